"""Brute force against the reach of one look: within it nothing may happen to r that the proof has not foreseen."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
import pytest
import scipy.linalg
from numpy.testing import assert_allclose
from numpy.typing import NDArray

from scatterpump.solver.band import norm_bound
from scatterpump.solver.folded import FoldedDevice
from scatterpump.solver.harmonics import Harmonics
from scatterpump.solver.path import Path, Side, Slopes, StraightPath, TrigonometricPath
from scatterpump.winding.cover import Arm, Centre, centre, cover_cycle, join, neighbours, open_gaps
from scatterpump.winding.look import Look, look
from scatterpump.winding.radius import Model, Rates, length_limit, split_reach

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]
TURN = 2 * np.pi
SIDES: tuple[Side, Side] = (-1, 1)


@dataclass(frozen=True, eq=False)
class Case:
    """A dense device in two forms: folded, and as arrays to work out r by hand."""

    device: FoldedDevice
    slopes: Slopes
    phase: float

    def hamiltonian(self, phases: Floats) -> Complex:
        path, n = self.device.path, self.device.size
        if isinstance(path, TrigonometricPath):
            return path.harmonics.at(phases).reshape(-1, n, n)
        return np.array([path.at(float(phase)).reshape(n, n) for phase in phases])

    def inverse(self, phases: Floats) -> tuple[Complex, Complex]:
        """Return A at each of `phases`, shape (k, n, n), and G W."""
        still = unpacked(self.device.still)
        stack = still - self.hamiltonian(phases)
        return stack, np.linalg.solve(stack, np.broadcast_to(self.device.probe, (len(stack), *self.device.probe.shape)))

    def reflection(self, phases: Floats) -> Complex:
        """Return r = -1 + i W^+ G W at each of `phases`."""
        _, right = self.inverse(phases)
        return np.asarray(1j * self.device.probe.conj().T @ right - np.eye(self.device.probe.shape[1]))


def unpacked(band: Complex) -> Complex:
    half, n = len(band) // 2, band.shape[1]
    i, j = np.indices((n, n))
    return np.where(np.abs(i - j) <= half, band[np.clip(half + i - j, 0, 2 * half), j], 0)


def hermitian(rng: np.random.Generator, n: int) -> Complex:
    matrix = rng.normal(size=(n, n)) + 1j * rng.normal(size=(n, n))
    return np.asarray(matrix + matrix.conj().T) / np.sqrt(8 * n)


def frame(rng: np.random.Generator, n: int, m: int, strength: Floats) -> Complex:
    matrix = np.linalg.qr(rng.normal(size=(n, n)) + 1j * rng.normal(size=(n, n)))[0][:, :m]
    return np.asarray(matrix * np.sqrt(strength))


def wave(rng: np.random.Generator, n: int, degree: int, size: float) -> TrigonometricPath:
    parts = [(rng.normal(size=(n, n)) + 1j * rng.normal(size=(n, n))) * size / np.sqrt(8 * n) for _ in range(degree)]
    every = np.array([*(part.conj().T for part in parts[::-1]), hermitian(rng, n), *parts])
    return TrigonometricPath(Harmonics(every.reshape(2 * degree + 1, n * n)))


def polygon(rng: np.random.Generator, n: int, corners: int, size: float) -> StraightPath:
    still = hermitian(rng, n)
    points = np.array([still + size * hermitian(rng, n) for _ in range(corners)])
    return StraightPath(np.sort(rng.uniform(0, TURN, size=corners)), points.reshape(corners, n * n))


def folded(path: Path, probe: Complex, drain: Complex, energy: float) -> FoldedDevice:
    """Return the device E - H(phi) + i/2 (W W^+ + W_d W_d^+) with all matrix elements kept."""
    n = len(probe)
    rows, columns = (index.ravel() for index in np.indices((n, n)))
    still = energy * np.eye(n) + 0.5j * (probe @ probe.conj().T + drain @ drain.conj().T)
    bare = FoldedDevice(n, n - 1, rows, columns, path, np.empty(0), probe, drain, np.zeros(n, dtype=int), 0)
    return FoldedDevice(n, n - 1, rows, columns, path, bare.band(still.ravel()), probe, drain, bare.distance, 0)


@cache
def random_case(kind: str, seed: int) -> Case:
    """A random device looked at near, or far from, one of its resonances."""
    rng = np.random.default_rng([seed, len(kind)])
    n = int(rng.integers(3, 8))
    m = 1 if kind == "twins" else int(rng.integers(1, min(4, n)))
    size, width = 10.0 ** rng.uniform(-0.5, 0.5), 10.0 ** rng.uniform(*((-1, 1) if seed % 2 else (-8, 0)))
    path: Path = wave(rng, n, int(rng.integers(1, 4)), size)
    if kind == "polygon":
        path = polygon(rng, n, int(rng.integers(1, 6)), size)
    probe = frame(rng, n, m, width * 10.0 ** rng.uniform(-1, 0, size=m))
    leak = 0 if seed % 3 == 0 else int(rng.integers(1, 3))
    drain = frame(rng, n, leak, width * 10.0 ** rng.uniform(*((-4, -1) if seed % 3 == 1 else (-1, 1)), size=leak))
    on_corner = kind == "polygon" and seed % 2
    phase = float(path.corners[rng.integers(len(path.corners))] if on_corner else rng.uniform(0, TURN))
    levels = np.linalg.eigvalsh(path.at(phase).reshape(n, n))
    energy = float(rng.choice(levels)) + rng.choice([0.0, 0.3, 3.0, 30.0]) * width * rng.normal()
    if kind == "twins":
        path, probe, drain = twinned(rng, path, probe, drain, 2 + seed % 2, width * 10.0 ** rng.uniform(-3, 1))
    return case_of(folded(path, probe, drain, energy), phase)


def case_of(device: FoldedDevice, phase: float = 0.0) -> Case:
    return Case(device, device.path.slopes(lambda entries: norm_bound(device.band(entries))), phase)


@cache
def seen_from(kind: str, seed: int) -> Centre:
    case = random_case(kind, seed)
    found = centre(case.device, case.slopes, case.phase)
    assert found is not None
    return found


@cache
def pump(seed: int) -> Case:
    """A short dimerised chain, its loop run once or twice in either direction, with random other couplings."""
    rng = np.random.default_rng([seed, 99])
    n, times = 2 * int(rng.integers(2, 5)), int(rng.choice([-2, -1, 1, 2]))
    stagger, delta = np.diag((-1.0) ** np.arange(n)), np.diag((-1.0) ** np.arange(n - 1), 1)
    delta = delta + delta.T
    parts = np.zeros((2 * abs(times) + 1, n, n), dtype=complex)
    parts[abs(times)] = np.eye(n, k=1) + np.eye(n, k=-1) + rng.choice([0.0, 0.3]) * hermitian(rng, n)
    parts[-1] = 0.3 * (delta - 1j * np.sign(times) * stagger)
    parts[0] = parts[-1].conj().T
    probe, drain = np.zeros((n, 1), dtype=complex), np.zeros((n, 1), dtype=complex)
    probe[0], drain[-1] = 10.0 ** rng.uniform(-3, 0.3), 10.0 ** rng.uniform(-2, 0.3)
    path = TrigonometricPath(Harmonics(parts.reshape(len(parts), n * n)))
    return case_of(folded(path, probe, drain, float(rng.uniform(-0.3, 0.3))))


def twinned(
    rng: np.random.Generator, path: Path, probe: Complex, drain: Complex, copies: int, apart: float
) -> tuple[Path, Complex, Complex]:
    assert isinstance(path, TrigonometricPath)
    n = len(probe)
    parts = path.harmonics.coefficients.reshape(-1, n, n)
    whole = np.array([np.kron(np.eye(copies), part) for part in parts])
    whole[path.harmonics.degree] += apart * hermitian(rng, copies * n)
    copied = TrigonometricPath(Harmonics(whole.reshape(len(parts), (copies * n) ** 2)))
    return copied, np.kron(np.eye(copies), probe), np.kron(np.eye(copies), drain)


def points_within(reach: float, marks: Floats) -> Floats:
    """Distances up to `reach`: even ones, ever smaller ones, and ever closer to `marks` from both sides."""
    near = 10.0 ** np.arange(-11.0, 0.5, 0.25)
    close = [np.concatenate([[mark], mark - near, mark + near]) for mark in marks]
    found = np.unique(np.concatenate([np.linspace(0, reach, 100), reach * near[near <= 1], *close]))
    return found[(found >= 0) & (found <= reach)]


def special(model: Model, side: int) -> Floats:
    """Distances at which the model expects zeros or poles of det r, real parts."""
    if not len(model.sigma):
        return np.empty(0)
    pencils = (scipy.linalg.eigvals(part, model.core) for part in (model.sigma, model.zeros_part))
    return np.asarray(side * np.concatenate([pencil[np.isfinite(pencil)] for pencil in pencils]).real)


def models(model: Model, s: Floats) -> Complex:
    """r_m = far + i X (S - sK)^-1 Y at each s."""
    pencil = model.sigma - s[:, None, None] * model.core
    right = np.broadcast_to(model.out, (len(s), *model.out.shape))
    return np.asarray(model.far + 1j * model.into @ np.linalg.solve(pencil, right))


def least_accretive(model: Model, case: Case, side: int, distances: Floats) -> float:
    """Smallest eigenvalue of the Hermitian part of r_m^-1 r over `distances`, relative to its size."""
    ratio = np.linalg.solve(models(model, side * distances), case.reflection(case.phase + side * distances))
    parts = np.linalg.eigvalsh((ratio + np.swapaxes(ratio, 1, 2).conj()) / 2)
    return float((parts[:, 0] / np.linalg.norm(ratio, 2, axis=(1, 2))).min())


def check_arm(arm: Arm, case: Case, side: Side) -> None:
    assert 0 <= arm.reach <= np.pi
    if arm.reach == 0:
        return
    distances = points_within(arm.reach, special(arm.model, side))
    # derived: path length of H (rule L), or block elimination and Woodbury's formula (rule S), keeps r_m^-1 r accretive
    assert least_accretive(arm.model, case, side, distances) > 0
    smallest = np.linalg.svd(case.reflection(case.phase + side * distances), compute_uv=False)[:, -1]
    # derived: Gronwall's lemma (rule L) or the triangle inequality (rule S)
    assert arm.floor <= smallest.min() * (1 + 1e-9)


def whole_turn(model: Model, side: int, end: float) -> float:
    """Unwrapped change of arg det r_m from 0 to side * end, by many small steps."""
    distances = points_within(end, special(model, side))
    sign, _ = np.linalg.slogdet(models(model, side * distances))
    steps = np.angle(sign[1:] / sign[:-1])
    assert np.abs(steps).max() < 2.5
    return float(steps.sum())


def winding_by_argument_principle(device: FoldedDevice) -> int:
    """Winding of det r = (-1)^m det B / det A from the zeros of both inside the unit circle of z = e^{i phi}."""
    assert isinstance(device.path, TrigonometricPath)
    n, parts = device.size, device.path.harmonics.coefficients.reshape(-1, device.size, device.size)
    a = unpacked(device.still)
    b = a - 1j * device.probe @ device.probe.conj().T
    return zeros_inside(parts, b, n) - zeros_inside(parts, a, n)


def zeros_inside(parts: Complex, constant: Complex, n: int) -> int:
    """Number of zeros of det(z^K (constant - sum_k H_k z^k)) with |z| < 1, by a block companion matrix."""
    degree = len(parts) - 1
    terms = -parts.copy()
    terms[degree // 2] += constant
    left = np.kron(np.eye(degree, k=1), np.eye(n)).astype(complex)
    right = np.eye(degree * n, dtype=complex)
    left[-n:] = -np.hstack(list(terms[:-1]))
    right[-n:, -n:] = terms[-1]
    alpha, beta = scipy.linalg.eigvals(left, right, homogeneous_eigvals=True)
    return int((np.abs(alpha) < np.abs(beta)).sum())


def brute_change(case: Case, start: float, end: float) -> float:
    """Change of arg det r, in steps so short that neither A nor B can be singular within twice their length."""
    total, phase, w = 0.0, start, case.device.probe
    (before,) = case.reflection(np.array([start]))
    while phase < end:
        (matrix,), _ = case.inverse(np.array([phase]))
        pair = np.array([matrix, matrix - 1j * w @ w.conj().T])
        room = np.linalg.svd(pair, compute_uv=False)[:, -1].min()
        phase = min(end, phase + max(0.5 * room / case.slopes.largest, 1e-14))
        (after,) = case.reflection(np.array([phase]))
        total += float(np.angle(np.linalg.eigvals(np.linalg.solve(before, after))).sum())
        before = after
    return total


ALL = [(kind, seed) for kind, count in (("wave", 80), ("polygon", 45), ("twins", 40)) for seed in range(count)]
every_case = pytest.mark.parametrize(("kind", "seed"), ALL)


@every_case
def test_within_the_reach_of_a_look_r_does_what_the_model_does(kind: str, seed: int) -> None:
    case, found = random_case(kind, seed), seen_from(kind, seed)
    check_arm(found.below, case, -1)
    check_arm(found.above, case, 1)


@every_case
def test_rule_of_path_length_alone(kind: str, seed: int) -> None:
    case = random_case(kind, seed)
    found = centre(case.device, case.slopes, case.phase, splitting=False)
    assert found is not None
    for side, arm in zip(SIDES, (found.below, found.above), strict=True):
        check_arm(arm, case, side)
        # derived: a constant model, and the limit on the path length is used up or half a turn is covered
        assert not len(arm.model.sigma) and not arm.poles
        used = float(case.slopes.length(case.phase, np.array([case.phase + side * arm.reach]))[0])
        limit = length_limit(found.seen) - found.seen.noise
        assert used <= limit or arm.reach == 0
        assert arm.reach == np.pi or used >= 0.999 * limit or limit < 1e-9


def split_arm(case: Case, seen: Look, side: Side) -> Arm | None:
    """Rule S alone, its rates worked out from dense derivatives."""
    split, n = seen.split, case.device.size
    if split is None:
        return None
    first, second = (case.device.path.derivative(case.phase, side, order).reshape(n, n) for order in (1, 2))
    into, out, curved = first @ split.v, split.u.conj().T @ first, split.u.conj().T @ second @ split.v
    norms = [float(np.linalg.norm(part, 2)) for part in (into, out, curved)]
    rates = Rates(split.u.conj().T @ into, *norms, case.slopes.second, case.slopes.third)
    ahead = (side * (case.device.path.corners - case.phase)) % TURN
    limit = float(min([np.pi, *ahead[ahead > 0]]))

    def length(distances: Floats) -> Floats:
        return case.slopes.length(case.phase, case.phase + side * distances)

    reach, floor = split_reach(split, rates, length, side, limit)
    assert reach <= limit
    return Arm(reach, Model.of(split, rates.core), (), floor)


@every_case
def test_rule_of_split_levels_alone(kind: str, seed: int) -> None:
    case, seen = random_case(kind, seed), seen_from(kind, seed).seen
    for side in SIDES:
        arm = split_arm(case, seen, side)
        if arm is not None:
            check_arm(arm, case, side)


@every_case
def test_models_turn_as_their_zeros_and_poles_say(kind: str, seed: int) -> None:
    case, seen = random_case(kind, seed), seen_from(kind, seed).seen
    for side in SIDES:
        arm = split_arm(case, seen, side)
        if arm is not None and arm.reach > 0:
            for end in (arm.reach, 0.37 * arm.reach):
                # determinant of a pencil: textbook; along a straight line from 1 principal arguments are exact
                assert arm.model.turned(side * end) == pytest.approx(whole_turn(arm.model, side, end), abs=1e-6)
                (value,) = models(arm.model, np.array([side * end]))
                assert_allclose(arm.model.at(side * end), value, rtol=1e-9, atol=1e-12)


def test_random_cases_reach_every_regime() -> None:
    """The brute force above is worth what it meets: narrow, leaky and degenerate levels, corners, both rules."""
    centres = [seen_from(*which) for which in ALL]
    arms = [arm for found in centres for arm in (found.below, found.above)]
    levels = np.array([0 if found.seen.split is None else len(found.seen.split.sigma) for found in centres])
    used = np.array([len(arm.model.sigma) for arm in arms if arm.reach > 0])
    assert (levels == 1).sum() > 80 and (levels == 2).sum() > 30 and (levels == 3).sum() >= 3
    assert (used == 0).sum() > 80 and (used == 1).sum() > 80 and (used > 1).sum() > 60
    assert sum(found.seen.g_norm > 1e5 for found in centres) > 15
    assert sum(found.seen.smallest < 0.9 for found in centres) > 20
    rates = [random_case(*which).slopes.largest * found.seen.g_norm for which, found in zip(ALL, centres, strict=True)]
    stretched = np.array([found.above.reach for found in centres]) * rates
    # derived: rule S reaches past what any rule that knows only |G| can, one over |G|
    assert (stretched > 100).sum() > 20


@pytest.mark.parametrize(
    ("kind", "seed"),
    [
        *(("pump", seed) for seed in range(40)),
        *(("wave", 1000 + seed) for seed in range(8)),
        *(("twins", 1004 + seed) for seed in range(4)),
    ],
)
def test_numbers_of_closed_covers_are_those_of_the_argument_principle(kind: str, seed: int) -> None:
    case = pump(seed) if kind == "pump" else random_case(kind, seed)
    cover = cover_cycle(case.device, case.slopes, budget=80)
    if cover.closed:
        turns = sum(join(list(cover.centres))) / TURN
        # argument principle: textbook complex analysis
        assert turns == pytest.approx(winding_by_argument_principle(case.device), abs=1e-8)
    assert cover.closed or kind != "pump"


def test_many_of_the_pumps_pump() -> None:
    numbers = [winding_by_argument_principle(pump(seed).device) for seed in range(40)]
    assert {abs(number) for number in numbers} >= {0, 1, 2}
    assert np.count_nonzero(numbers) > 15


@pytest.mark.parametrize("seed", range(16))
def test_joined_steps_are_the_true_change_between_looks(seed: int) -> None:
    case = pump(seed)
    cover = cover_cycle(case.device, case.slopes, budget=200)
    centres = list(cover.centres)
    assert cover.closed and not open_gaps(centres)
    steps = join(centres)
    for (left, _, end), step in zip(neighbours(centres), steps, strict=True):
        # brute force along the way
        assert step == pytest.approx(brute_change(case, left.phase, end), abs=1e-7)
    assert abs(sum(steps) / TURN - round(sum(steps) / TURN)) < 1e-10
    # derived: what the centres claim to cover leaves nothing out, and meets once round
    assert sum(c.above.reach + c.below.reach for c in centres) >= TURN


def test_sharpness_of_the_rule_of_path_length() -> None:
    """One level on a straight line: the closed form uses up the right angle to the last percent."""
    width, speed = 0.3, 0.2
    path = StraightPath(np.array([0.0, np.pi]), np.array([[-speed * np.pi / 2], [speed * np.pi / 2]], dtype=complex))
    probe = np.array([[np.sqrt(width)]], dtype=complex)
    device = folded(path, probe, np.zeros((1, 0), dtype=complex), 0.0)
    case = case_of(device, np.pi / 2)
    seen = look(np.pi / 2, device.matrix(np.pi / 2), probe)
    assert seen is not None
    # derived: at resonance g = b = 2/width, both columns are 2/sqrt(width): (4/width) x / (1 - 2x/width) = pi/2
    x = (np.pi / 2) / (4 / width + np.pi / width)
    assert length_limit(seen) == pytest.approx(x, rel=0.02)
    reach = case.slopes.reach(case.phase, 1, length_limit(seen))
    assert reach == pytest.approx(length_limit(seen) / speed, rel=1e-6)
    r = case.reflection(np.array([case.phase, case.phase + reach]))[:, 0, 0]
    # derived: r = (a - i width/2) / (a + i width/2) with a = -speed s turns by 2 atan(2 speed s / width)
    assert_allclose(np.abs(np.angle(r[1] / r[0])), 2 * np.arctan(2 * speed * reach / width), rtol=1e-9)
