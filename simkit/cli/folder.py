"""What a results folder says besides its store."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager, nullcontext
from functools import wraps
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import TYPE_CHECKING, Any

import click

if TYPE_CHECKING:
    from simkit.store.remote import RemotePath
    from simkit.study import Study


@contextmanager
def drawing_folder(results: str | Path | RemotePath, output: str | None = None) -> Iterator[Path]:
    """Give the folder pictures are drawn into; those for an address are sent there afterwards.

    With `output` they go elsewhere, and the folder is not used.
    """
    from simkit.store.remote import place

    there = place(results)
    if output is not None or isinstance(there, Path):
        yield Path(str(there))
        return
    with TemporaryDirectory(prefix="simkit-") as folder:
        yield Path(folder)
        there.upload_tree(Path(folder))
    click.echo(f"  ... sent to {there}", err=True)


@contextmanager
def damage_said(results: str | Path | RemotePath) -> Iterator[None]:
    """If reading results fails because files of theirs are damaged, say which cases to solve anew.

    Raises
    ------
    StoreError
    """
    from simkit.errors import DamageError, SimkitError, StoreError
    from simkit.store.write import TORN

    try:
        yield
    except TORN as error:
        if isinstance(error, SimkitError) and not isinstance(error, DamageError):
            raise
        cases = _damaged(results)
        if not cases:
            raise
        raise StoreError(
            f"{results}: damaged, the results of these cases cannot be read: {cases}; "
            "simkit run STUDY --retry solves them anew"
        ) from error


def says_damage(function: Callable[..., None]) -> Callable[..., None]:
    """Let a command that takes `results` name the cases whose damage keeps it from going on."""

    @wraps(function)
    def command(*, results: str | None, **options: Any) -> None:
        with nullcontext() if results is None else damage_said(results):
            function(results=results, **options)

    return command


def _damaged(results: str | Path | RemotePath) -> str:
    """Numbers of the damaged cases; empty if there are none, or not even that can be read."""
    from simkit.store.read import damaged_cases
    from simkit.store.write import TORN

    try:
        damaged = damaged_cases(results)
    except (*TORN, KeyError):
        return ""
    return ", ".join(
        f"{rows[0]} to {rows[-1]}" if len(rows) > 1 else f"{rows[0]}" for rows in damaged
    )


def study_of(results: str | Path) -> Study | None:
    """Return the study a results folder was made from, None if its copy is not there."""
    from simkit.store.remote import place
    from simkit.study import load_study

    copy = place(results) / "study.toml"
    if not copy.is_file():
        return None
    if isinstance(copy, Path):
        return load_study(copy)
    with TemporaryDirectory(prefix="simkit-") as folder:
        local = Path(folder) / copy.name
        local.write_text(copy.read_text(), encoding="utf-8")
        return load_study(local)


def build_of(study: Study | None, measured: str | Path) -> dict[str, float] | None:
    """Return the swept values of the build a measured file belongs to, SI.

    What the study does not say of the build is taken at its nominal value. None if the study does
    not name a file of this name.
    """
    name = Path(measured).name
    for file in study.measured if study is not None else ():
        if file.path.name == name:
            return nominal_of(study) | file.build
    return None


def nominal_of(study: Study | None) -> dict[str, float]:
    """Return the nominal values, SI, of what a study sweeps."""
    if study is None:
        return {}
    return {s.name: study.values[s.name] for s in study.swept if s.name in study.values}
