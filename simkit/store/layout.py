"""Create an empty results store: arrays, coordinates and attributes, all values at their fill."""

from __future__ import annotations

import hashlib
import json
import math
import os
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from simkit.store.files import flush_tree
from simkit.store.remote import Place
from simkit.store.schema import (
    ADDED_LATER,
    MODES,
    PHI_DEG,
    POSITIONS,
    SAMPLES,
    THETA_DEG,
    VARIABLES,
    Status,
)

if TYPE_CHECKING:
    import zarr

STORE_VERSION = 1
"""Raised when a reader of the older layout would misunderstand a newer store."""

_INTEGER_FILL = {"status": 0, "solves": 0, "driven": -1}

_PIECE_BYTES = 1_000_000
"""What is read at least, unpacked, to get at one case of a large variable."""


@dataclass(frozen=True)
class SweptColumn:
    """One swept value over all cases, SI.

    Attributes
    ----------
    name : str
        As in the study.
    units : str
        SI unit, "1" for pure numbers.
    display_unit : str
        Unit the user wrote.
    values : (N,) float array
    """

    name: str
    units: str
    display_unit: str
    values: NDArray[np.float64]


@dataclass(frozen=True)
class Layout:
    """Sizes, coordinates and attributes of a store.

    Attributes
    ----------
    cases, segments, block_size : int
        Sizes of ``case`` and ``segment``, and of one chunk along ``case``.
    frequency_hz : (F,) float array
    strips : tuple of str
    swept : tuple of SweptColumn
    attrs : dict
        Kept as attributes of the store; must be JSON.
    """

    cases: int
    segments: int
    block_size: int
    frequency_hz: NDArray[np.float64]
    strips: tuple[str, ...]
    swept: tuple[SweptColumn, ...] = ()
    attrs: dict[str, Any] = field(default_factory=dict)

    @property
    def sizes(self) -> dict[str, int]:
        """Length of every dimension."""
        return {
            "case": self.cases,
            "frequency": len(self.frequency_hz),
            "mode": MODES,
            "strip": len(self.strips),
            "position": POSITIONS,
            "theta": len(THETA_DEG),
            "phi": len(PHI_DEG),
            "sample": SAMPLES,
            "segment": self.segments,
        }


def fill_value(name: str) -> Any:
    """Value of a cell of `name` that nothing was written to.

    NaN for reals and complex numbers, empty text, ``waiting`` for the status, no solves, and -1
    for every other integer.
    """
    kind = VARIABLES[name].dtype
    if kind == "str":
        return ""
    if kind.startswith("c"):
        return complex(np.nan, np.nan)
    if kind.startswith("f"):
        return np.nan
    return _INTEGER_FILL.get(name, -1)


def numpy_dtype(name: str) -> Any:
    """Type of `name` in memory; text is of variable length."""
    kind = VARIABLES[name].dtype
    return np.dtypes.StringDType() if kind == "str" else np.dtype(kind)


def layout_hash(without: frozenset[str] = frozenset()) -> str:
    """Short hash of names, dimensions and types of all variables, some left out."""
    table = [
        [name, list(variable.dims), variable.dtype, MODES, SAMPLES]
        for name, variable in VARIABLES.items()
        if name not in without
    ]
    return hashlib.sha256(json.dumps(table).encode()).hexdigest()[:16]


def usable_layouts() -> tuple[str, str]:
    """Hashes of this layout and of the one before it, whose cases can be taken over."""
    return layout_hash(), layout_hash(ADDED_LATER)


def create_store(path: Place, layout: Layout) -> None:
    """Write an empty store to `path`, which appears complete or not at all.

    Parameters
    ----------
    path : Path or RemotePath
        Must not exist.
    layout : Layout

    Raises
    ------
    OSError
        The folder cannot be written.
    """
    import tempfile

    if not isinstance(path, Path):
        with tempfile.TemporaryDirectory(prefix="simkit-") as folder:
            create_store(Path(folder) / path.name, layout)
            path.upload_tree(Path(folder) / path.name)
        return
    aside = path.with_name(path.name + ".part")
    _write_empty(aside, layout)
    flush_tree(aside)
    os.rename(aside, path)
    flush_tree(path.parent, files=False)


def _write_empty(aside: Path, layout: Layout) -> None:
    import zarr

    group = zarr.create_group(aside, zarr_format=3, attributes=_group_attrs(layout), overwrite=True)
    for name in VARIABLES:
        _add_variable(group, name, layout)
    _add_coordinates(group, layout)


def _group_attrs(layout: Layout) -> dict[str, Any]:
    return {
        **layout.attrs,
        "store_version": STORE_VERSION,
        "layout_hash": layout_hash(),
        "variables": list(VARIABLES),
        "block_size": layout.block_size,
        "swept": {column.name: column.name for column in layout.swept},
        # What xarray itself needs to see the swept values as coordinates.
        "coordinates": " ".join(column.name for column in layout.swept),
    }


def _variable_attrs(name: str) -> dict[str, Any]:
    variable = VARIABLES[name]
    attrs: dict[str, Any] = {"long_name": variable.meaning}
    if variable.units:
        attrs["units"] = variable.units
    if name == "status":
        attrs["flag_values"] = [int(status) for status in Status]
        attrs["flag_meanings"] = " ".join(status.label for status in Status)
    if name == "driven":
        attrs["flag_values"] = [-1, 0, 1]
        attrs["flag_meanings"] = "no-mode mode-current driven-at-feed"
    return attrs


def _add_variable(group: zarr.Group, name: str, layout: Layout) -> None:
    from zarr.codecs import Crc32cCodec, ZstdCodec

    dims = VARIABLES[name].dims
    shape = tuple(layout.sizes[dim] for dim in dims)
    block = min(layout.block_size, layout.cases)
    piece = _cases_in_a_piece(block, numpy_dtype(name).itemsize * math.prod(shape[1:]))
    group.create_array(
        name,
        shape=shape,
        # One file holds a block, in pieces that can be read alone if the block is large.
        chunks=(piece, *shape[1:]),
        shards=(block, *shape[1:]) if piece < block else None,
        dtype=numpy_dtype(name),
        fill_value=fill_value(name),
        compressors=[ZstdCodec(level=1), Crc32cCodec()],
        dimension_names=dims,
        # One file per block straight under the array: fewer folders to flush.
        chunk_key_encoding={"name": "default", "separator": "."},
        attributes=_variable_attrs(name),
    )


def _cases_in_a_piece(block: int, case_bytes: int) -> int:
    """Largest part of a block, dividing it evenly, that keeps the reading of one case quick."""
    if block * case_bytes <= 4 * _PIECE_BYTES:
        return block
    most = max(1, _PIECE_BYTES // case_bytes)
    return next(count for count in range(most, 0, -1) if block % count == 0)


def _add_coordinates(group: zarr.Group, layout: Layout) -> None:
    columns: list[tuple[str, str, Any, dict[str, Any]]] = [
        ("case", "case", np.arange(layout.cases), {"long_name": "point of the sweep"}),
        ("frequency", "frequency", layout.frequency_hz, {"units": "Hz", "long_name": "frequency"}),
        ("mode", "mode", np.arange(MODES), {"long_name": "natural mode, lowest frequency first"}),
        ("position", "position", np.linspace(0, 1, POSITIONS), _units("1", "place along a strip")),
        ("theta", "theta", THETA_DEG, _units("degree", "polar angle from +z")),
        ("phi", "phi", PHI_DEG, _units("degree", "azimuth from +x")),
        ("strip", "strip", _text(layout.strips), {"long_name": "strip"}),
    ]
    for column in layout.swept:
        attrs = _units(column.units, column.name) | {"display_unit": column.display_unit}
        columns.append((column.name, "case", column.values, attrs))
    for name, dim, values, attrs in columns:
        array = group.create_array(
            name,
            shape=values.shape,
            chunks=values.shape,
            dtype=values.dtype,
            fill_value="" if values.dtype.kind == "T" else None,
            dimension_names=(dim,),
            attributes=attrs,
        )
        array[:] = values


def _units(units: str, long_name: str) -> dict[str, Any]:
    return {"units": units, "long_name": long_name}


def _text(words: tuple[str, ...]) -> Any:
    return np.array(words, dtype=np.dtypes.StringDType())
