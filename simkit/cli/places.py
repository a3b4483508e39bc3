"""Tables of current maxima and nodes for ``simkit modes --places``."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from simkit.cli.output import frequency_text, number_text, table
from simkit.errors import StoreError

if TYPE_CHECKING:
    import xarray as xr

    from simkit.study import Study

Row = dict[str, Any]

PLACES_KEY = """\
maximum: one for each half wave; a feed sees a low resistance here, and a support does least harm.
node: the current changes its direction; the charge is large here, as it is at open ends.
along: from the start of the strip along its path; x, y: in the plane of the study, not placed.
current: over the largest of the mode."""


def add_places(rows: list[Row], dataset: xr.Dataset, study: Study | None, results: str) -> None:
    """Give each mode of each row its list of ``places``.

    Raises
    ------
    StoreError
        If the results folder has lost its copy of the study.
    """
    from simkit.response.extrema import case_places

    if study is None:
        raise StoreError(
            f"{results}: there is no study.toml in this folder, from which to tell where strips "
            "lie; run the study again"
        )
    for row in rows:
        antenna = study.case(row["case"]).antenna if row["modes"] else None
        if antenna is None:
            continue
        found = case_places(dataset.sel(case=row["case"]), antenna)
        for mode, places in zip(row["modes"], found, strict=True):
            mode["places"] = [place.as_dict(antenna.strips) for place in places]


def flat_places(rows: list[Row]) -> list[Row]:
    """Return one row per place, with its case and mode."""
    return [
        {
            "case": row["case"],
            "half_waves": mode["half_waves"],
            "frequency_hz": mode["frequency_hz"],
        }
        | place
        for row in rows
        for mode in row["modes"]
        for place in mode.get("places", [])
    ]


def places_table(rows: list[Row]) -> str:
    """Return the table for people: one line per place, case and mode named where they begin."""
    head = ["case", "mode", "natural", "place", "strip", "along", "x", "y", "current"]
    lines = []
    for row in rows:
        if not row["modes"]:
            lines.append([str(row["case"]), row["status"], *[""] * 7])
        for mode in row["modes"]:
            start = [str(row["case"]), _label(mode), frequency_text(mode["frequency_hz"])]
            for place in mode.get("places", []):
                lines.append([*start, *_cells(place)])
                start = [""] * 3
    return table(head, lines)


def _label(mode: Row) -> str:
    from simkit.response.labels import half_wave_label

    number = mode["half_waves"]
    return half_wave_label(-1 if number is None else number, mode.get("on_plane", False))


def _cells(place: Row) -> list[str]:
    inside = place["strip"] is not None
    return [
        place["kind"],
        place["strip"] if inside else "between strips",
        _millimetres(place["along_m"]) if inside else "",
        _millimetres(place["x_m"]),
        _millimetres(place["y_m"]),
        number_text(place["relative_current"], 2),
    ]


def _millimetres(value_m: float) -> str:
    return f"{round(value_m * 1e3, 1) + 0.0:.1f} mm"  # adding 0 takes the sign off -0.0
