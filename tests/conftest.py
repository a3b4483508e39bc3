"""Antennas for tests, made in one line."""

from __future__ import annotations

import os
from types import SimpleNamespace

# Small matrices on cores that run other tests: before numpy reads it.
for _name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(_name, "1")

import numpy as np  # noqa: E402
import pytest  # noqa: E402

from simkit.study.model import Antenna, CutFeed, EndFeed, FrequencyBand, Metal, Strip  # noqa: E402

PERFECT = Metal("perfect", None, 0.0)
BAND = FrequencyBand(0.3e9, 3e9, 271)


def strip(path_mm, width_mm, at_mm, *, gap_mm=None, metal=PERFECT, band=BAND):
    """One strip with a cut across it."""
    path = tuple((float(x) * 1e-3, float(y) * 1e-3) for x, y in path_mm)
    gap = width_mm / 10 if gap_mm is None else gap_mm
    feed = CutFeed("strip", at_mm * 1e-3, gap * 1e-3)
    return Antenna((Strip("strip", path, width_mm * 1e-3),), metal, feed, 50.0, band)


def straight(length_mm, width_mm, at_mm, **options):
    return strip([(0, 0), (length_mm, 0)], width_mm, at_mm, **options)


def vee(arm_mm, width_mm, turn_deg, **options):
    """Two arms that turn by an angle at the feed, bent towards -y."""
    half = np.deg2rad(turn_deg / 2)
    x, y = arm_mm * np.cos(half), -arm_mm * np.sin(half)
    return strip([(-x, y), (0, 0), (x, y)], width_mm, arm_mm, **options)


def ell(leg_mm, width_mm, turn_deg, at_mm, **options):
    """Two equal legs that meet at an angle away from the feed."""
    turn = np.deg2rad(turn_deg)
    end = (leg_mm * (1 + np.cos(turn)), leg_mm * np.sin(turn))
    return strip([(0, 0), (leg_mm, 0), end], width_mm, at_mm, **options)


def loop(side_x_mm, side_y_mm, width_mm, at_mm, **options):
    corners = [(0, 0), (side_x_mm, 0), (side_x_mm, side_y_mm), (0, side_y_mm), (0, 0)]
    return strip(corners, width_mm, at_mm, **options)


def dipole(east_mm, west_mm, width_mm, *, metal=PERFECT, band=BAND):
    """Two strips, given by their paths from the feed outwards, bridged at their starts."""
    strips = tuple(
        Strip(name, tuple((float(x) * 1e-3, float(y) * 1e-3) for x, y in path), width_mm * 1e-3)
        for name, path in (("east", east_mm), ("west", west_mm))
    )
    return Antenna(strips, metal, EndFeed("west", "start", "east", "start"), 50.0, band)


@pytest.fixture(scope="session")
def make():
    """Builders of antennas; lengths in millimetres."""
    return SimpleNamespace(
        strip=strip,
        straight=straight,
        vee=vee,
        ell=ell,
        loop=loop,
        dipole=dipole,
        brass=Metal("brass", 1.5e7, 0.15e-3),
        band=FrequencyBand,
    )


# A store of made-up numbers, written as a run writes it, for everything that reads results.

CREEK_HZ = np.linspace(0.5e9, 1.5e9, 101)
CREEK_ARMS_M = np.linspace(0.070, 0.082, 7)
CREEK_WIDTHS_M = np.array([0.004, 0.008])
CREEK_CASES = 14
CREEK_Q = 6.0


def creek_centre_hz(case):
    """Where the made-up antenna of a case resonates in series."""
    return 0.84e9 + 10e6 * case


def creek_impedance(case, frequency_hz):
    """A resistor of 40 ohm, an inductor and a capacitor in series."""
    ratio = frequency_hz / creek_centre_hz(case)
    return 40.0 * (1 + 1j * CREEK_Q * (ratio - 1 / ratio))


@pytest.fixture(scope="session")
def creek_results(tmp_path_factory):
    """Results folder of 14 cases in blocks of 4: case 3 refused, 9 doubtful, 12 and 13 waiting.

    Case 5 has no dip at its half-wave mode, case 6 stands on a plane; nobody has a 2-wave mode.
    """
    from simkit.store.layout import Layout, SweptColumn, create_store
    from simkit.store.schema import Status
    from simkit.store.write import StoreFile

    arms = np.repeat(CREEK_ARMS_M, 2)
    widths = np.tile(CREEK_WIDTHS_M, 7)
    infill = np.linspace(0.3, 0.95, CREEK_CASES)
    swept = (
        SweptColumn("arm", "m", "mm", arms),
        SweptColumn("width", "m", "mm", widths),
        SweptColumn("carrier.infill", "1", "1", infill),
    )
    attrs = {
        "title": "Creek gauge, made up",
        "reference_ohm": 50.0,
        "sweep_method": "list",
        "sweep_shape": [CREEK_CASES],
    }
    folder = tmp_path_factory.mktemp("made") / "creek_gauge"
    folder.mkdir()
    layout = Layout(CREEK_CASES, 5, 4, CREEK_HZ, ("east", "west"), swept, attrs)
    create_store(folder / "store.zarr", layout)
    store = StoreFile(folder / "store.zarr")
    for number in range(3):
        block = store.new_block(number)
        for case in range(4 * number, 4 * number + 4):
            status = {3: Status.REFUSED, 9: Status.DOUBTFUL}.get(case, Status.SOLVED)
            values = {} if status is Status.REFUSED else _creek_values(case)
            reason = "" if status is Status.SOLVED else "the strip crosses itself, über all"
            block.put(case, values | {"status": int(status), "reason": reason})
        store.write_block(number, block)
    return folder


def _creek_values(case):
    none = np.full(10, np.nan)
    frequency, quality, dip, gain = (none.copy() for _ in range(4))
    halves = np.full(10, -1)
    frequency[:3] = creek_centre_hz(case) * np.array([0.98, 2.0, 3.1])
    halves[:3] = (1, 2, 3)
    quality[:3] = CREEK_Q + case * np.array([0.1, 0.2, 0.3])
    dip[0] = np.nan if case == 5 else creek_centre_hz(case)
    gain[:3] = (2.1 + 0.01 * case, 2.6, 3.4)
    return {
        "impedance": creek_impedance(case, CREEK_HZ),
        "mode_frequency": frequency,
        "mode_half_waves": halves.astype(np.int16),
        "path_on_plane": np.int8(case == 6),
        "mode_q": quality,
        "dip_frequency": dip,
        "dip_return_loss": np.where(np.isnan(dip), np.nan, 19.0 + case),
        "peak_gain": gain,
        "efficiency": np.where(np.isnan(frequency), np.nan, 0.9 + 0.005 * case),
        "gain": np.full((10, 19, 37), 2.5 - 0.25 * case, dtype=np.float32),
        "seconds": 0.5 * case,
        "solves": np.int32(10 + case),
        "worker": f"process {case}",
    }
