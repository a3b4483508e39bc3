"""From a blueprint and numbers to an antenna in SI, with the limits a study must keep.

The same checks serve the file itself, where they are errors, and single points of a sweep, where
they refuse that case only.
"""

from __future__ import annotations

import math
from collections.abc import Mapping

from simkit.errors import Problem
from simkit.study.blueprint import (
    Axis,
    Blueprint,
    CutFeedPlan,
    EndFeedPlan,
    FrequencyPlan,
    MetalPlan,
    MirrorPlan,
    PathPlan,
)
from simkit.study.expression import ExpressionError
from simkit.study.model import Antenna, CutFeed, EndFeed, FrequencyBand, Metal, Strip
from simkit.study.tables import Quantity
from simkit.study.units import FREQUENCY, PURE, as_text, usual_unit

SAME_PLACE_M = 1e-9
"""Points nearer to each other than this are the same point."""

FARTHEST_M = 1e5
"""Largest coordinate; beyond it a unit is wrong."""

HIGHEST_HZ = 1e13
FEWEST_FREQUENCIES, MOST_FREQUENCIES = 2, 100_001
DEFAULT_REFERENCE_OHM = 50.0
DEFAULT_GAP_OF_WIDTH = 0.1
"""A cut without a stated gap is this part of the strip's width."""

Point = tuple[float, float]
PathPoints = tuple[Point, ...]


def resolve(
    blueprint: Blueprint, values: Mapping[str, float]
) -> tuple[Antenna | None, tuple[Problem, ...]]:
    """Evaluate a blueprint.

    Parameters
    ----------
    blueprint : Blueprint
    values : mapping of str to float
        Names of [values], and dotted keys that override the file; all in SI.

    Returns
    -------
    antenna : Antenna or None
        None if there is a problem.
    problems : tuple of Problem
    """
    resolver = _Resolver(values)
    antenna = resolver.antenna(blueprint)
    return (None if resolver.problems else antenna), tuple(resolver.problems)


class _Resolver:
    def __init__(self, values: Mapping[str, float]) -> None:
        self.values = values
        self.problems: list[Problem] = []

    def antenna(self, blueprint: Blueprint) -> Antenna | None:
        strips = self.strips(blueprint.strips)
        metal = self.metal(blueprint.metal, strips)
        feed = self.feed(blueprint.feed, strips)
        reference = self.number(blueprint.reference, above=0.0, highest=1e6)
        if blueprint.reference is None:
            reference = DEFAULT_REFERENCE_OHM
        band = self.band(blueprint.frequency)
        if (
            self.problems
            or not strips
            or metal is None
            or feed is None
            or band is None
            or reference is None
        ):
            return None
        complete = tuple(strip for strip in strips.values() if strip is not None)
        return Antenna(complete, metal, feed, reference, band, blueprint.model)

    def report(self, quantity: Quantity, what: str, number: float | None = None) -> None:
        written = quantity.written
        literal = len(quantity.expression.steps) == 1 and not quantity.expression.names
        if number is not None and (quantity.key in self.values or not literal):
            written += f" (here {_shown(number, quantity)})"
        self.problems.append(Problem(what, quantity.key, written, quantity.line))

    def number(
        self,
        quantity: Quantity | None,
        *,
        above: float | None = None,
        lowest: float = -math.inf,
        highest: float = math.inf,
    ) -> float | None:
        """Evaluate a quantity within limits; None without one or after a problem."""
        if quantity is None:
            return None
        try:
            number = quantity.evaluate(self.values)
        except ExpressionError as error:
            self.report(quantity, str(error))
            return None
        if above is not None and not number > above:
            limit = f"above {_shown(above, quantity)}; a positive number is needed"
        elif number < lowest:
            limit = f"at least {_shown(lowest, quantity)}; raise it"
        elif number > highest:
            remedy = "lower it" if quantity.dimension == PURE else "check its unit"
            limit = f"at most {_shown(highest, quantity)}; {remedy}"
        else:
            return number
        self.report(quantity, f"must be {limit}", number)
        return None

    def strips(self, plans: tuple[PathPlan | MirrorPlan, ...]) -> dict[str, Strip | None]:
        """Return strips in the order of the file; None stands for one with a problem."""
        found: dict[str, Strip | None] = {}
        for plan in plans:
            if isinstance(plan, PathPlan):
                found[plan.name] = self.strip(plan)
        mirrors = [plan for plan in plans if isinstance(plan, MirrorPlan)]
        while mirrors:
            plan = mirrors.pop(0)
            if plan.of in found:
                found[plan.name] = _mirrored(found[plan.of], plan.name, plan.axis)
            else:
                mirrors.append(plan)
        ordered = {plan.name: found[plan.name] for plan in plans}
        self.check_twins(plans, ordered)
        return ordered

    def strip(self, plan: PathPlan) -> Strip | None:
        width = self.number(plan.width, above=0.0, highest=FARTHEST_M)
        points: list[Point] = []
        for x, y in plan.path:
            x_m = self.number(x, lowest=-FARTHEST_M, highest=FARTHEST_M)
            y_m = self.number(y, lowest=-FARTHEST_M, highest=FARTHEST_M)
            if x_m is not None and y_m is not None:
                points.append((x_m, y_m))
        if not points or len(points) < len(plan.path):
            return None
        path = self.path(plan, points)
        return None if width is None or path is None else Strip(plan.name, path, width)

    def path(self, plan: PathPlan, points: list[Point]) -> PathPoints | None:
        for i in range(1, len(points)):
            if math.dist(points[i - 1], points[i]) < SAME_PLACE_M:
                x, y = plan.path[i]
                what = f"point {i + 1} of the path repeats point {i}; move it or leave it out"
                self.problems.append(
                    Problem(what, x.key.removesuffix(".x"), f"[{x.written}, {y.written}]", x.line)
                )
                return None
        if math.dist(points[0], points[-1]) < SAME_PLACE_M:
            if len(points) < 4:
                what = "the path goes out and back on itself; a loop needs three points or more"
                x = plan.path[-1][0]
                self.problems.append(Problem(what, x.key.removesuffix(".x"), "", x.line))
                return None
            points[-1] = points[0]
        return tuple(points)

    def check_twins(
        self, plans: tuple[PathPlan | MirrorPlan, ...], strips: dict[str, Strip | None]
    ) -> None:
        """Report strips that lie exactly on each other, as the mirror of one on the axis does."""
        seen: dict[PathPoints, str] = {}
        for plan in plans:
            strip = strips[plan.name]
            if strip is None:
                continue
            twin = seen.get(strip.path_m) or seen.get(strip.path_m[::-1])
            seen[strip.path_m] = strip.name
            if twin is not None:
                what = f"lies exactly on strip `{twin}`; move it or leave it out"
                line = plan.path[0][0].line if isinstance(plan, PathPlan) else plan.line
                self.problems.append(Problem(what, f"strip.{plan.name}", "", line))

    def metal(self, plan: MetalPlan, strips: Mapping[str, Strip | None]) -> Metal | None:
        conductivity = plan.material_conductivity
        real = conductivity is not None or plan.conductivity is not None
        if plan.conductivity is not None:
            conductivity = self.number(plan.conductivity, above=0.0, highest=1e9)
        if plan.thickness is None:
            return Metal(plan.material, conductivity, 0.0)
        limit = {"above": 0.0} if real else {"lowest": 0.0}
        thickness = self.number(plan.thickness, highest=FARTHEST_M, **limit)
        if thickness is None:
            return None
        widths = [strip.width_m for strip in strips.values() if strip is not None]
        if widths and thickness > min(widths) / 2:
            narrow = as_text(min(widths), "mm")
            what = (
                f"the metal must be thinner than half the narrowest strip ({narrow} wide), "
                "because the rules are for flat strip; widen the strip or thin the metal"
            )
            self.report(plan.thickness, what, thickness)
            return None
        return Metal(plan.material, conductivity, thickness)

    def feed(
        self, plan: EndFeedPlan | CutFeedPlan | None, strips: Mapping[str, Strip | None]
    ) -> EndFeed | CutFeed | None:
        if plan is None:
            return None
        if isinstance(plan, CutFeedPlan):
            return self.cut(plan, strips.get(plan.strip))
        ends = (
            ("from", plan.from_strip, plan.from_end, plan.from_line),
            ("to", plan.to_strip, plan.to_end, plan.to_line),
        )
        points = []
        for key, name, end, line in ends:
            strip = strips.get(name)
            if strip is None:
                return None
            if strip.path_m[0] == strip.path_m[-1]:
                what = f"`{name}` is a closed loop and has no ends; feed it by strip and at"
                self.problems.append(Problem(what, f"feed.{key}", f'"{name}.{end}"', line))
                return None
            points.append(strip.path_m[0 if end == "start" else -1])
        if math.dist(*points) < SAME_PLACE_M:
            what = "the two ends touch, so there is no gap to feed; move them apart"
            value = f'"{plan.to_strip}.{plan.to_end}"'
            self.problems.append(Problem(what, "feed.to", value, plan.to_line))
            return None
        return EndFeed(plan.from_strip, plan.from_end, plan.to_strip, plan.to_end)

    def cut(self, plan: CutFeedPlan, strip: Strip | None) -> CutFeed | None:
        at = self.number(plan.at, lowest=0.0)
        gap = self.number(plan.gap, above=0.0)
        if strip is None or at is None or plan.at is None:
            return None
        if plan.gap is None and gap is None:
            gap = DEFAULT_GAP_OF_WIDTH * strip.width_m
        if gap is None:
            return None
        length = path_length(strip.path_m)
        closed = strip.path_m[0] == strip.path_m[-1]
        margin = 0.0 if closed else gap / 2
        if not margin <= at <= length - margin:
            what = (
                f"the cut of {as_text(gap, 'mm')} must lie on the strip, which is "
                f"{as_text(length, 'mm')} long; choose a place from {as_text(margin, 'mm')} to "
                f"{as_text(length - margin, 'mm')}"
            )
            self.report(plan.at, what, at)
            return None
        return CutFeed(plan.strip, at, gap)

    def band(self, plan: FrequencyPlan | None) -> FrequencyBand | None:
        if plan is None:
            return None
        start = self.number(plan.start, above=0.0, highest=HIGHEST_HZ)
        stop = self.number(plan.stop, above=0.0, highest=HIGHEST_HZ)
        if plan.stop is not None and start is not None and stop is not None and not stop > start:
            what = f"must be above start, {as_text(start, usual_unit(FREQUENCY))}"
            self.report(plan.stop, what, stop)
        points = self.number(plan.points, lowest=FEWEST_FREQUENCIES, highest=MOST_FREQUENCIES)
        if plan.points is not None and points is not None and points != round(points):
            self.report(plan.points, "must be a whole number", points)
        if start is None or stop is None or points is None:
            return None
        return FrequencyBand(start, stop, round(points))


def _shown(number: float, quantity: Quantity) -> str:
    return as_text(number, usual_unit(quantity.dimension))


def path_length(path_m: PathPoints) -> float:
    """Return the length of a path in metres."""
    return sum(math.dist(path_m[i - 1], path_m[i]) for i in range(1, len(path_m)))


def _mirrored(strip: Strip | None, name: str, axis: Axis) -> Strip | None:
    if strip is None:
        return None
    if axis == "y":
        path = tuple((0.0 - x, y) for x, y in strip.path_m)
    else:
        path = tuple((x, 0.0 - y) for x, y in strip.path_m)
    return Strip(name, path, strip.width_m)
