"""A comparison in words: the table and what follows from it."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Sequence

    from simkit.measured.comparison import Comparison
    from simkit.measured.measurement import Measurement
    from simkit.measured.mode_line import ModeLine
    from simkit.measured.nearest import NearCase
    from simkit.measured.poles import MeasuredModes

MOVE_ALIKE = 0.004
"""Spread of the ratios up to which the modes moved alike: the model's own error of 0.15 % in each
of two frequencies, twice the standard deviation."""

_GROUPS = (
    ("", 1),
    ("natural, MHz", 2),
    ("Q", 2),
    ("dip, MHz", 3),
    ("return loss, dB", 2),
    ("to lowest mode", 2),
)
_PAIR = ("simul.", "meas.")
_NAMES = ("mode", *_PAIR, *_PAIR, *_PAIR, "m./s.", *_PAIR, *_PAIR)


def comparison_text(comparison: Comparison) -> str:
    """Return the comparison as a text of some lines: case, table, conclusion, notes."""
    rows = [_cells(line) for line in comparison.lines]
    parts = [
        f"{comparison.measurement.path} beside {case_text(comparison)}",
        *([f"the file says: {comparison.file_comment}"] if comparison.file_comment else []),
        "",
        *_table(rows),
        "",
        *_conclusion(comparison),
        comparison.agreement().as_text(),
    ]
    parts += [
        f"unpaired: measured dip at {dip.frequency_hz / 1e6:.1f} MHz, "
        f"return loss {dip.return_loss_db:.1f} dB, belongs to no mode of this case"
        for dip in comparison.unpaired
    ]
    parts += [f"note: {note}" for note in comparison.notes]
    return "\n".join(parts)


def case_text(comparison: Comparison) -> str:
    """Return ``case 7 (arm 76 mm, width 8 mm)``, with a word if it is doubtful."""
    values = [
        quantity_text(name, value, comparison.units[name])
        for name, value in comparison.values.items()
    ]
    text = f"case {comparison.case}" + (f" ({', '.join(values)})" if values else "")
    return text if comparison.status == "solved" else f"{text}, {comparison.status}"


def quantity_text(name: str, value: float, units: str) -> str:
    """Return a swept value as the workshop says it: ``arm 76 mm``."""
    factor, unit = {"m": (1e3, " mm"), "Hz": (1e-6, " MHz"), "1": (1.0, "")}.get(
        units, (1.0, f" {units}")
    )
    return f"{name} {value * factor:.5g}{unit}"


def natural_text(found: MeasuredModes | None) -> str:
    """Return the natural modes a sweep shows, and those it does not support, in one line."""
    if found is None:
        return (
            "natural modes cannot be read from the sweep: no dip is paired, or a feed line lies "
            "before the antenna"
        )
    sure = [
        f"{mode.frequency_hz / 1e6:.1f} +- {1.96 * mode.frequency_sigma_hz / 1e6:.1f} MHz "
        f"(Q {mode.q:.2f})"
        for mode in found.modes
        if mode.supported
    ]
    unsure = sum(not mode.supported for mode in found.modes)
    text = "natural modes read from the sweep: " + (", ".join(sure) or "none is supported by it")
    if unsure:
        text += f"; {unsure} more pole{'s' if unsure > 1 else ''} of the fit not supported"
    return "; ".join([text, *found.notes])


def nearest_text(measurement: Measurement, cases: Sequence[NearCase]) -> str:
    """Return the stored cases that come nearest to a measurement as a table."""
    from simkit.measured.fit_words import aligned

    rows = [("rank", "case", "dip misfit", "curve rms", "values")]
    rows += [
        (
            str(rank + 1),
            str(near.case),
            _number(near.misfit, 2),
            _number(near.curve, 3),
            ", ".join(quantity_text(n, v, near.units.get(n, "1")) for n, v in near.values.items()),
        )
        for rank, near in enumerate(cases)
    ]
    return "\n".join([f"{measurement.path}: nearest stored cases as they stand", *aligned(rows)])


def _cells(line: ModeLine) -> tuple[str, ...]:
    return (
        f"{line.label} ?" if line.ambiguous else line.label,
        _number(line.natural_hz / 1e6, 1),
        _number(line.measured_natural_hz / 1e6, 1),
        _number(line.q, 1),
        _with_error(line.measured_q, 1.96 * line.measured_q_sigma),
        _number(line.simulated_hz / 1e6, 1),
        _number(line.measured_hz / 1e6, 1),
        _number(line.ratio, 4),
        _number(line.simulated_return_loss_db, 1),
        _number(line.measured_return_loss_db, 1),
        _number(line.simulated_ratio, 3),
        _number(line.measured_ratio, 3),
    )


def _number(value: float, digits: int) -> str:
    return f"{value:.{digits}f}" if np.isfinite(value) else "-"


def _with_error(value: float, limit: float) -> str:
    """A number with its 95 % interval, to the place that is uncertain."""
    return f"{value:.1f} +-{limit:.1f}" if np.isfinite(value) else "-"


def _table(rows: list[tuple[str, ...]]) -> list[str]:
    """Columns set flush right but the first, under heads that each reach over a group of them."""
    widths = [max(len(row[i]) for row in (_NAMES, *rows)) for i in range(len(_NAMES))]
    widths = [max(width, 6) for width in widths]
    rule = tuple("-" * width for width in widths)
    return [_group_line(widths), *(_line(row, widths) for row in (_NAMES, rule, *rows))]


def _group_line(widths: list[int]) -> str:
    cells, place = [], 0
    for name, columns in _GROUPS:
        room = sum(widths[place : place + columns]) + 2 * (columns - 1)
        cells.append(name.rjust(room))
        place += columns
    return "  ".join(cells)


def _line(row: tuple[str, ...], widths: list[int]) -> str:
    rest = [cell.rjust(width) for cell, width in zip(row[1:], widths[1:], strict=True)]
    return "  ".join([row[0].ljust(widths[0]), *rest])


def _conclusion(comparison: Comparison) -> list[str]:
    paired = [line for line in comparison.lines if line.is_paired]
    if not paired:
        return ["no measured dip could be paired with a mode of this case"]
    ratios = [line.ratio for line in paired]
    mean = float(np.exp(np.mean(np.log(ratios))))
    if len(paired) == 1:
        return [f"measured/simulated {mean:.4f} from one mode: no ratio between modes to judge by"]
    spread = max(ratios) / min(ratios) - 1
    return [
        f"measured/simulated {mean:.4f} on average, modes within {spread:.2%} of each other: "
        + _meaning(mean, spread)
    ]


def _meaning(mean: float, spread: float) -> str:
    if spread > MOVE_ALIKE:
        return "they move unlike, as they do with a wrong width, carrier or feed"
    if abs(mean - 1) <= MOVE_ALIKE / 2:
        return "the build is as modelled, as far as the model can tell"
    return "they move alike, as they do with a wrong length"
