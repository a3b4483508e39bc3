"""What a results folder says besides its store."""

from __future__ import annotations

from pathlib import Path
from tempfile import TemporaryDirectory
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from simkit.study import Study


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
