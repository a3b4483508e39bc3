"""The feed line in SI, with the limits its lines and parts must keep."""

from __future__ import annotations

import math

from simkit.errors import Problem
from simkit.study.blueprint import FeedLinePlan, LinePlan
from simkit.study.evaluate import FARTHEST_M, Evaluator
from simkit.study.model import (
    CoaxialLine,
    DataSheetLine,
    ExtensionItem,
    FeedLineItem,
    FeedLineMake,
    LineItem,
    Metal,
    PartItem,
    PartKind,
    StripLine,
    StripLineKind,
    StubItem,
    TappedItem,
    TransformerItem,
)
from simkit.study.resolve_surroundings import HIGHEST_PERMITTIVITY
from simkit.study.tables import Quantity
from simkit.study.units import as_text

WIDTH_RATIOS = (0.01, 100.0)
"""Width over distance within which the lines of strips are good; beyond it they are not checked."""

LONGEST_DELAY_S = 1e-6
"""200 m of cable; beyond it a unit is wrong."""

LIGHT_M_PER_S = 299_792_458.0
HIGHEST_OHM = 1e6
DEFAULT_NOMINAL_OHM = 50.0

PARTS: tuple[PartKind, ...] = ("resistor", "inductor", "capacitor")

_DISTANCES: dict[str, tuple[StripLineKind, str, float]] = {
    "two-strips": ("two-strips", "separation", 1.0),
    # A strip over a plate is half of two strips face to face.
    "strip-over-plate": ("strip-over-plate", "height", 2.0),
    "coplanar-strips": ("coplanar-strips", "gap", 1.0),
}

Resolved = dict[str, FeedLineMake | None]


def resolve_feedline(
    evaluator: Evaluator, plans: tuple[FeedLinePlan, ...], metal: Metal | None
) -> tuple[FeedLineItem, ...]:
    """Return the items of the feed line; after a problem some are missing.

    Parameters
    ----------
    evaluator : Evaluator
    plans : tuple of FeedLinePlan
    metal : Metal or None
        Of the study: strip lines are made of it unless they say otherwise.
    """
    lines: Resolved = {}
    for plan in plans:
        if plan.line is not None and plan.line.item not in lines:
            lines[plan.line.item] = _line(evaluator, plan.line, metal)
    items = (_item(evaluator, plan, lines) for plan in plans)
    return tuple(item for item in items if item is not None)


def _item(evaluator: Evaluator, plan: FeedLinePlan, lines: Resolved) -> FeedLineItem | None:
    if plan.kind in ("line", "stub", "tapped-line"):
        line = None if plan.line is None else lines[plan.line.item]
        return _of_line(evaluator, plan, line)
    if plan.kind == "transformer":
        return _transformer(evaluator, plan)
    if plan.kind == "port-extension":
        return _extension(evaluator, plan)
    return _part(evaluator, plan)


def _of_line(
    evaluator: Evaluator, plan: FeedLinePlan, line: FeedLineMake | None
) -> FeedLineItem | None:
    if plan.kind == "tapped-line":
        lengths = [_length(evaluator, plan.size(key)) for key in ("from_antenna", "beyond")]
        if line is None or lengths[0] is None or lengths[1] is None:
            return None
        return TappedItem(plan.name, line, lengths[0], lengths[1], plan.end)
    length = _length(evaluator, plan.size("length"))
    if line is None or length is None:
        return None
    if plan.kind == "line":
        return LineItem(plan.name, line, length)
    return StubItem(plan.name, line, length, plan.end, plan.connection)


def _length(evaluator: Evaluator, quantity: Quantity | None) -> float | None:
    why = "a line is 0 mm long or more, and below 100 km; check sign and unit"
    return evaluator.number(quantity, lowest=0.0, highest=FARTHEST_M, why=why)


def _part(evaluator: Evaluator, plan: FeedLinePlan) -> PartItem | None:
    value = evaluator.number(plan.size("value"), above=0.0, highest=1e12)
    quality = evaluator.number(plan.size("q"), above=0.0)
    if plan.size("q") is None:
        quality = math.inf
    if value is None or quality is None:
        return None
    part = next(kind for kind in PARTS if kind == plan.kind)
    return PartItem(plan.name, part, value, plan.connection, quality)


def _transformer(evaluator: Evaluator, plan: FeedLinePlan) -> TransformerItem | None:
    ratio = evaluator.number(plan.size("ratio"), above=0.0, highest=1e6)
    loss = _or(evaluator, plan.size("loss"), 0.0, lowest=0.0, highest=100.0)
    nominal = _or(evaluator, plan.size("nominal"), DEFAULT_NOMINAL_OHM, 0.0, highest=HIGHEST_OHM)
    if ratio is None or loss is None or nominal is None:
        return None
    return TransformerItem(plan.name, ratio, loss, nominal)


def _extension(evaluator: Evaluator, plan: FeedLinePlan) -> ExtensionItem | None:
    if plan.size("delay") is not None:
        delay = evaluator.number(
            plan.size("delay"),
            lowest=-LONGEST_DELAY_S,
            highest=LONGEST_DELAY_S,
            why="that is 200 m of cable; check its unit",
        )
        return None if delay is None else ExtensionItem(plan.name, delay)
    length = evaluator.number(plan.size("length"), lowest=0.0, highest=300.0)
    permittivity = _permittivity(evaluator, plan.size("permittivity"))
    if length is None or permittivity is None:
        return None
    return ExtensionItem(plan.name, length * math.sqrt(permittivity) / LIGHT_M_PER_S)


def _or(
    evaluator: Evaluator,
    quantity: Quantity | None,
    default: float,
    above: float | None = None,
    *,
    lowest: float = -math.inf,
    highest: float = math.inf,
) -> float | None:
    """Evaluate a quantity that may be left out; None after a problem only."""
    if quantity is None:
        return default
    return evaluator.number(quantity, above=above, lowest=lowest, highest=highest)


def _permittivity(evaluator: Evaluator, quantity: Quantity | None) -> float | None:
    return _or(evaluator, quantity, 1.0, lowest=1.0, highest=HIGHEST_PERMITTIVITY)


def _loss_tangent(evaluator: Evaluator, quantity: Quantity | None) -> float | None:
    return _or(evaluator, quantity, 0.0, lowest=0.0, highest=1.0)


# -- lines -----------------------------------------------------------------------------------------


def _line(evaluator: Evaluator, plan: LinePlan, metal: Metal | None) -> FeedLineMake | None:
    if plan.kind == "uniform":
        return _data_sheet(evaluator, plan)
    if plan.kind == "coaxial":
        return _coaxial(evaluator, plan)
    return _strips(evaluator, plan, metal)


def _data_sheet(evaluator: Evaluator, plan: LinePlan) -> DataSheetLine | None:
    impedance = evaluator.number(plan.size("impedance"), above=0.0, highest=HIGHEST_OHM)
    why = "it is the speed on the line over that of light: 0.66 to 0.85 for most cables"
    factor: float | None = 1.0
    if plan.size("velocity_factor") is not None:
        factor = evaluator.number(plan.size("velocity_factor"), above=0.0, highest=1.0, why=why)
    attenuation = _or(evaluator, plan.size("attenuation"), 0.0, lowest=0.0, highest=1e4)
    at = _or(evaluator, plan.size("at"), 1e9, 0.0)
    loss = _loss_tangent(evaluator, plan.size("loss_tangent"))
    if impedance is None or factor is None or attenuation is None or at is None or loss is None:
        return None
    return DataSheetLine(impedance, factor, attenuation, at, loss)


def _coaxial(evaluator: Evaluator, plan: LinePlan) -> CoaxialLine | None:
    inner = evaluator.length(plan.size("inner"))
    outer = evaluator.length(plan.size("outer"))
    permittivity = _permittivity(evaluator, plan.size("permittivity"))
    loss = _loss_tangent(evaluator, plan.size("loss_tangent"))
    conductivity = _conductivity(evaluator, plan)
    size = plan.size("inner")
    if size is not None and inner is not None and outer is not None and inner >= outer:
        what = (
            f"an inner conductor this thick does not fit in an outer one of {as_text(outer, 'mm')};"
            " give the diameters of the inner conductor and of the outer one inside"
        )
        evaluator.report(size, what, inner)
        return None
    if inner is None or outer is None or permittivity is None or loss is None:
        return None
    return CoaxialLine(inner, outer, permittivity, loss, conductivity)


def _conductivity(evaluator: Evaluator, plan: LinePlan) -> float | None:
    given = evaluator.number(plan.size("conductivity"), above=0.0, highest=1e9)
    return given if plan.material_conductivity is None else plan.material_conductivity


def _strips(evaluator: Evaluator, plan: LinePlan, metal: Metal | None) -> StripLine | None:
    kind, key, per_height = _DISTANCES[plan.kind]
    width, distance = evaluator.length(plan.size("width")), evaluator.length(plan.size(key))
    other = evaluator.length(plan.size("other_width"))
    sheet = _or(evaluator, plan.size("sheet"), 0.0, 0.0, highest=FARTHEST_M)
    permittivity = _permittivity(evaluator, plan.size("permittivity"))
    loss = _loss_tangent(evaluator, plan.size("loss_tangent"))
    overhang = evaluator.number(plan.size("overhang"), lowest=0.0, highest=FARTHEST_M)
    if distance is not None:
        _check_ratio(evaluator, plan.size("width"), width, per_height * distance)
        _check_ratio(evaluator, plan.size("other_width"), other, per_height * distance)
    real = _metal(evaluator, plan, metal, [w for w in (width, other) if w is not None])
    if width is None or distance is None or sheet is None or permittivity is None:
        return None
    if loss is None or real is None:
        return None
    thickness, conductivity = real
    return StripLine(
        kind,
        width,
        distance,
        other,
        sheet,
        permittivity,
        loss,
        overhang,
        thickness,
        conductivity,
    )


def _check_ratio(
    evaluator: Evaluator, quantity: Quantity | None, width_m: float | None, distance_m: float
) -> None:
    if quantity is None or width_m is None:
        return
    low, high = WIDTH_RATIOS
    if not low <= width_m / distance_m <= high:
        what = (
            f"the line's model is good for widths from {as_text(low * distance_m, 'mm')} to "
            f"{as_text(high * distance_m, 'mm')} at this distance of the conductors; change one of "
            "the two"
        )
        evaluator.report(quantity, what, width_m)


def _metal(
    evaluator: Evaluator, plan: LinePlan, metal: Metal | None, widths_m: list[float]
) -> tuple[float, float | None] | None:
    """Thickness and conductivity of the strips, None after a problem."""
    before = len(evaluator.problems)
    conductivity = _conductivity(evaluator, plan)
    own = plan.material_conductivity is not None or plan.size("conductivity") is not None
    if metal is not None and not own:
        conductivity = metal.conductivity_s_per_m
    thickness = 0.0 if metal is None else metal.thickness_m
    size = plan.size("thickness")
    if size is not None:
        why = "the metal of a line is this thick; write it as in 0.15 mm"
        given = evaluator.number(size, lowest=0.0, highest=FARTHEST_M, why=why)
        thickness = thickness if given is None else given
        if given is not None and widths_m and given > min(widths_m):
            narrow = as_text(min(widths_m), "mm")
            what = f"metal thicker than the strip is wide ({narrow}) is no strip; thin it"
            evaluator.report(size, what, given)
    if len(evaluator.problems) > before:
        return None
    if conductivity is not None and thickness == 0.0:
        what = (
            "the loss of a line's metal needs the metal's thickness; "
            'write it here, as in thickness = "0.15 mm", or in [metal]'
        )
        evaluator.problems.append(Problem(what, f"{plan.item}.thickness", "", plan.place))
        return None
    return thickness, conductivity
