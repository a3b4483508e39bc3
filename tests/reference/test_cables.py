"""A cable in the plane of the strips against flat metal with a branch of the same width.

The metal's modes are those of cables.toml (make_cables.py). The strip's ends named in the feed lie
as far apart as the branch is wide, so that the cable begins where the branch's middle is: the gap
means nothing to natural modes.
"""

from __future__ import annotations

import tomllib
from pathlib import Path

import numpy as np
import pytest
from make_cables import WANTED, branched

from simkit.engine.pynec import solve_wires
from simkit.geometry import build_wires, plan_mesh
from simkit.geometry.cable import JOINT_ERROR
from simkit.geometry.strips import OPEN_END_WIDTHS
from simkit.response.cable import cable_level_db
from simkit.response.modes import find_modes
from simkit.runner.currents import sweep_currents
from simkit.study.model import Antenna, Cable, FrequencyBand

ROWS = tomllib.loads((Path(__file__).parent / "cables.toml").read_text())["cable"]
BAND = FrequencyBand(0.4e9, 3.0e9, 27)


def antenna_of(make, row) -> Antenna:
    half, offset = row["length_mm"] / 2, row["offset_mm"]
    antenna = make.dipole([(offset, 0), (half, 0)], [(-offset, 0), (-half, 0)], row["width_mm"])
    # A braid is not shorter as a wire, as an open end of strip is.
    tip = row["branch_mm"] - OPEN_END_WIDTHS * row["width_mm"]
    points = ((-offset * 1e-3, 0.0, 0.0), (-offset * 1e-3, tip * 1e-3, 0.0))
    cable = Cable("west", "start", points, row["width_mm"] * 0.5e-3)
    return Antenna(
        antenna.strips, antenna.metal, antenna.feed, 50.0, BAND, model="line", cable=cable
    )


@pytest.mark.parametrize("row", ROWS, ids=lambda row: f"{row['width_mm']}-{row['branch_mm']}")
def test_modes_are_those_of_flat_metal(make, row) -> None:
    antenna = antenna_of(make, row)
    grid = build_wires(antenna, plan_mesh([antenna]))
    found = find_modes(sweep_currents(antenna, grid), grid, BAND.start_hz, BAND.stop_hz)
    wanted = np.array(row["modes"])
    frequency = np.array([mode.frequency_hz for mode in found]) / 1e9
    near = np.argmin(abs(frequency[:, None] - wanted[None, :, 0]), axis=0)
    off = frequency[near] / wanted[:, 0] - 1
    # The error stated is one standard deviation; none of a few modes lies two off.
    assert np.max(abs(off)) < 2 * JOINT_ERROR
    assert np.sqrt(np.mean(off**2)) < 1.2 * JOINT_ERROR
    # Q by the sheets is good to 1 %, that of the line model at junctions to 4 %.
    assert [found[k].q for k in near] == pytest.approx(wanted[:, 1], rel=0.04)


@pytest.mark.parametrize(("mhz", "level_db"), [(600, -6.26), (900, -6.23), (1000, -0.04)])
def test_the_current_on_the_cable_is_that_on_the_branch(make, mhz, level_db) -> None:
    """The same metal, 1.5 mm and 75 mm, driven by a uniform field across a gap of 0.15 mm.

    Current up the branch at the strip's edge over that at the feed, level 2 of the sheet; level
    1 differs by up to 0.15 dB.
    """
    row = next(row for row in ROWS if (row["width_mm"], row["branch_mm"]) == (1.5, 75.0))
    antenna = antenna_of(make, row)
    grid = build_wires(antenna, plan_mesh([antenna]))
    current = solve_wires(grid.wires, grid.radius_m, mhz * 1e6, [grid.source])[0]
    assert cable_level_db(current, grid, mhz * 1e6) == pytest.approx(level_db, abs=0.25)


@pytest.mark.long
def test_a_mode_of_the_file_comes_out_of_the_solver_again() -> None:
    row = next(row for row in ROWS if (row["width_mm"], row["branch_mm"]) == (1.5, 75.0))
    sheet = branched(1.5, 75.0, 2)
    guess = WANTED[1.5, 75.0][1]
    mode = sheet.mode(complex(guess, guess / 26) * 1e9)
    # One mesh instead of the extrapolation from two.
    assert mode.frequency_hz / 1e9 == pytest.approx(row["modes"][1][0], rel=1e-3)
