"""The study a new user starts from."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from simkit.errors import StudyError
from simkit.study import load_study
from simkit.study.model import Ground
from simkit.study.starter import DEFAULT_TITLE, starter_text, write_starter


def test_it_loads_and_every_case_resolves(tmp_path: Path) -> None:
    path = write_starter(tmp_path / "my_gauge")
    assert path == tmp_path / "my_gauge.toml"
    study = load_study(path)
    assert study.title == "my gauge"
    assert study.shape == (3, 2)
    assert not any(case.refused for case in study.cases())


def test_it_also_loads_with_every_suggested_line_switched_on(tmp_path: Path) -> None:
    # Examples of TOML are not followed by more words, as notes of several lines are.
    optional = re.compile(r'# (\[+[a-z]+\]+|[a-z_]+ *= (\S+|"[^"]*"|[\[{].*[\]}])( +#.*)?)')
    text = starter_text()
    lines = [m[1] if (m := optional.fullmatch(line)) else line for line in text.splitlines()]
    text = "\n".join(lines).replace('["4 mm", "8 mm"]', '["4 mm", "8 mm", "9 mm"]')
    (tmp_path / "all.toml").write_text(text, encoding="utf-8")
    study = load_study(tmp_path / "all.toml")
    assert study.method == "list"
    assert study.measured[0].build == {"arm": 0.0754}
    antenna = study.nominal()
    assert [strip.name for strip in antenna.strips] == ["east", "west", "tapered", "sagging", "bow"]
    assert antenna.carrier is not None
    assert antenna.carrier.material == "ASA"
    assert antenna.ground == Ground("earth", 13.0, 0.005)
    assert antenna.placement.shift_m == (0.0, 0.0, 0.3)
    assert antenna.converge
    assert not any(case.refused for case in study.cases())


@pytest.mark.parametrize(
    "caution",
    [
        "needs a licence",
        "ICNIRP 2020",
        "estimates",
        "Local rules and qualified people",
        "Never transmit into a network analyser",
        "clear of power lines",
        "edges of cut sheet",
        "soldering fumes",
        "Solder before gluing",
    ],
)
def test_it_carries_the_cautions(caution: str) -> None:
    assert caution in starter_text().replace("\n#   ", " ")


def test_it_never_overwrites(tmp_path: Path) -> None:
    path = tmp_path / "kept.toml"
    path.write_text("mine")
    with pytest.raises(StudyError, match=r"kept\.toml: exists already and is left as it is"):
        write_starter(path)
    assert path.read_text() == "mine"


@pytest.mark.parametrize("place", ["no/such/folder/a", "nul\0byte"])
def test_places_that_cannot_be_written(tmp_path: Path, place: str) -> None:
    with pytest.raises(StudyError, match="cannot be written: "):
        write_starter(tmp_path / place)


@pytest.mark.parametrize(
    ("title", "kept"),
    [('say "hi" \\ @file@', 'say "hi" \\ @file@'), ("", DEFAULT_TITLE), ("a\nb", DEFAULT_TITLE)],
)
def test_any_title_makes_a_valid_file(tmp_path: Path, title: str, kept: str) -> None:
    path = tmp_path / "x.toml"
    path.write_text(starter_text(title, "@title@.toml"), encoding="utf-8")
    assert load_study(path).title == kept
