"""A small store, written the way a run writes it."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from simkit.store.layout import Layout, SweptColumn, create_store
from simkit.store.schema import Status
from simkit.store.write import StoreFile

FREQUENCIES = np.linspace(3e8, 3e9, 11)
STRIPS = ("east", "west")
ARMS_M = np.repeat([0.070, 0.074, 0.078], 2)
WIDTHS_M = np.tile([0.004, 0.008], 3)
SEGMENTS = 5


def layout(**changes: Any) -> Layout:
    settings: dict[str, Any] = {
        "cases": 6,
        "segments": SEGMENTS,
        "block_size": 4,
        "frequency_hz": FREQUENCIES,
        "strips": STRIPS,
        "swept": (SweptColumn("arm", "m", "mm", ARMS_M), SweptColumn("width", "m", "mm", WIDTHS_M)),
        "attrs": {"title": "Ford", "sweep_method": "grid", "sweep_shape": [3, 2]},
    }
    return Layout(**settings | changes)


MakeResults = Callable[..., Path]


@pytest.fixture
def make_results(tmp_path: Path) -> MakeResults:
    """Create ``ford/store.zarr`` in a temporary folder; changes go to the layout."""

    def make(**changes: Any) -> Path:
        folder = tmp_path / "ford"
        folder.mkdir()
        create_store(folder / "store.zarr", layout(**changes))
        return folder

    return make


@pytest.fixture
def results(make_results: MakeResults) -> Path:
    """Results folder whose first block of four cases is written, the second one not."""
    folder = make_results()
    store = StoreFile(folder / "store.zarr")
    block = store.new_block(0)
    codes = [Status.SOLVED, Status.REFUSED, Status.TIMED_OUT, Status.DOUBTFUL]
    for case, code in enumerate(codes):
        block.put(case, case_values(case) | {"status": int(code), "reason": f"because of {case}"})
    store.write_block(0, block)
    return folder


def case_values(case: int) -> dict[str, Any]:
    return {
        "case_key": f"key {case}",
        "seconds": 0.25 * case,
        "solves": 10 + case,
        "impedance": (case + 1) * np.linspace(1 + 2j, 3 - 4j, len(FREQUENCIES)),
        "mode_half_waves": np.array([1, 2, 3] + [-1] * 7),
        "gain": np.full((10, 19, 37), -3.5 * case),
        "x": np.arange(SEGMENTS) + 10.0 * case,
        "wire_radius": 0.001 * (case + 1),
    }
