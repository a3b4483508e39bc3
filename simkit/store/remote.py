"""Results folders at an address (``s3://bucket/folder``): the few file operations a store needs."""

from __future__ import annotations

import contextlib
import os
from collections.abc import Iterator
from os import PathLike
from pathlib import Path, PurePosixPath
from typing import Any

from simkit.errors import StoreError


class RemotePath:
    """A place at an fsspec address, with the part of the interface of `pathlib.Path` used here.

    Parameters
    ----------
    address : str
        Such as ``s3://bucket/folder``. Credentials and endpoint come from the environment, as the
        file system behind the address reads them, so that workers find them too.

    Notes
    -----
    A file that was written is durable and seen whole: object stores replace in one step. There are
    no folders in between, so nothing has to be made before it is written to.
    """

    def __init__(self, address: str) -> None:
        protocol, _, path = address.partition("://")
        self._protocol = protocol
        self._path = PurePosixPath(path.strip("/"))

    @property
    def address(self) -> str:
        """The whole address."""
        return f"{self._protocol}://{self._path}"

    @property
    def name(self) -> str:
        """Last part of the address."""
        return self._path.name

    @property
    def suffix(self) -> str:
        """Ending of the name, with its dot."""
        return self._path.suffix

    @property
    def parent(self) -> RemotePath:
        """The place around this one."""
        return RemotePath(f"{self._protocol}://{self._path.parent}")

    def with_name(self, name: str) -> RemotePath:
        """The place of another name beside this one."""
        return self.parent / name

    def __truediv__(self, name: str) -> RemotePath:
        return RemotePath(f"{self._protocol}://{self._path / name}")

    def __str__(self) -> str:
        return self.address

    def __repr__(self) -> str:
        return f"RemotePath({self.address!r})"

    def __eq__(self, other: object) -> bool:
        return isinstance(other, RemotePath) and self.address == other.address

    def __lt__(self, other: RemotePath) -> bool:
        return self.address < other.address

    def __hash__(self) -> int:
        return hash(self.address)

    @property
    def system(self) -> Any:
        """The fsspec file system, which is kept by fsspec itself.

        Raises
        ------
        StoreError
            The package behind the address is not installed.
        """
        import fsspec

        try:
            system = fsspec.filesystem(self._protocol, use_listings_cache=False)
        except (ImportError, ValueError) as error:
            raise StoreError(f"{self.address}: cannot be reached: {error}") from error
        return system

    @property
    def inner(self) -> str:
        """The path inside the file system."""
        return str(self.system._strip_protocol(self.address))

    def exists(self) -> bool:
        """Whether there is a file, or anything below this place."""
        with self._in_words():
            return bool(self.system.exists(self.inner))

    def is_dir(self) -> bool:
        """Whether there is anything below this place."""
        with self._in_words():
            return bool(self.system.isdir(self.inner))

    def is_file(self) -> bool:
        """Whether there is a file."""
        with self._in_words():
            return bool(self.system.isfile(self.inner))

    def read_text(self, encoding: str = "utf-8") -> str:
        """Content of a file.

        Raises
        ------
        FileNotFoundError
            There is none.
        """
        content: bytes = self.system.cat_file(self.inner)
        return content.decode(encoding)

    def write_text(self, text: str, encoding: str = "utf-8") -> None:
        """Replace a file."""
        self.system.pipe_file(self.inner, text.encode(encoding))

    def create_text(self, text: str) -> bool:
        """Write a file only if there is none; False if there is one.

        Where the file system knows no such operation, the file is looked for first.
        """
        if self.exists():
            return False
        try:
            self.system.pipe_file(self.inner, text.encode(), mode="create")
        except FileExistsError:
            return False
        except (TypeError, NotImplementedError):
            self.write_text(text)
        return True

    def glob(self, pattern: str) -> Iterator[RemotePath]:
        """Files and places directly below whose names fit a pattern."""
        from fnmatch import fnmatch

        with self._in_words():
            try:
                names = self.system.ls(self.inner, detail=False)
            except FileNotFoundError:
                return
        for name in sorted(PurePosixPath(str(path)).name for path in names):
            if fnmatch(name, pattern):
                yield self / name

    def mkdir(self, *, parents: bool = False, exist_ok: bool = False) -> None:
        """Do nothing: files make their places."""

    def unlink(self, *, missing_ok: bool = False) -> None:
        """Remove a file."""
        try:
            self.system.rm_file(self.inner)
        except FileNotFoundError:
            if not missing_ok:
                raise

    def remove_tree(self) -> None:
        """Remove everything below, the file ``zarr.json`` that makes a store whole at first."""
        (self / "zarr.json").unlink(missing_ok=True)
        with contextlib.suppress(FileNotFoundError):
            self.system.rm(self.inner, recursive=True)

    def copy_tree(self, target: RemotePath) -> None:
        """Copy a store; it is whole at its new place with the last file."""
        root = f"{self.inner}/zarr.json"
        files = [path for path in self.system.find(self.inner) if path != root]
        to = target.inner
        for path in files:
            self.system.cp_file(path, to + path.removeprefix(self.inner))
        self.system.cp_file(root, f"{to}/zarr.json")

    def upload_tree(self, source: Path) -> None:
        """Copy a local folder here, its own ``zarr.json`` at last."""
        root = source / "zarr.json"
        files = [path for path in source.rglob("*") if path.is_file() and path != root]
        for path in [*files, *([root] if root.exists() else [])]:
            relative = path.relative_to(source).as_posix()
            self.system.pipe_file(f"{self.inner}/{relative}", path.read_bytes())

    @contextlib.contextmanager
    def _in_words(self) -> Iterator[None]:
        """Turn what the file system says of a missing bucket or key into one sentence."""
        try:
            self.system.invalidate_cache()
            yield
        except StoreError:
            raise
        except Exception as error:
            raise StoreError(f"{self.address}: cannot be reached: {error}") from error


Place = Path | RemotePath
"""A results folder or something in it, on this machine or at an address."""


def place(path: str | PathLike[str] | RemotePath) -> Place:
    """The place a user means: addresses have ``://`` in them, everything else is a local path."""
    if isinstance(path, RemotePath):
        return path
    text = os.fspath(path)
    if "://" not in text:
        return Path(text)
    protocol, _, rest = text.partition("://")
    return Path(rest) if protocol in ("file", "local") else RemotePath(text)


def zarr_store(path: Place, *, read_only: bool = False) -> Any:
    """What zarr and xarray open for a place."""
    if isinstance(path, Path):
        return path
    from zarr.storage import FsspecStore

    return FsspecStore.from_url(
        path.address, storage_options={"use_listings_cache": False}, read_only=read_only
    )
