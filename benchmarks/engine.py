"""How much faster r(phi) is than a practised loop over kwant.smatrix.

Both sides run on the same pump in one process, BLAS on one thread: the loop computes the lead modes once and asks
for the probe as the only in-lead; the engine starts from the same finalized system.  Ratios are medians over paired
repeats; the loop is timed on a few phases and scaled.

    python benchmarks/engine.py [--json FILE] [--phases 400] [--repeats 5]
"""

from __future__ import annotations

import argparse
import json
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import kwant
import numpy as np
from threadpoolctl import threadpool_limits

import scatterpump as sp

LOOP_SAMPLES = 8
ACROSS = 0.1


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


def loop(pump: sp.Pump, phases: np.ndarray) -> np.ndarray:
    """What a practised user writes."""
    system = pump.finalized.precalculate(pump.fermi_level, params={"phi": 0.0}, what="modes")
    return np.array(
        [
            kwant.smatrix(system, pump.fermi_level, params={"phi": phase}, out_leads=[0], in_leads=[0]).data
            for phase in phases
        ]
    )


def timed(function: Callable[[], Any]) -> tuple[float, Any]:
    start = time.perf_counter()
    result = function()
    return time.perf_counter() - start, result


def compare(length: int, width: int, disorder: float, count: int, repeats: int) -> dict[str, Any]:
    """Time both sides in pairs; ratios are loop over engine."""
    pump = device(length, width, disorder)
    phases = 2 * np.pi * np.arange(count) / count + 0.01
    few = phases[:: max(1, count // LOOP_SAMPLES)]
    pairs = []
    for _ in range(repeats):
        ours, trace = timed(lambda: sp.reflect(pump, phases, engine="layered", transmission=False))
        theirs, reference = timed(lambda: loop(pump, few))
        pairs.append((theirs * count / len(few), ours))
    chosen = trace.reflection[:: max(1, count // LOOP_SAMPLES)]
    invariant = np.abs(
        np.linalg.det(chosen[1:]) / np.linalg.det(chosen[:1])
        - np.linalg.det(reference[1:]) / np.linalg.det(reference[:1])
    ).max()
    loops, engines = np.array(pairs).T
    return {
        "case": f"{length} x {width}{' disordered' if disorder else ''}",
        "phases": count,
        "loop_s": float(np.median(loops)),
        "engine_s": float(np.median(engines)),
        "ratio": float(np.median(loops / engines)),
        "largest_difference": float(invariant),
    }


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--json", type=Path)
    parser.add_argument("--phases", type=int, default=400)
    parser.add_argument("--repeats", type=int, default=5)
    parser.add_argument("--sizes", nargs="+", default=["300x1", "3000x1", "100x10", "100x40"], metavar="LxW")
    options = parser.parse_args()
    rows = []
    print(
        f"{'device':<22}{'loop':>10}{'engine':>10}{'ratio':>9}{'difference':>13}   kwant solver: "
        f"{kwant.solvers.default.smodule.__name__.rpartition('.')[2]}"
    )
    with threadpool_limits(1):
        for size in options.sizes:
            length, width = map(int, size.split("x"))
            for disorder in (0.0, 0.3):
                row = compare(length, width, disorder, options.phases, options.repeats)
                rows.append(row)
                print(
                    f"{row['case']:<22}{row['loop_s']:>9.2f}s{row['engine_s']:>9.3f}s{row['ratio']:>9.1f}"
                    f"{row['largest_difference']:>13.1e}",
                    flush=True,
                )
    if options.json:
        options.json.write_text(json.dumps(rows, indent=2) + "\n")


if __name__ == "__main__":
    main()
