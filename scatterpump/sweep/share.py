"""Which share of a plan this process has: as told, or as the scheduler's array variables say.

Slurm counts an array by SLURM_ARRAY_TASK_ID, _MIN, _STEP and _COUNT; Grid Engine by SGE_TASK_ID, _FIRST, _LAST and
_STEPSIZE (both from their manuals).
"""

from __future__ import annotations

import os
import re
from collections.abc import Mapping

from scatterpump.errors import InputError

__all__ = ["available_workers", "share_of"]


def share_of(text: str | None, environment: Mapping[str, str] = os.environ) -> tuple[int, int]:
    """Return (share, shares), counted from 1, from "3/16" or from the array variables; (1, 1) without either."""
    if text is not None:
        match = re.fullmatch(r"\s*(\d{1,9})\s*/\s*(\d{1,9})\s*", text)
        share, shares = map(int, match.groups()) if match else (0, 0)
        return _checked(share, shares, f"--share {text}")
    if "SLURM_ARRAY_TASK_ID" in environment:
        number, first = _whole(environment, "SLURM_ARRAY_TASK_ID"), _whole(environment, "SLURM_ARRAY_TASK_MIN")
        step = _whole(environment, "SLURM_ARRAY_TASK_STEP", "1")
        shares = _whole(environment, "SLURM_ARRAY_TASK_COUNT")
        return _checked((number - first) // step + 1, shares, "SLURM_ARRAY_TASK_ID")
    if environment.get("SGE_TASK_ID", "undefined") != "undefined":
        number, first = _whole(environment, "SGE_TASK_ID"), _whole(environment, "SGE_TASK_FIRST")
        step = _whole(environment, "SGE_TASK_STEPSIZE", "1")
        shares = (_whole(environment, "SGE_TASK_LAST") - first) // step + 1
        return _checked((number - first) // step + 1, shares, "SGE_TASK_ID")
    return 1, 1


def available_workers(environment: Mapping[str, str] = os.environ) -> int:
    """Return how many processes may run here: what the scheduler grants, else what the machine has."""
    for name in ("SLURM_CPUS_PER_TASK", "NSLOTS", "PBS_NCPUS"):
        if environment.get(name, "").isdigit():
            return max(1, int(environment[name]))
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def _whole(environment: Mapping[str, str], name: str, default: str = "") -> int:
    value = environment.get(name, default)
    if not value.isdigit():
        raise InputError(f"{name} is {value!r}", allowed="a whole number, or --share 3/16", where="environment")
    return max(int(value), 0)


def _checked(share: int, shares: int, where: str) -> tuple[int, int]:
    if not 1 <= share <= shares:
        raise InputError(
            "this is no share",
            allowed="number/count such as 3/16, from 1/16 to 16/16; arrays without gaps",
            where=where,
        )
    return share, shares
