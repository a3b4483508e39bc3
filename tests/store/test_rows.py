"""Rows per case, from a hand-made dataset: a solved, a refused and a doubtful case."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

from simkit.errors import StoreError
from simkit.store.rows import modes
from simkit.store.schema import Status

CENTRE_HZ = 1e9
FREQUENCY_HZ = np.linspace(0.8e9, 1.2e9, 201)


def series_circuit(resistance_ohm: float, q: float) -> np.ndarray:
    """Impedance of a series circuit of 50 ohm reactance slope, resonant at 1 GHz."""
    ratio = FREQUENCY_HZ / CENTRE_HZ
    return resistance_ohm + 1j * resistance_ohm * q * (ratio - 1 / ratio)


@pytest.fixture
def dataset() -> xr.Dataset:
    nan = float("nan")
    impedance = np.full((3, FREQUENCY_HZ.size), complex(nan, nan))
    impedance[0] = series_circuit(72.0, 6.0)
    impedance[2] = series_circuit(40.0, 9.0)
    per_mode = {
        # The order of slots is not the order of frequencies in the last case.
        "mode_frequency": [[0.98e9, 1.9e9], [nan, nan], [2.0e9, 0.97e9]],
        "mode_q": [[6.0, 9.0], [nan, nan], [8.0, 5.5]],
        "dip_frequency": [[1.001e9, nan], [nan, nan], [nan, nan]],
        "dip_return_loss": [[14.9, nan], [nan, nan], [nan, nan]],
        "series_resonance_frequency": [[1.0e9, nan], [nan, nan], [nan, nan]],
        "series_resonance_resistance": [[72.0, nan], [nan, nan], [nan, nan]],
        "peak_gain": [[2.1, nan], [nan, nan], [nan, nan]],
    }
    variables = {name: (("case", "mode"), np.array(values)) for name, values in per_mode.items()}
    status = [Status.SOLVED, Status.REFUSED, Status.DOUBTFUL]
    return xr.Dataset(
        {
            "status": ("case", np.array(status, dtype="i1")),
            "reason": ("case", np.array(["", "strip east crosses itself", "why"], dtype=object)),
            "solves": ("case", np.array([12, 0, 15], dtype="i4")),
            "impedance": (("case", "frequency"), impedance),
            "mode_half_waves": (("case", "mode"), np.array([[1, 2], [-1, -1], [3, -1]])),
            **variables,
        },
        coords={
            "case": np.arange(3),
            "frequency": FREQUENCY_HZ,
            "arm": ("case", np.array([0.070, 0.075, 0.080])),
        },
        attrs={"reference_ohm": 50.0},
    )


def test_one_row_per_case_with_status_and_values(dataset: xr.Dataset) -> None:
    rows = modes(dataset)
    assert [row["case"] for row in rows] == [0, 1, 2]
    assert [row["status"] for row in rows] == ["solved", "refused", "doubtful"]
    assert [row["values"] for row in rows] == [{"arm": 0.070}, {"arm": 0.075}, {"arm": 0.080}]
    assert [row["solves"] for row in rows] == [12, 0, 15]
    assert "reason" not in rows[0]
    assert rows[1]["reason"] == "strip east crosses itself"


def test_modes_ascend_and_leave_out_what_is_unknown(dataset: xr.Dataset) -> None:
    first, _, last = modes(dataset)
    assert first["modes"][0] == {
        "half_waves": 1,
        "frequency_hz": 0.98e9,
        "q": 6.0,
        "dip_frequency_hz": 1.001e9,
        "dip_return_loss_db": 14.9,
        "series_resonance_frequency_hz": 1.0e9,
        "series_resonance_resistance_ohm": 72.0,
        "peak_gain_dbi": 2.1,
    }
    assert first["modes"][1] == {"half_waves": 2, "frequency_hz": 1.9e9, "q": 9.0}
    assert [mode["half_waves"] for mode in last["modes"]] == [None, 3]


def test_owned_features_name_their_mode_and_are_not_listed_twice(dataset: xr.Dataset) -> None:
    row = modes(dataset)[0]
    assert row["dips"] == [{"frequency_hz": 1.001e9, "return_loss_db": 14.9, "half_waves": 1}]
    assert row["resonances"] == [
        {"frequency_hz": 1.0e9, "kind": "series", "resistance_ohm": 72.0, "half_waves": 1}
    ]


def test_features_without_a_mode_are_found_on_the_curve(dataset: xr.Dataset) -> None:
    row = modes(dataset)[2]
    (resonance,) = row["resonances"]
    assert resonance["kind"] == "series"
    # A cubic spline over 2 MHz steps of a circuit whose Q is 9: far below 1e-6.
    assert resonance["frequency_hz"] == pytest.approx(CENTRE_HZ, rel=1e-6)
    assert resonance["resistance_ohm"] == pytest.approx(40.0, rel=1e-6)
    (dip,) = row["dips"]
    assert dip["frequency_hz"] == pytest.approx(CENTRE_HZ, rel=1e-4)
    assert dip["return_loss_db"] == pytest.approx(-20 * np.log10(10 / 90), rel=1e-6)


def test_unsolved_case_has_empty_lists(dataset: xr.Dataset) -> None:
    row = modes(dataset)[1]
    assert row["modes"] == row["resonances"] == row["dips"] == []


def test_a_single_case_gives_one_row(dataset: xr.Dataset) -> None:
    assert modes(dataset.sel(case=2)) == modes(dataset)[2:]


def test_a_dataset_without_cases_is_refused(dataset: xr.Dataset) -> None:
    with pytest.raises(StoreError, match="no coordinate 'case'"):
        modes(dataset.drop_vars("case"))


def test_a_value_stored_under_another_name_keeps_its_own(dataset: xr.Dataset) -> None:
    renamed = dataset.rename(arm="swept_length").assign_attrs(swept={"length": "swept_length"})
    assert modes(renamed)[1]["values"] == {"length": 0.075}
