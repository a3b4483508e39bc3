"""Whatever is drawn, three things come out: a clear error, a solved case, a doubtful one.

A solved case radiates and loses what it takes in; a doubtful one says why. Studies are random:
polylines, tapers, branches and loops, of any size from too short to far too wide, fed anywhere.
The long tests draw 2500 of them, split so that each part takes about a minute.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from simkit.errors import SimkitError
from simkit.geometry import MeshPlan, plan_mesh
from simkit.runner.solve import BALANCE_TOLERANCE, solve_case
from simkit.store.schema import Status
from simkit.study.model import Antenna, CutFeed, EndFeed, FrequencyBand, Metal, Strip

METALS = (Metal("perfect", None, 0.0), Metal("brass", 1.5e7, 0.15e-3))
POINTS = 41


def mm(points):
    return tuple((float(x) * 1e-3, float(y) * 1e-3) for x, y in points)


@st.composite
def paths(draw, most_legs=4):
    """A polyline from the origin, mm; turns favour those that strips are built with."""
    legs = draw(st.lists(st.floats(4, 80), min_size=1, max_size=most_legs))
    turn = st.one_of(
        st.sampled_from([0.0, 30.0, -30.0, 45.0, 60.0, -60.0, 90.0, -90.0, 120.0]),
        st.floats(-150, 150),
    )
    heading = np.deg2rad(np.cumsum([draw(turn) for _ in legs]))
    steps = np.array(legs)[:, None] * np.stack([np.cos(heading), np.sin(heading)], axis=1)
    return np.vstack([np.zeros(2), np.cumsum(steps, axis=0)])


def widths(points, draw, width):
    """One width, or one that changes along the path by up to ten times."""
    if not draw(st.booleans()):
        return ()
    ratios = [draw(st.floats(1.0, 10.0)) for _ in points]
    return tuple(float(width * r) * 1e-3 for r in ratios)


@st.composite
def antennas(draw, shapes=("polyline", "taper", "branch", "loop")):
    shape = draw(st.sampled_from(shapes))
    width = draw(st.floats(0.8, 12))
    if shape == "loop":
        a, b = draw(st.floats(15, 90)), draw(st.floats(10, 60))
        skew = draw(st.sampled_from([0.0, 0.0, 10.0]))
        points = np.array([(0, 0), (a, 0), (a + skew, b), (skew, b), (0, 0)])
    else:
        points = draw(paths())
    changing = widths(points, draw, width) if shape == "taper" else ()
    first = Strip("main", mm(points), max(changing or (width * 1e-3,)), changing)
    length = float(np.linalg.norm(np.diff(points, axis=0), axis=1).sum())
    strips = [first]
    if shape == "branch":
        count = draw(st.integers(1, 2))
        strips += [draw(branches(points, width, f"branch {number}")) for number in range(count)]
    at = draw(st.one_of(st.just(length / 2), st.floats(0.05, 0.95).map(lambda p: p * length)))
    if len(points) > 2 and draw(st.integers(0, 4)) == 0:
        at = float(np.linalg.norm(points[1]))  # on the first corner
    feed: CutFeed | EndFeed = CutFeed("main", at * 1e-3, min(width / 10, 0.5) * 1e-3)
    top = draw(st.sampled_from([1.0, 2.0, 3.0])) * 1e9
    return Antenna(
        strips=tuple(strips),
        metal=draw(st.sampled_from(METALS)),
        feed=feed,
        reference_ohm=50.0,
        frequency=FrequencyBand(0.3e9, top, POINTS),
        model=draw(st.sampled_from(["auto", "auto", "line", "grid"])),
    )


@st.composite
def branches(draw, points, width, name):
    """A straight strip that leaves some leg, at its centre line, its edge or a little off."""
    leg = draw(st.integers(0, len(points) - 2))
    place = draw(st.floats(0.0, 1.0))
    start = points[leg] + place * (points[leg + 1] - points[leg])
    along = np.arctan2(*(points[leg + 1] - points[leg])[::-1])
    angle = along + np.deg2rad(draw(st.sampled_from([90.0, -90.0, 60.0, 45.0, 110.0, 20.0])))
    out = np.array([np.cos(angle), np.sin(angle)])
    own = width * draw(st.sampled_from([1.0, 1.0, 0.5, 1.5]))
    start = start + out * draw(st.sampled_from([0.0, 0.0, width / 2, 0.7 * width]))
    return Strip(name, mm([start, start + out * draw(st.floats(5, 60))]), own * 1e-3)


def planned(antenna: Antenna) -> tuple[MeshPlan | None, str]:
    try:
        return plan_mesh([antenna]), ""
    except SimkitError as error:
        return None, str(error)


def let_out(antenna: Antenna) -> str:
    """What becomes of one study; fails on anything but the three."""
    plan, told = planned(antenna)
    if plan is None:
        assert len(told) > 20
        return "error"
    result = solve_case(antenna, plan)
    if result.status in (Status.REFUSED, Status.FAILED):
        assert len(result.reason) > 20
        assert not result.arrays
        return "refused"
    # Without a mode in the band there is nothing to balance.
    balance = np.asarray(result.arrays.get("power_balance", []))
    balance = balance[np.isfinite(balance)]
    assert np.isfinite(result.arrays["impedance"]).all()
    if result.status == Status.DOUBTFUL:
        assert len(result.reason) > 20
        return "doubtful"
    assert result.status == Status.SOLVED
    assert result.reason == ""
    assert np.all(abs(balance - 1) <= BALANCE_TOLERANCE)
    # Passive to within the sweep's tolerance, 1e-3 of the median current, which is the median
    # admittance for 1 V: far below its first mode a dipole takes less, milliohms beside kilohms.
    admittance = 1 / result.arrays["impedance"]
    assert np.all(admittance.real > -1e-3 * np.median(abs(admittance)))
    return "solved"


OPTIONS = {
    "deadline": None,
    "derandomize": True,
    "database": None,
    "suppress_health_check": [HealthCheck.too_slow, HealthCheck.data_too_large],
}
SMALL = {"polyline": 45, "taper": 12, "branch": 28, "loop": 15}
LARGE = {"polyline": 900, "taper": 350, "branch": 800, "loop": 450}


def tried(shape: str, examples: int) -> dict[str, int]:
    counts: dict[str, int] = {}

    @settings(max_examples=examples, **OPTIONS)
    @given(antenna=antennas(shapes=(shape,)))
    def run(antenna: Antenna) -> None:
        # Coarse bands keep rails few enough for hundreds of cases.
        if antenna.model == "grid" or shape == "taper":
            top = min(antenna.frequency.stop_hz, 2e9)
            antenna = replace(antenna, frequency=FrequencyBand(0.3e9, top, POINTS))
        out = let_out(antenna)
        counts[out] = counts.get(out, 0) + 1

    run()
    return counts


@pytest.mark.parametrize("shape", SMALL)
def test_a_hundred_studies(shape):
    counts = tried(shape, SMALL[shape])
    # The generator must not drift to where nothing is ever solved; few random branches can be.
    assert counts.get("solved", 0) + counts.get("doubtful", 0) > 0


@pytest.mark.long
@pytest.mark.parametrize("shape", LARGE)
def test_thousands_of_studies(shape):
    counts = tried(shape, LARGE[shape])
    assert sum(counts.values()) >= LARGE[shape]
    assert counts.get("solved", 0) + counts.get("doubtful", 0) > 0.03 * LARGE[shape]
