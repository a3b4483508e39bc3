"""Places of current maxima and nodes."""

from __future__ import annotations

import numpy as np
import pytest

from simkit.response.extrema import find_extrema, mode_places
from simkit.response.strip_route import routes_of
from simkit.study.model import Antenna, CutFeed, EndFeed, FrequencyBand, Metal, Strip

BAND = FrequencyBand(3e8, 3e9, 28)
METAL = Metal("perfect", None, 0.0)
POSITION = np.linspace(0.0, 1.0, 101)
TURN = np.exp(0.7j)


def places(found, kind):
    return [one.distance_m for one in found if one.kind == kind]


@pytest.mark.parametrize("half_waves", [1, 2, 3, 5])
def test_a_sinusoid_has_one_maximum_a_half_wave(half_waves: int) -> None:
    s = np.linspace(0.0, 1.0, 187)
    found = find_extrema(s, TURN * np.sin(half_waves * np.pi * s))
    wanted = (np.arange(half_waves) + 0.5) / half_waves
    # A parabola through three places a 186th apart misses a sinusoid's top by well under 1e-4.
    np.testing.assert_allclose(places(found, "maximum"), wanted, atol=1e-4)
    np.testing.assert_allclose(
        places(found, "node"), np.arange(1, half_waves) / half_waves, atol=1e-4
    )
    sizes = [one.size for one in found if one.kind == "maximum"]
    np.testing.assert_allclose(sizes, 1.0, atol=1e-4)


def test_quiet_ripples_make_no_nodes() -> None:
    s = np.linspace(0.0, 1.0, 201)
    current = np.where(s < 0.6, np.sin(np.pi * s / 0.6), 0.03 * np.sin(8 * np.pi * (s - 0.6)))
    found = find_extrema(s, current.astype(complex))
    assert places(found, "node") == []
    np.testing.assert_allclose(places(found, "maximum"), [0.3], atol=1e-4)


def test_a_dip_without_reversal_is_no_node() -> None:
    s = np.linspace(0.0, 1.0, 201)
    found = find_extrema(s, (abs(np.sin(2 * np.pi * s)) + 0j) * (1 + s))
    assert places(found, "node") == []
    assert len(places(found, "maximum")) == 1


@pytest.mark.parametrize("shift", [0.0, 0.13, 0.25, 0.5, 0.77])
@pytest.mark.parametrize("waves", [1, 2])
def test_round_a_loop_there_are_as_many_maxima_as_nodes(waves: int, shift: float) -> None:
    s = np.linspace(0.0, 0.2, 161)
    current = np.cos(2 * np.pi * waves * (s / 0.2 - shift)).astype(complex)
    found = find_extrema(s, current, period_m=0.2)
    step = 0.2 / (2 * waves)
    for kind, first in (("maximum", 0.2 * shift), ("node", 0.2 * shift + step / 2)):
        at = np.array(places(found, kind))
        assert len(at) == 2 * waves
        away = (at - first) % step
        np.testing.assert_allclose(np.minimum(away, step - away), 0, atol=2e-5)


def test_uniform_loop_current_has_no_node() -> None:
    s = np.linspace(0.0, 0.2, 41)
    found = find_extrema(s, 1 + 0.1 * np.cos(2 * np.pi * (s - 0.05) / 0.2) + 0j, period_m=0.2)
    assert [(one.kind, one.distance_m) for one in found] == [("maximum", pytest.approx(0.05))]


def test_places_on_two_bent_strips_and_in_the_gap() -> None:
    """A dipole of 77 mm arms, the east one bent upwards; a current of three half waves."""
    east = Strip("east", ((0.002, 0.0), (0.030, 0.0), (0.030, 0.049)), 0.005)
    west = Strip("west", ((-0.002, 0.0), (-0.079, 0.0)), 0.005)
    antenna = Antenna((east, west), METAL, EndFeed("west", "start", "east", "start"), 50.0, BAND)
    routes = routes_of(antenna)
    wave = 3 * np.pi / 0.158
    rows = [np.sin(wave * (0.081 + 0.077 * POSITION)), -np.sin(wave * (0.077 - 0.077 * POSITION))]
    found = mode_places(np.array(rows).astype(complex), POSITION, routes, antenna.strips)
    kinds = [(one.kind, one.strip) for one in found]
    assert kinds == [("maximum", 1), ("node", 1), ("maximum", -1), ("node", 0), ("maximum", 0)]
    third = 0.158 / 3
    along = [0.077 - third / 2, 0.077 - third, np.nan, 2 * third - 0.081, 2.5 * third - 0.081]
    np.testing.assert_allclose([one.along_m for one in found], along, atol=2e-5)
    assert (found[2].x_m, found[2].y_m) == (pytest.approx(0, abs=2e-5), 0.0)
    assert (found[0].x_m, found[0].y_m) == (pytest.approx(third / 2 - 0.079, abs=2e-5), 0.0)
    # 28 mm along x, the rest up the second leg.
    assert (found[4].x_m, found[4].y_m) == (
        pytest.approx(0.030),
        pytest.approx(along[4] - 0.028, abs=2e-5),
    )
    assert found[2].as_dict(antenna.strips)["strip"] is None
    assert found[4].as_dict(antenna.strips)["strip"] == "east"


def test_branches_have_places_of_their_own_but_not_their_joint() -> None:
    beam = Strip("beam", ((0.0, 0.0), (0.15, 0.0)), 0.006)
    stub = Strip("stub", ((0.05, 0.0), (0.05, 0.04)), 0.004)
    antenna = Antenna((beam, stub), METAL, CutFeed("beam", 0.09, 0.002), 50.0, BAND)
    current = np.array([np.sin(np.pi * POSITION), 0.5 * np.sin(1.5 * np.pi * (1 - POSITION))])
    found = mode_places(current.astype(complex), POSITION, routes_of(antenna), antenna.strips)
    on_stub = [one for one in found if one.strip == 1]
    assert [one.kind for one in on_stub] == ["node", "maximum"]
    np.testing.assert_allclose([one.along_m for one in on_stub], [0.04 / 3, 0.08 / 3], atol=2e-5)
    assert on_stub[1].size == pytest.approx(0.5, abs=1e-3)
    assert on_stub[1].route == 1
