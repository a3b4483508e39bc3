"""Write results, one block of cases at a time."""

from __future__ import annotations

import contextlib
from collections.abc import Iterator, Mapping
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from simkit.errors import StoreError
from simkit.store.files import flush
from simkit.store.layout import fill_value, numpy_dtype
from simkit.store.remote import Place, RemotePath, zarr_store
from simkit.store.schema import VARIABLES, Status

if TYPE_CHECKING:
    import zarr

TORN = (ValueError, RuntimeError, OSError)
"""What reading a damaged chunk can raise: a wrong checksum, a codec's complaint, a missing file."""


ALWAYS_WRITTEN = "impedance"
"""Array of which a solved case leaves nothing empty."""

KEY_DTYPE = np.dtype("S64")
"""Type of many case keys at once: the hexadecimal digits, empty for none."""


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
            value = self._filled_up(name, np.asarray(value), target.shape[1:])
            if value.shape != target.shape[1:] or not np.can_cast(
                value.dtype, target.dtype, casting="same_kind"
            ):
                raise ValueError(
                    f"case {case}: {name} has shape {value.shape} and type {value.dtype}, "
                    f"the store keeps {target.shape[1:]} and {target.dtype}"
                )
        target[case - self.first] = value

    @staticmethod
    def _filled_up(name: str, value: Any, shape: tuple[int, ...]) -> Any:
        """Values of a case with fewer segments than others, with fill values up to their number."""
        dims = VARIABLES[name].dims[1:]
        if "segment" not in dims or value.ndim != len(dims):
            return value
        axis = dims.index("segment")
        missing = max(shape[axis] - value.shape[axis], 0)
        if not missing:
            return value
        room = [(0, missing if k == axis else 0) for k in range(value.ndim)]
        return np.pad(value, room, constant_values=fill_value(name))

    def take(self, case: int, other: Mapping[str, Any], row: int) -> None:
        """Copy one case from row `row` of the arrays of another block, as far as that has them."""
        for name, target in self.arrays.items():
            if name in other:
                target[case - self.first] = other[name][row]

    def statuses(self) -> list[Status]:
        """Status of every case of the block."""
        return [Status(int(code)) for code in self.arrays["status"]]


class StoreFile:
    """A store open for reading and writing whole blocks.

    Parameters
    ----------
    path : Path or RemotePath
        Folder of the store, ``store.zarr``.

    Raises
    ------
    StoreError
        The folder is not a store of this version.
    """

    def __init__(self, path: Place) -> None:
        self.path = path
        self.attrs = read_attrs(path)
        self._group: zarr.Group | None = None
        self._arrays: dict[str, Any] = {}
        self.block_size = int(self.attrs["block_size"])
        self.cases = int(self.array("status").shape[0])

    def array(self, name: str) -> Any:
        """The zarr array of one variable, kept open."""
        import zarr

        if self._group is None:
            self._group = zarr.open_group(zarr_store(self.path), mode="r+", zarr_format=3)
        if name not in self._arrays:
            try:
                self._arrays[name] = self._group[name]
            except KeyError as error:
                raise StoreError(
                    f"{self.path}: the array {name!r} is missing; start anew with --fresh"
                ) from error
        return self._arrays[name]

    @cached_property
    def sizes(self) -> dict[str, int]:
        """Length of every dimension."""
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
        """Every array of one block that the store has, with the ``case`` dimension.

        Raises
        ------
        ValueError, RuntimeError, OSError
            A file of the block is damaged (see `TORN`).
        """
        stored = set(self.attrs["variables"])
        return {name: self._read_one(name, block) for name in VARIABLES if name in stored}

    def read_waiting(self, block: int) -> bool:
        """Whether no case of a block is settled, as far as its status can be read."""
        try:
            return not self._read_one("status", block).any()
        except TORN:
            return True

    def status_is_whole(self, block: int) -> bool:
        """Whether the status of a block can be read, or was never written."""
        try:
            self._read_one("status", block)
        except TORN:
            return False
        return True

    def is_damaged(self, block: int) -> bool:
        """Whether the block is settled, at least in part, and an array of it cannot be read."""
        try:
            statuses = self._read_one("status", block)
            if statuses.any():
                self.read_arrays(block)
        except TORN:
            return True
        return not is_complete(self.path, block, statuses)

    def _read_one(self, name: str, block: int) -> Any:
        chunk = self._chunk(name, block)
        # A shard of no bytes would pass for one that was never written.
        if not isinstance(chunk, RemotePath) and chunk.exists() and chunk.stat().st_size == 0:
            raise ValueError(f"{chunk}: empty")
        with self._reached():
            return self.array(name)[self.rows(block)]

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
        with self._reached():
            for name in names:
                self.array(name)[rows] = content.arrays[name]
        flush(self._chunk(name, block) for name in names)
        flush(self.path / name for name in names)

    def _chunk(self, name: str, block: int) -> Place:
        return _chunk_path(self.path, name, block)

    @contextlib.contextmanager
    def _reached(self) -> Iterator[None]:
        """Say in one kind of error that an address cannot be reached, whatever lies behind it."""
        try:
            yield
        except TORN:
            raise
        except Exception as error:
            if isinstance(self.path, RemotePath):
                raise StoreError(f"{self.path}: cannot be reached: {error}") from error
            raise

    def read_statuses(self) -> NDArray[np.int8]:
        """Status codes of all cases, (N,) int8; a torn block counts as waiting."""
        codes = np.zeros(self.cases, dtype=np.int8)
        for block in range(self.blocks):
            rows = self.rows(block)
            try:
                codes[rows] = self.array("status")[rows]
            except TORN:
                continue
        return codes

    def read_keys(self) -> NDArray[np.bytes_]:
        """Keys of all cases, (N,) bytes, empty where nothing was written or the block is torn."""
        keys = np.zeros(self.cases, dtype=KEY_DTYPE)
        for block in range(self.blocks):
            rows = self.rows(block)
            try:
                keys[rows] = self.array("case_key")[rows].astype(KEY_DTYPE)
            except TORN:
                continue
        return keys


def is_complete(store: Place, block: int, statuses: NDArray[np.int8]) -> bool:
    """Whether the curves are there that every block with a solved case has.

    A file that is gone reads as if nothing had been written, without any error.
    """
    solved = np.isin(statuses, (Status.SOLVED, Status.DOUBTFUL)).any()
    return not solved or _chunk_path(store, ALWAYS_WRITTEN, block).exists()


def _chunk_path(store: Place, name: str, block: int) -> Place:
    trailing = ".0" * (len(VARIABLES[name].dims) - 1)
    return store / name / f"c.{block}{trailing}"


def read_attrs(path: Place) -> dict[str, Any]:
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
