"""netCDF: one file that most scientific programs open.

The classic form (64-bit offsets) is written, because it needs no further library and everything
reads it. It knows neither complex numbers nor compression, and the file is put together in memory;
so its size is limited, and larger results are better handed on as the store they are.
"""

from __future__ import annotations

import json
import math
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from simkit.errors import ExportError
from simkit.exports.aside import new_file
from simkit.exports.outcome import Exported, Seen
from simkit.finding.reading import damage_in_words
from simkit.finding.select import parts

if TYPE_CHECKING:
    import xarray as xr

_OF_THE_STORE = ("store_version", "layout_hash", "variables", "block_size", "takeover")

LARGEST_BYTES = 1_000_000_000
"""Numbers in one file; while it is written about twice as much memory is needed."""


def write_netcdf(
    dataset: xr.Dataset, path: Path, only: Sequence[str], seen: Seen, *, overwrite: bool
) -> Exported:
    """Write chosen cases; see `simkit.export`."""
    chosen = dataset[_variables(dataset, only)]
    _require_room(chosen, path)
    with new_file(path, overwrite=overwrite) as aside:
        table = split_complex(_loaded(chosen, seen))
        table.to_netcdf(aside, engine="scipy", format="NETCDF3_64BIT")
    return Exported(path, chosen.sizes["case"])


def _variables(dataset: xr.Dataset, only: Sequence[str]) -> list[str]:
    from simkit.study.units import nearest

    names = [str(name) for name in dataset.data_vars]
    for name in only:
        if name not in names:
            hint = nearest(name, names)
            advice = f"do you mean {hint}?" if hint else f"there are {', '.join(names)}"
            raise ExportError(f"the results have no variable {name!r}; {advice}")
    return list(only) or names


def _require_room(chosen: xr.Dataset, path: Path) -> None:
    # Of text the type says nothing; some tens of bytes a case do not matter here.
    size = sum(
        variable.dtype.itemsize * math.prod(variable.shape)
        for variable in chosen.variables.values()
    )
    if size > LARGEST_BYTES:
        raise ExportError(
            f"{path}: these {chosen.sizes['case']} cases are {size / 1e9:.1f} GB, more than "
            f"{LARGEST_BYTES / 1e9:.0f} GB in one netCDF file; choose cases by --where or "
            "variables by --only, or hand on the folder store.zarr itself, which is compressed and "
            "opens with xarray.open_zarr(..., consolidated=False)"
        )


def _loaded(chosen: xr.Dataset, seen: Seen) -> xr.Dataset:
    """Read everything, a block of cases at a time."""
    import xarray as xr

    arrays: dict[Any, Any] = {
        name: np.empty(variable.shape, variable.dtype) if variable.dtype.kind != "T" else []
        for name, variable in chosen.data_vars.items()
    }
    for rows in parts(chosen):
        part = chosen.isel(case=rows)
        with damage_in_words(part):
            for name, target in arrays.items():
                if isinstance(target, list):
                    target += [str(text) for text in part[name].values]
                else:
                    target[rows] = part[name].values
        seen(rows.stop)
    variables = {
        name: (chosen[name].dims, _text(array) if isinstance(array, list) else array,
               chosen[name].attrs)
        for name, array in arrays.items()
    }  # fmt: skip
    return xr.Dataset(variables, chosen.coords, chosen.attrs)


def _text(words: list[str]) -> Any:
    # A length of one at least: the form knows no dimension of no length.
    return np.array(words, dtype=f"<U{max(1, *map(len, words), 1)}")


def split_complex(dataset: xr.Dataset) -> xr.Dataset:
    """Return a dataset without complex variables and with plain attributes.

    ``NAME`` becomes ``NAME_real`` and ``NAME_imag``, each with the unit of the whole.
    """
    variables: dict[Any, Any] = {}
    for name, variable in dataset.data_vars.items():
        if variable.dtype.kind != "c":
            variables[name] = variable
            continue
        about = variable.attrs.get("long_name", name)
        for ending, values in (("real", variable.values.real), ("imag", variable.values.imag)):
            kind = "real" if ending == "real" else "imaginary"
            attrs = variable.attrs | {"long_name": f"{about}, {kind} part"}
            variables[f"{name}_{ending}"] = (variable.dims, values, attrs)
    split = type(dataset)(variables, dataset.coords, plain_attrs(dataset.attrs))
    split.attrs["complex_numbers"] = "NAME_real + 1j * NAME_imag"
    return split


def plain_attrs(attrs: Mapping[Any, Any]) -> dict[str, Any]:
    """Return attributes as text and numbers; lists and tables become JSON.

    What belongs to the store alone is left out, and must be: an attribute called ``variables``
    takes the place of the variables themselves in scipy's writer.
    """
    return {
        str(key): value if isinstance(value, str | int | float) else json.dumps(value)
        for key, value in attrs.items()
        if key not in _OF_THE_STORE
    }
