"""A short version of the campaign: every victim once, and everything else."""

from __future__ import annotations

import pytest

from .campaign import campaign


@pytest.mark.long
def test_a_short_campaign(tmp_path):
    figures = campaign(tmp_path, kills=5, seed=7)
    print("\n".join(figures.lines()))
    assert figures.sound(), figures.lines()
    poisoned, two, disk = figures.notes
    assert "wrongly marked or missed 0" in poisoned
    assert "1 completed, 1 refused; cases solved twice 0" in two
    assert "not tried" in disk or "0 of them solved again; files unlike a calm run 0" in disk
