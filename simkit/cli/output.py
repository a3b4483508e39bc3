"""Text the commands print: tables, quantities with readable units, JSON and CSV."""

from __future__ import annotations

import csv
import io
import json
import math
from collections.abc import Iterable, Mapping, Sequence

import click

_NAME_WIDTH = 14
_PREFIXES = ((1e9, "G"), (1e6, "M"), (1e3, "k"), (1.0, ""))


def frequency_text(frequency_hz: float | None) -> str:
    """Return a frequency with four or five digits and a fitting prefix, "-" for none.

    Examples
    --------
    >>> frequency_text(868.31e6)
    '868.3 MHz'
    """
    if frequency_hz is None or not math.isfinite(frequency_hz):
        return "-"
    size = abs(frequency_hz)
    scale, prefix = next((p for p in _PREFIXES if size >= p[0]), _PREFIXES[-1])
    return f"{frequency_hz / scale:#.4g} {prefix}Hz".replace(". ", " ")


def number_text(value: float | None, digits: int = 1, unit: str = "") -> str:
    """Return a number with fixed digits after the point and its unit, "-" for none."""
    if value is None or not math.isfinite(value):
        return "-"
    # Adding 0 makes of -0, which rounding leaves of what is slightly below, a plain 0.
    return f"{round(value, digits) + 0.0:.{digits}f} {unit}".rstrip()


def quantity_text(value: float, unit: str) -> str:
    """Return an SI value in the unit given, one a study file may use.

    Examples
    --------
    >>> quantity_text(0.0765, "mm")
    '76.5 mm'
    """
    from simkit.study.units import find_unit

    shown = f"{value / float(find_unit(unit).factor):.6g}"
    return shown if unit in {"", "1"} else f"{shown} {unit}"


def length_text(value_m: float) -> str:
    """Return a length in millimetres to a hundredth."""
    return f"{value_m * 1e3:.2f}".rstrip("0").rstrip(".") + " mm"


def duration_text(seconds: float) -> str:
    """Return a duration as seconds, minutes or hours, whichever reads best."""
    if seconds < 0.95:
        return f"{seconds:.2g} s"
    if seconds < 100:
        return f"{seconds:.0f} s"
    if seconds < 5400:
        return f"{seconds / 60:.0f} min"
    return f"{seconds / 3600:.1f} h"


def size_text(size_bytes: float) -> str:
    """Return an amount of storage with a fitting decimal prefix."""
    for scale, unit in ((1e9, "GB"), (1e6, "MB"), (1e3, "kB")):
        if size_bytes >= scale:
            return f"{size_bytes / scale:.3g} {unit}"
    return f"{size_bytes:.0f} B"


def labelled(name: str, text: str) -> str:
    """Return a name in the left column with text beside it; further lines stay in their column."""
    return name.ljust(_NAME_WIDTH) + text.replace("\n", "\n" + " " * _NAME_WIDTH)


def table(head: Sequence[str], rows: Iterable[Sequence[str]]) -> str:
    """Return an aligned text table: a line of names, a rule, one line per row.

    Columns whose cells all begin with a digit or are empty are set flush right.
    """
    body = [tuple(row) for row in rows]
    columns = list(zip(head, *body, strict=True))
    widths = [max(len(cell) for cell in column) for column in columns]
    right = [all(cell[:1] in set("0123456789-+.±") | {""} for cell in col[1:]) for col in columns]

    def line(cells: Sequence[str]) -> str:
        padded = (
            cell.rjust(width) if flush else cell.ljust(width)
            for cell, width, flush in zip(cells, widths, right, strict=True)
        )
        return "  ".join(padded).rstrip()

    rule = "  ".join("-" * width for width in widths)
    return "\n".join([line(tuple(head)), rule, *(line(row) for row in body)])


def json_text(data: object) -> str:
    """Return strict JSON; numbers that are not finite become null."""
    return json.dumps(_finite(data), indent=2, allow_nan=False, ensure_ascii=False)


def _finite(data: object) -> object:
    if isinstance(data, float):
        return data if math.isfinite(data) else None
    if isinstance(data, Mapping):
        return {key: _finite(value) for key, value in data.items()}
    if isinstance(data, list | tuple):
        return [_finite(value) for value in data]
    return data


def csv_text(rows: Sequence[Mapping[str, object]]) -> str:
    """Return CSV with the union of the rows' keys as its columns; what is unknown stays empty."""
    names = list(dict.fromkeys(name for row in rows for name in row))
    buffer = io.StringIO()
    writer = csv.DictWriter(buffer, names, restval="", lineterminator="\n")
    writer.writeheader()
    for row in rows:
        writer.writerow({key: _blank(value) for key, value in row.items()})
    return buffer.getvalue()


def _blank(value: object) -> object:
    unknown = value is None or (isinstance(value, float) and not math.isfinite(value))
    return "" if unknown else value


def emit(text: str, output: str | None = None) -> None:
    """Print to standard output, or write to a file and say so on standard error."""
    if output is None:
        click.echo(text.rstrip("\n"))
        return
    with open(output, "w", encoding="utf-8") as file:
        file.write(text.rstrip("\n") + "\n")
    click.echo(f"written: {output}", err=True)
