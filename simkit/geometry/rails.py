"""Cross-section rules of the grid model: how many rails, of which radius, at which offsets.

A strip is a bundle of equal parallel wires whose static radius, the radius of the one round wire
with the same potential for the same charge, is that of the strip. One wire radius serves the whole
structure, since this kind of engine errs by several per cent where radii meet; a strip of changing
width keeps its wires and spreads them.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from scipy.optimize import brentq

from simkit.crosssection.radius import charge_parts, static_radius_m
from simkit.errors import GeometryError
from simkit.geometry.wires import FloatArray

CLOSEST_RADII = 2.1
"""Least distance of neighbouring rails, in radii: the engine needs two."""

CONSTANT_RADIUS_WIDTHS = 0.05
CONSTANT_OFFSET_WIDTHS = 0.43
CONSTANT_TIP_WIDTHS = 0.075
TIP_PER_SEGMENT = 0.0012
"""More of a width is taken off where the segments are short against it. Without it straight strips
of 1/7.5 and 1/5 of their length are 0.1 and 0.4 % low; narrower ones are not concerned."""

_TIP_RATIOS = (1.0, 3.0, 6.0, 10.0)
_TIP_WIDTHS = {
    3: (0.118, 0.082, 0.114, 0.164),
    5: (0.081, 0.038, 0.030, 0.032),
    7: (0.065, 0.0265, 0.0148, 0.0093),
    9: (0.052, 0.020, 0.011, 0.005),
}
"""Distance of the end bar from the end of the strip, in widths there, against the width over that
at which the rails are as close as they may be. Fitted on straight strips of one width only."""


@dataclass(frozen=True)
class RailRule:
    """Rails of one structure.

    Attributes
    ----------
    count : int
    radius_m : float
        Of every wire.
    constant : bool
        All strips have one width: three rails at fixed places.
    """

    count: int
    radius_m: float
    constant: bool

    def offsets_m(self, width_m: float) -> FloatArray:
        """Offsets of the rails from the centre line for a strip of a width, ascending, metres."""
        if self.constant:
            reach = CONSTANT_OFFSET_WIDTHS * width_m
            return np.linspace(-reach, reach, self.count)
        return np.array(_spread(self.count, round(width_m / self.radius_m, 9))) * self.radius_m

    def current_parts(self, width_m: float) -> FloatArray:
        """Part of a strip's current that each rail carries, in the order of the offsets.

        `width_m` is the effective width. A series load z of the strip is divided by these parts,
        not merely multiplied by the number of rails: every rail then drops the same voltage, z
        times the whole current, as the strip does, and no wave between the rails is driven.
        """
        return np.array(_parts(self, round(width_m / self.radius_m, 9)))

    def tip_m(self, width_m: float, effective_m: float, segment_m: float = np.inf) -> float:
        """How far inside an open end the end bar lies, metres.

        Parameters
        ----------
        width_m : float
            Drawn width at the end.
        effective_m : float
            The same, widened by the carrier: it sets how far the rails are spread.
        segment_m : float
            Length of the segments along the rails.
        """
        if self.constant:
            many = max(width_m / segment_m - 2.0, 0.0)
            return (CONSTANT_TIP_WIDTHS + TIP_PER_SEGMENT * many) * width_m
        ratio = closest_radius_widths(self.count) * effective_m / self.radius_m
        value = np.interp(np.log(max(ratio, 1.0)), np.log(_TIP_RATIOS), _TIP_WIDTHS[self.count])
        return float(value * width_m)


def rails_for(ratio: float) -> int:
    """Number of rails for a ratio of largest to smallest width in a structure."""
    if ratio <= 2.0:
        return 5
    return 7 if ratio <= 4.0 else 9


def rail_rule(narrowest_m: float, widest_m: float, count: int | None = None) -> RailRule:
    """Rule for a structure with strips between two widths.

    Parameters
    ----------
    narrowest_m, widest_m : float
        Effective widths (with a carrier, widened by it), metres.
    count : int, optional
        Rails, if the study has settled on a number; 3 means one constant width.
    """
    constant = widest_m < narrowest_m * (1 + 1e-6) if count is None else count == 3
    if constant:
        return RailRule(3, CONSTANT_RADIUS_WIDTHS * narrowest_m, True)
    count = count or rails_for(widest_m / narrowest_m)
    return RailRule(count, closest_radius_widths(count) * narrowest_m, False)


@lru_cache(maxsize=16)
def closest_radius_widths(count: int) -> float:
    """Wire radius over width at which rails as close as they may be act like the strip."""
    closest = (np.arange(count) - (count - 1) / 2) * CLOSEST_RADII
    return 1.0 / (4.0 * static_radius_m(closest, 1.0))


@lru_cache(maxsize=4096)
def _parts(rule: RailRule, width_radii: float) -> tuple[float, ...]:
    offsets_m = rule.offsets_m(width_radii * rule.radius_m)
    return tuple(map(float, charge_parts(offsets_m, rule.radius_m)))


@lru_cache(maxsize=4096)
def _spread(count: int, width_radii: float) -> tuple[float, ...]:
    """Offsets over the radius for a width over the radius.

    The places go from equal spacing towards those that carry equal parts of a strip's charge, as
    far as the least distance allows, and are scaled until the bundle has the strip's radius.
    """
    equal = np.linspace(-1.0, 1.0, count)
    charge = -np.cos((2 * np.arange(1, count + 1) - 1) * np.pi / (2 * count))
    charge = (charge - charge[::-1]) / (2 * charge[-1])  # exactly symmetric

    def scaled(blend: float) -> FloatArray:
        shape = (1 - blend) * equal + blend * charge

        def excess(scale: float) -> float:
            return static_radius_m(scale * shape, 1.0) - width_radii / 4

        # Rails closer than two radii overlap; such a shape only says "too close".
        low, high = 2.0 / float(np.diff(shape).min()), 4 * width_radii
        if excess(low) >= 0:
            return np.asarray(low * shape)
        return np.asarray(brentq(excess, low, high, xtol=1e-12) * shape)

    def spare(blend: float) -> float:
        return float(np.diff(scaled(blend)).min()) - CLOSEST_RADII

    if spare(1.0) >= 0:
        return tuple(scaled(1.0))
    if spare(0.0) < -1e-6:
        raise GeometryError(
            f"a strip of {width_radii:.3g} wire radii is too narrow for {count} rails"
        )
    if spare(0.0) <= 0:
        return tuple(scaled(0.0))
    return tuple(scaled(float(brentq(spare, 0.0, 1.0, xtol=1e-12))))
