"""A fit in words: values with intervals, what they mean, and what the data cannot tell."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from simkit.measured.fit_result import CONFOUNDED, LEARNT, LIMIT_95
from simkit.response.labels import half_wave_label

if TYPE_CHECKING:
    from collections.abc import Sequence

    from simkit.measured.fit_result import Confounding, FitResult, FittedCurve, FittedValue

HARDLY = 2.5
"""Two values cannot be told apart at all from here on, in `Confounding.times_narrower`: they have
a correlation of 0.92."""


def fit_text(result: FitResult) -> str:
    """Return the whole report of a fit."""
    parts = [
        f"{result.study.title}: fitted to "
        + ", ".join(str(curve.measurement.path) for curve in result.curves),
        "",
        *value_table(result),
        "",
        *(f"  {statement}" for statement in statements(result)),
        "",
    ]
    for curve in result.curves:
        parts += [*mode_table(curve), ""]
    parts += [f"note: {note}" for note in result.notes]
    return "\n".join(parts).rstrip()


def value_table(result: FitResult) -> list[str]:
    """One line per free value."""
    text = result.problem.variation.text
    rows = [("value", "study", "fitted", "95 % interval", "known before")]
    for v in result.values:
        before = (
            f"{text(v.name, v.prior.value)} +- {text(v.name, v.prior.width)}"
            if v.prior
            else f"{text(v.name, v.bounds[0])} .. {text(v.name, v.bounds[1])}"
        )
        rows.append(
            (
                v.name,
                text(v.name, v.nominal),
                text(v.name, v.value),
                f"{text(v.name, v.low)} .. {text(v.name, v.high)}",
                before,
            )
        )
    return aligned(rows)


def mode_table(curve: FittedCurve) -> list[str]:
    """One line per mode: dips before and after the fit against the measured ones."""
    measured = dict(curve.pairs)
    rows = [("mode", "dip in study, MHz", "fitted, MHz", "measured, MHz", "measured/fitted")]
    for place, half_waves in enumerate(curve.modes_after.half_waves):
        fitted = curve.modes_after.dip_hz[place]
        dip = curve.dips[measured[half_waves]].frequency_hz if half_waves in measured else np.nan
        rows.append(
            (
                half_wave_label(half_waves, curve.modes_after.on_plane),
                number_text(curve.modes_before.dip_hz[place] / 1e6, 1),
                number_text(fitted / 1e6, 1),
                number_text(dip / 1e6, 1),
                number_text(dip / fitted, 4),
            )
        )
    return [f"{curve.measurement.path.name}:", *aligned(rows)]


def statements(result: FitResult) -> list[str]:
    """What the fit says, one sentence each."""
    said = [
        f"difference from the measured curve: {result.rms_before:.3f} before, "
        f"{result.rms_after:.3f} after (rms of |reflection|)"
    ]
    said += [_without_dips(result, curve) for curve in result.curves if not curve.dips]
    said += [text for v in result.values if (text := _value_statement(result, v))]
    said += [_confounding_statement(result, c) for c in result.confounded]
    said += _tied_statements(result)
    if result.surrogate_error > 0.01:
        said.append(
            f"the interpolated model is off by up to {result.surrogate_error:.3f} in reflection "
            "from a solution at the fitted values: narrow the bounds for a finer one"
        )
    if result.rms_after > 0.08:
        said.append(
            "the fitted model still differs visibly: something that is not free is wrong (feed, "
            "cable, something near the antenna), so distrust the values"
        )
    picofarad = result.capacitance_f * 1e12
    if abs(picofarad) > 2 * result.problem.sizes.capacitance_f * 1e12:
        said.append(f"the feed shows {picofarad:+.2f} pF that the model lacks: solder or connector")
    plane = "connector" if result.study.nominal().feedline else "feed"
    for curve in result.curves:
        delay = curve.errors.delay_s
        if abs(delay) > 2 * result.problem.sizes.delay_s:
            said.append(
                f"{curve.measurement.path.name}: the reference plane misses the {plane} by "
                f"{delay * 1e12:+.0f} ps one way ({delay * 2.998e11:+.1f} mm of air): set the port "
                "extension"
            )
    return said


def _without_dips(result: FitResult, curve: FittedCurve) -> str:
    places = curve.modes_before.dip_hz[np.isfinite(curve.modes_before.dip_hz)] / 1e6
    expected = " and ".join(f"{place:.0f}" for place in places)
    frequency = curve.measurement.frequency_hz / 1e6
    where = f", where the study has them at {expected} MHz" if len(places) else ""
    return (
        f"{curve.measurement.path.name}: no dip from {frequency[0]:.0f} to {frequency[-1]:.0f} MHz"
        f"{where}: this fit rests on no feature of the antenna, do not build on its values; check "
        "the connection, or sweep where the dips are"
    )


def _value_statement(result: FitResult, v: FittedValue) -> str:
    text = result.problem.variation.text
    if all(v.is_cut):
        return (
            f"the data do not narrow {v.name}: its interval is that of its bounds, "
            f"{text(v.name, v.low)} to {text(v.name, v.high)}, and the fitted number by itself "
            "means nothing"
        )
    if v.at_bound:
        return (
            f"{v.name} ran to its bound {text(v.name, v.value)}: the bounds are too narrow or "
            "another assumption is wrong"
        )
    if v.learnt > LEARNT:
        source = "what was known before" if v.prior else "the bounds"
        return f"the data do not determine {v.name}: its interval comes from {source}"
    return _against_study(result, v) + _cut_words(result, v)


def _against_study(result: FitResult, v: FittedValue) -> str:
    text = result.problem.variation.text
    if v.low <= v.nominal <= v.high:
        return f"{v.name}: the study's {text(v.name, v.nominal)} agrees with the measurement"
    change = f" ({v.value / v.nominal - 1:+.1%})" if v.nominal else ""
    return (
        f"{v.name}: {text(v.name, v.value)} instead of the study's "
        f"{text(v.name, v.nominal)}{change}"
    )


def _cut_words(result: FitResult, v: FittedValue) -> str:
    """Say which end of an interval is not the data's."""
    if not any(v.is_cut):
        return ""
    end, number = ("lower", v.low) if v.is_cut[0] else ("upper", v.high)
    bound = result.problem.variation.text(v.name, number)
    return f"; the {end} end of its interval is its bound {bound}, the data alone would allow more"


def _confounding_statement(result: FitResult, c: Confounding) -> str:
    known = [v.name for v in result.values if v.prior and v.name in (c.first, c.second)]
    times = _times(c.times_narrower)
    advice = (
        f"what you know of {' and '.join(known)} settles it"
        if known
        else f"were one known, the other's interval would be {times} narrower: measure one and "
        "say so with --known"
    )
    how = "cannot" if c.times_narrower >= HARDLY else "can hardly"
    alone = ", ".join(
        f"{name} alone {_alone(result, name, sigma)}"
        for name, sigma in zip((c.first, c.second), c.alone_sigma, strict=True)
    )
    return (
        f"{c.first} and {c.second} {how} be told apart by these data (correlation "
        f"{c.correlation:+.3f}): {_combination(result, c)}; {alone}; {advice}"
    )


def _tied_statements(result: FitResult) -> list[str]:
    """Values that no single other one, but several together can make up for."""
    if len(result.values) < 3:
        return []
    told = {name for c in result.confounded for name in (c.first, c.second)}
    told |= {v.name for v in result.values if all(v.is_cut)}
    return [
        f"{name} cannot be told apart from {_listed(result, name)} together: were all of them "
        f"known, its interval would be {_times(times)} narrower; measure them and say so with "
        "--known"
        for name, times in result.tied.items()
        if times >= CONFOUNDED and name not in told
    ]


def _listed(result: FitResult, name: str) -> str:
    others = [v.name for v in result.values if v.name != name]
    return f"{', '.join(others[:-1])} and {others[-1]}"


def _times(number: float) -> str:
    return f"{number:.{1 if number < 10 else 0}f} times"


def _combination(result: FitResult, c: Confounding) -> str:
    """What of two values is known."""
    if np.isfinite(c.product):
        power = f"{abs(c.exponent):.2f}"
        raised = c.second if power == "1.00" else f"{c.second}^{power}"
        sign = "*" if c.exponent > 0 else "/"
        return f"they determine {c.first} {sign} {raised}, within {LIMIT_95 * c.relative_sigma:.2%}"
    text = result.problem.variation.text
    first = LIMIT_95 * c.alone_sigma[0]
    return (
        f"{text(c.first, first, 3)} more of {c.first} looks like "
        f"{text(c.second, -first * c.trade, 3)} more of {c.second}"
    )


def _alone(result: FitResult, name: str, sigma: float) -> str:
    """How well one of two confounded values is known without the other."""
    value = next(v for v in result.values if v.name == name)
    width = LIMIT_95 * sigma
    if width > value.bounds[1] - value.bounds[0]:
        return "not even within its bounds"
    if value.value > 0:
        return f"within {width / value.value:.2%}"
    return f"within {result.problem.variation.text(name, width, 3)}"


def number_text(value: float, digits: int) -> str:
    """Return a number with fixed digits, - for none."""
    return f"{value:.{digits}f}" if np.isfinite(value) else "-"


def aligned(rows: Sequence[tuple[str, ...]]) -> list[str]:
    """Set a table: first row its head, first column flush left."""
    widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]))]
    lines = [
        "  ".join(
            cell.ljust(width) if i == 0 else cell.rjust(width)
            for i, (cell, width) in enumerate(zip(row, widths, strict=True))
        ).rstrip()
        for row in rows
    ]
    return [lines[0], "  ".join("-" * width for width in widths), *lines[1:]]
