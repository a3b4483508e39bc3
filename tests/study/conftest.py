"""One small study that loads, and a way to load changed copies of it."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from simkit.errors import StudyError
from simkit.study import Study, load_study

TEXT = """\
title = "Gauge at the weir"

[values]
arm   = "71 mm"
width = "5 mm"
gap   = "3 mm"

[[strip]]
name  = "upper"
path  = [["gap/2", "0 mm"],
         ["gap/2 + arm", "0 mm"],
         ["gap/2 + arm", "11 mm"]]
width = "width"

[[strip]]
name   = "lower"
mirror = "upper"

[metal]
material  = "copper"
thickness = "0.035 mm"

[feed]
from = "lower.start"
to   = "upper.start"

[connector]
reference = "75 ohm"

[frequency]
start  = "0.4 GHz"
stop   = "2.5 GHz"
points = 211
"""

Loader = Callable[..., Study]
Complaints = Callable[..., list[str]]


@pytest.fixture
def text() -> str:
    """Text of a study without a sweep; its line numbers are used in the tests."""
    return TEXT


@pytest.fixture
def load(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Loader:
    """Load the study above with replacements made and text added at its end."""
    monkeypatch.chdir(tmp_path)

    def load(*replacements: tuple[str, str], added: str = "") -> Study:
        text = TEXT
        for old, new in replacements:
            assert old in text, f"the study holds no {old!r}"
            text = text.replace(old, new, 1)
        Path("weir.toml").write_text(text + added, encoding="utf-8")
        return load_study("weir.toml")

    return load


@pytest.fixture
def complaints(load: Loader) -> Complaints:
    """Load as `load` does and return what the error says, one text per problem."""

    def complaints(*replacements: tuple[str, str], added: str = "") -> list[str]:
        with pytest.raises(StudyError, match=r"^weir\.toml") as caught:
            load(*replacements, added=added)
        assert str(caught.value).splitlines() == [
            problem.as_text("weir.toml") for problem in caught.value.problems
        ]
        return str(caught.value).splitlines()

    return complaints
