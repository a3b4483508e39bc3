"""The grid model: rails of one radius, metal across where the strip bends, joins or ends.

Every shape is drawn for a band to 3 GHz; lengths are in millimetres.
"""

from collections import Counter
from dataclasses import replace
from functools import cache
from itertools import combinations

import numpy as np
import pytest

from simkit.errors import GeometryError
from simkit.geometry import build_wires, chains_of, plan_mesh
from simkit.geometry.checks import check_wires
from simkit.geometry.dressing import dressing_of
from simkit.geometry.grid_layout import CORNER_RUNGS_WIDTHS, JUNCTION_RUNGS_WIDTHS, layout
from simkit.geometry.grid_mesh import TIE_WAVELENGTHS, grid_rule, source_m
from simkit.geometry.grid_model import is_even
from simkit.study.model import Antenna, Carrier, CutFeed, EndFeed, FrequencyBand, Metal, Strip

BAND = FrequencyBand(0.3e9, 3e9, 271)


def strip(name, path_mm, width_mm):
    many = isinstance(width_mm, tuple)
    widths = tuple(w * 1e-3 for w in width_mm) if many else ()
    path = tuple((float(x) * 1e-3, float(y) * 1e-3) for x, y in path_mm)
    return Strip(name, path, max(widths) if many else width_mm * 1e-3, widths)


def of(*strips, at=None, feed=None, band=BAND):
    feed = feed or CutFeed(strips[0].name, at * 1e-3, 0.3e-3)
    return Antenna(strips, Metal("perfect", None, 0.0), feed, 50.0, band, model="grid")


def turned(leg, turn_deg):
    turn = np.deg2rad(turn_deg)
    return [(0, 0), (leg, 0), (leg + leg * np.cos(turn), leg * np.sin(turn))]


def bow(radius, length, legs=60):
    angles = (np.arange(legs + 1) / legs - 0.5) * length / radius
    return [(radius * np.sin(a), radius * np.cos(a)) for a in angles]


def slanted(angle_deg, width=6.0, branch=6.0, start=0.0, side=1):
    """A bar and a branch that leaves it at an angle; `start` along the branch from the axis."""
    along = np.array([np.cos(np.deg2rad(angle_deg)), side * np.sin(np.deg2rad(angle_deg))])
    path = [tuple(np.array([15, 0]) + s * along) for s in (start, 40)]
    return of(strip("bar", [(-60, 0), (60, 0)], width), strip("branch", path, branch), at=25)


SHAPES = {
    "straight": of(strip("s", [(0, 0), (150, 0)], 6), at=75),
    "straight, off centre": of(strip("s", [(0, 0), (150, 0)], 6), at=40),
    "wide": of(strip("s", [(0, 0), (150, 0)], 20), at=75),
    "bow tie": of(strip("s", [(-75, 0), (0, 0), (75, 0)], (30, 3, 30)), at=75),
    "one-sided taper": of(strip("s", [(-75, 0), (75, 0)], (4, 16)), at=60),
    "right angle": of(strip("s", turned(75, 90), 8), at=35),
    "bend of 30 degrees": of(strip("s", turned(75, 30), 6), at=35),
    "bend of 60 degrees": of(strip("s", turned(75, -60), 6), at=35),
    "bend of 110 degrees": of(strip("s", turned(75, 110), 4), at=35),
    "zigzag": of(strip("s", [(0, 0), (40, 0), (60, 34), (100, 34)], 5), at=20),
    "arc": of(strip("s", bow(50, 150), 6), at=40),
    "V fed at its apex": of(strip("s", turned(75, 60), 8), at=75),
    "gentle V fed at its apex": of(strip("s", turned(75, 30), 8), at=75),
    "loop": of(strip("s", [(0, 0), (60, 0), (60, 40), (0, 40), (0, 0)], 4), at=30),
    "dipole": of(
        strip("east", [(1, 0), (70, 0)], 6),
        strip("west", [(-1, 0), (-70, 0)], 6),
        feed=EndFeed("west", "start", "east", "start"),
    ),
    "T": slanted(90),
    "T at the edge": slanted(90, start=3),
    "T downwards": slanted(90, side=-1),
    "T of a narrow branch": slanted(90, branch=3),
    "slanted T": slanted(60),
    "slanted T, other way": slanted(120),
    "slanted T downwards": slanted(50, side=-1),
    "slanted T of a narrow branch": slanted(60, branch=3),
    "T on a taper": of(
        strip("bar", [(-60, 0), (60, 0)], (4, 12)), strip("branch", [(15, 0), (15, 40)], 6), at=25
    ),
}
named = pytest.mark.parametrize("name", SHAPES)


@cache
def grid_of(antenna):
    return build_wires(antenna, plan_mesh([antenna]))


def ends_of(grid):
    return np.array([[wire.start_m, wire.end_m] for wire in grid.wires])


def refused(antenna, match):
    with pytest.raises(GeometryError, match=match):
        grid_of(antenna)


# -- what holds for every shape --------------------------------------------------------------------


@named
def test_ends_that_meet_coincide_to_the_last_bit(name):
    """The engine joins what lies within a thousandth of a segment; nothing is left to that."""
    places = ends_of(grid_of(SHAPES[name])).reshape(-1, 3)
    unique = np.unique(places, axis=0)
    apart = np.linalg.norm(unique[:, None] - unique[None], axis=2)
    np.fill_diagonal(apart, np.inf)
    assert apart.min() > 1e-4


@named
def test_metal_is_in_one_piece(name):
    ends = ends_of(grid_of(SHAPES[name]))
    _, node = np.unique(ends.reshape(-1, 3), axis=0, return_inverse=True)
    links = node.reshape(-1, 2)
    part = np.arange(node.max() + 1)
    for _ in range(len(links)):
        low = np.minimum(part[links[:, 0]], part[links[:, 1]])
        before = part.copy()
        np.minimum.at(part, links[:, 0], low)
        np.minimum.at(part, links[:, 1], low)
        if np.array_equal(part, before):
            break
    assert len(set(part)) == 1


@named
def test_no_end_is_left_hanging(name):
    """Every rail ends on a row of metal across, or on another rail."""
    ends = ends_of(grid_of(SHAPES[name])).reshape(-1, 3)
    count = Counter(map(tuple, ends))
    assert min(count.values()) >= 2


@named
def test_wires_pass_the_engines_checks(name):
    antenna = SHAPES[name]
    grid = grid_of(antenna)
    check_wires(grid.wires, grid.radius_m, antenna.frequency.stop_hz)
    assert max(w.segment_m for w in grid.wires) < 0.1 / 6
    assert grid.radius_m > 0


@named
def test_unknowns(name):
    """400 at most for shapes like those of the full-wave table, 150 mm at 3 GHz."""
    beyond_the_table = {"T on a taper": 500}
    assert grid_of(SHAPES[name]).segments <= beyond_the_table.get(name, 400)


@named
def test_every_rail_carries_the_source_and_the_second_source(name):
    antenna = SHAPES[name]
    plan = plan_mesh([antenna])
    grid = build_wires(antenna, plan)
    assert sum(volts for _, volts in grid.source) == pytest.approx(plan.rails)
    assert [volts for _, volts in grid.probe] == [1.0] * plan.rails
    assert not {s for s, _ in grid.source} & {s for s, _ in grid.probe}
    # The volts of each point along the chain.
    (chain, *_) = grid.chains
    signs = dict(zip(chain.segments.tolist(), chain.signs.tolist(), strict=True))
    assert {signs[s] for s, _ in grid.source} == {1}


@named
def test_chain_has_the_strips_rails_at_each_place(name):
    """As many segments side by side as there are rails, with ascending arc lengths."""
    antenna = SHAPES[name]
    plan = plan_mesh([antenna])
    grid = build_wires(antenna, plan)
    used = np.concatenate([chain.segments for chain in grid.chains])
    assert len(set(used.tolist())) == len(used)
    for chain in grid.chains:
        assert np.all(np.diff(chain.arc_m) >= 0)
        assert 0 <= chain.arc_m[0] <= chain.arc_m[-1] <= chain.length_m
        _, number = chain.places()
        counts = np.bincount(number)
        # Where a branch's rails cross the host's, pieces of one place stand for all of it.
        assert np.all(counts == plan.rails)
    assert np.all(grid.strip_index >= -1)


@named
def test_mirrored_antenna_is_the_mirrored_grid(name):
    """Rails are numbered from the other edge: the same wires, in another order."""
    antenna = SHAPES[name]
    flipped = tuple(replace(s, path_m=tuple((x, -y) for x, y in s.path_m)) for s in antenna.strips)
    one, other = grid_of(antenna), grid_of(replace(antenna, strips=flipped))
    assert other.radius_m == one.radius_m
    wires = [sorted_wires(ends_of(one) * [1, -1, 1]), sorted_wires(ends_of(other))]
    assert wires[1] == pytest.approx(wires[0], abs=1e-12)
    sums = [sorted(volts for _, volts in g.source) for g in (one, other)]
    assert sums[0] == sums[1]


def sorted_wires(ends):
    """Both ends of every wire, in an order that does not depend on how they are drawn."""
    nm = np.round(ends * 1e9)
    swap = [tuple(a) > tuple(b) for a, b in nm]
    ends = np.where(np.array(swap)[:, None, None], ends[:, ::-1], ends)
    keys = np.round(ends.reshape(len(ends), -1) * 1e7) + 0.0
    return ends[np.lexsort(keys.T[::-1])].reshape(len(ends), -1)


@named
@pytest.mark.parametrize("factor", [2.0, 0.4])
def test_scaled_antenna_is_the_scaled_grid(name, factor):
    antenna = SHAPES[name]
    band = FrequencyBand(BAND.start_hz / factor, BAND.stop_hz / factor, 11)
    strips = tuple(
        replace(
            s,
            path_m=tuple((x * factor, y * factor) for x, y in s.path_m),
            width_m=s.width_m * factor,
            widths_m=tuple(w * factor for w in s.widths_m),
        )
        for s in antenna.strips
    )
    feed = antenna.feed
    if isinstance(feed, CutFeed):
        feed = replace(feed, at_m=feed.at_m * factor, gap_m=feed.gap_m * factor)
    one = grid_of(antenna)
    other = grid_of(replace(antenna, strips=strips, feed=feed, frequency=band))
    assert [w.segments for w in other.wires] == [w.segments for w in one.wires]
    assert ends_of(other) == pytest.approx(factor * ends_of(one), rel=1e-6, abs=1e-9)
    assert other.radius_m == pytest.approx(factor * one.radius_m)
    assert other.model_gap_m == pytest.approx(factor * one.model_gap_m)


# -- layout: where the rows lie --------------------------------------------------------------------


def rows_of(antenna, chain=0):
    """Arc lengths (mm), tied or not, of the rows of a chain before they are divided."""
    lines = chains_of(antenna)
    rule = grid_rule(lines, None, lambda w: w)
    corners = plan_mesh([antenna]).chains[chain].vertices
    found = layout(lines, chain, rule, lambda w: w, source_m(antenna, rule), corners)
    stations = [found[0].start, *(interval.stop for interval in found)]
    return found, [(s.arc_m * 1e3, s.tied) for s in stations], rule


def test_rows_of_a_straight_strip():
    """End bars 0.075 w inside, the source a thirtieth of a wavelength long between two ties."""
    found, rows, _ = rows_of(SHAPES["straight"])
    half = 299.792458 / 3 / 30 / 2
    wanted = [0.45, 75 - half, 75 + half, 149.55]
    assert [arc for arc, _ in rows] == pytest.approx(wanted)
    assert all(tied for _, tied in rows)
    assert [interval.fed for interval in found] == [0, 1, 0]


def test_rows_of_a_taper_turn_at_its_apex():
    """No metal across where only the slope of the width changes."""
    antenna = of(strip("s", [(-75, 0), (0, 0), (75, 0)], (30, 3, 30)), at=30)
    _, rows, rule = rows_of(antenna)
    assert rule.count >= 7
    assert (pytest.approx(75.0), False) in rows
    assert rows[0] == (pytest.approx(rule.tip_m(0.03, 0.03) * 1e3), True)


def test_rungs_of_a_gentle_corner():
    """On the mitre line, and 0.2 and 0.8 widths beyond the inner ends of it on both sides."""
    antenna = SHAPES["bend of 30 degrees"]
    found, rows, rule = rows_of(antenna)
    reach = rule.offsets_m(0.006)[-1] * 1e3 * np.tan(np.deg2rad(15))
    near, far = (reach + part * 6 for part in CORNER_RUNGS_WIDTHS)
    wanted = [75 - far, 75 - near, 75, 75 + near, 75 + far]
    corner = [arc for arc, tied in rows if tied and 60 < arc < 90]
    assert corner == pytest.approx(wanted)
    assert [i.stop.vertex for i in found if i.stop.vertex > 0] == [2]


def test_block_of_a_sharp_corner():
    """The rails of both legs run on and cross: N x N nodes, on lines parallel to the legs."""
    antenna = SHAPES["right angle"]
    grid = grid_of(antenna)
    offsets = grid_rule(chains_of(antenna), None, lambda w: w).offsets_m(0.008) * 1e3
    nodes = {tuple(np.round(p[:2] * 1e3, 6) + 0.0) for p in ends_of(grid).reshape(-1, 3)}
    for a in offsets:
        for b in offsets:
            # Rail of the first leg at y = a, of the second at x = 75 - b (left of it is -x).
            assert tuple(np.round([75 - b, a], 6) + 0.0) in nodes
    # No two rows of rungs inside the block: the pieces between nodes are the rails themselves.
    inside = [
        w
        for w in grid.wires
        if all(abs(p[0] - 0.075) < 0.0035 and abs(p[1]) < 0.0035 for p in (w.start_m, w.end_m))
    ]
    assert len(inside) == 2 * 3 * 2


@pytest.mark.parametrize("name", ["T", "T downwards", "slanted T", "slanted T downwards"])
def test_block_of_a_junction(name):
    """The branch's rails run on across the host's: a node at every crossing."""
    antenna = SHAPES[name]
    lines = chains_of(antenna)
    rule = grid_rule(lines, None, lambda w: w)
    nodes = ends_of(grid_of(antenna)).reshape(-1, 3)[:, :2]
    branch = lines[1]
    along = (branch.points[1] - branch.points[0]) / np.linalg.norm(
        branch.points[1] - branch.points[0]
    )
    normal = np.array([-along[1], along[0]])
    for y in rule.offsets_m(0.006):
        for offset in rule.offsets_m(0.006):
            # Where the host's rail at y meets the branch's rail at this offset.
            start = branch.points[0] + offset * normal
            at = start + (y - start[1]) / along[1] * along
            assert np.min(np.linalg.norm(nodes - at, axis=1)) < 1e-9


@pytest.mark.parametrize("name", ["T", "slanted T"])
def test_rungs_of_a_junction(name):
    """0.6 and 1.2 widths outside the block, on the host's two sides and on the branch."""
    _, rows, rule = rows_of(SHAPES[name])
    tied = np.array([arc for arc, is_tied in rows if is_tied])
    sine, cosine = (1, 0) if name == "T" else (np.sqrt(0.75), 0.5)
    edge = rule.offsets_m(0.006)[-1] * 1e3
    half = edge / sine + edge * cosine / sine
    for rung in JUNCTION_RUNGS_WIDTHS:
        for place in (75 - half - 6 * rung, 75 + half + 6 * rung):
            assert np.min(abs(tied - place)) < 1e-6
    _, branch_rows, _ = rows_of(SHAPES[name], chain=1)
    wanted = [edge / sine + 6 * rung for rung in (0, *JUNCTION_RUNGS_WIDTHS)]
    assert [arc for arc, _ in branch_rows[:3]] == pytest.approx(wanted)


def test_metal_across_lies_on_tied_rows_only():
    """End bars and the two rows beside the feed: 4 rows of two wires for three rails."""
    grid = grid_of(SHAPES["straight"])
    across = [w for w in grid.wires if w.start_m[0] == w.end_m[0]]
    assert len(across) == 8
    assert len({w.start_m[0] for w in across}) == 4


@pytest.mark.parametrize("name", ["bow tie", "one-sided taper", "right angle", "arc"])
def test_ties_are_closer_than_the_rails_could_resonate(name):
    antenna = SHAPES[name]
    plan = plan_mesh([antenna])
    found, _, _ = rows_of(antenna)
    longest = TIE_WAVELENGTHS * 299.792458e6 / BAND.stop_hz
    # Rows without metal across, as at the apex of a taper, do not interrupt the rails.
    length = 0.0
    for interval, ties in zip(found, plan.chains[0].ties, strict=True):
        length += interval.length_m / (ties + 1)
        assert length <= longest * 1.02
        if interval.stop.tied:
            length = 0.0


PLASTIC = Carrier(2.7, 0.01, 2.4e-3, overhang_m=2e-3)


def test_segments_between_ties_are_of_one_length():
    """The engine takes unequal ones badly where several wires meet."""
    antenna = replace(SHAPES["straight, off centre"], carrier=PLASTIC)
    plan = plan_mesh([antenna])
    counts, ties = plan.chains[0].counts, plan.chains[0].ties
    assert any(t and n % (t + 1) for n, t in zip(counts, ties, strict=True))  # else no proof
    lengths = [w.segment_m for w in build_wires(antenna, plan).wires if w.start_m[0] != w.end_m[0]]
    assert len(set(np.round(np.array(lengths) * 1e9))) == len(counts)


@pytest.mark.parametrize("name", ["straight", "right angle", "bow tie"])
def test_rails_drop_the_strips_voltage(name):
    """Loads side by side make the strip's own, and are smallest where most of the current runs."""
    antenna = replace(SHAPES[name], carrier=PLASTIC)
    plan = plan_mesh([antenna])
    grid = build_wires(antenna, plan)
    first = [wire.start_m[0] for wire in grid.wires]
    rails = np.flatnonzero(np.isclose(first, min(first)) & (grid.series_inductance_h_per_m > 0))
    load = grid.series_inductance_h_per_m[rails]
    assert len(load) == plan.rails
    width = (antenna.strips[0].widths[0] + antenna.strips[0].widths[-1]) / 2
    if name != "bow tie":  # whose first piece is narrower than its end
        wanted = 2e-7 * dressing_of(antenna).kappa(width).real
        assert 1 / np.sum(1 / load) == pytest.approx(wanted, rel=1e-9)
    order = np.argsort([grid.wires[k].start_m[1] for k in rails])
    load = load[order]
    assert load == pytest.approx(load[::-1], rel=1e-9)
    assert load[0] < 0.9 * load[plan.rails // 2]


def test_a_leg_too_short_for_its_corner():
    antenna = of(strip("s", [(0, 0), (60, 0), (60, 4)], 6), at=25)
    refused(antenna, r"near .* mm a leg is too short for its width of 6 mm between corners, junc")


def test_a_strip_drawn_twice():
    """Their common ends meet, so the chain turns right back; planning comes before the checks."""
    main = strip("main", [(0, 0), (40, 0)], 4)
    twins = [strip(f"twin {k}", [(0, 0), (0, 30)], 4) for k in range(2)]
    refused(of(main, *twins, at=20), r"turns by 180 degrees, so the metal lies on itself there")


def test_a_junction_at_a_corner():
    bent, stub = strip("s", turned(60, 90), 5), strip("stub", [(60, 0), (100, 0)], 5)
    refused(of(bent, stub, at=25), r"at \(60, 0\) mm a strip ends on another at its feed, at a cor")


def test_a_junction_too_slanted():
    refused(slanted(35), r"at \(15, 0\) mm a strip leaves another at less than 40 degrees")


def test_a_branch_that_begins_on_another_and_runs_along_it():
    bar = strip("bar", [(0, 0), (80, 0)], 4)
    twins = [strip(f"twin {k}", [(40, y), (40, 25 + y)], 4) for k, y in enumerate((2.8, 0))]
    refused(of(bar, *twins, at=20), r"a strip leaves another at less than 40 degrees")


def test_strips_that_end_on_each_other_in_a_ring():
    corners = np.array([(0, 0), (60, 0), (60, 60), (0, 60)])
    strips = [
        strip(f"side {k}", [corners[k], corners[k] + 1.25 * (corners[(k + 1) % 4] - corners[k])], 4)
        for k in range(4)
    ]
    refused(of(*strips, at=25), "strips end on each other in a ring; draw the ring as one closed")


# -- limits ----------------------------------------------------------------------------------------


def test_expected_error_grows_with_corners_and_tapers():
    errors = [grid_of(SHAPES[n]).relative_error for n in ("straight", "right angle", "bow tie")]
    assert errors == sorted(errors)
    assert 0 < errors[0] < errors[-1] <= 0.008


@pytest.mark.parametrize(
    ("antenna", "doubt"),
    [
        (of(strip("s", [(-80, 0), (0, 0), (80, 0)], (36, 3, 36)), at=80), "widens 12.0 times"),
        (of(strip("s", turned(75, 130), 4), at=35), r"turns by 130 degrees; folds over 120"),
        (SHAPES["bend of 110 degrees"], "turns by 110 degrees; rails hold up to 100"),
        (SHAPES["loop"], "rails have its modes up to 0.5 % low"),
    ],
    ids=["12 to 1", "fold", "sharp", "loop"],
)
def test_limits_are_doubted(antenna, doubt):
    assert any(doubt.replace("\\", "") in found for found in grid_of(antenna).doubts)


@pytest.mark.parametrize("name", [n for n in SHAPES if n not in ("loop", "bend of 110 degrees")])
def test_shapes_within_the_limits_are_not_doubted(name):
    assert grid_of(SHAPES[name]).doubts == ()


def test_an_even_interval_is_straight_and_of_one_width():
    found, _, _ = rows_of(SHAPES["straight"])
    line = chains_of(SHAPES["straight"])[0]
    assert all(is_even(line, interval) for interval in found)
    found, _, _ = rows_of(SHAPES["bow tie"])
    line = chains_of(SHAPES["bow tie"])[0]
    assert not is_even(line, found[0])


STEPS = {
    ratio: of(
        strip("west", [(-75, 0), (0, 0)], 6), strip("east", [(0, 0), (75, 0)], 6 * ratio), at=35
    )
    for ratio in (1.5, 2.0)
}


@pytest.mark.parametrize("ratio", STEPS)
def test_a_step_in_width(ratio):
    grid = grid_of(STEPS[ratio])
    for first, second in combinations(grid.chains, 2):
        assert not set(first.segments) & set(second.segments)
    assert len(grid.chains) == 1
