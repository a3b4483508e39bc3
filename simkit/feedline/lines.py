"""Lines of two conductors: impedance, effective permittivity, attenuation, and how far to trust it.

The cross-section is taken small against the wavelength, so that capacitance and inductance per
metre are static ones. For strips they come from the plane solution, good to 0.05 %; the formulas of
`simkit.feedline.closed_forms` are the check on it. Skin effect adds resistance and the inductance
that belongs to it. `doubts` says where a line is used beyond what that holds for.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any, TypeVar

import numpy as np
from scipy.optimize import brentq

from simkit.feedline.checks import FeedlineError, not_negative, positive, quantity
from simkit.feedline.limits import coplanar_dispersion_hz, plate_dispersion_hz
from simkit.feedline.pair import Crowding, side_by_side
from simkit.feedline.strip_line import (
    FULL_SHEET,
    NONE,
    Static,
    StripLine,
    facing,
    rounded,
    scaled,
)


@dataclass(frozen=True)
class TwoStrips(StripLine):
    """Two strips face to face, with a dielectric sheet between them.

    Attributes
    ----------
    width_m, separation_m : float
        The strips' width and the distance of their inner faces, which is the sheet's thickness.
    thickness_m : float
        Of the metal; 0 is allowed without loss.
    permittivity, loss_tangent : float
        Of the sheet; 1 for air.
    overhang_m : float, optional
        Sheet beyond each edge of the strips; far beyond if left out.
    conductivity_s_per_m : float, optional
        No loss in the metal if left out.
    other_width_m : float, optional
        Width of the second strip if it is another one.

    Raises
    ------
    FeedlineError
        If a size is not positive, or metal with loss has no thickness.
    """

    width_m: float
    separation_m: float
    thickness_m: float = 0.0
    permittivity: float = 1.0
    loss_tangent: float = 0.0
    overhang_m: float | None = None
    conductivity_s_per_m: float | None = None
    other_width_m: float | None = None

    def __post_init__(self) -> None:
        self._check(
            {
                "strip width": self.width_m,
                "width of the other strip": self._other_m,
                "strip separation": self.separation_m,
            }
        )

    @property
    def _other_m(self) -> float:
        return self.width_m if self.other_width_m is None else self.other_width_m

    @property
    def distance_m(self) -> float:
        """Between the conductors."""
        return self.separation_m

    @property
    def about(self) -> str:
        """Kind and dimensions in a few words."""
        widths = quantity(self.width_m, "m")
        if self.other_width_m is not None:
            widths += f" and {quantity(self.other_width_m, 'm')}"
        apart = quantity(self.separation_m, "m")
        return f"two strips {widths} wide, {apart} apart{self._sheet_words()}"

    @cached_property
    def static(self) -> Static:
        """The plane solution."""
        pair = facing(
            self.width_m,
            self._other_m,
            self.separation_m,
            self.thickness_m,
            self.overhang_m,
            self._epsilon,
        )
        first, second = scaled(pair, self.separation_m)
        return Static(pair.air, pair.permittivity, first + second, NONE)

    @property
    def _distance_m(self) -> float:
        return self.separation_m

    @property
    def _across_m(self) -> float:
        return max(self.width_m, self._other_m) + self.separation_m

    @property
    def _ratio(self) -> float:
        return min(self.width_m, self._other_m) / self.separation_m

    @property
    def _dispersion_limit_hz(self) -> float:
        return plate_dispersion_hz(
            self.impedance_ohm / 2,
            self.separation_m / 2,
            self.permittivity,
            self.static.permittivity.real,
        )


@dataclass(frozen=True)
class StripOverPlate(StripLine):
    """A strip over a wide plate, with a dielectric sheet between them.

    Attributes
    ----------
    width_m, height_m : float
        The strip's width and the height of its lower face over the plate.
    thickness_m, permittivity, loss_tangent, overhang_m, conductivity_s_per_m
        As in `TwoStrips`. The plate is wide against width and height, and of the strip's metal.

    Raises
    ------
    FeedlineError
        If a size is not positive, or metal with loss has no thickness.
    """

    width_m: float
    height_m: float
    thickness_m: float = 0.0
    permittivity: float = 1.0
    loss_tangent: float = 0.0
    overhang_m: float | None = None
    conductivity_s_per_m: float | None = None

    def __post_init__(self) -> None:
        self._check({"strip width": self.width_m, "height over the plate": self.height_m})

    @property
    def distance_m(self) -> float:
        """Between the conductors."""
        return self.height_m

    @property
    def about(self) -> str:
        """Kind and dimensions in a few words."""
        return (
            f"strip {quantity(self.width_m, 'm')} wide, {quantity(self.height_m, 'm')} over a "
            f"plate{self._sheet_words()}"
        )

    @cached_property
    def static(self) -> Static:
        """The plane solution of the strip and its image."""
        sizes = (self.thickness_m, self.overhang_m, self._epsilon)
        pair = facing(self.width_m, self.width_m, 2 * self.height_m, *sizes)
        first, _ = scaled(pair, 2 * self.height_m)
        return Static(2 * pair.air, pair.permittivity, first, self._plate())

    def _plate(self) -> Crowding:
        """Loss of the plate: as the inductance grows when its face recedes (Wheeler's rule)."""
        if self.conductivity_s_per_m is None:
            return NONE
        step = 0.01
        low, high = (
            1
            / facing(
                self.width_m,
                self.width_m,
                2 * self.height_m * (1 + side * step),
                self.thickness_m,
                self.overhang_m,
                1.0,
            ).air
            / 2
            for side in (-1, 1)
        )
        return Crowding(0.0, 0.0, (high - low) / (2 * step * self.height_m))

    @property
    def _pair_ohm(self) -> float:
        return 2 * self.impedance_ohm

    @property
    def _distance_m(self) -> float:
        return 2 * self.height_m

    @property
    def _across_m(self) -> float:
        return self.width_m + self.height_m

    @property
    def _ratio(self) -> float:
        return self.width_m / (2 * self.height_m)

    @property
    def _dispersion_limit_hz(self) -> float:
        return plate_dispersion_hz(
            self.impedance_ohm, self.height_m, self.permittivity, self.static.permittivity.real
        )


@dataclass(frozen=True)
class CoplanarStrips(StripLine):
    """Two strips side by side, in air or on a dielectric sheet.

    Attributes
    ----------
    width_m, gap_m : float
        The strips' width and the gap between their edges.
    sheet_m : float
        Thickness of the sheet under the strips; 0 in air.
    thickness_m, permittivity, loss_tangent, overhang_m, conductivity_s_per_m, other_width_m
        As in `TwoStrips`; the overhang is beyond the outer edges.

    Raises
    ------
    FeedlineError
        If a size is not positive, or metal with loss has no thickness.
    """

    width_m: float
    gap_m: float
    sheet_m: float = 0.0
    thickness_m: float = 0.0
    permittivity: float = 1.0
    loss_tangent: float = 0.0
    overhang_m: float | None = None
    conductivity_s_per_m: float | None = None
    other_width_m: float | None = None

    def __post_init__(self) -> None:
        self._check(
            {
                "strip width": self.width_m,
                "width of the other strip": self._other_m,
                "gap between the strips": self.gap_m,
            }
        )
        not_negative("sheet thickness", self.sheet_m, "m")
        if self.permittivity > 1:
            positive("thickness of a sheet with permittivity above 1", self.sheet_m, "m")

    @property
    def _other_m(self) -> float:
        return self.width_m if self.other_width_m is None else self.other_width_m

    @property
    def distance_m(self) -> float:
        """Between the conductors."""
        return self.gap_m

    @property
    def about(self) -> str:
        """Kind and dimensions in a few words."""
        widths = quantity(self.width_m, "m")
        if self.other_width_m is not None:
            widths += f" and {quantity(self.other_width_m, 'm')}"
        gap = quantity(self.gap_m, "m")
        return f"coplanar strips {widths} wide, gap {gap}{self._sheet_words()}"

    @cached_property
    def static(self) -> Static:
        """The plane solution."""
        unit_m = self.gap_m
        sheet_m = self.sheet_m if self.permittivity > 1 else unit_m
        overhang_m = self.overhang_m
        if overhang_m is None:
            overhang_m = FULL_SHEET * (self.gap_m + min(self.width_m, sheet_m))
        pair = side_by_side(
            *(rounded(length_m / unit_m) for length_m in (self.width_m, self._other_m, self.gap_m)),
            rounded(self.thickness_m / unit_m),
            rounded(sheet_m / unit_m),
            rounded(overhang_m / unit_m),
            self._epsilon,
        )
        first, second = scaled(pair, unit_m)
        return Static(pair.air, pair.permittivity, first + second, NONE)

    @property
    def _distance_m(self) -> float:
        return self.gap_m + min(self.width_m, self._other_m) / 2

    @property
    def _across_m(self) -> float:
        return self.width_m + self._other_m + self.gap_m

    @property
    def _ratio(self) -> float:
        return min(self.width_m, self._other_m) / self.gap_m

    @property
    def _dispersion_limit_hz(self) -> float:
        return coplanar_dispersion_hz(
            self.width_m, self.gap_m, self.sheet_m, self.permittivity, self.static.permittivity.real
        )


AnyStrips = TypeVar("AnyStrips", bound=TwoStrips | StripOverPlate | CoplanarStrips)

NARROWEST, WIDEST = 0.02, 50.0


def width_for(line: AnyStrips, impedance_ohm: float) -> AnyStrips:
    """Return the same line with the width that gives it an impedance (without loss).

    Parameters
    ----------
    line : TwoStrips, StripOverPlate or CoplanarStrips
        Its own width does not matter; a second strip gets the same width.
    impedance_ohm : float

    Raises
    ------
    FeedlineError
        If the impedance lies outside those of widths from 0.02 to 50 times the distance of the
        conductors.
    """
    positive("wanted impedance", impedance_ohm, "ohm")
    distance_m = line.distance_m
    lossless: dict[str, Any] = {"loss_tangent": 0.0, "conductivity_s_per_m": None}

    def of_width(log_m: float, **losses: Any) -> AnyStrips:
        width_m = float(np.exp(log_m))
        changes: dict[str, Any] = {"width_m": width_m, **losses}
        if not isinstance(line, StripOverPlate):
            changes["other_width_m"] = None
        return replace(line, **changes)

    def miss(log_m: float) -> float:
        return of_width(log_m, **lossless).impedance_ohm / impedance_ohm - 1

    low = high = np.log(np.clip(line.width_m / distance_m, NARROWEST, WIDEST) * distance_m)
    while miss(low) < 0:
        low = _in_range(low - STEP, line, impedance_ohm)
    while miss(high) > 0:
        high = _in_range(high + STEP, line, impedance_ohm)
    return of_width(brentq(miss, low, high, xtol=1e-6) if low < high else low)


STEP = 0.4


def _in_range(log_m: float, line: AnyStrips, impedance_ohm: float) -> float:
    ratio = np.exp(log_m) / line.distance_m
    if NARROWEST <= ratio <= WIDEST:
        return log_m
    raise FeedlineError(
        f"{line.about}: no width from {NARROWEST:g} to {WIDEST:g} times the distance gives "
        f"{impedance_ohm:.4g} ohm: change the distance of the conductors or the sheet"
    )
