"""Four numbers at a time for numba: a value of type `Lanes` lies in one vector register (complex: in two).

A store is a flat array of lanes: float64 for real lanes, complex128 for complex ones, where the four real parts come
before the four imaginary parts.  Products and sums may be contracted to fused operations; no other liberty is taken
with IEEE arithmetic, so that what is not finite stays visible.

Only the compiled sweep imports this module; numba is optional.
"""

from __future__ import annotations

from typing import Any

from llvmlite import ir
from numba.core import types
from numba.core.cgutils import get_or_insert_function
from numba.extending import intrinsic, models, register_model

__all__ = [
    "LANES",
    "constant",
    "get",
    "is_real",
    "larger",
    "load",
    "minus_product",
    "plus",
    "product",
    "put",
    "reciprocal",
    "scaled",
    "size",
    "store",
    "tainted",
]

LANES = 4
FUSED = ("contract",)
DOUBLE = ir.DoubleType()


class Lanes(types.Type):
    """Type of four real or complex numbers."""

    def __init__(self, is_complex: bool) -> None:
        self.is_complex = is_complex
        super().__init__(name=f"Lanes({is_complex})")


@register_model(Lanes)
class LanesModel(models.PrimitiveModel):
    """A vector of doubles."""

    def __init__(self, manager: Any, kind: Lanes) -> None:
        super().__init__(manager, kind, ir.VectorType(DOUBLE, LANES * (1 + kind.is_complex)))


REAL, COMPLEX = Lanes(False), Lanes(True)


def _kind(array: Any) -> Lanes:
    return COMPLEX if isinstance(array.dtype, types.Complex) else REAL


def _address(context: Any, builder: Any, array_type: Any, array: Any, index: Any) -> Any:
    """Where the lanes with this index begin, as a pointer to double."""
    data = context.make_array(array_type)(context, builder, array).data
    width = ir.Constant(index.type, LANES * (1 + _kind(array_type).is_complex))
    return builder.gep(builder.bitcast(data, DOUBLE.as_pointer()), [builder.mul(index, width)], source_etype=DOUBLE)


def _shuffled(builder: Any, a: Any, b: Any, order: Any) -> Any:
    order = list(order)
    mask = ir.Constant(ir.VectorType(ir.IntType(32), len(order)), order)
    return builder.shuffle_vector(a, b, mask)


def _parts(builder: Any, value: Any) -> tuple[Any, Any]:
    return _shuffled(builder, value, value, range(LANES)), _shuffled(builder, value, value, range(LANES, 2 * LANES))


def _joined(builder: Any, real: Any, imaginary: Any) -> Any:
    return _shuffled(builder, real, imaginary, range(2 * LANES))


def _number(builder: Any, kind: Lanes, parts: Any) -> Any:
    """A vector from the scalars of its real parts and, if it is complex, its imaginary parts."""
    width = LANES * (1 + kind.is_complex)
    vector: Any = ir.Constant(ir.VectorType(DOUBLE, width), ir.Undefined)
    for place, part in enumerate(list(parts)[:width]):
        vector = builder.insert_element(vector, part, ir.Constant(ir.IntType(32), place))
    return vector


@intrinsic
def load(typing: Any, array: Any, index: Any) -> Any:
    """Lanes number `index` of a store."""
    kind = _kind(array)

    def build(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        vector = context.get_value_type(kind)
        place = _address(context, builder, array, args[0], args[1])
        return builder.load(builder.bitcast(place, vector.as_pointer()), align=8, typ=vector)

    return kind(array, types.intp), build


@intrinsic
def store(typing: Any, array: Any, index: Any, value: Any) -> Any:
    """Write lanes number `index` of a store."""

    def build(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        vector = context.get_value_type(value)
        place = _address(context, builder, array, args[0], args[1])
        builder.store(args[2], builder.bitcast(place, vector.as_pointer()), align=8)
        return context.get_dummy_value()

    return types.void(array, types.intp, value), build


@intrinsic
def get(typing: Any, array: Any, index: Any, lane: Any) -> Any:
    """One number out of a store."""
    kind = _kind(array)

    def build(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        place = builder.gep(_address(context, builder, array, args[0], args[1]), [args[2]], source_etype=DOUBLE)
        real = builder.load(place, typ=DOUBLE)
        if not kind.is_complex:
            return real
        shift = ir.Constant(ir.IntType(64), LANES)
        imaginary = builder.load(builder.gep(place, [shift], source_etype=DOUBLE), typ=DOUBLE)
        number = context.make_complex(builder, array.dtype)
        number.real, number.imag = real, imaginary
        return number._getvalue()

    return array.dtype(array, types.intp, types.intp), build


@intrinsic
def put(typing: Any, array: Any, index: Any, lane: Any, value: Any) -> Any:
    """Write one number of a store."""
    kind = _kind(array)

    def build(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        place = builder.gep(_address(context, builder, array, args[0], args[1]), [args[2]], source_etype=DOUBLE)
        if not kind.is_complex:
            builder.store(args[3], place)
            return context.get_dummy_value()
        number = context.make_complex(builder, array.dtype, value=args[3])
        builder.store(number.real, place)
        shift = ir.Constant(ir.IntType(64), LANES)
        builder.store(number.imag, builder.gep(place, [shift], source_etype=DOUBLE))
        return context.get_dummy_value()

    return types.void(array, types.intp, types.intp, array.dtype), build


@intrinsic
def is_real(typing: Any, array: Any) -> Any:
    """Whether a store holds real lanes; known when the code is compiled."""
    kind = _kind(array)

    def build(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        return context.get_constant(types.boolean, not kind.is_complex)

    return types.boolean(array), build


@intrinsic
def constant(typing: Any, array: Any, real: Any, imaginary: Any) -> Any:
    """The same number in all lanes, of the store's kind."""
    kind = _kind(array)

    def build(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        return _number(builder, kind, [args[1]] * LANES + [args[2]] * LANES)

    return kind(array, types.float64, types.float64), build


@intrinsic
def minus_product(typing: Any, c: Any, a: Any, b: Any) -> Any:
    """Return c - a b."""

    def less(builder: Any, c: Any, a: Any, b: Any) -> Any:
        return builder.fsub(c, builder.fmul(a, b, flags=FUSED), flags=FUSED)

    def build(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        if not c.is_complex:
            return less(builder, *args)
        (c_re, c_im), (a_re, a_im), (b_re, b_im) = (_parts(builder, value) for value in args)
        real = less(builder, c_re, a_re, b_re)
        real = builder.fadd(real, builder.fmul(a_im, b_im, flags=FUSED), flags=FUSED)
        return _joined(builder, real, less(builder, less(builder, c_im, a_re, b_im), a_im, b_re))

    return c(c, a, b), build


@intrinsic
def product(typing: Any, a: Any, b: Any) -> Any:
    """Return a b."""

    def build(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        if not a.is_complex:
            return builder.fmul(*args)
        (a_re, a_im), (b_re, b_im) = (_parts(builder, value) for value in args)
        times = builder.fmul
        real = builder.fsub(times(a_re, b_re, flags=FUSED), times(a_im, b_im, flags=FUSED), flags=FUSED)
        imaginary = builder.fadd(times(a_re, b_im, flags=FUSED), times(a_im, b_re, flags=FUSED), flags=FUSED)
        return _joined(builder, real, imaginary)

    return a(a, b), build


@intrinsic
def plus(typing: Any, a: Any, b: Any) -> Any:
    """Return a + b."""
    return a(a, b), lambda context, builder, signature, args: builder.fadd(*args)


@intrinsic
def scaled(typing: Any, a: Any, factor: Any) -> Any:
    """Return a times one real number."""

    def build(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        return builder.fmul(args[0], _number(builder, a, [args[1]] * (2 * LANES)))

    return a(a, types.float64), build


@intrinsic
def reciprocal(typing: Any, a: Any) -> Any:
    """Return 1 / a; infinite or not a number where a is zero."""

    def build(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        one = ir.Constant(ir.VectorType(DOUBLE, LANES), [1.0] * LANES)
        if not a.is_complex:
            return builder.fdiv(one, args[0])
        real, imaginary = _parts(builder, args[0])
        squared = builder.fadd(builder.fmul(real, real), builder.fmul(imaginary, imaginary))
        factor = builder.fdiv(one, squared)
        return _joined(builder, builder.fmul(real, factor), builder.fmul(builder.fneg(imaginary), factor))

    return a(a), build


def _greater(builder: Any, a: Any, b: Any) -> Any:
    return builder.select(builder.fcmp_ordered(">", a, b), a, b)  # one instruction


def _modulus(builder: Any, a: Any) -> Any:
    kind = ir.FunctionType(a.type, [a.type])
    return builder.call(get_or_insert_function(builder.module, kind, f"llvm.fabs.v{a.type.count}f64"), [a])


@intrinsic
def size(typing: Any, a: Any) -> Any:
    """Larger of |real part| and |imaginary part|, as real lanes."""

    def build(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        if not a.is_complex:
            return _modulus(builder, args[0])
        real, imaginary = _parts(builder, args[0])
        return _greater(builder, _modulus(builder, real), _modulus(builder, imaginary))

    return REAL(a), build


@intrinsic
def larger(typing: Any, a: Any, b: Any) -> Any:
    """Larger of two real lanes; `b` where they cannot be compared."""

    def build(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        return _greater(builder, *args)

    return REAL(REAL, REAL), build


@intrinsic
def tainted(typing: Any, doubt: Any, a: Any) -> Any:
    """`doubt` (real lanes), or not a number where `a` is not finite."""

    def build(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        zero = ir.Constant(ir.VectorType(DOUBLE, LANES), [0.0] * LANES)
        parts = _parts(builder, args[1]) if a.is_complex else (args[1],)
        nothing = [builder.fmul(part, zero, flags=FUSED) for part in parts]
        return builder.fadd(args[0], builder.fadd(*nothing, flags=FUSED) if a.is_complex else nothing[0], flags=FUSED)

    return REAL(REAL, a), build
