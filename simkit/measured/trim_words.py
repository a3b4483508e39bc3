"""A trim in words."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from simkit.measured.fit_result import LIMIT_95
from simkit.measured.fit_words import aligned, number_text
from simkit.study.units import as_text, find_unit

if TYPE_CHECKING:
    from collections.abc import Sequence

    from simkit.measured.trim import Trim
    from simkit.measured.trim_model import ModeChange

SHALLOW_DB = 10.0
MISSED = 0.004
"""Relative distance of the measured dip from the fitted one that an analyser's errors may make."""


def trim_text(trim: Trim) -> str:
    """Return the change of one dimension with its interval, consequences and warnings."""
    lines = [
        f"{trim.label} dip from {_megahertz(trim.present_hz)} (+- "
        f"{LIMIT_95 * trim.present_sigma_hz / 1e6:.1f}) to {_megahertz(trim.target_hz)} by "
        f"`{trim.name}`, now {_length(trim, trim.present)}:",
        f"  by the fitted model  {_change(trim, trim.change)}, to "
        f"{_length(trim, trim.present + trim.change)}; 95 % interval "
        f"{_change(trim, trim.low)} to {_change(trim, trim.high)}",
        *_scaling_lines(trim),
        "",
        *mode_lines(trim.modes),
        "",
        *(f"  {line}" for line in advice(trim)),
    ]
    return "\n".join(lines).rstrip()


def _scaling_lines(trim: Trim) -> list[str]:
    if trim.of_feedline:
        return []
    factor = trim.correction_factor
    said = f"; correction factor {factor:.3f}" if np.isfinite(factor) else ""
    return [f"  by plain scaling     {_change(trim, trim.scaling_change)}{said}"]


def mode_lines(modes: Sequence[ModeChange]) -> list[str]:
    """What happens to every mode's dip and match."""
    rows = [("mode", "dip now, MHz", "then, MHz", "return loss now, dB", "then, dB")]
    rows += [
        (
            mode.label,
            number_text(mode.before_hz / 1e6, 1),
            number_text(mode.after_hz / 1e6, 1),
            number_text(mode.before_return_loss_db, 1),
            number_text(mode.after_return_loss_db, 1),
        )
        for mode in modes
    ]
    return indented(rows)


def indented(rows: Sequence[tuple[str, ...]]) -> list[str]:
    """Set a table that belongs to the line above it."""
    return [f"  {line}" for line in aligned(rows)]


def advice(trim: Trim) -> list[str]:
    """What to do, and what to beware of."""
    unsupported = [] if trim.is_measured else [unsupported_line(trim.label)]
    return [*unsupported, *_what_to_expect(trim), _what_to_do(trim), *_side_effects(trim)]


def unsupported_line(label: str) -> str:
    """Mark a change whose mode was not measured."""
    mode = label.removesuffix(" wave")
    return (
        f"UNSUPPORTED: no measured dip is known to be of the {label} mode, so this change rests on "
        "the model and the other modes alone; if one is, say so with "
        f"--pin '{mode}=FREQUENCY', else sweep where it should be before you cut"
    )


def _what_to_expect(trim: Trim) -> list[str]:
    lines = []
    if trim.band_hz[1] > trim.band_hz[0]:
        lines.append(
            f"return loss then at least {trim.band_return_loss_db:.1f} dB from "
            f"{_megahertz(trim.band_hz[0])} to {_megahertz(trim.band_hz[1])}, now "
            f"{trim.band_return_loss_now_db:.1f} dB; no other `{trim.name}` near it does better"
        )
    if np.isfinite(trim.gain_dbi).all():
        before, after = trim.gain_dbi
        lines.append(f"peak gain of the mode {before:.2f} dBi now, {after:.2f} dBi then")
    missed = trim.measured_hz - trim.present_hz
    if abs(missed) > max(3 * trim.present_sigma_hz, MISSED * trim.present_hz):
        lines.append(
            f"the measured dip is at {_megahertz(trim.measured_hz)}, the fitted model puts it at "
            f"{_megahertz(trim.present_hz)}: free a value that explains this before you cut"
        )
    return lines


def _what_to_do(trim: Trim) -> str:
    if abs(trim.change) < LIMIT_95 * trim.sigma:
        return "the dip is where it is wanted as far as these data can tell: cut nothing"
    if trim.of_feedline:
        return f"change `{trim.name}` by {_change(trim, trim.change)}, then measure once more"
    if trim.adds_metal:
        area = f" ({trim.metal_m2[0] * 1e6:.3g} mm²)" if np.isfinite(trim.metal_m2[0]) else ""
        return (
            f"metal must be added{area}: `{trim.name}` has to change by "
            f"{_change(trim, trim.change)}; this piece cannot be cut to the target, solder strip "
            "on or make a new one"
        )
    if not trim.cuts_metal:
        return f"change `{trim.name}` by {_change(trim, trim.change)}: no metal is cut"
    if trim.in_steps:
        first = trim.first_step
        return (
            f"cut {trim.first_share:.0%} first ({_change(trim, first)}), measure, fit again: the "
            "interval is wide against the cut, and metal does not grow back"
        )
    return f"cut {_change(trim, trim.change)} of `{trim.name}`, then measure once more"


def _side_effects(trim: Trim) -> list[str]:
    lines = []
    for mode in trim.modes:
        if mode.half_waves == trim.half_waves:
            if mode.after_return_loss_db < SHALLOW_DB:
                lines.append(
                    f"the dip will be only {mode.after_return_loss_db:.1f} dB deep: the place is "
                    "right then, the match is not"
                )
            continue
        moved = mode.after_hz / mode.before_hz - 1
        if np.isfinite(moved) and abs(moved) > 0.002:
            lines.append(f"the {mode.label} dip moves by {moved:+.1%} with it")
    return lines


def factor_lines(trims: Sequence[Trim]) -> list[str]:
    """Correction factors for one's own sheet: what plain scaling must be multiplied by."""
    rows = [("dimension", "now", "MHz per unit", "plain scaling times")]
    rows += [
        (
            trim.name,
            _length(trim, trim.present),
            f"{trim.slope_hz_per_m * unit_si(trim.unit) / 1e6:+.2f} MHz"
            + (f"/{trim.unit}" if trim.unit != "1" else ""),
            number_text(trim.correction_factor, 3),
        )
        for trim in trims
    ]
    return aligned(rows)


def unit_si(unit: str) -> float:
    """Return what a unit is in SI."""
    return float(find_unit(unit).factor) if unit != "1" else 1.0


def length_text(value: float, unit: str) -> str:
    """Return a dimension as a workshop reads it: to 0.01 mm, or five digits of another unit."""
    return f"{value * 1e3:.2f} mm" if unit == "mm" else as_text(value, unit, 5)


def change_text(value: float, unit: str) -> str:
    """Return a change with its sign: ``-3.05 mm``."""
    sign = "+" if value > 0 else "-" if value < 0 else ""
    if unit == "mm":
        return f"{sign}{abs(value) * 1e3:.2f} mm"
    return f"{sign}{as_text(abs(value), unit, 3)}"


def _megahertz(frequency_hz: float) -> str:
    return f"{frequency_hz / 1e6:.1f} MHz"


def _length(trim: Trim, value: float) -> str:
    return length_text(value, trim.unit)


def _change(trim: Trim, value: float) -> str:
    return change_text(value, trim.unit)
