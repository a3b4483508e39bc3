"""The feed cable in pictures: from two cases solved here, 60 and 130 mm of it."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import xarray as xr

from simkit.geometry import build_wires
from simkit.plot import plot_charge, plot_current, plot_geometry, plot_tracks
from simkit.plot.along import strip_currents
from simkit.plot.cable_route import NAME, cable_route, has_cable, segments_of
from simkit.plot.cases import numbered_modes, one_case
from simkit.response.labels import UNNUMBERED, half_wave_label
from simkit.runner.prepare import mesh_of
from simkit.runner.solve import solve_case
from simkit.store.layout import Layout
from simkit.store.schema import PHI_DEG, POSITIONS, THETA_DEG, VARIABLES
from simkit.store.write import Block
from simkit.study.model import Antenna, Cable, FrequencyBand

LENGTHS_M = (0.06, 0.13)
BAND = FrequencyBand(0.5e9, 2.2e9, 86)


@pytest.fixture(scope="module")
def antennas(make) -> list[Antenna]:
    base = make.dipole([(1, 0), (71, 0)], [(-1, 0), (-61, 0)], 5, band=BAND)
    start = (-0.001, 0.0, 0.0)
    return [
        replace(base, cable=Cable("west", "start", (start, (-0.001, 0.0, length)), 0.0025))
        for length in LENGTHS_M
    ]


@pytest.fixture(scope="module")
def dataset(antennas: list[Antenna]) -> xr.Dataset:
    """As the results of a sweep open."""
    plan, segments = mesh_of(antennas)
    frequency = np.linspace(BAND.start_hz, BAND.stop_hz, BAND.points)
    sizes = Layout(2, segments, 2, frequency, ("east", "west")).sizes
    block = Block(sizes, 0, 2)
    for case, antenna in enumerate(antennas):
        result = solve_case(antenna, plan)
        block.put(case, result.arrays | {"status": int(result.status), "reason": result.reason})
    data = {name: (VARIABLES[name].dims, values) for name, values in block.arrays.items()}
    return xr.Dataset(
        data,
        {
            "case": [0, 1],
            "frequency": ("frequency", frequency, {"units": "Hz"}),
            "strip": ["east", "west"],
            "position": np.linspace(0, 1, POSITIONS),
            "theta": THETA_DEG,
            "phi": PHI_DEG,
            "cable.length": ("case", list(LENGTHS_M), {"units": "m", "display_unit": "mm"}),
        },
        {"title": "Weir", "swept": {"cable.length": "cable.length"}},
    )


def test_the_cable_is_a_route_of_its_length(dataset: xr.Dataset) -> None:
    for case, length in enumerate(LENGTHS_M):
        route = cable_route(one_case(dataset, case))
        assert route.length_m == pytest.approx(length, rel=1e-9)
        assert route.legs[0].strip == 2
        index, position = segments_of(one_case(dataset, case))
        own = position[index == 2]
        assert np.all(np.diff(own) > 0)
        assert 0 < own[0] < own[-1] < 1


def test_what_leaves_the_strips_enters_the_cable(dataset: xr.Dataset) -> None:
    """Kirchhoff's law at the joint, from three rows of currents on one scale."""
    case = one_case(dataset, 1)
    mode = next(m for m in numbered_modes(case) if m.half_waves < 0)
    current, position = strip_currents(case, mode)
    assert current.shape == (3, len(position))
    assert np.nanmax(abs(current)) == pytest.approx(1.0)
    # All three count away from the feed; the last millimetres are the source's.
    clear = position > 0.12
    leaving = [np.interp(0.0, position[clear], row[clear].real) for row in current[:2]]
    assert sum(leaving) == pytest.approx(-current[2, 2].real, rel=0.1)


def test_it_ends_without_current(dataset: xr.Dataset) -> None:
    case = one_case(dataset, 0)
    current, _ = strip_currents(case, numbered_modes(case)[0])
    assert abs(current[2, -1]) < 1e-9


@pytest.mark.parametrize("plot", [plot_current, plot_charge])
def test_pictures_along_the_strips_name_it(dataset: xr.Dataset, antennas, plot) -> None:
    ax = plot(dataset, 1, antenna=antennas[1])
    words = [text.get_text() for text in ax.texts]
    assert f"{NAME} (branch)" in words
    labels = [line.get_label() for line in ax.get_lines()]
    assert any(str(label).startswith(UNNUMBERED) for label in labels)


def test_modes_of_the_cable_are_marked_in_tracks(dataset: xr.Dataset) -> None:
    ax = plot_tracks(dataset)
    (crosses,) = [line for line in ax.get_lines() if line.get_marker() == "x"]
    numbers, frequency = dataset["mode_half_waves"].values, dataset["mode_frequency"].values
    own = (numbers < 0) & np.isfinite(frequency)
    assert sorted(crosses.get_ydata()) == pytest.approx(sorted(frequency[own] / 1e6), rel=1e-9)
    assert half_wave_label(-1) in [text.get_text() for text in ax.get_legend().get_texts()]


def test_the_drawing_shows_where_it_leaves_and_how_far_it_goes(antennas) -> None:
    bent = antennas[0].cable
    assert bent is not None
    points = (*bent.points_m, (-0.001, -0.09, 0.06))
    antenna = replace(antennas[0], cable=replace(bent, points_m=points))
    plan, _ = mesh_of([antenna])
    ax = plot_geometry(antenna, build_wires(antenna, plan))
    (line,) = [one for one in ax.get_lines() if str(one.get_label()).startswith("feed cable")]
    assert str(line.get_label()) == "feed cable, 150 mm,\nz from 0 to 60 mm"
    assert line.get_ydata().tolist() == pytest.approx([0, 0, -90])
    assert line.get_markevery() == [0]
    assert ax.get_ylim()[0] < -90


def test_results_without_a_cable_are_drawn_as_before(dataset: xr.Dataset) -> None:
    without = one_case(dataset, 0)
    without = without.assign(
        strip_index=without["strip_index"].where(without["strip_index"] >= 0, -1)
    )
    assert not has_cable(without)
    current, _ = strip_currents(without, numbered_modes(without)[0])
    assert current.shape[0] == 2
