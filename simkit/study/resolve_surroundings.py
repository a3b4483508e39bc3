"""Placement, carrier and ground in SI, with the limits they must keep."""

from __future__ import annotations

from collections.abc import Sequence

from simkit.errors import Problem
from simkit.study.blueprint import CarrierPlan, GroundPlan, PlacementPlan
from simkit.study.evaluate import FARTHEST_M, Evaluator
from simkit.study.model import NO_ROTATION, Carrier, Ground, Placement, Strip, Vector
from simkit.study.paths import SAME_PLACE_M, cos_sin
from simkit.study.tables import Quantity
from simkit.study.units import as_text

HIGHEST_PERMITTIVITY = 100.0
HIGHEST_EARTH_CONDUCTIVITY_S_PER_M = 100.0

Rows = tuple[Vector, Vector, Vector]


# -- placement -------------------------------------------------------------------------------------


def resolve_placement(evaluator: Evaluator, plan: PlacementPlan) -> Placement | None:
    """Return how the antenna stands in space; None after a problem."""
    rotation: Rows | None = NO_ROTATION
    for axis, quantity in enumerate((plan.rotate_x, plan.rotate_y, plan.rotate_z)):
        if quantity is None:
            continue
        angle = evaluator.angle(quantity)
        if angle is None or rotation is None:
            rotation = None
        else:
            rotation = _product(_about(axis, angle), rotation)
    shift: Vector | None = (0.0, 0.0, 0.0)
    if plan.shift is not None:
        x, y, z = (evaluator.coordinate(place) for place in plan.shift)
        shift = None if x is None or y is None or z is None else (x, y, z)
    return None if rotation is None or shift is None else Placement(rotation, shift)


def _about(axis: int, angle_rad: float) -> Rows:
    cos, sin = cos_sin(angle_rad)
    if axis == 0:
        return ((1.0, 0.0, 0.0), (0.0, cos, -sin), (0.0, sin, cos))
    if axis == 1:
        return ((cos, 0.0, sin), (0.0, 1.0, 0.0), (-sin, 0.0, cos))
    return ((cos, -sin, 0.0), (sin, cos, 0.0), (0.0, 0.0, 1.0))


def _product(left: Rows, right: Rows) -> Rows:
    columns: Rows = tuple(zip(*right, strict=True))  # type: ignore[assignment]
    rows = [tuple(_dot(row, column) for column in columns) for row in left]
    return tuple(rows)  # type: ignore[return-value]


def _dot(a: Vector, b: Vector) -> float:
    # The sum starts at 0.0, so that no element is -0.0 and equal rotations are equal as text.
    return 0.0 + a[0] * b[0] + a[1] * b[1] + a[2] * b[2]


# -- carrier ---------------------------------------------------------------------------------------


def resolve_carrier(
    evaluator: Evaluator, plan: CarrierPlan, metal_thickness_m: float
) -> Carrier | None:
    """Return the carrier; None after a problem."""
    before = len(evaluator.problems)
    permittivity, loss_tangent = _plastic(evaluator, plan)
    infill = _part(evaluator, plan.infill, 1.0, "write 40 % as 0.4")
    thickness = evaluator.length(plan.thickness)
    skin = _skin(evaluator, plan, thickness, infill)
    overhang = _beyond(evaluator, plan.overhang, "narrower", "its overhang sideways")
    end_overhang = _beyond(evaluator, plan.end_overhang, "shorter", "its end_overhang")
    offset = _offset(evaluator, plan, overhang)
    depth = _depth(evaluator, plan, thickness, metal_thickness_m)
    if len(evaluator.problems) > before or thickness is None:
        return None
    return Carrier(
        relative_permittivity=permittivity,
        loss_tangent=loss_tangent,
        thickness_m=thickness,
        infill=infill,
        mixing=plan.mixing,
        skin_m=skin,
        overhang_m=overhang,
        end_overhang_m=end_overhang,
        offset_m=offset,
        side=plan.side,
        depth_m=depth,
        material=plan.material,
    )


def _plastic(evaluator: Evaluator, plan: CarrierPlan) -> tuple[float, float]:
    if plan.material_permittivity is not None:
        return plan.material_permittivity, plan.material_loss_tangent
    # Whatever stands in for a missing number or one with a problem is never used.
    permittivity = evaluator.number(
        plan.permittivity,
        lowest=1.0,
        highest=HIGHEST_PERMITTIVITY,
        why="that of the solid plastic is needed, mostly 2 to 5",
    )
    return permittivity or 1.0, _part(evaluator, plan.loss_tangent, 0.0, "mostly it is below 0.05")


def _part(evaluator: Evaluator, quantity: Quantity | None, default: float, why: str) -> float:
    number = evaluator.number(quantity, lowest=0.0, highest=1.0, why=why)
    return default if number is None else number


def _beyond(evaluator: Evaluator, quantity: Quantity | None, shape: str, remedy: str) -> float:
    why = (
        f"a carrier {shape} than the strip would leave metal without plastic, for which there is "
        f"no rule; make {remedy} 0 mm or more"
    )
    number = evaluator.number(quantity, lowest=0.0, highest=FARTHEST_M, why=why)
    return number or 0.0


def _skin(
    evaluator: Evaluator, plan: CarrierPlan, thickness_m: float | None, infill: float
) -> float:
    skin = evaluator.number(plan.skin, lowest=0.0, highest=FARTHEST_M)
    if plan.skin is None or skin is None or thickness_m is None:
        return 0.0
    slack = 1 + 1e-12  # of rounding: two skins of 0.1 mm just fit in 0.2 mm
    if 2 * skin > thickness_m * slack:
        what = (
            f"two skins do not fit in a carrier of {as_text(thickness_m, 'mm')}; "
            "make them thinner, or infill = 1 without skins"
        )
        evaluator.report(plan.skin, what, skin)
    elif 2 * skin > infill * thickness_m * slack:
        what = (
            f"the two skins alone fill {2 * skin / thickness_m:.3g} of the carrier, more than its "
            f"infill of {infill:.3g}, which counts them in; make them thinner or the infill larger"
        )
        evaluator.report(plan.skin, what, skin)
    return skin


def _offset(evaluator: Evaluator, plan: CarrierPlan, overhang_m: float) -> float:
    offset = evaluator.number(plan.offset, lowest=-FARTHEST_M, highest=FARTHEST_M)
    if plan.offset is None or offset is None:
        return 0.0
    if abs(offset) > overhang_m * (1 + 1e-9):
        what = (
            "a strip this far off the carrier's middle stands over its edge; keep it within the "
            f"overhang of {as_text(overhang_m, 'mm')} or widen that"
        )
        evaluator.report(plan.offset, what, offset)
    return offset


def _depth(
    evaluator: Evaluator, plan: CarrierPlan, thickness_m: float | None, metal_m: float
) -> float:
    depth = evaluator.number(plan.depth, above=0.0, highest=FARTHEST_M)
    if plan.depth is None or depth is None or thickness_m is None:
        return 0.0
    if not metal_m < depth < thickness_m:
        what = (
            f"an embedded strip lies between {as_text(metal_m, 'mm')}, the metal's thickness, and "
            f'{as_text(thickness_m, "mm")}, the carrier\'s, below its top; or write side = "below"'
        )
        evaluator.report(plan.depth, what, depth)
    return depth


# -- ground ----------------------------------------------------------------------------------------


def resolve_ground(evaluator: Evaluator, plan: GroundPlan) -> Ground | None:
    """Return the ground; None after a problem."""
    if plan.kind == "plane":
        return Ground("plane")
    permittivity = evaluator.number(
        plan.permittivity,
        lowest=1.0,
        highest=HIGHEST_PERMITTIVITY,
        why="dry sand has 3, wet earth up to 30, water 80",
    )
    conductivity = evaluator.number(
        plan.conductivity,
        lowest=0.0,
        highest=HIGHEST_EARTH_CONDUCTIVITY_S_PER_M,
        why="dry sand has 1 mS/m, wet earth 30 mS/m, the sea 5 S/m",
    )
    if permittivity is None or conductivity is None:
        return None
    return Ground("earth", permittivity, conductivity)


def check_heights(
    evaluator: Evaluator, plan: GroundPlan, placement: Placement, strips: Sequence[Strip]
) -> None:
    """Report strips that reach below the ground or lie in it."""
    (_, _, row), (_, _, lift) = placement.rotation, placement.shift_m
    for strip in strips:
        heights = [row[0] * x + row[1] * y + lift for x, y in strip.path_m]
        if min(heights) < -SAME_PLACE_M:
            what = (
                f"strip `{strip.name}` reaches {as_text(-min(heights), 'mm')} below the ground at "
                "z = 0; turn it or lift it with [placement]"
            )
        elif max(heights) < SAME_PLACE_M:
            what = (
                f"strip `{strip.name}` lies in the ground at z = 0; "
                'lift it with [placement], as in shift = ["0 mm", "0 mm", "300 mm"]'
            )
        else:
            continue
        evaluator.problems.append(Problem(what, "ground", "", plan.line))
