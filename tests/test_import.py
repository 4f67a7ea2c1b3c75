"""`import scatterpump` is quick: what is heavy is loaded by the functions that need it."""

from __future__ import annotations

import subprocess
import sys

import pytest

HEAVY = ("kwant", "scipy.optimize", "matplotlib", "pydantic", "xarray", "h5py", "distributed", "mpi4py", "tqdm")


def loaded_after(statement: str) -> set[str]:
    program = f"import sys; {statement}; print(*sys.modules)"
    result = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    return set(result.stdout.split())


@pytest.mark.parametrize("statement", ["import scatterpump", "import scatterpump.cli"])
def test_import_leaves_heavy_packages_alone(statement: str) -> None:
    # derived: the project's own promise
    loaded = loaded_after(statement)
    assert "scatterpump" in loaded
    assert loaded.isdisjoint(HEAVY)


def test_import_is_silent() -> None:
    result = subprocess.run([sys.executable, "-W", "error", "-c", "import scatterpump"], capture_output=True, text=True)
    # derived: the project's own promise
    assert (result.returncode, result.stdout, result.stderr) == (0, "", "")


def test_public_names_exist() -> None:
    import scatterpump

    # derived: the list of public names is what can be imported
    assert sorted(scatterpump.__all__) == scatterpump.__all__
    assert [name for name in scatterpump.__all__ if not hasattr(scatterpump, name)] == []
