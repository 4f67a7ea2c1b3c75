"""All parts of a sweep as one labelled data set, and as one netCDF file.

Dimensions are the axes of the plan; complex numbers are split into real and imaginary parts, as netCDF has no complex
ones; the attributes hold the plan, so that the file is enough to run it again.  Axes of seeds are summed up as well:
the share of samples that is quantised, with its interval, and quantiles of every number kept.
"""

from __future__ import annotations

import json
import os
from collections import Counter
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from scatterpump.errors import InputError, SweepError
from scatterpump.sweep.axis import Axis
from scatterpump.sweep.columns import MISSING, empty, joined
from scatterpump.sweep.ensemble import QUANTILES, quantiles, quantised, quantised_fraction
from scatterpump.sweep.order import points_at
from scatterpump.sweep.plan import SweepPlan
from scatterpump.sweep.quantities import DTYPES, Column, columns_of
from scatterpump.sweep.store import Store

if TYPE_CHECKING:
    import xarray

__all__ = ["gather_sweep", "write_netcdf"]

DONE, ABSENT, FAILED = 1, 0, -1
SHOWN_ERRORS = 20


def gather_sweep(folder: str | Path) -> xarray.Dataset:
    """Return what a folder of results holds as an `xarray.Dataset`.

    ``status`` is 1 where a point is done, 0 where it is missing and -1 where it failed; numbers are nan there.

    Raises
    ------
    InputError
        If the folder holds no results, or xarray is not installed.
    """
    xr = _xarray()
    store = Store.read(folder)
    columns = columns_of(store.plan.keep)
    arrays, status, about = _merged(store, columns)
    plan = store.plan
    dims = tuple(axis.name for axis in plan.axes)
    variables = {"status": (dims, status.reshape(plan.shape), _flags())}
    variables["seconds"] = (dims, arrays.pop("seconds").reshape(plan.shape), {"long_name": "time taken", "units": "s"})
    for column in columns:
        variables |= _variables(column, arrays[column.name], dims, plan.shape)
    variables |= _ensembles(plan, arrays, status)
    raw = xr.Dataset(variables, _coordinates(plan, columns, arrays), {**about, **_summary(store)})
    decoded: xarray.Dataset = xr.decode_cf(raw, decode_times=False, decode_timedelta=False)
    return decoded


def write_netcdf(data: xarray.Dataset, path: str | Path) -> None:
    """Write the data set to a netCDF file, whole or not at all.

    Raises
    ------
    SweepError
        If it cannot be written.
    """
    path = Path(path)
    temporary = path.with_name(f".{path.name}.{os.getpid()}.tmp")
    try:
        data.to_netcdf(temporary, engine="h5netcdf")
        os.replace(temporary, path)
    except OSError as error:
        temporary.unlink(missing_ok=True)
        raise SweepError(f"{path}: it cannot be written: {error.strerror or error}") from error


def _xarray() -> Any:
    try:
        import h5netcdf  # noqa: F401  # what writes the file
        import h5py  # noqa: F401  # what h5netcdf needs, and does not install
        import xarray
    except ImportError as error:
        raise InputError(f"{error.name} is not installed", allowed="pip install 'scatterpump[store]'") from error
    return xarray


def _merged(store: Store, columns: list[Column]) -> tuple[dict[str, NDArray[Any]], NDArray[np.int8], dict[str, str]]:
    """Put all parts together, a row a point; a success counts more than a failure, and else the first part."""
    size = store.plan.size
    arrays = {c.name: empty((size, *(0 for _ in c.dims)), DTYPES[c.kind]) for c in columns}
    arrays["seconds"] = empty((size,), np.float64)
    status = np.full(size, ABSENT, np.int8)
    versions: Counter[str] = Counter()
    errors: Counter[str] = Counter()
    for part in store.parts():
        found, about = store.load(part, arrays.keys())
        positions = np.arange(part.start, part.stop)
        failed = np.isin(positions, [int(p) for p in about["errors"]])
        rows = points_at(positions, size)
        better = (status[rows] == ABSENT) | ((status[rows] == FAILED) & ~failed)
        status[rows[better]] = np.where(failed[better], FAILED, DONE)
        for name in arrays:
            arrays[name] = joined(arrays[name], rows[better], found[name][better])
        versions[json.dumps(about["versions"], sort_keys=True)] += part.stop - part.start
        errors.update(text.strip().splitlines()[-1] for text in about["errors"].values())
    return arrays, status, {"versions": json.dumps([json.loads(v) for v in versions]), "errors": _errors(errors)}


def _variables(column: Column, values: NDArray[Any], dims: tuple[str, ...], shape: tuple[int, ...]) -> dict[str, Any]:
    shaped = values.reshape(*shape, *values.shape[1:])
    attributes = {"long_name": column.meaning, "units": column.unit}
    here = (*dims, *column.dims)
    if column.kind == "complex":
        return {
            f"{column.name}_real": (here, shaped.real, {**attributes, "long_name": f"real part of {column.meaning}"}),
            f"{column.name}_imag": (
                here,
                shaped.imag,
                {**attributes, "long_name": f"imaginary part of {column.meaning}"},
            ),
        }
    filled = {"_FillValue": np.int32(MISSING)} if column.kind == "integer" else {}
    return {column.name: (here, shaped, {**attributes, **filled})}


def _coordinates(plan: SweepPlan, columns: list[Column], arrays: dict[str, NDArray[Any]]) -> dict[str, Any]:
    coordinates: dict[str, Any] = {}
    for axis in plan.axes:
        for i, key in enumerate(axis.keys):
            name = axis.name if i == 0 else key.replace(".", "_").replace("-", "_")
            coordinates[name] = ((axis.name,), *_labels(axis, i, key))
    if any("phase" in column.dims for column in columns):
        even = 2 * np.pi * np.arange(plan.phases) / plan.phases
        if all(arrays[c.name].shape[1] == plan.phases for c in columns if "phase" in c.dims):
            coordinates["phase"] = (("phase",), even, {"long_name": "angle of the cycle", "units": "rad"})
    return coordinates


def _labels(axis: Axis, which: int, key: str) -> tuple[NDArray[Any], dict[str, str]]:
    """Return the values of one key of an axis; what is neither number nor text is counted, and told as an attribute."""
    values = [entry[which] for entry in axis.values]
    attributes = {"long_name": key, **({"units": axis.unit} if axis.unit else {})}
    if all(isinstance(v, str) for v in values) or all(isinstance(v, int | float) for v in values):
        return np.array(values), attributes
    return np.arange(len(values)), {**attributes, "values": json.dumps(values)}


def _ensembles(plan: SweepPlan, arrays: dict[str, NDArray[Any]], status: NDArray[np.int8]) -> dict[str, Any]:
    """Sum up over the axes of seeds, if there are any."""
    axes = [i for i, axis in enumerate(plan.axes) if axis.is_seed]
    if not axes:
        return {}
    dims = tuple(axis.name for axis in plan.axes if not axis.is_seed)
    counts = (status == DONE).reshape(plan.shape)
    sure = quantised(arrays, plan.expected)
    found: dict[str, Any] = {}
    if sure is not None:
        fraction = quantised_fraction(sure.reshape(plan.shape), counts, axes)
        found["samples"] = (dims, fraction.samples, {"long_name": "samples that counted", "units": "1"})
        for name, values in (("", fraction.value), ("_lower", fraction.lower), ("_upper", fraction.upper)):
            told = "share of samples that is quantised" + (", Wilson interval at 95 %" if name else "")
            found[f"quantised_fraction{name}"] = (dims, values, {"long_name": told, "units": "1"})
    for column in columns_of(plan.keep):
        if column.kind == "float" and not column.dims:
            values = quantiles(arrays[column.name].reshape(plan.shape), counts, axes)
            words = {"long_name": f"quantiles of: {column.meaning}", "units": column.unit}
            found[f"{column.name}_quantiles"] = ((*dims, "quantile"), values, words)
    return found | {"quantile": (("quantile",), np.array(QUANTILES), {"long_name": "share of samples", "units": "1"})}


def _flags() -> dict[str, Any]:
    return {
        "long_name": "what became of the point",
        "flag_values": np.array([FAILED, ABSENT, DONE], np.int8),
        "flag_meanings": "failed missing done",
    }


def _errors(errors: Counter[str]) -> str:
    return json.dumps(dict(errors.most_common(SHOWN_ERRORS)))


def _summary(store: Store) -> dict[str, str]:
    return {
        "title": str(store.plan.device.get("name", "sweep")) if isinstance(store.plan.device, dict) else "sweep",
        "plan": (store.folder / "plan.json").read_text(encoding="utf-8"),
        "plan_sha256": store.fingerprint,
        "rerun": "write the attribute 'plan' to plan.json; scatterpump sweep plan.json --into FOLDER",
        "limits": "single-particle theory: no interactions, no decoherence; it does not replace measurement",
    }
