"""The tables [placement], [carrier] and [ground]: where the strips are and what is around them."""

from __future__ import annotations

from typing import TYPE_CHECKING

from simkit.study.blueprint import CarrierPlan, GroundPlan, PlacementPlan
from simkit.study.fields import read_angle, read_vector
from simkit.study.model import CarrierSide, MixingName
from simkit.study.tables import Table
from simkit.study.units import CONDUCTIVITY, LENGTH, PURE, nearest

if TYPE_CHECKING:
    from simkit.crosssection.plastics import Plastic

MIXING: dict[str, MixingName] = {
    "maxwell-garnett": "plastic-host",
    "bruggeman": "bruggeman",
    "series": "series",
    "parallel": "parallel",
}
"""What a study calls the mixing rules, and what the cross-section calls them."""

SIDES: tuple[CarrierSide, ...] = ("below", "both", "embedded")

_EARTH = 'as in kind = "earth", permittivity = 13, conductivity = "5 mS/m"'


def read_placement(table: Table | None) -> PlacementPlan:
    """Read [placement]."""
    if table is None:
        return PlacementPlan()
    plan = PlacementPlan(
        read_angle(table, "rotate_x"),
        read_angle(table, "rotate_y"),
        read_angle(table, "rotate_z"),
        read_vector(table, "shift", "xyz"),
    )
    table.close()
    return plan


def read_carrier(table: Table | None) -> CarrierPlan | None:
    """Read [carrier]; None without one or after a problem that leaves nothing to check."""
    if table is None:
        return None
    material, entry = _read_material(table)
    permittivity = table.quantity("permittivity", PURE)
    loss_tangent = table.quantity("loss_tangent", PURE)
    infill = table.quantity("infill", PURE)
    mixing = table.choice("mixing", tuple(MIXING), "maxwell-garnett")
    skin = table.quantity("skin", LENGTH)
    thickness = table.quantity(
        "thickness", LENGTH, 'write how thick the plastic is, as in thickness = "2.4 mm"'
    )
    overhang = table.quantity("overhang", LENGTH)
    end_overhang = table.quantity("end_overhang", LENGTH)
    offset = table.quantity("offset", LENGTH)
    side = table.choice("side", SIDES, "below")
    depth = table.quantity("depth", LENGTH)
    table.close()
    _check_material(table)
    _check_depth(table, side)
    return CarrierPlan(
        material=material,
        material_permittivity=None if entry is None else entry.permittivity,
        material_loss_tangent=0.0 if entry is None else entry.loss_tangent,
        permittivity=permittivity,
        loss_tangent=loss_tangent,
        infill=infill,
        mixing=MIXING[mixing or "maxwell-garnett"],
        skin=skin,
        thickness=thickness,
        overhang=overhang,
        end_overhang=end_overhang,
        offset=offset,
        side=next((known for known in SIDES if known == side), "below"),
        depth=depth,
    )


def _read_material(table: Table) -> tuple[str, Plastic | None]:
    name = table.text("material")
    if name is None:
        return "given permittivity", None
    from simkit.crosssection.plastics import PLASTICS

    known = {plastic.casefold(): plastic for plastic in PLASTICS}
    found = known.get(name.casefold())
    if found is not None:
        return found, PLASTICS[found]
    hint = nearest(name, list(PLASTICS))
    advice = f'do you mean "{hint}"?' if hint else f"known are {', '.join(PLASTICS)}"
    what = f"this plastic is not in the table; {advice} Or give permittivity and loss_tangent."
    table.report("material", what)
    return name, None


def _check_material(table: Table) -> None:
    if not table.has("material"):
        if not table.has("permittivity"):
            what = 'is missing; write the plastic, as in material = "ASA", or its permittivity'
            table.report("material", what)
        return
    for key in ("permittivity", "loss_tangent"):
        if table.has(key):
            table.report(key, "give either `material` or the plastic's numbers, not both")
        table.notes.fixed[table.key(key)] = (
            f"`material` fixes it; give carrier.{key} instead of the material"
        )


def _check_depth(table: Table, side: str | None) -> None:
    if side == "embedded" and not table.has("depth"):
        what = 'is missing; write how much plastic lies above the strip, as in depth = "1 mm"'
        table.report("depth", what)
    elif side in ("below", "both") and table.has("depth"):
        table.report("depth", 'belongs to side = "embedded"; leave it out')


def read_ground(table: Table | None) -> GroundPlan | None:
    """Read [ground]; None without one or after a problem."""
    if table is None:
        return None
    if not table.has("kind"):
        table.report("kind", 'is missing; write kind = "plane" (perfect) or kind = "earth"')
    kind = table.choice("kind", ("plane", "earth"), "plane") if table.has("kind") else None
    advice = f"say what the earth is, {_EARTH}" if kind == "earth" else ""
    permittivity = table.quantity("permittivity", PURE, advice)
    conductivity = table.quantity("conductivity", CONDUCTIVITY, advice)
    table.close()
    line = table.notes.line(table.path)
    if kind == "earth":
        return GroundPlan("earth", permittivity, conductivity, line)
    if kind is None:
        return None
    for key in ("permittivity", "conductivity"):
        if table.has(key):
            what = 'a plane conducts perfectly; leave it out, or write kind = "earth"'
            table.report(key, what)
    return GroundPlan("plane", None, None, line)
