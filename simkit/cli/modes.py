"""``simkit modes``: list natural modes and what they own."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from simkit.cli.folder import says_damage
from simkit.cli.options import case_option, csv_option, json_option, one_format, results_argument
from simkit.cli.output import (
    csv_text,
    emit,
    frequency_text,
    json_text,
    number_text,
    quantity_text,
    table,
)

if TYPE_CHECKING:
    import xarray as xr

Row = dict[str, Any]

_KEY = """\
natural: frequency and Q of the mode itself, whatever the feed.
dip: minimum of the reflection at the connector, which is what an analyser shows{where}.
X = 0: series resonance at the feed with its resistance.  gain: the largest, in any direction."""

_LINE_KEY = """
The connector is behind the feed line ({items}). network: power into the antenna over power into
the connector; realised: gain less what feed line and mismatch take; both at the dip, or for a mode
without one at its conductance peak at the feed."""

_LOSS_KEY = """
efficiency: radiated over radiated and lost power; gain is directivity less what is lost."""

_CABLE_KEY = """
cable: current on the outside of the feed cable at its start over that at the feed, at the
conductance peak; under -20 dB it hardly matters. on it: the cable's part of the squared current."""

LEAST_LOSS = 5e-4
"""Efficiencies nearer to 1 than this are not worth two columns."""


@click.command()
@results_argument
@json_option
@csv_option
@case_option
@click.option(
    "--places", is_flag=True, help="List where each mode's current is largest and where it is zero."
)
@says_damage
def command(results: str, as_json: bool, as_csv: bool, case: int | None, places: bool) -> None:
    """List the natural modes of the results in DIR, with the dips and resonances they own.

    With --places: the places of their current maxima and nodes, which is where feeds and supports
    go; JSON has them under the key "places" of each mode.

    \b
    Example:
      simkit modes results/creek_gauge
      simkit modes results/creek_gauge --case 2 --json
      simkit modes results/creek_gauge --case 2 --places
    """
    form = one_format(as_json, as_csv)
    from simkit.store import open_results
    from simkit.store.rows import modes

    dataset = open_results(results)
    if case is not None:
        if case not in dataset["case"].values:
            last = int(dataset["case"].values.max())
            raise click.UsageError(f"--case {case}: these results hold the cases 0 to {last}.")
        dataset = dataset.sel(case=[case])
    rows = modes(dataset)
    if places:
        show_places(dataset, rows, results, form)
        return
    if form == "json":
        emit(json_text(rows))
    elif form == "csv":
        emit(csv_text(flat_rows(rows, _attribute(dataset, "units"))))
    else:
        items = list(dataset.attrs.get("feedline", ()))
        key = _KEY.format(where="" if items else "; it lies above")
        key += _LINE_KEY.format(items=", ".join(items)) if items else ""
        key += (_LOSS_KEY if lossy(rows) else "") + (_CABLE_KEY if cabled(rows) else "")
        shown = modes_table(rows, _attribute(dataset, "display_unit"), feedline=bool(items))
        emit(f"{shown}\n\n{key}")


def show_places(dataset: xr.Dataset, rows: list[Row], results: str, form: str) -> None:
    """Print maxima and nodes instead of what the modes own; in JSON besides."""
    from simkit.cli.folder import study_of
    from simkit.cli.places import PLACES_KEY, add_places, flat_places, places_table

    add_places(rows, dataset, study_of(results), results)
    if form == "json":
        emit(json_text(rows))
    elif form == "csv":
        emit(csv_text(flat_places(rows)))
    else:
        emit(f"{places_table(rows)}\n\n{PLACES_KEY}")


def _attribute(dataset: xr.Dataset, attribute: str) -> dict[str, str]:
    """One attribute of every swept value, under its name in the study."""
    from simkit.store import swept_names

    return {
        name: str(dataset[stored].attrs.get(attribute, "1"))
        for name, stored in swept_names(dataset).items()
    }


def flat_rows(rows: list[Row], units: dict[str, str]) -> list[Row]:
    """Return one row per mode, or one for a case without modes; units stand in the names."""
    from simkit.store.rows import column_name

    flat = []
    for row in rows:
        start = {"case": row["case"], "status": row["status"]}
        start |= {
            column_name(name, units.get(name, "1")): value for name, value in row["values"].items()
        }
        flat += [start | {"solves": row["solves"]} | mode for mode in row["modes"] or [{}]]
    return flat


def lossy(rows: list[Row]) -> bool:
    """Return whether some mode loses power that is worth showing."""
    return any(
        mode.get("efficiency", 1.0) < 1 - LEAST_LOSS for row in rows for mode in row["modes"]
    )


def cabled(rows: list[Row]) -> bool:
    """Return whether the feed cable is in the model."""
    return any("on_cable" in mode for row in rows for mode in row["modes"])


def modes_table(rows: list[Row], units: dict[str, str], *, feedline: bool = False) -> str:
    """Return the table for people: one line per mode, one for a case without any.

    Where power is lost, directivity and efficiency stand beside the gain; behind a feed line, what
    that takes; with a feed cable in the model, what flows on it.
    """
    names = list(rows[0]["values"]) if rows else []
    losses, cable = lossy(rows), cabled(rows)
    head = ["case", *names, "status", "mode", "natural", "+/-", "Q", "dip", "return loss"]
    head += ["X = 0", "R", "gain", *(["directivity", "efficiency"] if losses else [])]
    head += ["network", "realised"] if feedline else []
    head += ["cable", "on it"] if cable else []
    lines = []
    for row in rows:
        swept = [quantity_text(row["values"][name], units.get(name, "1")) for name in names]
        start = [str(row["case"]), *swept, row["status"]]
        if row["modes"]:
            for mode in row["modes"]:
                cells = _mode_cells(mode, losses=losses)
                cells += _line_cells(mode) if feedline else []
                lines.append(start + cells + (_cable_cells(mode) if cable else []))
        else:
            lines.append([*start, "-", *[""] * (len(head) - len(start) - 1)])
    # Under the table, where a long sentence does not push the numbers apart.
    reasons = [
        f"case {row['case']}: {row['status']}: {row['reason']}"
        for row in rows
        if row.get("reason") and not row["modes"]
    ]
    return "\n".join([table(head, lines), *([""] if reasons else []), *reasons])


def _mode_cells(mode: Row, *, losses: bool) -> list[str]:
    from simkit.response.labels import half_wave_label

    number = mode["half_waves"]
    error = mode.get("frequency_error")
    cells = [
        half_wave_label(-1 if number is None else number, mode.get("on_plane", False)),
        frequency_text(mode["frequency_hz"]),
        number_text(error * 100, 2, "%") if error is not None else "-",
        number_text(mode.get("q"), 2),
        frequency_text(mode.get("dip_frequency_hz")),
        number_text(mode.get("dip_return_loss_db"), 1, "dB"),
        frequency_text(mode.get("series_resonance_frequency_hz")),
        number_text(mode.get("series_resonance_resistance_ohm"), 1, "ohm"),
        number_text(mode.get("peak_gain_dbi"), 1, "dBi"),
    ]
    if losses:
        efficiency = mode.get("efficiency")
        cells.append(number_text(mode.get("directivity_dbi"), 1, "dBi"))
        cells.append(_percent(efficiency))
    return cells


def _line_cells(mode: Row) -> list[str]:
    gain = number_text(mode.get("realised_gain_dbi"), 1, "dBi")
    return [_percent(mode.get("network_efficiency")), gain]


def _cable_cells(mode: Row) -> list[str]:
    level = number_text(mode.get("cable_current_db"), 1, "dB")
    return [level, _percent(mode.get("on_cable"), 0)]


def _percent(part: float | None, digits: int = 1) -> str:
    return number_text(None if part is None else part * 100, digits, "%")
