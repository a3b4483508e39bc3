"""Every data file says where its numbers come from and why a deviation is allowed."""

import tomllib
from pathlib import Path

import pytest

FILES = sorted(Path(__file__).parent.glob("*.toml"))


def test_there_are_data_files():
    assert len(FILES) >= 8


@pytest.mark.parametrize("path", FILES, ids=lambda path: path.stem)
def test_source_place_units_and_confidence_are_given(path):
    data = tomllib.loads(path.read_text(encoding="utf-8"))
    for key in ("source", "place", "units", "confidence", "accuracy"):
        assert data[key].strip(), key
    assert data["confidence"][0] in "PSMC"


@pytest.mark.parametrize("path", FILES, ids=lambda path: path.stem)
def test_tolerances_carry_their_reasons(path):
    data = tomllib.loads(path.read_text(encoding="utf-8"))
    for name, tolerance in data["tolerance"].items():
        assert len(tolerance["reason"]) > 10, name
        assert {"relative", "absolute"} & set(tolerance), name
