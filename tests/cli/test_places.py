"""``simkit modes --places``: where the currents of the modes are largest and where they vanish."""

from __future__ import annotations

import csv
import io
import json
import shutil
from pathlib import Path

import pytest

from simkit.cli.places import places_table

from .hook import Session


def test_json_gains_one_key_and_only_with_the_option(session: Session) -> None:
    plain = json.loads(session.simkit("modes", session.results, "--json").stdout)
    result = session.simkit("modes", session.results, "--json", "--places")
    rows = json.loads(result.stdout, parse_constant=pytest.fail)
    for row in rows:
        for mode in row["modes"]:
            kinds = [place["kind"] for place in mode.pop("places")]
            assert kinds.count("maximum") == mode["half_waves"]
            assert kinds.count("node") == mode["half_waves"] - 1
    assert rows == plain


def test_places_lie_on_the_strip(session: Session) -> None:
    result = session.simkit("modes", session.results, "--case", "1", "--csv", "--places")
    rows = list(csv.DictReader(io.StringIO(result.stdout)))
    assert {row["kind"] for row in rows} == {"maximum", "node"}
    assert {row["case"] for row in rows} == {"1"}
    for row in rows:
        assert row["strip"]
        assert float(row["along_m"]) > 0
        assert 0 <= float(row["relative_current"]) <= 1


def test_table_names_case_and_mode_once(session: Session) -> None:
    text = session.simkit("modes", session.results, "--places").stdout
    assert text.splitlines()[0].split()[:3] == ["case", "mode", "natural"]
    assert text.count("1/2 wave") == 2
    assert "refused" in text
    assert "maximum: one for each half wave" in text


def test_gap_and_small_negative_places_read_well() -> None:
    place = {
        "kind": "maximum",
        "strip": None,
        "along_m": None,
        "x_m": -1e-6,
        "y_m": 0.0123,
        "relative_current": 1.0,
    }
    mode = {"half_waves": 1, "frequency_hz": 9e8, "on_plane": True, "places": [place]}
    line = places_table([{"case": 3, "status": "solved", "modes": [mode]}]).splitlines()[-1]
    assert "1/4 wave" in line
    assert "between strips" in line
    assert " 0.0 mm" in line
    assert "-0.0" not in line
    assert "12.3 mm" in line


def test_without_the_study_it_says_so(session: Session, tmp_path: Path) -> None:
    folder = tmp_path / "hook"
    shutil.copytree(session.results, folder)
    (folder / "study.toml").unlink()
    result = session.simkit("modes", folder, "--places")
    assert result.exit_code == 1
    assert "there is no study.toml in this folder" in result.stderr
