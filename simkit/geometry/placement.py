"""Strips placed in space: the drawn wires turned and lifted, and held against a ground at z = 0.

Wires are drawn in the plane of the strips; only then are their ends moved, so that everything
about the grid but its place stays as it was.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import replace

import numpy as np
from scipy.constants import c as light_speed

from simkit.errors import GeometryError
from simkit.geometry.outlines import outline
from simkit.geometry.wires import FloatArray, Wire, WireGrid
from simkit.study.model import Antenna, Placement, Strip, Vector

ON_PLANE_M = 1e-6
"""An end within a micrometre of a perfect plane stands on it."""

CLEAR_RADII = 4.0
"""Wires nearer to a ground than this, a width for a strip of one wire, see its charge crowd towards
the ground, which a round wire does not do: over a plane the characteristic impedance of a strip one
width up comes out 2 % low, half a width up 11 %."""

UPRIGHT_RAD = np.deg2rad(65.0)
FLATTEST_RAD = np.deg2rad(30.0)
"""A strip on the plane and its image make a corner; the wires there have no figure for it, which is
good for turns of 50 degrees and stops at 120, like everywhere else."""

INTEGRAL_WAVELENGTHS = 0.08
"""Lowest height over earth, in wavelengths, for the engine's solution by Sommerfeld's integrals.

Against the same integrals for a sinusoidal current, the change of a half-wave dipole's impedance by
the earth is right to 1 ohm from here up. Below, the engine's tables of them fail: 8 ohm off at 0.06
wavelengths, hundreds at 0.03. Its other way, reflection coefficients, is off by 1 ohm at 0.3
wavelengths, 10 at 0.1 and 30 at 0.02, for permittivities from 4 to 80."""


def place_point(point_m: Sequence[float], placement: Placement) -> Vector:
    """Where a point of the strips' plane, or of space before placing, comes to lie, metres."""
    x, y, z = (float(value) for value in (*point_m, 0.0)[:3])
    # In plain floats: equal points stay exactly equal, which the engine needs to join wires.
    turned = [a * x + b * y + c * z for a, b, c in placement.rotation]
    lifted = [value + shift for value, shift in zip(turned, placement.shift_m, strict=True)]
    return lifted[0], lifted[1], lifted[2]


def stands_on_plane(point_m: Sequence[float], antenna: Antenna) -> bool:
    """A point of the strips' plane is placed on a perfect ground plane."""
    if antenna.ground is None or antenna.ground.kind != "plane":
        return False
    return abs(place_point(point_m, antenna.placement)[2]) <= ON_PLANE_M


def placed(grid: WireGrid, antenna: Antenna) -> WireGrid:
    """The wire grid where the antenna is placed, checked against its ground.

    Parameters
    ----------
    grid : WireGrid
        Drawn in the plane of the strips.
    antenna : Antenna

    Returns
    -------
    WireGrid
        Only end points and doubts differ. Ends within a micrometre of a perfect plane are exactly
        on it, which connects them to it.

    Raises
    ------
    GeometryError
        Metal reaches below the ground, lies in it, or stands on it in a way the models do not
        cover.
    """
    if antenna.placement != Placement():
        grid = replace(grid, wires=tuple(_placed_wire(w, antenna.placement) for w in grid.wires))
    if antenna.ground is None:
        return grid
    if antenna.ground.kind == "plane":
        grid = replace(grid, wires=tuple(_snapped(wire) for wire in grid.wires))
    _check_metal(antenna)
    _check_wires(grid, antenna)
    doubts = [*_clearance_doubts(grid), *_leaning_doubts(grid)]
    if antenna.ground.kind == "earth":
        doubts += _earth_doubts(grid, antenna)
    return replace(grid, doubts=(*grid.doubts, *doubts))


def lowest_m(wires: Iterable[Wire]) -> float:
    """Smallest height of any wire, metres."""
    return min(min(wire.start_m[2], wire.end_m[2]) for wire in wires)


def far_from_earth(grid: WireGrid, antenna: Antenna) -> bool:
    """The engine's integrals for real earth hold at every frequency of the band."""
    wavelength = light_speed / antenna.frequency.start_hz
    return bool(lowest_m(grid.wires) >= INTEGRAL_WAVELENGTHS * wavelength)


def _placed_wire(wire: Wire, placement: Placement) -> Wire:
    return replace(
        wire,
        start_m=place_point(wire.start_m, placement),
        end_m=place_point(wire.end_m, placement),
    )


def _snapped(wire: Wire) -> Wire:
    return replace(wire, start_m=_on_plane(wire.start_m), end_m=_on_plane(wire.end_m))


def _on_plane(point: Vector) -> Vector:
    return (point[0], point[1], 0.0) if abs(point[2]) <= ON_PLANE_M else point


def _mm(point: Sequence[float] | FloatArray) -> str:
    return "(" + ", ".join(f"{round(value * 1e3, 6) + 0.0:.4g}" for value in point) + ") mm"


# -- checks ----------------------------------------------------------------------------------------


def _check_metal(antenna: Antenna) -> None:
    """The strips themselves, which are wider than their wires, must stay above the ground."""
    for strip in antenna.strips:
        edge = np.array(
            [place_point(p, antenna.placement) for p in outline(strip).exterior.coords[:-1]]
        )
        for point in edge[np.argsort(edge[:, 2])]:
            if point[2] >= -ON_PLANE_M:
                break
            if not _trimmed_at_its_foot(strip, point, antenna):
                raise GeometryError(
                    f"strip {strip.name!r} reaches {-point[2] * 1e3:.4g} mm below the ground, at "
                    f"{_mm(point)}: lift the antenna in [placement], turn it, or shorten the strip"
                )


def _trimmed_at_its_foot(strip: Strip, point: FloatArray, antenna: Antenna) -> bool:
    """A corner of a strip that leans sideways where it stands on the plane would be cut off."""
    feet = [end for end in (strip.path_m[0], strip.path_m[-1]) if stands_on_plane(end, antenna)]
    return any(
        np.linalg.norm(point - place_point(foot, antenna.placement)) < strip.width_m
        for foot in feet
    )


def _check_wires(grid: WireGrid, antenna: Antenna) -> None:
    ground = "plane" if antenna.ground is not None and antenna.ground.kind == "plane" else "earth"
    for number, wire in enumerate(grid.wires):
        heights = wire.start_m[2], wire.end_m[2]
        low = wire.start_m if heights[0] <= heights[1] else wire.end_m
        if min(heights) < 0:
            raise GeometryError(
                f"the model's wire reaches {-min(heights) * 1e3:.4g} mm below the ground, at "
                f"{_mm(low)}: lift the antenna in [placement], turn it, or let the strip end "
                "square on the plane"
            )
        if max(heights) == 0:
            raise GeometryError(
                f"{_name_of(grid, number, 'a strip')} lies in the ground plane from "
                f"{_mm(wire.start_m)} to {_mm(wire.end_m)}, where it is part of the plane: lift "
                "the antenna in [placement]"
            )
        stands = min(heights) == 0 and ground == "plane"
        if not stands and min(heights) <= grid.radius_m:
            what = (
                f"the model's wire of {grid.radius_m * 1e3:.4g} mm radius lies "
                f"{min(heights) * 1e3:.4g} mm above the {ground} at {_mm(low)}"
            )
            raise GeometryError(
                f"{what}: lift the antenna in [placement] by at least "
                f"{(grid.radius_m - min(heights)) * 1e3:.3g} mm"
                + (
                    "; strips can stand on a perfect plane, but not on real earth"
                    if ground == "earth"
                    else ", or let the strip's end stand on the plane"
                )
            )
        if stands and _slope_rad(wire) < FLATTEST_RAD:
            raise GeometryError(
                f"{_name_of(grid, number)} at {_mm(low)} leans to "
                f"{np.rad2deg(_slope_rad(wire)):.0f} degrees from the plane it stands on; the "
                "models cover 30 degrees and more: turn it up"
            )


def _name_of(grid: WireGrid, number: int, strip: str = "the strip") -> str:
    """What a wire belongs to, in words; those of the feed cable come last."""
    first = sum(wire.segments for wire in grid.wires[:number])
    on_cable = grid.cable >= 0 and first >= int(grid.chains[grid.cable].segments[0])
    return "the cable" if on_cable else strip


def _slope_rad(wire: Wire) -> float:
    rise = abs(wire.end_m[2] - wire.start_m[2]) / wire.length_m
    return float(np.arcsin(min(rise, 1.0)))


def _clearance_doubts(grid: WireGrid) -> list[str]:
    """The lowest place of the wires that do not stand on the plane."""
    ends = [(wire.start_m, wire.end_m) for wire in grid.wires]
    standing = {end for pair in ends if min(pair[0][2], pair[1][2]) == 0 for end in pair}
    points = [end for pair in ends for end in pair if end not in standing]
    if not points:
        return []
    low = min(points, key=lambda point: point[2])
    if low[2] >= CLEAR_RADII * grid.radius_m:
        return []
    return [
        f"at {_mm(low)} the metal comes within {low[2] / grid.radius_m:.2g} wire radii of the "
        f"ground; the models are checked from {CLEAR_RADII:.0f} radii "
        f"({CLEAR_RADII * grid.radius_m * 1e3:.3g} mm) up: impedances may be off by 10 % and mode "
        "frequencies by 1 %"
    ]


def _leaning_doubts(grid: WireGrid) -> list[str]:
    for number, wire in enumerate(grid.wires):
        low = wire.start_m if wire.start_m[2] <= wire.end_m[2] else wire.end_m
        if low[2] == 0 and _slope_rad(wire) < UPRIGHT_RAD:
            return [
                f"{_name_of(grid, number)} at {_mm(low)} leans to "
                f"{np.rad2deg(_slope_rad(wire)):.0f} degrees from the plane it stands on; the "
                "models are checked from 65 degrees up: mode "
                "frequencies may be off by 1 %"
            ]
    return []


def _earth_doubts(grid: WireGrid, antenna: Antenna) -> list[str]:
    if far_from_earth(grid, antenna):
        return []
    wavelength = light_speed / antenna.frequency.start_hz
    low = lowest_m(grid.wires)
    return [
        f"the lowest metal is {low * 1e3:.4g} mm or {low / wavelength:.2g} wavelengths above real "
        f"earth at the bottom of the band; under {INTEGRAL_WAVELENGTHS} "
        f"({INTEGRAL_WAVELENGTHS * wavelength * 1e3:.3g} mm) only reflection coefficients are at "
        "hand, which leave resistances and reactances off by 10 to 30 ohm: raise the antenna or "
        "frequency.start"
    ]
