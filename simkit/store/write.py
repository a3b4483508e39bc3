"""Write results, one block of cases at a time."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from simkit.errors import StoreError
from simkit.store.files import flush
from simkit.store.layout import fill_value, numpy_dtype
from simkit.store.schema import VARIABLES, Status

if TYPE_CHECKING:
    import zarr

TORN = (ValueError, RuntimeError, OSError)
"""What reading a damaged chunk can raise: a wrong checksum, a codec's complaint, a missing file."""


class Block:
    """The cases of one block in memory, at their fill values until something is put in.

    Parameters
    ----------
    sizes : dict of str to int
        Length of every dimension but ``case``.
    first, count : int
        First case and number of cases.
    """

    def __init__(self, sizes: Mapping[str, int], first: int, count: int) -> None:
        self.first = first
        self.count = count
        self.arrays: dict[str, Any] = {}
        for name, variable in VARIABLES.items():
            shape = (count, *(sizes[dim] for dim in variable.dims[1:]))
            self.arrays[name] = np.full(shape, fill_value(name), dtype=numpy_dtype(name))

    def put(self, case: int, values: Mapping[str, Any]) -> None:
        """Set arrays of one case, named as in the schema and without the ``case`` dimension.

        Raises
        ------
        ValueError
            A name is not of the schema, or a shape or type does not fit.
        """
        for name, value in values.items():
            if name not in self.arrays:
                raise ValueError(f"case {case}: the store has no variable {name!r}")
            self._put_one(case, name, value)

    def _put_one(self, case: int, name: str, value: Any) -> None:
        target = self.arrays[name]
        if target.dtype.kind != "T":
            value = np.asarray(value)
            if value.shape != target.shape[1:] or not np.can_cast(
                value.dtype, target.dtype, casting="same_kind"
            ):
                raise ValueError(
                    f"case {case}: {name} has shape {value.shape} and type {value.dtype}, "
                    f"the store keeps {target.shape[1:]} and {target.dtype}"
                )
        target[case - self.first] = value

    def take(self, case: int, other: Mapping[str, Any], row: int) -> None:
        """Copy every array of one case from row `row` of the arrays of another block."""
        for name, target in self.arrays.items():
            target[case - self.first] = other[name][row]

    def statuses(self) -> list[Status]:
        """Status of every case of the block."""
        return [Status(int(code)) for code in self.arrays["status"]]


class StoreFile:
    """A store open for reading and writing whole blocks.

    Parameters
    ----------
    path : Path
        Folder of the store, ``store.zarr``.

    Raises
    ------
    StoreError
        The folder is not a store of this version.
    """

    def __init__(self, path: Path) -> None:
        self.path = path
        self.attrs = read_attrs(path)
        self._group: zarr.Group | None = None
        self._arrays: dict[str, Any] = {}
        self.block_size = int(self.attrs["block_size"])
        self.cases = int(self.array("status").shape[0])
        self.sizes = self._read_sizes()

    def array(self, name: str) -> Any:
        """The zarr array of one variable, kept open."""
        import zarr

        if self._group is None:
            self._group = zarr.open_group(self.path, mode="r+", zarr_format=3)
        if name not in self._arrays:
            try:
                self._arrays[name] = self._group[name]
            except KeyError as error:
                raise StoreError(
                    f"{self.path}: the array {name!r} is missing; start anew with --fresh"
                ) from error
        return self._arrays[name]

    def _read_sizes(self) -> dict[str, int]:
        sizes: dict[str, int] = {}
        for name in VARIABLES:
            sizes |= dict(zip(VARIABLES[name].dims, self.array(name).shape, strict=True))
        return sizes

    @property
    def blocks(self) -> int:
        """Number of blocks."""
        return -(-self.cases // self.block_size)

    def rows(self, block: int) -> slice:
        """Cases of one block."""
        return slice(block * self.block_size, min((block + 1) * self.block_size, self.cases))

    def new_block(self, block: int) -> Block:
        """An empty block of the right sizes."""
        rows = self.rows(block)
        return Block(self.sizes, rows.start, rows.stop - rows.start)

    def read_arrays(self, block: int) -> dict[str, Any]:
        """Every array of one block, with the ``case`` dimension.

        Raises
        ------
        ValueError, RuntimeError, OSError
            A file of the block is damaged (see `TORN`).
        """
        rows = self.rows(block)
        return {name: self.array(name)[rows] for name in VARIABLES}

    def write_block(self, block: int, content: Block) -> None:
        """Write one block: data first, flushed to the disk, then the status, flushed too.

        Parameters
        ----------
        block : int
        content : Block
            All cases of that block.

        Raises
        ------
        OSError
            The disk is full or cannot be written; the status of the block is then not written.
        """
        names = [name for name in VARIABLES if name != "status"]
        self._write(block, content, names)
        self._write(block, content, ["status"])

    def _write(self, block: int, content: Block, names: list[str]) -> None:
        rows = self.rows(block)
        for name in names:
            self.array(name)[rows] = content.arrays[name]
        flush(self._chunk(name, block) for name in names)
        flush(self.path / name for name in names)

    def _chunk(self, name: str, block: int) -> Path:
        trailing = ".0" * (len(VARIABLES[name].dims) - 1)
        return self.path / name / f"c.{block}{trailing}"

    def read_statuses(self) -> Any:
        """Status codes of all cases, (N,) int8; a torn block counts as waiting."""
        return self._read_by_block("status")

    def read_keys(self) -> list[str]:
        """Keys of all cases, empty where nothing was written or the block is torn."""
        return [str(key) for key in self._read_by_block("case_key")]

    def _read_by_block(self, name: str) -> Any:
        values = np.full(self.cases, fill_value(name), dtype=numpy_dtype(name))
        for block in range(self.blocks):
            rows = self.rows(block)
            try:
                values[rows] = self.array(name)[rows]
            except TORN:
                continue
        return values


def read_attrs(path: Path) -> dict[str, Any]:
    """Attributes of a store.

    Raises
    ------
    StoreError
        Missing, damaged, not a store of simkit, or of another version.
    """
    import json

    from simkit.store.layout import STORE_VERSION

    try:
        text = (path / "zarr.json").read_text(encoding="utf-8")
    except FileNotFoundError as error:
        raise StoreError(f"{path}: there is no results store here") from error
    except (NotADirectoryError, UnicodeDecodeError) as error:
        raise StoreError(f"{path}: this is not a results store") from error
    except OSError as error:
        raise StoreError(f"{path}: cannot be read: {error.strerror}") from error
    try:
        attrs = json.loads(text).get("attributes", {})
    except (ValueError, AttributeError) as error:
        raise StoreError(
            f"{path}: zarr.json is damaged; the store cannot be read. Start anew with --fresh"
        ) from error
    version = attrs.get("store_version") if isinstance(attrs, dict) else None
    if not isinstance(version, int):
        raise StoreError(f"{path}: this zarr folder was not written by simkit")
    if version != STORE_VERSION:
        raise StoreError(
            f"{path}: written in store version {version}, this simkit reads version "
            f"{STORE_VERSION}; use the simkit that wrote it, or start anew with --fresh"
        )
    return dict(attrs)
