"""How much faster r(phi) is than a practised loop over kwant.smatrix, how cost grows, and what a proof costs.

Both sides run on the same pump in one process, BLAS on one thread, in processor time.  The loop computes the lead
modes once and asks for the probe as the only in-lead; it is timed on a few phases and scaled.  The engine starts from
the same finalized system and finds everything else itself, modes included.  Ratios are medians over paired repeats;
every case runs in a process of its own, whose peak memory before the loop starts is given, with some 100 MiB of
imports in it.  What numba compiles, if it is installed, is compiled before the clock starts.

    python benchmarks/engine.py [--json FILE] [--phases 400] [--repeats 5] [--sizes 300x1 ...] [--only ratios proof]
        [--without-numba]
"""

from __future__ import annotations

import argparse
import json
import resource
import sys
import time
from collections.abc import Callable
from concurrent.futures import ProcessPoolExecutor
from dataclasses import replace
from functools import partial
from multiprocessing import get_context
from pathlib import Path
from typing import Any

import kwant
import numpy as np
from threadpoolctl import threadpool_limits

import scatterpump as sp
from scatterpump.solver.problem import prepare

LOOP_SAMPLES = 8
ACROSS = 0.1
SIZES = ["300x1", "3000x1", "100x10", "100x40", "100x100", "1000x40", "200x200"]
LENGTHS, WIDTHS = (50, 100, 200, 400, 800), (5, 10, 20, 40, 80)


def device(length: int, width: int, disorder: float) -> sp.Pump:
    """A sliding wave on weakly coupled chains, gapped at the Fermi level; clean, or with every site different."""
    lattice, system = kwant.lattice.square(norbs=1), kwant.Builder()
    noise = disorder * (np.random.default_rng(3).random((length, width)) - 0.5)

    def onsite(site: Any, phi: Any) -> Any:
        x, y = site.tag
        return 1.5 * np.cos(2 * np.pi * (x % 3) / 3 - phi) + noise[x, y]

    system[(lattice(x, y) for x in range(length) for y in range(width))] = onsite
    along, across = (kwant.builder.HoppingKind(step, lattice) for step in ((1, 0), (0, 1)))
    system[along], system[across] = -1.0, -ACROSS
    for direction in (-1, 1):
        lead = kwant.Builder(kwant.TranslationalSymmetry((direction, 0)))
        lead[(lattice(0, y) for y in range(width))] = 0.0
        lead[along], lead[across] = -2.0, -ACROSS
        system.attach_lead(lead)
    return sp.Pump(system.finalized(), sp.Cycle.angle("phi"), -1.2)


def fresh(pump: sp.Pump) -> sp.Pump:
    """The same pump with nothing found out about it yet."""
    return replace(pump, system=pump.finalized)


def timed(function: Callable[[], Any]) -> tuple[float, Any]:
    start = time.process_time()
    result = function()
    return time.process_time() - start, result


def loop(pump: sp.Pump, phases: Any, count: int) -> tuple[float, Any]:
    """Seconds that a practised user's loop takes for `count` phases, and r at `phases`."""
    ready, system = timed(lambda: pump.finalized.precalculate(pump.fermi_level, params={"phi": 0.0}, what="modes"))

    def one(phase: float) -> Any:
        return kwant.smatrix(system, pump.fermi_level, params={"phi": phase}, out_leads=[0], in_leads=[0]).data

    spent, found = timed(lambda: np.array([one(phase) for phase in phases]))
    return ready + spent * count / len(phases), found


def lapack_share(function: Callable[[], Any]) -> float:
    """Share of a call's time spent in numpy's inverses and solutions; products of matrices are not counted."""
    spent, kept = [], {name: getattr(np.linalg, name) for name in ("inv", "solve")}

    def watched(inner: Callable[..., Any]) -> Callable[..., Any]:
        def call(*arguments: Any) -> Any:
            seconds, result = timed(lambda: inner(*arguments))
            spent.append(seconds)
            return result

        return call

    for name, inner in kept.items():
        setattr(np.linalg, name, watched(inner))
    try:
        whole, _ = timed(function)
    finally:
        for name, inner in kept.items():
            setattr(np.linalg, name, inner)
    return sum(spent) / whole


def compare(length: int, width: int, disorder: float, count: int, repeats: int) -> dict[str, Any]:
    """Time both sides in pairs; ratios are loop over engine."""
    with threadpool_limits(1):
        pump = device(length, width, disorder)
        phases = 2 * np.pi * np.arange(count) / count + 0.01
        few = phases[:: max(1, count // (LOOP_SAMPLES if length * width < 20000 else 2))]
        sp.reflect(fresh(pump), phases[:8], engine="layered", transmission=False)  # compiled or loaded before the clock
        pairs, peak = [], 0
        for _ in range(repeats):
            ours, trace = timed(lambda: sp.reflect(fresh(pump), phases, engine="layered", transmission=False))
            peak = peak or resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
            theirs, reference = loop(pump, few, count)
            pairs.append((theirs, ours))
        share = lapack_share(lambda: sp.reflect(fresh(pump), phases, engine="layered", transmission=False))
        chosen = trace.reflection[np.isin(phases, few)]
    loops, engines = np.array(pairs).T
    ratios = loops / engines
    return {
        "case": f"{length} x {width}{' disordered' if disorder else ''}",
        "sites": length * width,
        "phases": count,
        "loop_s": float(np.median(loops)),
        "engine_s": float(np.median(engines)),
        "ratio": float(np.median(ratios)),
        "ratio_range": [float(ratios.min()), float(ratios.max())],
        "lapack_share": share,
        "peak_mib": peak / 1024,
        "largest_difference": float(np.abs(_turned(chosen) - _turned(reference)).max()),
    }


def _turned(reflection: Any) -> Any:
    """Det r from the first phase on: free of the arbitrary phases of the modes."""
    return np.linalg.det(reflection) / np.linalg.det(reflection[0])


def ratios(options: argparse.Namespace) -> list[dict[str, Any]]:
    print(
        f"{'device':<22}{'loop':>9}{'engine':>10}{'ratio':>7}{'from..to':>12}{'LAPACK':>8}{'peak MiB':>10}"
        f"{'difference':>12}   kwant: {kwant.solvers.default.smodule.__name__.rpartition('.')[2]}"
    )
    rows = []
    for size in options.sizes:
        length, width = map(int, size.split("x"))
        for disorder in (0.0, 0.3):
            row = _alone(compare, length, width, disorder, options.phases, options.repeats)
            rows.append(row)
            low, high = row["ratio_range"]
            print(
                f"{row['case']:<22}{row['loop_s']:>8.2f}s{row['engine_s']:>9.3f}s{row['ratio']:>7.1f}"
                f"{f'{low:.0f}..{high:.0f}':>12}{row['lapack_share']:>8.0%}{row['peak_mib']:>10.0f}"
                f"{row['largest_difference']:>12.1e}",
                flush=True,
            )
    return rows


def cost(length: int, width: int, count: int) -> tuple[float, float, float]:
    """Seconds for `count` phases of a disordered device: preparing, solving, and the loop."""
    with threadpool_limits(1):
        pump = device(length, width, 0.3)
        phases = 2 * np.pi * np.arange(count) / count + 0.01
        found = []
        for _ in range(3):
            ready, _ = timed(lambda: prepare(fresh(pump)))
            whole, _ = timed(lambda: sp.reflect(fresh(pump), phases, engine="layered", transmission=False))
            found.append((ready, max(whole - ready, 1e-6), loop(pump, phases[:2], count)[0]))
    ready, solving, looping = np.median(found, axis=0)
    return float(ready), float(solving), float(looping)


def growth(options: argparse.Namespace) -> list[dict[str, Any]]:
    """Cost against length at width 10 and against width at length 60, with fitted exponents."""
    count, rows = min(options.phases, 100), []
    for name, sizes, cases in (
        ("length", LENGTHS, [(n, 10) for n in LENGTHS]),
        ("width", WIDTHS, [(60, n) for n in WIDTHS]),
    ):
        costs = np.array([_alone(cost, *case, count) for case in cases])
        exponents = np.polyfit(np.log(sizes), np.log(costs), 1)[0]
        for part, values, exponent in zip(("preparing", "solving", "the loop"), costs.T, exponents, strict=True):
            rows.append(
                {"against": name, "sizes": sizes, "part": part, "seconds": values.tolist(), "exponent": exponent}
            )
            shown = " ".join(f"{value:9.3f}" for value in values)
            print(f"{part:<10} against {name:<7} {shown} s   ~ {name}^{exponent:.2f}", flush=True)
    return rows


def proof(options: argparse.Namespace) -> list[dict[str, Any]]:
    """A proven winding against the loop's 401 unproven points; cells joined against cells counted; auto's choice."""
    rows = []
    with threadpool_limits(1):
        for length, width in ((300, 1), (100, 10)):
            pump = device(length, width, 0.0)
            pairs = []
            for _ in range(options.repeats):
                seconds, winding = timed(partial(sp.certify, fresh(pump), leak=False))
                pairs.append((loop(pump, [0.1, 1.2, 2.3, 4.5], 401)[0] / seconds, seconds))
            ratio, seconds = np.median(pairs, axis=0)
            row = {"case": f"{length} x {width}", "number": winding.number, "certify_s": seconds, "ratio": ratio}
            rows.append(row)
            print(f"proof on {row['case']:<9} W = {winding.number:+d} in {seconds:.3f} s, loop / proof = {ratio:.1f}")
        thousand, many = (_prolonged(10**3), _prolonged(10**5))
        rows.append({"case": "repeat 1e5 / 1e3", "ratio": many / thousand})
        print(f"10^5 cells against 10^3: {many / thousand:.2f} times the time")
        for length, width in ((300, 1), (100, 10), (60, 100)):
            for count in (1, 4, 100):
                rows.append(_choice(device(length, width, 0.3), count))
    return rows


def _prolonged(cells: int) -> float:
    """Seconds for r at 100 phases of a chain prolonged by so many cells."""
    chain, phases = device(60, 1, 0.0), np.linspace(0, 6, 100)
    return float(np.median([timed(lambda: sp.reflect(fresh(chain), phases, repeat=cells))[0] for _ in range(5)]))


def _choice(pump: sp.Pump, count: int) -> dict[str, Any]:
    """How much slower "auto" is than the better engine."""
    phases = np.linspace(0.1, 6, count)
    times = {
        engine: np.median([timed(lambda e=engine: sp.reflect(fresh(pump), phases, engine=e))[0] for _ in range(3)])
        for engine in ("auto", "layered", "direct")
    }
    ratio = times["auto"] / min(times["layered"], times["direct"])
    sites = len(pump.finalized.sites)
    print(f"auto on {sites} sites, {count} phase(s): {ratio:.2f} times the better engine", flush=True)
    return {"case": f"auto, {sites} sites, {count} phases", "ratio": ratio}


def _alone(function: Callable[..., Any], *arguments: Any) -> Any:
    """Run in a fresh process, so that nobody's memory or caches are in the way."""
    is_hidden = sys.modules.get("numba", sys) is None
    with ProcessPoolExecutor(1, get_context("spawn"), _hide_numba if is_hidden else None) as pool:
        return pool.submit(function, *arguments).result()


def _hide_numba() -> None:
    """Let nobody in this process find numba."""
    sys.modules["numba"] = None  # type: ignore[assignment]  # importlib's way to say that there is no such module


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--json", type=Path)
    parser.add_argument("--phases", type=int, default=400)
    parser.add_argument("--repeats", type=int, default=5)
    parser.add_argument("--sizes", nargs="+", default=SIZES, metavar="LxW")
    parts = {"ratios": ratios, "growth": growth, "proof": proof}
    parser.add_argument("--only", nargs="+", default=list(parts), choices=parts)
    parser.add_argument("--without-numba", action="store_true", help="measure what is left if it is not installed")
    options = parser.parse_args()
    if options.without_numba:
        _hide_numba()
    found = {name: parts[name](options) for name in options.only}
    if options.json:
        options.json.write_text(json.dumps(found, indent=2, default=float) + "\n")


if __name__ == "__main__":
    main()
