"""Cross-section of strips on a carrier of rectangular layers, and how it is cut into panels.

x runs across the strips, z upwards; the strips' lower faces lie at z = 0. The carrier reaches from
its left to its right edge in all layers. One side, both sides, an embedded strip and solid skins
are all stacks of layers: only `depth_m`, the plastic above z = 0, tells them apart.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from simkit.crosssection.panels import INTERFACE, Panels, chain, graded, join
from simkit.errors import GeometryError

SAME = 1e-9
"""Places closer than this part of the whole section are one place."""


@dataclass(frozen=True)
class FlatConductor:
    """A strip in cross-section: `centre_m` across, `thickness_m` upwards from z = 0."""

    centre_m: float
    width_m: float
    thickness_m: float = 0.0

    @property
    def left_m(self) -> float:
        """Left edge, metres."""
        return self.centre_m - self.width_m / 2

    @property
    def right_m(self) -> float:
        """Right edge, metres."""
        return self.centre_m + self.width_m / 2


@dataclass(frozen=True)
class Layer:
    """One layer of the carrier: thickness in metres, relative permittivity eps' - j eps''."""

    thickness_m: float
    permittivity: complex


@dataclass(frozen=True)
class CrossSection:
    """Strips on, under or in a carrier.

    Attributes
    ----------
    strips : tuple of FlatConductor
        From left to right, apart from each other.
    left_m, right_m : float
        Edges of the carrier.
    layers : tuple of Layer
        From bottom to top.
    depth_m : float
        Height of the carrier's top above the strips' lower faces: 0 for strips on top, the whole
        thickness for strips underneath, in between for embedded ones.

    Raises
    ------
    GeometryError
        If a size is not positive and finite, strips overlap, the carrier is narrower than the
        strips, or the strips lie outside the carrier's thickness.
    """

    strips: tuple[FlatConductor, ...]
    left_m: float
    right_m: float
    layers: tuple[Layer, ...]
    depth_m: float = 0.0

    def __post_init__(self) -> None:
        _check(self)

    @property
    def thickness_m(self) -> float:
        """Thickness of the whole carrier, metres."""
        return sum(layer.thickness_m for layer in self.layers)

    @property
    def levels_m(self) -> tuple[float, ...]:
        """Heights of the boundaries of the layers from bottom to top, metres."""
        below = np.cumsum([0.0, *(layer.thickness_m for layer in self.layers)])
        return tuple(float(level) for level in below - below[-1] + self.depth_m)

    @property
    def extent_m(self) -> float:
        """Larger of the carrier's width and thickness, metres."""
        return max(self.right_m - self.left_m, self.thickness_m)

    def permittivity(self, x_m: float, z_m: float) -> complex:
        """Return the relative permittivity at a place off the boundaries, metal taken away."""
        levels = self.levels_m
        if not (self.left_m < x_m < self.right_m and levels[0] < z_m < levels[-1]):
            return 1.0
        return self.layers[int(np.searchsorted(levels, z_m)) - 1].permittivity


def single_strip(
    width_m: float,
    layers: Sequence[Layer],
    overhang_m: float | tuple[float, float],
    *,
    depth_m: float = 0.0,
    metal_thickness_m: float = 0.0,
) -> CrossSection:
    """Return one strip on a carrier that reaches beyond its edges.

    Parameters
    ----------
    width_m : float
    layers : sequence of Layer
        From bottom to top.
    overhang_m : float or (float, float)
        Carrier beyond both edges, or beyond the left and the right one.
    depth_m : float
        Plastic above the strip's lower face.
    metal_thickness_m : float
    """
    left_m, right_m = overhang_m if isinstance(overhang_m, tuple) else (overhang_m, overhang_m)
    strip = FlatConductor(0.0, width_m, metal_thickness_m)
    return CrossSection(
        (strip,), -width_m / 2 - left_m, width_m / 2 + right_m, tuple(layers), depth_m
    )


def _check(section: CrossSection) -> None:
    sizes = [("strip width", strip.width_m) for strip in section.strips]
    sizes += [("layer thickness", layer.thickness_m) for layer in section.layers]
    for name, size_m in sizes:
        if not (np.isfinite(size_m) and size_m > 0):
            raise GeometryError(f"{name} is {size_m * 1e3:g} mm: it must be positive and finite")
    if not section.strips or not section.layers:
        raise GeometryError("a cross-section needs at least one strip and one carrier layer")
    _check_permittivity(section)
    slack_m = SAME * section.extent_m
    for strip in section.strips:
        if not (np.isfinite(strip.thickness_m) and strip.thickness_m >= 0):
            raise GeometryError(
                f"metal thickness is {strip.thickness_m * 1e3:g} mm: it must be 0 or more"
            )
        if strip.left_m < section.left_m - slack_m or strip.right_m > section.right_m + slack_m:
            raise GeometryError(
                f"the carrier, x = {section.left_m * 1e3:g} to {section.right_m * 1e3:g} mm, is "
                f"narrower than the strip, x = {strip.left_m * 1e3:g} to "
                f"{strip.right_m * 1e3:g} mm: give overhangs of 0 or more"
            )
    for one, two in pairwise(section.strips):
        if not two.left_m - one.right_m > slack_m:
            raise GeometryError(
                f"two strips of a cross-section meet or overlap at x = {two.left_m * 1e3:g} mm: "
                "they must stand apart, from left to right"
            )
    if not -slack_m <= section.depth_m <= section.thickness_m + slack_m:
        raise GeometryError(
            f"strip depth is {section.depth_m * 1e3:g} mm: it must lie between 0 (on top) and the "
            f"carrier's thickness of {section.thickness_m * 1e3:g} mm (underneath)"
        )


def _check_permittivity(section: CrossSection) -> None:
    for layer in section.layers:
        value = complex(layer.permittivity)
        if not (np.isfinite(value) and value.real >= 1 and value.imag <= 0):
            raise GeometryError(
                f"relative permittivity is {value:g}: its real part must be at least 1, its "
                "imaginary part 0 or negative (eps' - j eps'')"
            )


def cut(section: CrossSection, count: int) -> Panels:
    """Return the cross-section as panels.

    Parameters
    ----------
    section : CrossSection
    count : int
        Panels on a line as long as the narrowest strip is wide; longer lines get some more.
    """
    lines = [*_level_lines(section), *_upright_lines(section)]
    unit_m = min(strip.width_m for strip in section.strips)
    parts = []
    for line in lines:
        length = abs(line.end_m - line.start_m)
        panels = int(np.ceil(count * (1 + LONGER * max(0.0, np.log2(length / unit_m)))))
        nodes = graded(line.start_m, line.end_m, panels)
        parts.append(chain(nodes, line.conductor, line.left, line.right))
    return join(parts)


LONGER = 0.25
"""More panels on a line, as a part of the count, for each doubling of its length over the strip.

A long face then still has panels shorter than the strip where the strip is near.
"""


@dataclass(frozen=True)
class _Line:
    start_m: complex
    end_m: complex
    conductor: int
    left: complex
    right: complex


def _level_lines(section: CrossSection) -> Iterator[_Line]:
    """Lines along x: boundaries of layers and faces of strips.

    All levels are cut at the same x, and so into the same panels: the bound charges on the two
    faces of a thin sheet nearly cancel, and would not if they stood on panels that do not match.
    """
    tops = (strip.thickness_m for strip in section.strips)
    for z in _distinct([*section.levels_m, 0.0, *tops], section.extent_m):
        edges = [edge for strip in section.strips for edge in (strip.left_m, strip.right_m)]
        edges = [section.left_m, *edges, section.right_m]
        cuts = _distinct(edges, section.extent_m)
        runs = [(start, end, _at(section, (start + end) / 2, z)) for start, end in pairwise(cuts)]
        for start, end, (conductor, above, below) in runs:
            if conductor != INTERFACE or above != below:
                yield _Line(complex(start, z), complex(end, z), conductor, above, below)


def _upright_lines(section: CrossSection) -> Iterator[_Line]:
    """Lines along z: the carrier's edges and the sides of thick strips."""
    tops = [strip.thickness_m for strip in section.strips]
    cuts = _distinct([*section.levels_m, 0.0, *tops], section.extent_m)
    edges = [edge for strip in section.strips for edge in (strip.left_m, strip.right_m)]
    for x in _distinct([section.left_m, *edges, section.right_m], section.extent_m):
        runs = [
            (start, end, _beside(section, x, (start + end) / 2)) for start, end in pairwise(cuts)
        ]
        for start, end, (conductor, left, right) in _merged(runs):
            if conductor != INTERFACE or left != right:
                yield _Line(complex(x, start), complex(x, end), conductor, left, right)


INSIDE = 1.0
"""Permittivity inside solid metal: any one value, since there is no field."""

_Kind = tuple[int, complex, complex]
_Run = tuple[float, float, _Kind]


def _at(section: CrossSection, x: float, z: float) -> _Kind:
    """What a level line is at (x, z): conductor, permittivity above, permittivity below."""
    step = SAME * section.extent_m
    above, below = (section.permittivity(x, z + side) for side in (step, -step))
    for number, strip in enumerate(section.strips):
        if not strip.left_m < x < strip.right_m:
            continue
        if strip.thickness_m <= step and abs(z) <= step:
            return number, above, below
        if abs(z) <= step:
            return number, INSIDE, below
        if abs(z - strip.thickness_m) <= step:
            return number, above, INSIDE
        if 0 < z < strip.thickness_m:
            return INTERFACE, INSIDE, INSIDE
    return INTERFACE, above, below


def _beside(section: CrossSection, x: float, z: float) -> _Kind:
    """What an upright line is at (x, z): conductor, permittivity left, permittivity right."""
    step = SAME * section.extent_m
    left, right = (section.permittivity(x + side, z) for side in (-step, step))
    for number, strip in enumerate(section.strips):
        if not 0 < z < strip.thickness_m:
            continue
        if abs(x - strip.left_m) <= step:
            return number, left, INSIDE
        if abs(x - strip.right_m) <= step:
            return number, INSIDE, right
    return INTERFACE, left, right


def _distinct(places: Sequence[float], extent_m: float) -> list[float]:
    """Sorted places, those within `SAME` of the one before left out."""
    kept: list[float] = []
    for place in sorted(places):
        if not kept or place - kept[-1] > SAME * extent_m:
            kept.append(place)
    return kept


def _merged(runs: list[_Run]) -> Iterator[_Run]:
    """Join neighbours of one kind, so that no line is graded towards a place that is nothing."""
    current: _Run | None = None
    for start, end, kind in runs:
        if current is not None and current[2] == kind:
            current = (current[0], end, kind)
        else:
            if current is not None:
                yield current
            current = (start, end, kind)
    if current is not None:
        yield current
