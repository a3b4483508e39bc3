"""Every data file says where its numbers come from and why a deviation is allowed."""

import tomllib
from pathlib import Path

import pytest

FILES = sorted(Path(__file__).parent.glob("*.toml"))
DATA = {path.stem: tomllib.loads(path.read_text(encoding="utf-8")) for path in FILES}
OF_ONE_SOURCE = [name for name, data in DATA.items() if "source" in data]
COLLECTIONS = [name for name in DATA if name not in OF_ONE_SOURCE]


def test_there_are_data_files():
    assert len(OF_ONE_SOURCE) >= 8


@pytest.mark.parametrize("name", OF_ONE_SOURCE)
def test_source_place_units_and_confidence_are_given(name):
    for key in ("source", "place", "units", "confidence", "accuracy"):
        assert DATA[name][key].strip(), key
    assert DATA[name]["confidence"][0] in "PSMC"


@pytest.mark.parametrize("name", OF_ONE_SOURCE)
def test_tolerances_carry_their_reasons(name):
    for key, tolerance in DATA[name]["tolerance"].items():
        assert len(tolerance["reason"]) > 10, key
        assert {"relative", "absolute"} & set(tolerance), key


@pytest.mark.parametrize("name", COLLECTIONS)
def test_each_value_of_a_collection_names_its_source(name):
    for table in DATA[name].values():
        for value in table if isinstance(table, list) else [table]:
            assert value["source"].strip()
            assert value["confidence"].strip()
