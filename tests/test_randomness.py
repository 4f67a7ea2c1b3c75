"""A report says what is random in a device, whichever kind it is."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from scatterpump.builder.description import Disorder
from scatterpump.device_file import load_device
from scatterpump.report import _randomness

EXAMPLES = Path(__file__).parents[1] / "examples"


@pytest.mark.parametrize("file", sorted(EXAMPLES.glob("*.toml")), ids=lambda file: file.stem)
def test_every_example_says_what_is_random(file: Path) -> None:
    assert _randomness(load_device(file))


@pytest.mark.parametrize("name", ["conveyor", "cold_atoms", "superlattice"])
def test_seed_is_told_where_there_is_disorder(name: str) -> None:
    clean = load_device(EXAMPLES / f"{name}.toml")
    rough = (
        replace(clean, disorder=Disorder(onsite=0.1, seed=7))
        if name == "superlattice"
        else replace(clean, disorder=0.1, seed=7)
    )
    assert _randomness(clean) == "nothing is random"
    assert _randomness(rough) == "seed 7 of the disorder"
