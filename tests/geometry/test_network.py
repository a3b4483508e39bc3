"""From strips and feed to chains: ends that meet, branches, loops, and where the feed comes to lie.

Lengths are in millimetres; chains are compared by the polyline they follow, either way round.
"""

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest

from simkit.errors import GeometryError
from simkit.geometry import build_wires, chains_of, plan_mesh
from simkit.geometry.chain_line import Joint
from simkit.study.model import Antenna, CutFeed, EndFeed, FrequencyBand, Metal, Strip


def strip(name, path_mm, width_mm=4.0):
    many = isinstance(width_mm, tuple)
    widths = tuple(w * 1e-3 for w in width_mm) if many else ()
    path = tuple((float(x) * 1e-3, float(y) * 1e-3) for x, y in path_mm)
    return Strip(name, path, max(widths) if many else width_mm * 1e-3, widths)


def antenna(*strips, feed):
    return Antenna(strips, Metal("perfect", None, 0.0), feed, 50.0, FrequencyBand(0.3e9, 3e9, 11))


def cut(name, at_mm, gap_mm=0.4):
    return CutFeed(name, at_mm * 1e-3, gap_mm * 1e-3)


def points_mm(line):
    return line.points * 1e3


def spans_mm(line):
    return {s.strip: (s.start_m * 1e3, s.end_m * 1e3) for s in line.spans}


def refused(one, match):
    with pytest.raises(GeometryError, match=match):
        chains_of(one)


BAR = strip("bar", [(-60, 0), (60, 0)])


class TestEnds:
    """Strips in a row."""

    def test_two_strips_whose_ends_meet_are_one_chain(self):
        second = strip("second", [(60, 0), (60, 50)])
        (line,) = chains_of(antenna(BAR, second, feed=cut("bar", 30)))
        assert points_mm(line) == pytest.approx(
            np.array([(-60, 0), (-30, 0), (60, 0), (60, 50)]), abs=1e-9
        )
        assert spans_mm(line) == {
            0: pytest.approx((0, 120)),
            1: pytest.approx((120, 170)),
        }
        assert line.feed.vertex == 1
        assert (line.start, line.end, line.closed, line.tees) == (None, None, False, ())

    @pytest.mark.parametrize("backwards", [False, True])
    @pytest.mark.parametrize("first", [False, True])
    def test_whichever_way_strips_are_drawn_and_listed(self, backwards, first):
        path = [(60, 0), (60, 50)]
        second = strip("second", path[::-1] if backwards else path)
        strips = (second, BAR) if first else (BAR, second)
        (line,) = chains_of(antenna(*strips, feed=cut("bar", 30)))
        ends = {tuple(np.round(p, 6)) for p in points_mm(line)[[0, -1]]}
        assert ends == {(-60.0, 0.0), (60.0, 50.0)}
        feed = points_mm(line)[line.feed.vertex]
        assert feed == pytest.approx([-30, 0])
        # Each span runs from its strip's own start to its own end.
        arcs = line.arcs_m * 1e3
        for number, one in enumerate(strips):
            start, end = spans_mm(line)[number]
            for arc, point in ((start, one.path_m[0]), (end, one.path_m[-1])):
                vertex = int(np.argmin(abs(arcs - arc)))
                assert arcs[vertex] == pytest.approx(arc, abs=1e-9)
                assert line.points[vertex] == pytest.approx(point, abs=1e-12)

    def test_ends_a_thousandth_of_a_width_apart_are_joined(self):
        near = strip("second", [(60.003, 0), (60, 50)])
        assert len(chains_of(antenna(BAR, near, feed=cut("bar", 30)))) == 1

    def test_widths_step_where_strips_of_two_widths_meet(self):
        second = strip("second", [(60, 0), (120, 0)], 9.0)
        (line,) = chains_of(antenna(BAR, second, feed=cut("bar", 30)))
        assert line.width_before_m * 1e3 == pytest.approx([4, 4, 4, 9])
        assert line.width_after_m * 1e3 == pytest.approx([4, 4, 9, 9])
        assert line.width_at(np.array([0.12])) == pytest.approx(0.004)
        assert line.width_at(np.array([0.1201])) == pytest.approx(0.009)
        assert (line.narrowest_m, line.widest_m) == pytest.approx((0.004, 0.009))

    def test_width_of_a_taper_at_the_feed(self):
        taper = strip("taper", [(0, 0), (100, 0)], (4.0, 12.0))
        (line,) = chains_of(antenna(taper, feed=cut("taper", 25)))
        assert line.width_before_m * 1e3 == pytest.approx([4, 6, 12])
        assert line.width_after_m * 1e3 == pytest.approx([4, 6, 12])

    def test_of_three_ends_at_a_point_the_straightest_pair_goes_on(self):
        """A bar of two strips and a third that leaves it: the third is the branch."""
        west = strip("west", [(-60, 0), (0, 0)])
        stem = strip("stem", [(0, 0), (0, 40)])
        east = strip("east", [(60, 3), (0, 0)])
        for strips in ((west, stem, east), (stem, east, west), (east, west, stem)):
            host, branch = chains_of(antenna(*strips, feed=cut("west", 20)))
            assert host.length_m == pytest.approx(0.06 + np.hypot(0.06, 0.003))
            ((vertex, other),) = host.tees
            assert (other, points_mm(host)[vertex]) == (1, pytest.approx([0, 0], abs=1e-9))
            joint = branch.start or branch.end
            assert joint == Joint(0, vertex)

    def test_the_two_strips_of_an_end_feed_are_one_chain_across_the_gap(self):
        east, west = strip("east", [(1, 0), (71, 0)]), strip("west", [(-1, 0), (-51, 0)])
        feed = EndFeed("west", "start", "east", "start")
        (line,) = chains_of(antenna(east, west, feed=feed))
        assert points_mm(line) == pytest.approx(np.array([(-51, 0), (0, 0), (71, 0)]), abs=1e-9)
        assert (line.feed.vertex, line.feed.gap_m) == (1, pytest.approx(0.002))
        assert spans_mm(line) == {0: pytest.approx((52, 122)), 1: pytest.approx((50, 0))}

    def test_fed_ends_do_not_merge_with_what_else_lies_there(self):
        """A third strip that starts on a fed end belongs to that strip's side, not across."""
        east, west = strip("east", [(1, 0), (71, 0)]), strip("west", [(-1, 0), (-51, 0)])
        tail = strip("tail", [(71, 0), (71, 30)])
        feed = EndFeed("west", "start", "east", "start")
        (line,) = chains_of(antenna(east, west, tail, feed=feed))
        assert line.length_m * 1e3 == pytest.approx(152)

    def test_a_feed_whose_ends_meet_is_shorted(self):
        east, west = strip("east", [(0, 0), (71, 0)]), strip("west", [(0, 0), (-51, 0)])
        feed = EndFeed("west", "start", "east", "start")
        refused(
            antenna(east, west, feed=feed),
            r"the two strip ends meet at \(0, 0\) mm, so the feed is shorted; leave the gap",
        )

    def test_fed_ends_out_of_line_by_more_than_the_gap(self):
        """Joined at the middle of the gap, both strips would slant."""
        east, west = strip("east", [(1, 0), (71, 0)]), strip("west", [(-1, 5), (-51, 5)])
        feed = EndFeed("west", "start", "east", "start")
        refused(antenna(east, west, feed=feed), "do not face each other across the gap")

    def test_fed_ends_that_do_not_face_each_other(self):
        """West begins beyond the start of east, so both run past each other."""
        east, west = strip("east", [(1, 0), (71, 0)]), strip("west", [(4, 9), (-51, 9)])
        feed = EndFeed("west", "start", "east", "start")
        refused(
            antenna(east, west, feed=feed),
            r"ends at \(4, 9\) mm and \(1, 0\) mm do not face each other across the gap",
        )


class TestBranches:
    """Strips that end on the side of another."""

    @pytest.mark.parametrize("start_y", [0.0, 1.0, 2.0], ids=["centre", "between", "edge"])
    @pytest.mark.parametrize("backwards", [False, True])
    def test_an_end_on_the_metal_is_carried_on_to_the_centre_line(self, start_y, backwards):
        path = [(20, start_y), (20, 40)]
        stem = strip("stem", path[::-1] if backwards else path)
        host, branch = chains_of(antenna(BAR, stem, feed=cut("bar", 30)))
        ((vertex, other),) = host.tees
        assert other == 1
        assert points_mm(host)[vertex] == pytest.approx([20, 0], abs=1e-9)
        assert branch.length_m * 1e3 == pytest.approx(40)
        assert (branch.end if backwards else branch.start) == Joint(0, vertex)
        assert (branch.start if backwards else branch.end) is None
        # The strip itself keeps its length on the chain.
        start, end = spans_mm(branch)[1]
        assert abs(end - start) == pytest.approx(40 - start_y)
        assert max(start, end) == pytest.approx(40 - start_y if backwards else 40)

    def test_an_end_beside_the_metal_is_no_branch(self):
        stem = strip("stem", [(20, 2.1), (20, 40)])
        host, branch = chains_of(antenna(BAR, stem, feed=cut("bar", 30)))
        assert host.tees == ()
        assert (branch.start, branch.end) == (None, None)

    def test_several_branches_keep_their_vertices(self):
        """Attached out of order, and before and after the feed: every joint stays in its place."""
        stems = [strip(f"at {x}", [(x, 0), (x, 30)]) for x in (20, -40, 0, 45)]
        lines = chains_of(antenna(BAR, *stems, feed=cut("bar", 40)))
        host = lines[0]
        assert points_mm(host)[host.feed.vertex] == pytest.approx([-20, 0], abs=1e-9)
        assert {branch for _, branch in host.tees} == {1, 2, 3, 4}
        for vertex, branch in host.tees:
            assert lines[branch].start == Joint(0, vertex)
            assert host.points[vertex] == pytest.approx(lines[branch].points[0], abs=1e-12)

    def test_a_branch_on_a_branch(self):
        stem = strip("stem", [(20, 0), (20, 40)])
        twig = strip("twig", [(20, 25), (50, 25)])
        lines = chains_of(antenna(BAR, stem, twig, feed=cut("bar", 30)))
        assert lines[2].start.chain == 1
        assert points_mm(lines[1])[lines[2].start.vertex] == pytest.approx([20, 25])
        assert lines[1].start.chain == 0

    def test_a_bridge_ends_on_metal_at_both_ends(self):
        other = strip("other", [(-60, 30), (60, 30)])
        bridge = strip("bridge", [(20, 0), (20, 30)])
        lines = chains_of(antenna(BAR, other, bridge, feed=cut("bar", 30)))
        assert (lines[2].start.chain, lines[2].end.chain) == (0, 1)

    @pytest.mark.parametrize("kind", ["line", "grid"])
    @pytest.mark.parametrize("path", [[(40, 60), (40, 0)], [(40, 0), (40, 60)]])
    def test_a_bridge_between_two_legs_of_one_strip(self, path, kind):
        """Drawn from the later leg, its second end moves the joint of its first on by a vertex."""
        bent = strip("bent", [(0, 0), (80, 0), (80, 60), (0, 60)], 2.0)
        one = antenna(bent, strip("bridge", path, 2.0), feed=cut("bent", 110, 0.2))
        host, bridge = chains_of(one)
        for joint, point in zip((bridge.start, bridge.end), path, strict=True):
            assert (joint.vertex, 1) in host.tees
            assert points_mm(host)[joint.vertex] == pytest.approx(point, abs=1e-9)
        one = replace(one, model=kind, frequency=FrequencyBand(0.3e9, 1e9, 11))
        grid = build_wires(one, plan_mesh([one]))
        assert (grid.chains[1].open_start, grid.chains[1].open_end) == (False, False)

    def test_a_bridge_drawn_towards_a_neighbours_leg_keeps_to_its_own_joint(self):
        """With a stub just before it, the joint left behind would be the stub's."""
        bent = strip("bent", [(0, 0), (80, 0), (80, 60), (0, 60)], 2.0)
        stub = strip("stub", [(60, 60), (60, 90)], 2.0)
        bridge = strip("bridge", [(40, 60), (40, 0)], 2.0)
        host, _, third = chains_of(antenna(bent, stub, bridge, feed=cut("bent", 110, 0.2)))
        assert points_mm(host)[third.start.vertex] == pytest.approx([40, 60], abs=1e-9)
        assert points_mm(host)[third.end.vertex] == pytest.approx([40, 0], abs=1e-9)

    def test_two_strips_do_not_end_on_each_other(self):
        """The start of the bar lies on the stem, and that of the stem on the bar."""
        bar, stem = strip("bar", [(0, 0), (60, 0)], 6.0), strip("stem", [(3, 2), (3, 30)], 8.0)
        for strips in ((bar, stem), (stem, bar)):
            refused(antenna(*strips, feed=cut("bar", 30)), "on the very end of another")

    def test_a_branch_that_stays_under_the_metal_it_ends_on(self):
        under = strip("under", [(20, 3), (20, 1)], 2.0)
        wide = strip("wide", [(-60, 0), (60, 0)], 12.0)
        refused(
            antenna(wide, under, feed=cut("wide", 30)),
            r"ends on another at \(20, .\) mm does not reach out from under its metal",
        )

    @pytest.mark.parametrize("y", [0.5, 2.0])
    def test_a_branch_on_the_very_end_of_its_host(self, y):
        stem = strip("stem", [(60, y), (60, 40)])
        refused(
            antenna(BAR, stem, feed=cut("bar", 30)),
            r"a strip ends at \(60, .*\) mm on the very end of another: for a corner let both end",
        )

    @pytest.mark.parametrize("at", [10, 30, 75, 130])
    @pytest.mark.parametrize("place", [0.25, 0.5, 0.75])
    @pytest.mark.parametrize("side", range(4))
    def test_a_loop_never_begins_where_a_branch_ends(self, at, place, side):
        corners = np.array([(0, 0), (60, 0), (60, 40), (0, 40), (0, 0)], dtype=float)
        along = corners[side + 1] - corners[side]
        start = corners[side] + place * along
        outwards = np.array([along[1], -along[0]]) / np.linalg.norm(along)
        if np.linalg.norm(start - [[10, 0], [30, 0], [60, 15], [30, 40]], axis=1).min() < 8:
            return  # on the feed
        loop = strip("loop", corners, 3.0)
        stub = strip("stub", [start, start + 30 * outwards], 3.0)
        host, branch = chains_of(antenna(loop, stub, feed=cut("loop", at)))
        ((vertex, _),) = host.tees
        assert 0 < vertex < len(host.points) - 1
        assert points_mm(host)[vertex] == pytest.approx(start, abs=1e-9)
        assert branch.start == Joint(0, vertex)
        assert min(host.arcs_m[vertex], host.length_m - host.arcs_m[vertex]) > 9e-3

    def test_a_branch_on_a_loop(self):
        loop = strip("loop", [(0, 0), (60, 0), (60, 40), (0, 40), (0, 0)])
        stub = strip("stub", [(60, 20), (90, 20)])
        host, branch = chains_of(antenna(loop, stub, feed=cut("loop", 30)))
        ((vertex, _),) = host.tees
        assert host.closed
        assert points_mm(host)[vertex] == pytest.approx([60, 20], abs=1e-9)
        assert branch.start == Joint(0, vertex)


class TestLoops:
    """Closed chains."""

    SQUARE = ((0, 0), (60, 0), (60, 40), (0, 40))

    @pytest.mark.parametrize("at", [0, 30, 60, 75, 199])
    def test_a_closed_strip(self, at):
        one = strip("loop", [*self.SQUARE, self.SQUARE[0]])
        (line,) = chains_of(antenna(one, feed=cut("loop", at)))
        assert line.closed
        assert line.points[0] == pytest.approx(line.points[-1], abs=1e-12)
        assert line.length_m * 1e3 == pytest.approx(200)
        place = np.interp(at, [0, 60, 100, 160, 200], np.arange(5.0))
        corners = np.array([*self.SQUARE, self.SQUARE[0]], dtype=float)
        low = int(place)
        wanted = corners[low] + (place - low) * (corners[min(low + 1, 4)] - corners[low])
        assert points_mm(line)[line.feed.vertex] == pytest.approx(wanted, abs=1e-9)
        start, end = spans_mm(line)[0]
        assert end - start == pytest.approx(200)
        # Where the strip's own start lies on the chain, once round being 200 mm.
        arcs = line.arcs_m * 1e3
        begin = next(k for k, p in enumerate(points_mm(line)) if np.hypot(*p) < 1e-9)
        off = start - arcs[begin]
        assert off - 200 * round(off / 200) == pytest.approx(0, abs=1e-9)

    def test_the_seam_lies_within_a_leg_away_from_the_feed(self):
        one = strip("loop", [*self.SQUARE, self.SQUARE[0]])
        (line,) = chains_of(antenna(one, feed=cut("loop", 30)))
        seam, feed = points_mm(line)[0], points_mm(line)[line.feed.vertex]
        corners = np.array(self.SQUARE)
        assert np.min(np.linalg.norm(corners - seam, axis=1)) > 5
        assert np.linalg.norm(seam - feed) > 35

    @pytest.mark.parametrize("parts", [2, 3, 4])
    def test_several_strips_that_close(self, parts):
        corners = [*self.SQUARE, self.SQUARE[0]]
        bounds = np.linspace(0, 4, parts + 1).round().astype(int)
        strips = [
            strip(f"part {k}", corners[a : b + 1] if k % 2 else corners[a : b + 1][::-1])
            for k, (a, b) in enumerate(pairwise(bounds))
        ]
        (line,) = chains_of(antenna(*strips, feed=cut("part 0", 15)))
        assert line.closed
        assert line.length_m * 1e3 == pytest.approx(200)
        assert set(spans_mm(line)) == set(range(parts))
        assert sum(abs(b - a) for a, b in spans_mm(line).values()) == pytest.approx(200)

    def test_a_loop_fed_between_its_own_ends(self):
        """Ends 2 mm apart in the middle of the lower side."""
        one = strip("loop", [(31, 0), (60, 0), (60, 40), (0, 40), (0, 0), (29, 0)])
        for start, end in (("start", "end"), ("end", "start")):
            (line,) = chains_of(antenna(one, feed=EndFeed("loop", start, "loop", end)))
            assert line.closed
            assert line.length_m * 1e3 == pytest.approx(200)
            assert points_mm(line)[line.feed.vertex] == pytest.approx([30, 0], abs=1e-9)
            assert line.feed.gap_m == pytest.approx(0.002)
            a, b = spans_mm(line)[0]
            assert abs(b - a) == pytest.approx(198)

    def test_a_loop_fed_between_one_end_and_itself(self):
        one = strip("loop", [(31, 0), (60, 0), (60, 40), (0, 40), (0, 0), (29, 0)])
        refused(
            antenna(one, feed=EndFeed("loop", "end", "loop", "end")),
            "from and to both name the end of strip 'loop'; a source bridges two different ends",
        )


class TestFeedsAndOrder:
    """Where a cut comes to lie; which chain is first."""

    @pytest.mark.parametrize(("at", "vertex"), [(30, 1), (60, 1), (80, 2)])
    def test_a_cut_is_a_vertex(self, at, vertex):
        bent = strip("bent", [(0, 0), (60, 0), (60, 50)])
        (line,) = chains_of(antenna(bent, feed=cut("bent", at)))
        assert line.feed.vertex == vertex
        assert line.arcs_m[vertex] * 1e3 == pytest.approx(at)
        assert len(line.points) == (3 if at == 60 else 4)

    def test_a_cut_on_a_strip_drawn_against_its_chain(self):
        """The second strip, the fed one, is drawn towards the first: at counts from its start."""
        second = strip("second", [(60, 50), (60, 0)])
        (line,) = chains_of(antenna(BAR, second, feed=cut("second", 10)))
        assert points_mm(line)[line.feed.vertex] == pytest.approx([60, 40], abs=1e-9)

    @pytest.mark.parametrize("at", [-1, 121])
    def test_a_cut_beyond_the_strip(self, at):
        refused(antenna(BAR, feed=cut("bar", at)), f"at = {at} mm lies outside strip 'bar'")

    @pytest.mark.parametrize("at", [0, 120])
    def test_a_cut_at_an_end(self, at):
        refused(antenna(BAR, feed=cut("bar", at)), f"at = {at} mm is an end of the metal")

    def test_a_cut_at_an_end_that_goes_on_into_another_strip(self):
        second = strip("second", [(60, 0), (60, 50)])
        (line,) = chains_of(antenna(BAR, second, feed=cut("bar", 120)))
        assert points_mm(line)[line.feed.vertex] == pytest.approx([60, 0], abs=1e-9)

    def test_a_cut_as_wide_as_a_quarter_of_the_strip(self):
        refused(antenna(BAR, feed=cut("bar", 60, 30)), "a cut of 30 mm is too wide for a path of")

    def test_the_fed_chain_is_first_whatever_the_order_of_strips(self):
        stem, rod = strip("stem", [(20, 0), (20, 40)]), strip("rod", [(-50, 20), (0, 20)])
        for strips in ((stem, rod, BAR), (rod, BAR, stem), (BAR, stem, rod)):
            lines = chains_of(antenna(*strips, feed=cut("bar", 30)))
            assert len(lines) == 3
            assert lines[0].feed is not None
            assert all(line.feed is None for line in lines[1:])
            assert lines[0].length_m == pytest.approx(0.12)

    def test_a_fed_branch_is_the_first_chain_and_the_bar_its_host(self):
        stem = strip("stem", [(20, 0), (20, 40)])
        lines = chains_of(antenna(BAR, stem, feed=cut("stem", 15)))
        assert lines[0].length_m == pytest.approx(0.04)
        assert lines[0].start.chain == 1
        assert lines[1].tees == ((lines[0].start.vertex, 0),)

    def test_mirrored_strips_give_mirrored_chains(self):
        stem = strip("stem", [(20, 2), (20, 40), (50, 60)])
        tail = strip("tail", [(60, 0), (90, 30)])
        feed = cut("bar", 30)
        lines = chains_of(antenna(BAR, stem, tail, feed=feed))
        flipped = [
            replace(one, path_m=tuple((x, -y) for x, y in one.path_m)) for one in (BAR, stem, tail)
        ]
        mirrored = chains_of(antenna(*flipped, feed=feed))
        for line, other in zip(lines, mirrored, strict=True):
            assert other.points == pytest.approx(line.points * [1, -1], abs=1e-15)
            assert (other.feed, other.start, other.end) == (line.feed, line.start, line.end)
            assert (other.tees, other.spans) == (line.tees, line.spans)
