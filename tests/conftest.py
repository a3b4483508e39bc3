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
