"""`simkit new`, then `simkit check`: what a newcomer does first."""

from __future__ import annotations

from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from simkit.cli import main

from .hook import STUDY


def simkit(*words: str | Path) -> Result:
    return CliRunner().invoke(main, [str(word) for word in words])


def test_what_new_writes_passes_check(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    made = simkit("new", "creek_gauge")
    assert made.exit_code == 0, made.output
    assert "Never transmit into a network analyser" in made.stdout
    checked = simkit("check", "creek_gauge.toml")
    assert checked.exit_code == 0, checked.output
    for word in ("creek gauge", "east", "west", "west.start", "unknowns", "Model error", "The run"):
        assert word in checked.stdout
    picture = tmp_path / "results" / "creek_gauge" / "plots" / "geometry.png"
    assert str(picture.relative_to(tmp_path)) in checked.stdout
    assert picture.read_bytes().startswith(b"\x89PNG")


def test_new_overwrites_nothing(tmp_path: Path) -> None:
    path = tmp_path / "mine.toml"
    path.write_text("precious", "utf-8")
    result = simkit("new", path)
    assert result.exit_code == 2
    assert "exists" in result.stderr
    assert path.read_text("utf-8") == "precious"


def test_new_needs_its_folder(tmp_path: Path) -> None:
    result = simkit("new", tmp_path / "nowhere" / "mine")
    assert result.exit_code == 2
    assert "folder" in result.stderr


def test_check_names_the_case_that_cannot_be_built(tmp_path: Path) -> None:
    study = tmp_path / "hook.toml"
    study.write_text(STUDY, "utf-8")
    picture = tmp_path / "hook.png"
    result = simkit("check", study, "-o", picture)
    assert result.exit_code == 1
    assert "1 of 3 cannot be built" in result.stdout
    assert "case 2 (as built: lift -12 mm)" not in result.stdout
    assert "case 2 (lift -12 mm): " in result.stdout
    assert "(hook.toml:7)" in result.stdout
    assert "Convergence" not in result.stdout
    assert picture.is_file()


def test_check_shows_a_case_where_the_nominal_antenna_cannot_be_built(tmp_path: Path) -> None:
    study = tmp_path / "hook.toml"
    study.write_text(STUDY.replace('lift = "10 mm"', 'lift = "-12 mm"'), "utf-8")
    result = simkit("check", study, "-o", tmp_path / "hook.png")
    assert result.exit_code == 1
    assert "Shown below   case 0 (lift 10 mm)" in result.stdout


def test_a_study_of_which_nothing_can_be_built_says_the_line(tmp_path: Path) -> None:
    study = tmp_path / "hook.toml"
    text = STUDY[: STUDY.index("[sweep]")]
    study.write_text(text.replace('lift = "10 mm"', 'lift = "-12 mm"'), "utf-8")
    result = simkit("check", study, "-o", tmp_path / "hook.png")
    assert result.exit_code == 1
    assert "strip 'hook' crosses or overlaps itself" in result.stderr
    assert result.stderr.rstrip().endswith("(hook.toml:7)")


def test_check_refines_where_asked(tmp_path: Path) -> None:
    study = tmp_path / "hook.toml"
    study.write_text(STUDY, "utf-8")
    result = simkit("check", study, "-o", tmp_path / "hook.png", "--converge")
    table = result.stdout.split("\nConvergence\n")[1].splitlines()
    for word in ("coarser (", "as planned (", "finer (", "shift", "mesh", "rules", "together"):
        assert word in table[0]
    (half,) = [line for line in table if line.lstrip().startswith("1/2 wave")]
    numbers = [float(word) for word in half.replace("%", " ").split() if _is_number(word)]
    rules, together = numbers[-2:]
    assert 0 < rules <= together


def _is_number(word: str) -> bool:
    return word.replace(".", "", 1).lstrip("+-").isdigit()
