"""Results as plain data: what JSON can hold, and nothing else."""

from __future__ import annotations

from math import isfinite
from typing import Any

__all__ = ["plain"]


def plain(value: Any) -> Any:
    """Return `value` in numbers, text, lists and dictionaries; a number that is not finite becomes None."""
    if isinstance(value, dict):
        return {key: plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [plain(item) for item in value]
    if hasattr(value, "item"):
        value = value.item()
    return None if isinstance(value, float) and not isfinite(value) else value
