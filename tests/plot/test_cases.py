"""Picking one case out of the results."""

from __future__ import annotations

import numpy as np
import xarray as xr

from simkit.plot.cases import nearest_case, numbered_modes, one_case
from simkit.store.schema import Status


def test_unsolved_case_is_passed_over_for_its_neighbour(dataset: xr.Dataset) -> None:
    at_refused = {"arm": 0.0791, "width": 0.008}
    # Width counts over its own span: 79 mm and 82 mm are a quarter apart, 8 mm and 4 mm a half.
    assert nearest_case(dataset, at_refused) == 13
    assert nearest_case(dataset.isel(case=[10]), at_refused) == 10


def test_labels_count_not_places(dataset: xr.Dataset) -> None:
    part = dataset.isel(case=[3, 9, 12])
    assert nearest_case(part, {"arm": 0.079, "width": 0.004}) == 9
    assert float(one_case(part, 12)["arm"]) == 0.082


def test_modes_come_from_the_lowest_frequency_up(dataset: xr.Dataset) -> None:
    case = dataset.sel(case=7).isel(mode=[2, 5, 0, 1])
    assert [(mode.slot, mode.half_waves) for mode in numbered_modes(case)] == [
        (2, 1),
        (3, 2),
        (0, 3),
    ]
    assert [mode.label for mode in numbered_modes(case)] == ["1/2 wave", "1 wave", "3/2 wave"]


def test_only_solved_and_doubtful_cases_have_data(dataset: xr.Dataset) -> None:
    status = dataset["status"].copy(data=np.full(15, Status.TIMED_OUT, dtype="i1"))
    status[11] = Status.DOUBTFUL
    assert nearest_case(dataset.assign(status=status)) == 11
