"""The results folder: which store a run continues, which it starts, and the swap at the end."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from simkit.errors import StoreError
from simkit.runner.prepare import Prepared
from simkit.store.files import flush, move, remove, replace_text, store_exists
from simkit.store.read import STORE_NAME, UNFINISHED_NAME
from simkit.store.remote import Place, RemotePath
from simkit.store.write import read_attrs

OLD_NAME = "store.old.zarr"
LEFT_PATTERN = "store.left-*.zarr"
STUDY_NAME = "study.toml"


@dataclass(frozen=True)
class Target:
    """Where a run writes.

    Attributes
    ----------
    path : Path or RemotePath
    exists : bool
        A store of the same study is continued.
    sources : tuple of Path or RemotePath
        Older stores whose unchanged cases are taken over.
    takeover : bool
        Whether they may be.
    """

    path: Place
    exists: bool
    sources: tuple[Place, ...]
    takeover: bool


class ResultsFolder:
    """One folder of results.

    Parameters
    ----------
    path : Path or RemotePath
        ``results/<stem of the study file>``.
    """

    def __init__(self, path: Place) -> None:
        self.path = path
        self.store = path / STORE_NAME
        self.unfinished = path / UNFINISHED_NAME
        self.old = path / OLD_NAME
        self.study_copy = path / STUDY_NAME
        self.log = path / "log.txt"

    def create(self) -> None:
        """Make the folder.

        Raises
        ------
        StoreError
            It cannot be made.
        """
        try:
            self.path.mkdir(parents=True, exist_ok=True)
            flush([self.path.parent])
        except OSError as error:
            raise StoreError(
                f"{self.path}: the results folder cannot be made: {error.strerror}; "
                "choose another with --results"
            ) from error

    def check_title(self, title: str, *, fresh: bool) -> None:
        """Refuse a folder that holds another study; nothing is written before this.

        Raises
        ------
        StoreError
            The folder holds a study with another title, or one that cannot be read.
        """
        for store in (self.store, self.unfinished, self.old):
            if not store_exists(store):
                continue
            try:
                found = read_attrs(store).get("title")
            except StoreError:
                if not (fresh and self._copy_has_title(title)):
                    raise
                continue
            if found != title:
                raise StoreError(
                    f"{self.path}: holds the results of another study, {found!r}; this one is "
                    f"{title!r}. Nothing was changed. Choose another folder with --results, "
                    "or rename the study file"
                )

    def _copy_has_title(self, title: str) -> bool:
        """A store beyond reading still belongs to this study if the copy of the file says so."""
        import tomllib

        try:
            content = tomllib.loads(self.study_copy.read_text(encoding="utf-8"))
        except (OSError, ValueError):
            return False
        return content.get("title") == title

    def recover(self) -> None:
        """Finish what a killed run left half done: a swap, a layout."""
        for pattern in ("store*.zarr.part", f"{STUDY_NAME}.part"):
            for part in self.path.glob(pattern):
                remove(part)
        self._drop_half_written()
        if isinstance(self.path, RemotePath):
            # A swap is a copy there; the new store is whole until the copy is.
            if store_exists(self.unfinished) and not store_exists(self.store):
                move(self.unfinished, self.store)
            return
        if self.old.exists() and not self.store.exists():
            move(self.unfinished if self.unfinished.exists() else self.old, self.store)
        remove(self.old)

    def choose(self, prepared: Prepared, *, fresh: bool) -> Target:
        """Decide which store is written, moving nothing but stores that are in the way."""
        if fresh:
            remove(self.unfinished)
            self._drop_left()
        else:
            for path in (self.unfinished, self.store):
                if store_exists(path) and self._identity(path) == prepared.identity:
                    takeover = path == self.unfinished and bool(read_attrs(path).get("takeover"))
                    return Target(path, True, self._sources() if takeover else (), takeover)
        if not store_exists(self.store):
            return Target(self.store, False, (), takeover=False)
        if store_exists(self.unfinished):
            move(self.unfinished, self._free_left_name())
        return Target(self.unfinished, False, () if fresh else self._sources(), takeover=not fresh)

    def finish(self, target: Target, text: str) -> None:
        """Put a complete store in its place and keep the study's text beside it."""
        if target.path != self.store:
            if not isinstance(self.path, RemotePath):
                move(self.store, self.old)
            move(target.path, self.store)
            flush([self.path])
            remove(self.old)
            self._drop_left()
        self._drop_half_written()
        self.keep_text(text)

    def _drop_half_written(self) -> None:
        """Remove files that workers were writing aside when they were killed."""
        if isinstance(self.path, Path):
            for part in self.path.glob("store*.zarr/*/*.partial"):
                remove(part)

    def keep_text(self, text: str) -> None:
        """Copy the study file into the folder."""
        replace_text(self.study_copy, text)

    @staticmethod
    def _identity(path: Place) -> str:
        return str(read_attrs(path).get("identity"))

    def _sources(self) -> tuple[Place, ...]:
        left: list[Place] = sorted(self.path.glob(LEFT_PATTERN))
        return (self.store, *left)

    def _free_left_name(self) -> Place:
        number = 1
        while store_exists(path := self.path / LEFT_PATTERN.replace("*", str(number))):
            number += 1
        return path

    def _drop_left(self) -> None:
        for path in self.path.glob(LEFT_PATTERN):
            remove(path)
