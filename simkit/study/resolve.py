"""From a blueprint and numbers to an antenna in SI, with the limits a study must keep.

The same checks serve the file itself, where they are errors, and single points of a sweep, where
they refuse that case only.
"""

from __future__ import annotations

import math
from collections.abc import Mapping

from simkit.errors import Problem
from simkit.study.blueprint import (
    Blueprint,
    CutFeedPlan,
    EndFeedPlan,
    FrequencyPlan,
    MetalPlan,
)
from simkit.study.evaluate import FARTHEST_M, Evaluator
from simkit.study.model import Antenna, CutFeed, EndFeed, FrequencyBand, Metal, Strip
from simkit.study.paths import SAME_PLACE_M, is_closed, path_length, width_at
from simkit.study.resolve_cable import check_cable_heights, resolve_cable
from simkit.study.resolve_feedline import resolve_feedline
from simkit.study.resolve_strips import Strips, resolve_strips
from simkit.study.resolve_surroundings import (
    check_heights,
    resolve_carrier,
    resolve_ground,
    resolve_placement,
)
from simkit.study.units import FREQUENCY, as_text, usual_unit

HIGHEST_HZ = 1e13
FEWEST_FREQUENCIES, MOST_FREQUENCIES = 2, 100_001
DEFAULT_REFERENCE_OHM = 50.0
DEFAULT_GAP_OF_WIDTH = 0.1
"""A cut without a stated gap is this part of the strip's width."""


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
    evaluator = Evaluator(values)
    antenna = _antenna(evaluator, blueprint)
    return (None if evaluator.problems else antenna), tuple(evaluator.problems)


def _antenna(evaluator: Evaluator, blueprint: Blueprint) -> Antenna | None:
    strips = resolve_strips(evaluator, blueprint.strips)
    metal = _metal(evaluator, blueprint.metal, strips)
    feed = _feed(evaluator, blueprint.feed, strips)
    reference = evaluator.number(blueprint.reference, above=0.0, highest=1e6)
    if blueprint.reference is None:
        reference = DEFAULT_REFERENCE_OHM
    band = _band(evaluator, blueprint.frequency)
    complete = tuple(strip for strip in strips.values() if strip is not None)
    placement = resolve_placement(evaluator, blueprint.placement)
    carrier = ground = None
    if blueprint.carrier is not None:
        thickness = 0.0 if metal is None else metal.thickness_m
        carrier = resolve_carrier(evaluator, blueprint.carrier, thickness)
    if blueprint.ground is not None:
        ground = resolve_ground(evaluator, blueprint.ground)
        if placement is not None:
            check_heights(evaluator, blueprint.ground, placement, complete)
    cable = None
    if blueprint.cable is not None and feed is not None:
        cable = resolve_cable(evaluator, blueprint.cable, feed, strips)
        if cable is not None and ground is not None and placement is not None:
            check_cable_heights(evaluator, blueprint.cable, placement, cable)
    feedline = resolve_feedline(evaluator, blueprint.feedline, metal)
    if (
        evaluator.problems
        or not strips
        or metal is None
        or feed is None
        or reference is None
        or band is None
        or placement is None
    ):
        return None
    return Antenna(
        complete,
        metal,
        feed,
        reference,
        band,
        blueprint.model,
        placement,
        carrier,
        ground,
        blueprint.converge,
        feedline,
        cable,
    )


def _metal(evaluator: Evaluator, plan: MetalPlan, strips: Strips) -> Metal | None:
    conductivity = plan.material_conductivity
    real = conductivity is not None or plan.conductivity is not None
    if plan.conductivity is not None:
        conductivity = evaluator.number(plan.conductivity, above=0.0, highest=1e9)
    if plan.thickness is None:
        return Metal(plan.material, conductivity, 0.0)
    above = 0.0 if real else None
    thickness = evaluator.number(plan.thickness, above=above, lowest=0.0, highest=FARTHEST_M)
    if thickness is None:
        return None
    widths = [min(strip.widths) for strip in strips.values() if strip is not None]
    if widths and thickness > min(widths) / 2:
        narrow = as_text(min(widths), "mm")
        what = (
            f"the metal must be thinner than half the narrowest strip ({narrow} wide), "
            "because the rules are for flat strip; widen the strip or thin the metal"
        )
        evaluator.report(plan.thickness, what, thickness)
        return None
    return Metal(plan.material, conductivity, thickness)


def _feed(
    evaluator: Evaluator, plan: EndFeedPlan | CutFeedPlan | None, strips: Strips
) -> EndFeed | CutFeed | None:
    if plan is None:
        return None
    if isinstance(plan, CutFeedPlan):
        return _cut(evaluator, plan, strips.get(plan.strip))
    ends = (
        ("from", plan.from_strip, plan.from_end, plan.from_line),
        ("to", plan.to_strip, plan.to_end, plan.to_line),
    )
    points = []
    for key, name, end, line in ends:
        strip = strips.get(name)
        if strip is None:
            return None
        if is_closed(strip.path_m):
            what = f"`{name}` is a closed loop and has no ends; feed it by strip and at"
            evaluator.problems.append(Problem(what, f"feed.{key}", f'"{name}.{end}"', line))
            return None
        points.append(strip.path_m[0 if end == "start" else -1])
    if math.dist(*points) < SAME_PLACE_M:
        what = "the two ends touch, so there is no gap to feed; move them apart"
        value = f'"{plan.to_strip}.{plan.to_end}"'
        evaluator.problems.append(Problem(what, "feed.to", value, plan.to_line))
        return None
    return EndFeed(plan.from_strip, plan.from_end, plan.to_strip, plan.to_end)


def _cut(evaluator: Evaluator, plan: CutFeedPlan, strip: Strip | None) -> CutFeed | None:
    at = evaluator.number(plan.at, lowest=0.0)
    gap = evaluator.number(plan.gap, above=0.0)
    if strip is None or at is None or plan.at is None:
        return None
    if plan.gap is None and gap is None:
        gap = DEFAULT_GAP_OF_WIDTH * width_at(strip.path_m, strip.widths, at)
    if gap is None:
        return None
    length = path_length(strip.path_m)
    margin = 0.0 if is_closed(strip.path_m) else gap / 2
    if not margin <= at <= length - margin:
        what = (
            f"the cut of {as_text(gap, 'mm')} must lie on the strip, which is "
            f"{as_text(length, 'mm')} long; choose a place from {as_text(margin, 'mm')} to "
            f"{as_text(length - margin, 'mm')}"
        )
        evaluator.report(plan.at, what, at)
        return None
    return CutFeed(plan.strip, at, gap)


def _band(evaluator: Evaluator, plan: FrequencyPlan | None) -> FrequencyBand | None:
    if plan is None:
        return None
    start = evaluator.number(plan.start, above=0.0, highest=HIGHEST_HZ)
    stop = evaluator.number(plan.stop, above=0.0, highest=HIGHEST_HZ)
    if plan.stop is not None and start is not None and stop is not None and not stop > start:
        what = f"must be above start, {as_text(start, usual_unit(FREQUENCY))}"
        evaluator.report(plan.stop, what, stop)
    points = evaluator.whole(plan.points, FEWEST_FREQUENCIES, MOST_FREQUENCIES)
    if start is None or stop is None or points is None:
        return None
    return FrequencyBand(start, stop, points)
