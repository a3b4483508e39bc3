from __future__ import annotations

import pytest

from simkit.finding import select


@pytest.fixture(autouse=True)
def small_parts(monkeypatch):
    """Look at one block of four cases at a time, so that fourteen cases are four parts."""
    monkeypatch.setattr(select, "LARGEST_PART", 1)
