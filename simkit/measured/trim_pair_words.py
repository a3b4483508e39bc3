"""A trim of two dimensions in words."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from simkit.measured.fit_result import LIMIT_95
from simkit.measured.fit_words import aligned, number_text
from simkit.measured.trim_words import (
    change_text,
    indented,
    length_text,
    mode_lines,
    unit_si,
    unsupported_line,
)
from simkit.study.units import as_text

if TYPE_CHECKING:
    from simkit.measured.trim_pair import PairTrim

TOLD = 0.002
"""Relative change of another mode's dip from which it is told."""

MOST_TIMES = 5.0
"""Change over plain scaling beyond which a factor between them means nothing."""


def pair_text(trim: PairTrim) -> str:
    """Return both changes with their intervals, consequences and warnings."""
    first, second = trim.names
    lines = [
        f"{trim.labels[0]}, {trim.labels[1]}: by `{first}` and `{second}` together",
        "",
        *indented(_dimension_rows(trim)),
        "",
        *indented(_target_rows(trim)),
        "",
        *mode_lines(trim.modes),
        "",
        *(f"  {line}" for line in advice(trim)),
    ]
    return "\n".join(lines).rstrip()


def _dimension_rows(trim: PairTrim) -> list[tuple[str, ...]]:
    rows: list[tuple[str, ...]] = [
        ("dimension", "now", "change", "95 % interval", "then", "plain scaling")
    ]
    for k, (name, unit) in enumerate(zip(trim.names, trim.units, strict=True)):
        now, change = float(trim.present[k]), float(trim.change[k])
        rows.append(
            (
                name,
                length_text(now, unit),
                change_text(change, unit),
                f"{change_text(float(trim.low[k]), unit)} to "
                f"{change_text(float(trim.high[k]), unit)}"
                if change
                else "-",
                length_text(now + change, unit),
                change_text(float(trim.scaling_change[k]), unit),
            )
        )
    return rows


def _target_rows(trim: PairTrim) -> list[tuple[str, ...]]:
    rows: list[tuple[str, ...]] = [("target", "now", "then", "+- (95 %)", "with plain scaling")]
    for k, label in enumerate(trim.labels):
        shown = [
            _shown(trim, k, float(value))
            for value in (trim.before[k], trim.after[k], LIMIT_95 * trim.shown_sigma[k])
        ]
        rows.append((label, *shown, _shown(trim, k, float(trim.scaled[k]))))
    return rows


def _shown(trim: PairTrim, target: int, value: float) -> str:
    """A dip's frequency or a return loss with its unit."""
    if trim.targets[target].kind == "dip":
        return f"{number_text(value / 1e6, 1)} MHz"
    return f"{number_text(value, 1)} dB"


def advice(trim: PairTrim) -> list[str]:
    """What to do, and what to beware of."""
    lines = [*map(unsupported_line, trim.unmeasured), *_conditions(trim)]
    for label, gains in dict(zip(trim.mode_labels, trim.gains_dbi, strict=False)).items():
        if np.isfinite(gains).all():
            lines.append(
                f"peak gain of the {label} mode {gains[0]:.2f} dBi now, {gains[1]:.2f} dBi then"
            )
    lines.append(_what_to_do(trim))
    aimed = {target.half_waves for target in trim.targets}
    for mode in trim.modes:
        moved = mode.after_hz / mode.before_hz - 1
        if mode.half_waves not in aimed and np.isfinite(moved) and abs(moved) > TOLD:
            lines.append(f"the {mode.label} dip moves by {moved:+.1%} with it")
    return lines


def _conditions(trim: PairTrim) -> list[str]:
    """How far the two equations can be trusted, and what plain scaling would miss."""
    lines = []
    first, second = trim.names
    if trim.change[1] == 0:
        lines.append(f"`{first}` alone reaches both; leave `{second}` as it is")
    elif not trim.well_conditioned:
        lines.append(
            f"`{first}` and `{second}` act on the two targets almost alike (sine of the angle "
            f"{trim.angle_sine:.2f}), so small errors of the model become large changes: see the "
            "intervals, or take a dimension that pulls the modes apart"
        )
    elif abs(trim.correlation) > 0.9:
        lines.append(
            f"the two changes are uncertain together (correlation {trim.correlation:+.2f}): "
            "measure after each of them"
        )
    return lines


def _what_to_do(trim: PairTrim) -> str:
    if trim.is_nothing:
        return "both targets are met as far as these data can tell: cut nothing"
    if not trim.is_determined:
        return (
            "both changes are smaller than their uncertainty while a target is missed: these two "
            "dimensions do not settle it, cut nothing by them; try one target, or other dimensions"
        )
    parts = " and ".join(
        f"{change_text(float(change), unit)} of `{name}`"
        for name, unit, change in zip(trim.names, trim.units, trim.change, strict=True)
        if change
    )
    if trim.adds_metal:
        return (
            f"metal must be added for {parts}: {trim.metal_m2[0] * 1e6:.3g} mm² that this piece "
            "does not have; solder strip on or make a new one"
            if np.isfinite(trim.metal_m2[0])
            else f"metal must be added for {parts}; solder strip on or make a new one"
        )
    if not trim.cuts_metal:
        return f"change {parts}: no metal is cut"
    if trim.in_steps:
        return (
            f"cut {trim.first_share:.0%} of both first "
            f"({', '.join(_shared(trim))}), measure, fit again: an interval is wide against its "
            "cut, and metal does not grow back"
        )
    return f"cut {parts}, then measure once more"


def _shared(trim: PairTrim) -> list[str]:
    return [
        f"`{name}` {change_text(trim.first_share * float(change), unit)}"
        for name, unit, change in zip(trim.names, trim.units, trim.change, strict=True)
    ]


def pair_factor_lines(trim: PairTrim) -> list[str]:
    """For one's own sheet: how each target goes with each dimension, and model over scaling."""
    heads = [
        "return loss" if target.kind == "match" else f"{mode} dip"
        for mode, target in zip(trim.mode_labels, trim.targets, strict=True)
    ]
    rows = [("dimension", "now", *heads, "plain scaling times")]
    for k, (name, unit) in enumerate(zip(trim.names, trim.units, strict=True)):
        cells = []
        for row, target in enumerate(trim.targets):
            factor, word = (1.0, "dB") if target.kind == "match" else (1e-6, "MHz")
            slope = float(trim.slopes[row, k]) * factor * unit_si(unit)
            cells.append(f"{slope:+.2f} {word}/{unit}" if unit != "1" else f"{slope:+.2f} {word}")
        change, scaling = float(trim.change[k]), float(trim.scaling_change[k])
        comparable = 0 < abs(change) < MOST_TIMES * abs(scaling)
        times = number_text(change / scaling, 3) if comparable else "-"
        rows.append((name, as_text(float(trim.present[k]), unit, 5), *cells, times))
    return aligned(rows)
