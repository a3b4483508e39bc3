"""Permittivity of plastics and of partly filled prints.

A printed carrier of solid fraction f (the infill, best found by weighing) is a mixture of plastic
and air with cells much smaller than a wavelength and, the rules assume, than the carrier's
thickness. Which rule holds depends on what is connected: a print is connected plastic around closed
or open air cells, so Maxwell Garnett's rule with the plastic as host is the default. All rules
take complex permittivity, eps' - j eps''.

References
----------
A. Sihvola, Electromagnetic Mixing Formulas and Applications, IEE, 1999 (all rules below; from
memory, re-derived).
"""

from __future__ import annotations

import cmath
from collections.abc import Callable
from typing import Literal

from simkit.crosssection.section import Layer
from simkit.errors import SimkitError

MixingRule = Literal["plastic-host", "air-host", "bruggeman", "series", "parallel"]


class DielectricError(SimkitError, ValueError):
    """A permittivity, solid fraction or skin that cannot be."""


def complex_permittivity(permittivity: float, loss_tangent: float = 0.0) -> complex:
    """Return eps' (1 - j tan delta).

    Raises
    ------
    DielectricError
        If the permittivity is below 1 or the loss tangent negative.
    """
    if not 1 <= permittivity < float("inf"):
        raise DielectricError(f"relative permittivity is {permittivity:g}: it must be at least 1")
    if not 0 <= loss_tangent < float("inf"):
        raise DielectricError(f"loss tangent is {loss_tangent:g}: it must be 0 or more")
    # Not `1 - 1j * 0`: that would leave an imaginary part of -0.0 in comparisons of text.
    return complex(permittivity, -permittivity * loss_tangent if loss_tangent else 0.0)


def mixed_permittivity(
    solid: complex, fraction: float, rule: MixingRule = "plastic-host"
) -> complex:
    """Relative permittivity of plastic and air mixed.

    Parameters
    ----------
    solid : complex
        Relative permittivity of the solid plastic.
    fraction : float
        Solid part of the volume, 0 to 1.
    rule : {"plastic-host", "air-host", "bruggeman", "series", "parallel"}
        Maxwell Garnett with round air cells in plastic; with plastic grains in air; Bruggeman's
        symmetric rule; and the Wiener bounds, layers across and along the field.

    Returns
    -------
    complex
        Between the series and the parallel value for real permittivity.

    Raises
    ------
    DielectricError
        If the fraction is not within 0 to 1, or the rule is unknown.

    Notes
    -----
    Both Maxwell Garnett values bound every isotropic mixture of the two (Hashin & Shtrikman 1962).
    Printed lines, walls and gyroids are not isotropic; where the field runs mainly along the walls
    the truth leans to the parallel bound.
    """
    if not 0 <= fraction <= 1:
        raise DielectricError(f"solid fraction is {fraction:g}: it must lie between 0 and 1")
    if rule not in _RULES:
        raise DielectricError(f"mixing rule '{rule}' is unknown: use one of {', '.join(_RULES)}")
    return _RULES[rule](complex(solid), fraction)


def _maxwell_garnett(host: complex, inclusion: complex, part: float) -> complex:
    """Spheres of `inclusion` taking `part` of the volume of `host`."""
    pull = part * (inclusion - host) / (inclusion + 2 * host)
    return host * (1 + 2 * pull) / (1 - pull)


def _bruggeman(solid: complex, fraction: float) -> complex:
    """Root of f (s - e)/(s + 2 e) + (1 - f) (1 - e)/(1 + 2 e) = 0 that is a passive medium."""
    half = ((3 * fraction - 1) * solid + 2 - 3 * fraction) / 4
    return half + cmath.sqrt(half * half + solid / 2)


_RULES: dict[str, Callable[[complex, float], complex]] = {
    "plastic-host": lambda solid, fraction: _maxwell_garnett(solid, 1.0, 1 - fraction),
    "air-host": lambda solid, fraction: _maxwell_garnett(1.0, solid, fraction),
    "bruggeman": _bruggeman,
    "series": lambda solid, fraction: 1 / (fraction / solid + (1 - fraction)),
    "parallel": lambda solid, fraction: fraction * solid + 1 - fraction,
}


def printed_layers(
    solid: complex,
    thickness_m: float,
    fraction: float,
    *,
    skins_m: tuple[float, float] = (0.0, 0.0),
    rule: MixingRule = "plastic-host",
) -> tuple[Layer, ...]:
    """Layers of a print with solid skins around a partly filled core, from bottom to top.

    The skins are kept as layers of their own, because where they lie matters: the skin
    under the strip sees much more field than the one on the far side.

    Parameters
    ----------
    solid : complex
        Relative permittivity of the solid plastic.
    thickness_m : float
        Whole thickness.
    fraction : float
        Solid part of the whole volume, skins included, as weighing gives it.
    skins_m : (float, float)
        Thickness of the solid skins at the bottom and at the top.
    rule : str
        As in `mixed_permittivity`; applied to the core alone.

    Returns
    -------
    tuple of Layer
        One to three.

    Raises
    ------
    DielectricError
        If the skins are negative, thicker than the carrier, or hold more plastic than the fraction.
    """
    bottom_m, top_m = skins_m
    core_m = thickness_m - bottom_m - top_m
    # Sums of decimal millimetres may miss zero by rounding.
    slack_m = 1e-9 * thickness_m
    if min(bottom_m, top_m) < 0 or not core_m >= -slack_m:
        raise DielectricError(
            f"skins of {bottom_m * 1e3:g} and {top_m * 1e3:g} mm do not fit a carrier "
            f"{thickness_m * 1e3:g} mm thick: they must be 0 or more and leave 0 or more between"
        )
    if not 0 <= fraction <= 1:
        raise DielectricError(f"solid fraction is {fraction:g}: it must lie between 0 and 1")
    if core_m <= slack_m or fraction == 1:
        return (Layer(thickness_m, solid),)
    core = (fraction * thickness_m - bottom_m - top_m) / core_m
    if core < -1e-9:
        raise DielectricError(
            f"the skins alone fill {(bottom_m + top_m) / thickness_m:.3g} of the carrier, more "
            f"than its solid fraction of {fraction:g}: give thinner skins or a larger fraction"
        )
    middle = Layer(core_m, mixed_permittivity(solid, max(core, 0.0), rule))
    skins = (Layer(bottom_m, solid), middle, Layer(top_m, solid))
    return tuple(layer for layer in skins if layer.thickness_m > 0)
