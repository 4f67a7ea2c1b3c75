"""The interior's H(k, phi) with first derivatives and bounds on the second ones, as a search over the torus needs them.

With psi_j(cell c) = e^{ik(c + theta_j)} u_j the spectrum stays, but the Bloch phase is spread over the cell: a
hopping from j to i inside a cell carries e^{ik d}, d = theta_j - theta_i, and one from the cell before e^{ik(d - 1)}.
The places theta minimise sum |t|^2 (exponent)^2, a graph Laplacian; on a chain of q sites they come out as j/q, and
|H_k| as 2t/q instead of 2t.  Norms are bounded by |A| <= max_i sum_j |A_ij|.

Bounds over phi are exact for a trigonometric polynomial of degree K, where sup|f| <= max over N > 2K equidistant
points / cos(pi K/N) in any norm, and where H is linear in phi between corners.  Any other path is replaced by a cubic
spline, whose bounds are exact again, and whose distance from the path is estimated: measured between the knots, times
a safety factor.

References: H. Ehlich, K. Zeller, Math. Z. 86, 41 (1964) (citation from memory).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from scatterpump.bulk.cell import BlochCell
from scatterpump.bulk.torus import Cover
from scatterpump.solver.harmonics import Harmonics

__all__ = ["BlochFamily", "bloch_family"]

Matrices = NDArray[np.complex128]
Reals = NDArray[np.float64]
Measure = Callable[[Matrices], Reals]

TURN = 2 * np.pi
ROUNDING = 1e-10
NODES_PER_HARMONIC = 16
KNOTS = 512
SAFETY = 4.0
INSIDE = (0.2113, 0.6181)
EXACT = 1e-11
REAL = 1e-12
APART = 1e-9


@dataclass(frozen=True, eq=False)
class Pieces:
    """A piecewise polynomial sum_d c_d (phi - start)^d.

    Attributes
    ----------
    starts : (n + 1,) float array
        Where the pieces begin, and where the last one ends.
    coefficients : (d + 1, n, 2, q, q) complex array
    stretches : (s,) int array
        The pieces at which a stretch without corners begins.
    """

    starts: Reals
    coefficients: Matrices
    stretches: NDArray[np.int64]

    @property
    def is_linear(self) -> bool:
        """True if there is nothing beyond (phi - start)."""
        return len(self.coefficients) <= 2

    def at(self, phases: Reals) -> Matrices:
        """Return the blocks at each of `phases`, shape (n, 2, q, q)."""
        piece = np.clip(np.searchsorted(self.starts, phases, side="right") - 1, 0, len(self.starts) - 2)
        return self._value(piece, phases - self.starts[piece])

    def derivative(self) -> Pieces:
        """Return d/dphi."""
        order = np.arange(1, max(2, len(self.coefficients)))
        raised = self.coefficients[1:] if len(self.coefficients) > 1 else 0 * self.coefficients
        return Pieces(self.starts, order[:, None, None, None, None] * raised, self.stretches)

    def peak(self, measure: Measure) -> Reals:
        """Return bounds on `measure` over each stretch: its values at the ends of pieces, and a margin on bent ones."""
        piece, width = np.arange(len(self.starts) - 1), np.diff(self.starts)
        ends = np.maximum(measure(self._value(piece, 0 * width)), measure(self._value(piece, width)))
        highest = np.maximum.reduceat(ends, self.stretches)
        return highest if self.is_linear else highest + width.max() / 2 * self.derivative().peak(measure)

    def _value(self, piece: NDArray[np.int64], along: Reals) -> Matrices:
        total = self.coefficients[-1][piece]
        for coefficient in self.coefficients[-2::-1]:
            total = total * along[:, None, None, None] + coefficient[piece]
        return np.asarray(total)


Curve = Harmonics | Pieces


@dataclass(frozen=True, eq=False)
class BlochFamily:
    """Centres (k, phi), shape (n, 2), to H - E_F, H_k and H_phi there, shape (n, 3, q, q), in one basis a centre.

    Attributes
    ----------
    curve, slope : Curve
        The blocks and their change with phi.
    fermi_level : float
    inner, outer : (q, q) float arrays
        Exponents theta_j - theta_i of h, and theta_j - theta_i - 1 of V.
    bends : (s, 3) float array
        Bounds on |H_kk|, |H_kphi|, |H_phiphi| on each stretch of phi.
    cover : Cover
        Boxes to begin a search with.
    slack : float
        How far an energy of the pump may be from the family's.
    exact : bool
        False if `slack` is estimated.
    """

    curve: Curve
    slope: Curve
    fermi_level: float
    inner: Reals
    outer: Reals
    bends: Reals
    cover: Cover
    slack: float
    exact: bool

    def __call__(self, centre: Reals) -> Matrices:
        momenta, phases = centre.T
        blocks = self.curve.at(phases)
        energy = self._summed(blocks, momenta, 0) - self.fermi_level * np.eye(len(self.inner))
        by_k, by_phi = self._summed(blocks, momenta, 1), self._summed(self.slope.at(phases), momenta, 0)
        return np.stack([energy, by_k, by_phi], axis=1)

    def _summed(self, blocks: Matrices, momenta: Reals, order: int) -> Matrices:
        """Return the Bloch sum of blocks (n, 2, q, q), differentiated `order` times by k.

        The phases e^{ik theta} stay out of it: they turn H, H_k and H_phi by one diagonal unitary matrix.
        """
        within = blocks[:, 0] * (1j * self.inner) ** order
        onward = blocks[:, 1] * (1j * self.outer) ** order * np.exp(-1j * momenta)[:, None, None]
        return np.asarray(within + onward + onward.conj().swapaxes(1, 2))


def bloch_family(cell: BlochCell) -> BlochFamily:
    """Return the family of a cell, with bounds that are exact wherever they can be."""
    curve = cell.harmonics or _straight(cell) or _spline(cell)
    nodes = curve.starts if isinstance(curve, Pieces) else _nodes(curve)
    blocks, slope = curve.at(nodes), curve.derivative()
    inner, outer = _exponents((np.abs(blocks) ** 2).mean(axis=0))
    size, swing, swirl = (_row_sums(inner, outer, order) for order in range(3))
    bends = np.stack([_peak(curve, swirl), _peak(slope, swing), _peak(slope.derivative(), size)], axis=1)
    scale = float(_peak(curve, size).max())
    misfit = _misfit(cell, curve, size) if isinstance(curve, Pieces) and not curve.is_linear else None
    slack = ROUNDING * scale + SAFETY * (misfit or 0.0)
    cover = _cover(curve, mirrored=float(np.abs(blocks.imag).max(initial=0.0)) <= REAL * scale)
    return BlochFamily(curve, slope, cell.fermi_level, inner, outer, bends, cover, slack, misfit is None)


def _nodes(curve: Harmonics) -> Reals:
    """Return more than 2K equidistant phases, which determine a polynomial of degree K."""
    count = max(1, NODES_PER_HARMONIC * curve.degree)
    return TURN * np.arange(count) / count


def _straight(cell: BlochCell) -> Pieces | None:
    """Return H between the corners of a cycle if it is linear there, checked at two points of each stretch."""
    cycle = cell.pump.cycle
    if not (cycle.straight and cycle.corners):
        return None
    edges = _edges(cell)
    values, width = cell.blocks(edges), np.diff(edges)
    rise = np.diff(values, axis=0) / width[:, None, None, None]
    pieces = Pieces(edges, np.stack([values[:-1], rise]), np.arange(len(width)))
    checks = np.concatenate([edges[:-1] + part * width for part in INSIDE])
    good = np.abs(pieces.at(checks) - cell.blocks(checks)).max(initial=0.0) <= EXACT * np.abs(values).max(initial=0.0)
    return pieces if good else None


def _spline(cell: BlochCell) -> Pieces:
    """Return cubic splines through samples, one between each two corners."""
    from scipy.interpolate import CubicSpline

    edges = _edges(cell)
    count = max(8, KNOTS // (len(edges) - 1))
    parts = [np.linspace(low, high, count, endpoint=False) for low, high in pairwise(edges)]
    knots = np.append(np.concatenate(parts), edges[-1])
    values = cell.blocks(knots)
    first = np.arange(0, len(knots) - 1, count)
    splines = [CubicSpline(knots[i : i + count + 1], values[i : i + count + 1]) for i in first]
    return Pieces(knots, np.concatenate([spline.c[::-1] for spline in splines], axis=1), first)


def _edges(cell: BlochCell) -> Reals:
    """Return the corners of the cycle, or 0, and the first of them again a turn later."""
    corners = np.unique(cell.pump.cycle.corners or (0.0,))
    apart = corners[np.diff(corners, prepend=-1.0) > APART]
    return np.append(apart, apart[0] + TURN)


def _misfit(cell: BlochCell, pieces: Pieces, size: Measure) -> float:
    """Return the largest difference found half-way between the knots."""
    middles = (pieces.starts[1:] + pieces.starts[:-1]) / 2
    return float(size(pieces.at(middles) - cell.blocks(middles)).max())


def _exponents(weight: Reals) -> tuple[Reals, Reals]:
    """Return the exponents of h and V for mean squared blocks `weight`, shape (2, q, q)."""
    within, onward = weight
    bonds = within + onward + onward.T
    laplacian = np.diag(bonds.sum(axis=1)) - bonds
    theta = np.linalg.lstsq(laplacian, onward.sum(axis=0) - onward.sum(axis=1), rcond=None)[0]
    inner = theta[None, :] - theta[:, None]
    return inner, inner - 1


def _row_sums(inner: Reals, outer: Reals, order: int) -> Measure:
    """Return the bound max_i sum_j, for every k, on the norm of the Bloch sum differentiated `order` times by k."""

    def measure(blocks: Matrices) -> Reals:
        within = np.abs(blocks[:, 0]) * np.abs(inner) ** order
        onward = np.abs(blocks[:, 1]) * np.abs(outer) ** order
        return np.asarray((within.sum(axis=2) + onward.sum(axis=2) + onward.sum(axis=1)).max(axis=1))

    return measure


def _peak(curve: Curve, measure: Measure) -> Reals:
    """Return bounds on `measure` over each stretch, shape (s,)."""
    if isinstance(curve, Pieces):
        return curve.peak(measure)
    nodes = _nodes(curve)
    return np.array([measure(curve.at(nodes)).max() / np.cos(np.pi * curve.degree / len(nodes))])


def _cover(curve: Curve, *, mirrored: bool) -> Cover:
    """Return boxes centred at k = 0 and pi, in phi at the quarters of the cycle or between its corners."""
    if isinstance(curve, Pieces):
        edges = np.append(curve.starts[curve.stretches], curve.starts[-1])
        each = -(-4 // len(curve.stretches))
        half = np.repeat(np.diff(edges) / (2 * each), each)
        phases = np.repeat(edges[:-1], each) + half * np.tile(2 * np.arange(each) + 1, len(edges) - 1)
        stretch = np.repeat(np.arange(len(edges) - 1), each)
    else:
        phases, half, stretch = np.arange(4) * np.pi / 2, np.full(4, np.pi / 4), np.zeros(4, dtype=int)
    momenta = np.repeat([0.0, np.pi], len(phases))
    centre = np.column_stack([momenta, np.tile(phases, 2)])
    halves = np.column_stack([np.full(len(momenta), np.pi / 2), np.tile(half, 2)])
    return Cover(centre, halves, np.tile(stretch, 2), mirrored)
