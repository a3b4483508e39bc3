"""Anything at any frequency from a stored case, against what solving the case gave."""

import numpy as np
import pytest
import xarray as xr

from simkit.engine.pynec import SeriesLoad, solve_wires
from simkit.errors import StoreError
from simkit.geometry import build_wires, plan_mesh
from simkit.geometry.conductor import strip_resistance_ohm_per_m
from simkit.response.evaluate import (
    current_at,
    far_field_at,
    gain_at,
    impedance_at,
    model_of,
    radiators_of,
)
from simkit.runner.solve import solve_case
from simkit.store.schema import PHI_DEG, THETA_DEG, VARIABLES, Status

FREQUENCY = np.array([0.41e9, 0.912e9, 1.777e9, 2.81e9])


def dataset_of(results, segments):
    """Cases in the shape of a store, padded to `segments`, the first one refused."""
    data = {}
    for name, variable in VARIABLES.items():
        values = []
        for result in results:
            value = np.asarray(result.arrays[name]) if name in result.arrays else None
            if value is not None and variable.dims[-1] == "segment":
                fill = -1 if variable.dtype.startswith("i") else np.nan
                pad = [(0, 0)] * (value.ndim - 1) + [(0, segments - value.shape[-1])]
                value = np.pad(value, pad, constant_values=fill)
            values.append(value)
        known = next((v for v in values if v is not None), None)
        if known is not None:
            lost = np.full_like(known, -1 if known.dtype.kind in "iu" else np.nan)
            stacked = np.stack([lost if v is None else v for v in values])
            data[name] = (variable.dims, stacked)
    data["status"] = ("case", [int(result.status) for result in results])
    data["reason"] = ("case", [result.reason for result in results])
    return xr.Dataset(data, {"case": np.arange(len(results))})


@pytest.fixture(scope="module")
def antennas(make):
    """Refused; unlike arms fed at their apex (two source segments); off-centre in lossy metal."""
    wide = make.band(0.3e9, 3.2e9, 271)
    return [
        make.strip([(0, 0), (60, 0), (60, 40), (30, 40), (30, -40)], 6, 12),
        make.strip([(-70, -30), (0, 0), (50, -40)], 6, np.hypot(70, 30), band=wide),
        make.straight(150, 6, 55, metal=make.brass),
    ]


@pytest.fixture(scope="module")
def grids(antennas):
    return [None, *(build_wires(a, plan_mesh([a])) for a in antennas[1:])]


@pytest.fixture(scope="module")
def dataset(antennas, grids):
    results = [solve_case(antenna, plan_mesh([antenna])) for antenna in antennas]
    assert [r.status for r in results] == [Status.REFUSED, Status.SOLVED, Status.SOLVED]
    return dataset_of(results, max(grid.segments for grid in grids[1:]) + 3)


def direct(antenna, grid, frequency):
    resistance = strip_resistance_ohm_per_m(grid.feed_width_m, antenna.metal, frequency)
    series = [SeriesLoad(resistance)] * len(grid.wires)
    return solve_wires(grid.wires, grid.radius_m, frequency, [grid.source], series=series)[0]


@pytest.mark.parametrize("case", [1, 2])
def test_currents_follow_the_engine_at_frequencies_never_solved(dataset, antennas, grids, case):
    found = current_at(dataset.isel(case=case), FREQUENCY)
    solved = np.array([direct(antennas[case], grids[case], f) for f in FREQUENCY])
    assert found.shape == solved.shape
    error = np.linalg.norm(found - solved, axis=1)
    assert error.max() < 3e-3 * np.median(np.linalg.norm(solved, axis=1))


@pytest.mark.parametrize("case", [1, 2])
def test_impedance_is_the_stored_one_on_the_stored_grid(dataset, antennas, case):
    band = antennas[case].frequency
    stored = dataset["impedance"].values[case]
    grid_hz = np.linspace(band.start_hz, band.stop_hz, band.points)
    assert impedance_at(dataset.isel(case=case), grid_hz) == pytest.approx(stored, rel=1e-9)


def test_impedance_of_an_apex_takes_both_source_segments(dataset, grids):
    case = dataset.isel(case=1)
    weight = case["source_weight"].values
    assert np.nansum(weight) == pytest.approx(1)
    assert np.count_nonzero(np.nan_to_num(weight)) == len(grids[1].source) == 2


def test_one_frequency_may_be_a_plain_number(dataset):
    case = dataset.isel(case=2)
    assert impedance_at(case, 0.9e9).shape == (1,)
    assert current_at(case, 0.9e9).shape == (1, np.count_nonzero(np.isfinite(case["length"])))


def test_the_model_passes_through_its_samples(dataset):
    case = dataset.isel(case=2)
    model = model_of(case)
    used = model.weight != 0
    assert np.isfinite(model.values).all()
    assert model(model.frequency_hz[used]) == pytest.approx(model.values[used], rel=1e-12)


def test_radiators_are_those_of_the_grid(dataset, grids):
    radiators = radiators_of(dataset.isel(case=1))
    starts, ends = grids[1].ends_m()
    assert radiators.middle_m == pytest.approx((starts + ends) / 2, abs=1e-15)
    assert radiators.direction * radiators.length_m[:, None] == pytest.approx(
        ends - starts, abs=1e-15
    )


def test_gain_is_the_stored_one_of_modes_driven_at_the_feed(dataset):
    for case in (dataset.isel(case=1), dataset.isel(case=2)):
        slots = np.flatnonzero(case["driven"].values == 1)
        assert len(slots) >= 2
        for slot in slots:
            frequency = float(case["pattern_frequency"][slot])
            found = gain_at(case, frequency, THETA_DEG[:, None], PHI_DEG[None])
            stored = case["gain"].values[slot]
            loud = stored > -30
            # The resistance between samples is interpolated: 1e-4 of a loss of 2 %.
            assert found[loud] == pytest.approx(stored[loud], abs=1e-3)
            peak = gain_at(case, frequency, case["peak_theta"][slot], case["peak_phi"][slot])
            assert float(peak) == pytest.approx(float(case["peak_gain"][slot]), abs=1e-3)


def test_losses_lower_the_gain(dataset):
    """Without the stored resistance the same currents would seem to lose nothing."""
    case = dataset.isel(case=2)
    lossless = case.assign(surface_resistance=0 * case["surface_resistance"])
    frequency = float(case["pattern_frequency"][0])
    drop = gain_at(lossless, frequency, 40.0, 90.0) - gain_at(case, frequency, 40.0, 90.0)
    assert 10 ** (-drop / 10) == pytest.approx(float(case["efficiency"][0]), rel=1e-4)


def test_far_field_has_the_shape_of_the_directions_and_gives_the_gain(dataset):
    case = dataset.isel(case=1)
    theta, phi = np.array([20.0, 70.0, 130.0])[:, None], np.array([0.0, 33.0])[None]
    e_theta, e_phi = far_field_at(case, 0.95e9, theta, phi)
    assert e_theta.shape == e_phi.shape == (3, 2)
    power = abs(e_theta) ** 2 + abs(e_phi) ** 2
    gain = gain_at(case, 0.95e9, theta, phi)
    assert np.ptp(10 * np.log10(power) - gain) < 1e-9


@pytest.mark.parametrize("frequency", [0.29e9, 3.3e9, float("nan")])
def test_frequencies_outside_the_band_are_refused(dataset, frequency):
    with pytest.raises(ValueError, match="MHz is outside the solved band, 300 to 3200 MHz: widen"):
        impedance_at(dataset.isel(case=1), [0.9e9, frequency])


def test_band_edges_are_inside(dataset):
    assert np.isfinite(impedance_at(dataset.isel(case=1), [0.3e9, 3.2e9])).all()


def test_a_case_without_solution_says_why(dataset):
    with pytest.raises(StoreError, match=r"case 0 holds no currents: .*crosses or overlaps itself"):
        current_at(dataset.isel(case=0), 0.9e9)


def test_several_cases_at_once_are_refused(dataset):
    with pytest.raises(ValueError, match=r"one case is wanted, got 3: select one, as in"):
        impedance_at(dataset, 0.9e9)
