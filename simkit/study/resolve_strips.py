"""From plans of strips to strips in SI: paths, widths, turns, shifts and mirrors."""

from __future__ import annotations

import math
from collections.abc import Mapping
from itertools import pairwise

from simkit.errors import Problem
from simkit.study.blueprint import (
    ArcPlan,
    CurvePlan,
    MirrorPlan,
    MovePlan,
    PathPlan,
    PolylinePlan,
)
from simkit.study.evaluate import FARTHEST_M, Evaluator, broken_limit
from simkit.study.expression import ExpressionError
from simkit.study.model import Strip
from simkit.study.paths import (
    SAME_PLACE_M,
    PathPoints,
    Point,
    arc,
    is_closed,
    mirrored,
    rotated,
    shifted,
    smoothed,
    spread_evenly,
)
from simkit.study.strip_schema import MOST_POINTS, PARAMETER
from simkit.study.tables import Quantity
from simkit.study.units import as_text

StripPlan = PathPlan | MirrorPlan
Strips = dict[str, Strip | None]

DEFAULT_POINTS = 60
"""Points of a curve or arc that does not say how many."""

WIDEST_STEP_RAD = math.radians(15)
"""Angle between neighbouring points of an arc; its polygon is then 0.3 % too short at most."""

Parameters = tuple[float, ...]


def resolve_strips(evaluator: Evaluator, plans: tuple[StripPlan, ...]) -> Strips:
    """Return strips in the order of the file; None stands for one with a problem."""
    found: Strips = {}
    for plan in plans:
        if isinstance(plan, PathPlan):
            found[plan.name] = _strip(evaluator, plan)
    mirrors = [plan for plan in plans if isinstance(plan, MirrorPlan)]
    while mirrors:
        plan = mirrors.pop(0)
        if plan.of in found:
            found[plan.name] = _mirror(evaluator, plan, found[plan.of])
        else:
            mirrors.append(plan)
    ordered = {plan.name: found[plan.name] for plan in plans}
    _check_twins(evaluator, plans, ordered)
    return ordered


def _strip(evaluator: Evaluator, plan: PathPlan) -> Strip | None:
    """Report all that is wrong with one strip, or return it."""
    points, parameters = _points(evaluator, plan)
    widths = _widths(evaluator, plan, parameters)
    drawn = None if points is None else _whole_path(evaluator, plan, points)
    turn = _turn(evaluator, plan.move)
    if drawn is None or widths is None or turn is None:
        return None
    smooth = isinstance(plan.path, PolylinePlan) and plan.path.smooth
    if len(widths) > 1 and not isinstance(plan.path, PolylinePlan):
        widths = spread_evenly(widths, len(drawn))
    if len(widths) > 1 and is_closed(drawn) and not math.isclose(widths[0], widths[-1]):
        what = (
            f"a closed loop must end as wide as it starts, {as_text(widths[0], 'mm')}; "
            "make both widths equal"
        )
        evaluator.report(plan.width[-1], what, widths[-1])
        return None
    if max(widths) == min(widths):
        widths = widths[:1]
    if smooth:
        drawn, tapered = smoothed(drawn, widths if len(widths) > 1 else ())
        widths = tapered or widths
    path = _moved(drawn, *turn)
    return Strip(plan.name, path, max(widths), widths if len(widths) > 1 else ())


def _mirror(evaluator: Evaluator, plan: MirrorPlan, strip: Strip | None) -> Strip | None:
    turn = _turn(evaluator, plan.move)
    if strip is None or turn is None:
        return None
    path = _moved(mirrored(strip.path_m, plan.axis), *turn)
    return Strip(plan.name, path, strip.width_m, strip.widths_m)


def _turn(evaluator: Evaluator, move: MovePlan) -> tuple[float, Point] | None:
    angle: float | None = 0.0
    if move.rotate is not None:
        angle = evaluator.angle(move.rotate)
    if move.shift is None:
        return None if angle is None else (angle, (0.0, 0.0))
    x_m, y_m = (evaluator.coordinate(place) for place in move.shift)
    return None if angle is None or x_m is None or y_m is None else (angle, (x_m, y_m))


def _moved(path_m: PathPoints, angle_rad: float, shift_m: Point) -> PathPoints:
    if angle_rad:
        path_m = rotated(path_m, angle_rad)
    return shifted(path_m, *shift_m) if any(shift_m) else path_m


# -- paths -----------------------------------------------------------------------------------------


def _points(evaluator: Evaluator, plan: PathPlan) -> tuple[PathPoints | None, Parameters]:
    """Return the points as given, and for a curve the parameter of each."""
    if isinstance(plan.path, PolylinePlan):
        points = [(evaluator.coordinate(x), evaluator.coordinate(y)) for x, y in plan.path.points]
        complete = tuple((x, y) for x, y in points if x is not None and y is not None)
        return (complete if len(complete) == len(points) else None), ()
    if isinstance(plan.path, CurvePlan):
        return _curve(evaluator, plan.path)
    return (None if plan.path is None else _arc(evaluator, plan.path)), ()


def _count(evaluator: Evaluator, points: Quantity | None) -> int | None:
    return DEFAULT_POINTS if points is None else evaluator.whole(points, 2, MOST_POINTS)


def _curve(evaluator: Evaluator, plan: CurvePlan) -> tuple[PathPoints | None, Parameters]:
    first: float | None = 0.0
    last: float | None = 1.0
    if plan.first is not None and plan.last is not None:
        first, last = evaluator.number(plan.first), evaluator.number(plan.last)
    count = _count(evaluator, plan.points)
    if first is None or last is None or count is None:
        return None, ()
    if first == last and plan.last is not None:
        evaluator.report(plan.last, "t must end at another number than it begins with", last)
        return None, ()
    step = (last - first) / (count - 1)
    parameters = (*(first + step * i for i in range(count - 1)), last)
    x = _along(evaluator, plan.x, parameters, -FARTHEST_M)
    y = _along(evaluator, plan.y, parameters, -FARTHEST_M)
    if x is None or y is None:
        return None, parameters
    return tuple(zip(x, y, strict=True)), parameters


def _along(
    evaluator: Evaluator,
    quantity: Quantity,
    parameters: Parameters,
    lowest: float,
    above: float | None = None,
) -> tuple[float, ...] | None:
    """Evaluate a length along a curve; the first value with a problem is reported."""
    values: dict[str, float] = dict(evaluator.values)
    numbers = []
    for t in parameters:
        values[PARAMETER] = t
        try:
            number = quantity.expression.evaluate(values)
        except ExpressionError as error:
            evaluator.report(quantity, f"{error} (at t = {t:.6g})")
            return None
        limit = broken_limit(number, quantity, above, lowest, FARTHEST_M)
        if limit:
            evaluator.report(quantity, f"{limit} (at t = {t:.6g})", number)
            return None
        numbers.append(number)
    return tuple(numbers)


def _arc(evaluator: Evaluator, plan: ArcPlan) -> PathPoints | None:
    x_m, y_m = (evaluator.coordinate(place) for place in plan.centre)
    radius = evaluator.length(plan.radius)
    start = evaluator.angle(plan.start, turns=2)
    stop = evaluator.angle(plan.stop, turns=2)
    count = _count(evaluator, plan.points)
    if start is None or stop is None or count is None:
        return None
    angle = abs(stop - start)
    if angle < 1e-9 or angle > 2 * math.pi * (1 + 1e-12):
        what = (
            f"the arc spans {as_text(angle, 'deg')}; it must span more than 0 deg and at most "
            "360 deg, a full circle"
        )
        evaluator.report(plan.stop, what, stop)
        return None
    fewest = math.ceil(angle / WIDEST_STEP_RAD * (1 - 1e-12)) + 1
    if count < fewest and plan.points is not None:
        what = f"too few for an arc of {as_text(angle, 'deg')}; give at least {fewest}"
        evaluator.report(plan.points, what, count)
        return None
    if radius is None or x_m is None or y_m is None:
        return None
    return arc((x_m, y_m), radius, start, stop, count)


def _whole_path(evaluator: Evaluator, plan: PathPlan, points: PathPoints) -> PathPoints | None:
    """Report points that repeat; let a path that closes do so exactly."""
    for i, (a, b) in enumerate(pairwise(points)):
        if math.dist(a, b) < SAME_PLACE_M:
            advice = "move it or leave it out"
            if not isinstance(plan.path, PolylinePlan):
                advice = "let the curve move on, or give fewer points"
            what = f"point {i + 2} of the path repeats point {i + 1}; {advice}"
            _report_point(evaluator, plan, what, i + 1)
            return None
    if not is_closed(points):
        return points
    if len(points) < 4:
        what = "the path goes out and back on itself; a loop needs three points or more"
        _report_point(evaluator, plan, what, len(points) - 1)
        return None
    return (*points[:-1], points[0])


def _report_point(evaluator: Evaluator, plan: PathPlan, what: str, index: int) -> None:
    if isinstance(plan.path, PolylinePlan):
        x, y = plan.path.points[index]
        written = f"[{x.written}, {y.written}]"
        problem = Problem(what, x.key.removesuffix(".x"), written, x.line)
    else:
        kind = "curve" if isinstance(plan.path, CurvePlan) else "arc"
        problem = Problem(what, f"strip.{plan.name}.{kind}", "", plan.line)
    evaluator.problems.append(problem)


# -- widths ----------------------------------------------------------------------------------------


def _widths(
    evaluator: Evaluator, plan: PathPlan, parameters: Parameters
) -> tuple[float, ...] | None:
    if not plan.width:
        return None
    if plan.width_along:
        return _along(evaluator, plan.width[0], parameters, 0.0, 0.0) if parameters else None
    widths = [evaluator.length(width) for width in plan.width]
    complete = tuple(width for width in widths if width is not None)
    return complete if len(complete) == len(widths) else None


# -- strips among each other -----------------------------------------------------------------------


def _check_twins(
    evaluator: Evaluator, plans: tuple[StripPlan, ...], strips: Mapping[str, Strip | None]
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
            evaluator.problems.append(Problem(what, f"strip.{plan.name}", "", plan.line))
