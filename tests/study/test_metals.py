"""The table of metals."""

from __future__ import annotations

import pytest

from simkit.study.metals import METALS


def test_every_metal_conducts_less_than_silver_and_names_its_source() -> None:
    for name, entry in METALS.items():
        assert name == name.lower()
        assert 1e6 < entry.conductivity_s_per_m <= METALS["silver"].conductivity_s_per_m
        assert len(entry.source) > 20


def test_copper_is_the_annealed_copper_standard() -> None:
    assert METALS["copper"].conductivity_s_per_m == 5.8e7


@pytest.mark.parametrize("name", ["copper", "brass", "aluminium", "silver", "tin"])
def test_common_metals_are_there(name: str) -> None:
    assert name in METALS
