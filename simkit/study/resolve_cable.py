"""The feed cable in SI: where it begins, its centre line, and the limits it must keep."""

from __future__ import annotations

import math
from collections.abc import Sequence
from itertools import pairwise

from simkit.errors import Problem
from simkit.study.blueprint import CablePlan
from simkit.study.evaluate import FARTHEST_M, Evaluator
from simkit.study.model import Cable, CutFeed, EndFeed, Placement, Strip, StripEnd, Vector
from simkit.study.paths import SAME_PLACE_M, Point, is_closed, path_length, point_on
from simkit.study.resolve_strips import Strips
from simkit.study.tables import Quantity
from simkit.study.units import as_text

SHORTEST_LEG_M = 1e-6
STRAIGHT_AWAY: Vector = (0.0, 0.0, 1.0)
"""Direction of a cable without one: along the normal of the strips' plane."""


def resolve_cable(
    evaluator: Evaluator, plan: CablePlan, feed: EndFeed | CutFeed, strips: Strips
) -> Cable | None:
    """Return the cable; None after a problem."""
    before = len(evaluator.problems)
    diameter = evaluator.length(plan.diameter)
    length = evaluator.length(plan.length)
    strip = strips.get(plan.strip)
    if strip is None or len(evaluator.problems) > before:
        return None
    steps = _route(evaluator, plan, length) if plan.route else _straight(evaluator, plan, length)
    if diameter is None or len(evaluator.problems) > before or not steps:
        return None
    x, y = feed_end_m(strip, plan.end, feed)
    points = tuple((x + a, y + b, c) for a, b, c in ((0.0, 0.0, 0.0), *steps))
    return Cable(plan.strip, plan.end, points, diameter)


def feed_end_m(strip: Strip, end: StripEnd, feed: EndFeed | CutFeed) -> Point:
    """Place of one end of the feed on the centre line of its strip, metres."""
    if isinstance(feed, EndFeed):
        return strip.path_m[0 if end == "start" else -1]
    at = feed.at_m + (-feed.gap_m if end == "start" else feed.gap_m) / 2
    length = path_length(strip.path_m)
    at = at % length if is_closed(strip.path_m) else min(max(at, 0.0), length)
    return point_on(strip.path_m, at)


def _straight(evaluator: Evaluator, plan: CablePlan, length_m: float | None) -> tuple[Vector, ...]:
    if length_m is None:
        return ()
    way = STRAIGHT_AWAY
    if plan.direction:
        numbers = [evaluator.number(part, lowest=-1e6, highest=1e6) for part in plan.direction]
        x, y, z = (number if number is not None else math.nan for number in numbers)
        if any(math.isnan(number) for number in (x, y, z)):
            return ()
        way = (x, y, z)
    size = math.hypot(*way)
    if size < 1e-9:
        _complain(
            evaluator,
            plan.direction[0],
            "the direction has no length; at least one of "
            "its three numbers must not be 0, as in [0, 0, 1]",
        )
        return ()
    # Adding 0.0 turns -0.0 into 0.0, so that equal cables are equal as text.
    x, y, z = (length_m * part / size + 0.0 for part in way)
    return ((x, y, z),)


def _complain(evaluator: Evaluator, quantity: Quantity, what: str) -> None:
    key = quantity.key.rpartition(".")[0]
    evaluator.problems.append(Problem(what, key, quantity.written, quantity.line))


def _route(evaluator: Evaluator, plan: CablePlan, length_m: float | None) -> tuple[Vector, ...]:
    points: list[Vector] = []
    for point in plan.route:
        numbers = [evaluator.coordinate(part) for part in point]
        if any(number is None for number in numbers):
            return ()
        x, y, z = (float(number) for number in numbers if number is not None)
        points.append((x, y, z))
    legs = [math.dist(a, b) for a, b in pairwise([(0.0, 0.0, 0.0), *points])]
    for number, leg in enumerate(legs):
        if leg < SHORTEST_LEG_M:
            what = (
                "the cable's route must not begin at the end it is joined to; leave that point out"
                if number == 0
                else "two points of the cable's route coincide; drop one"
            )
            _complain(evaluator, plan.route[number][0], what)
            return ()
    if length_m is None or plan.length is None:
        return tuple(points)
    return _cut_to(evaluator, plan.length, points, legs, length_m)


def _cut_to(
    evaluator: Evaluator,
    quantity: Quantity,
    points: Sequence[Vector],
    legs: Sequence[float],
    length_m: float,
) -> tuple[Vector, ...]:
    """The route with its last leg cut or carried on to a length of the whole."""
    rest = length_m - sum(legs[:-1])
    if rest < SHORTEST_LEG_M:
        what = (
            f"the route is {as_text(sum(legs[:-1]), 'mm')} long up to its last leg, which must not "
            "vanish; make the cable longer, or drop the last point of `route`"
        )
        evaluator.report(quantity, what, length_m)
        return ()
    origin = points[-2] if len(points) > 1 else (0.0, 0.0, 0.0)
    part = rest / legs[-1]
    x, y, z = (a + part * (b - a) for a, b in zip(origin, points[-1], strict=True))
    if max(abs(x), abs(y), abs(z)) > FARTHEST_M:
        evaluator.report(quantity, "is too long; check its unit", length_m)
        return ()
    return (*points[:-1], (x, y, z))


def check_cable_heights(
    evaluator: Evaluator, plan: CablePlan, placement: Placement, cable: Cable
) -> None:
    """Report a cable that reaches below the ground or lies in it."""
    (_, _, row), (_, _, lift) = placement.rotation, placement.shift_m
    heights = [row[0] * x + row[1] * y + row[2] * z + lift for x, y, z in cable.points_m]
    advice = "lift the antenna with [placement], or change the cable's length or route"
    if min(heights) < -SAME_PLACE_M:
        depth = as_text(-min(heights), "mm")
        what = f"the cable reaches {depth} below the ground at z = 0; {advice}"
    elif any(max(pair) < SAME_PLACE_M for pair in pairwise(heights)):
        what = f"the cable lies in the ground at z = 0, where it is part of it; {advice}"
    else:
        return
    evaluator.problems.append(Problem(what, "cable", "", plan.line))
