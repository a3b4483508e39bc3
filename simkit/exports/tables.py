"""CSV tables: one row a case and mode, or one a case and frequency."""

from __future__ import annotations

import csv
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from simkit.exports.aside import new_file
from simkit.exports.outcome import Exported, Seen
from simkit.finding.reading import damage_in_words
from simkit.finding.select import parts
from simkit.store.read import connector_impedance, swept_names
from simkit.store.rows import OF_MODE, column_name
from simkit.store.schema import Status

if TYPE_CHECKING:
    import xarray as xr

CURVE_COLUMNS = (
    "frequency_hz",
    "resistance_ohm",
    "reactance_ohm",
    "reflection_real",
    "reflection_imag",
    "return_loss_db",
)


def write_modes(dataset: xr.Dataset, path: Path, seen: Seen, *, overwrite: bool) -> Exported:
    """Write one row a case and mode; a case without modes has one with its status and reason."""
    names = [name for name in OF_MODE.values() if name in dataset]
    head = ["case", *_swept_columns(dataset), "status", "reason", "solves"]
    head += ["half_waves", "on_plane", *(key for key, name in OF_MODE.items() if name in names)]
    with new_file(path, overwrite=overwrite) as aside, _open(aside) as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(head)
        for rows in parts(dataset):
            part = dataset.isel(case=rows)
            with damage_in_words(part):
                columns = _mode_columns(part, names)
            writer.writerows(zip(*columns, strict=True))
            seen(rows.stop)
    return Exported(path, dataset.sizes["case"])


def _mode_columns(part: xr.Dataset, names: list[str]) -> list[list[Any]]:
    """Columns of the table for a few cases, all of one length."""
    frequency = part["mode_frequency"].values
    there = np.isfinite(frequency)
    # A case without modes keeps its first slot, in which everything reads as missing.
    there[:, 0] |= ~there.any(axis=1)
    case, slot = np.nonzero(there)
    has = np.isfinite(frequency[case, slot])
    halves = part["mode_half_waves"].values[case, slot]
    on_plane = part["path_on_plane"].values[case] == 1
    columns = [part["case"].values[case].tolist()]
    columns += [_cells(part[name].values[case]) for name in swept_names(part).values()]
    columns += [
        [Status(int(code)).label for code in part["status"].values[case]],
        [str(text) for text in part["reason"].values[case]],
        part["solves"].values[case].tolist(),
        ["" if number < 0 else int(number) for number in halves],
        ["" if not one else int(on) for one, on in zip(has, on_plane, strict=True)],
    ]
    return columns + [_cells(part[name].values[case, slot]) for name in names]


def write_curves(dataset: xr.Dataset, path: Path, seen: Seen, *, overwrite: bool) -> Exported:
    """Write one row a case and frequency; cases without a solution are left out."""
    written = 0
    with new_file(path, overwrite=overwrite) as aside, _open(aside) as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(["case", *_swept_columns(dataset), *CURVE_COLUMNS])
        for rows in parts(dataset):
            part = dataset.isel(case=rows)
            starts = zip(
                part["case"].values.tolist(),
                *(_cells(part[name].values) for name in swept_names(part).values()),
                strict=True,
            )
            with damage_in_words(part):
                curves = part[connector_impedance(part)].values
            for start, curve in zip(starts, curves, strict=True):
                if np.isfinite(curve).all():
                    written += 1
                    writer.writerows((*start, *row) for row in _curve_rows(part, curve))
            seen(rows.stop)
    return Exported(path, written, dataset.sizes["case"] - written)


def _curve_rows(part: xr.Dataset, impedance: NDArray[np.complex128]) -> Any:
    from simkit.response.features import reflection

    gamma = reflection(impedance, float(part.attrs.get("reference_ohm", 50.0)))
    with np.errstate(divide="ignore"):
        loss = -20 * np.log10(np.abs(gamma))
    columns = (part["frequency"].values, impedance.real, impedance.imag, gamma.real, gamma.imag)
    return zip(*map(_cells, columns), _cells(loss), strict=True)


def _swept_columns(dataset: xr.Dataset) -> list[str]:
    return [
        column_name(name, str(dataset[stored].attrs.get("units", "1")))
        for name, stored in swept_names(dataset).items()
    ]


def _cells(values: NDArray[Any]) -> list[Any]:
    """Numbers in the shortest text that gives them back, nothing where there is none."""
    return ["" if value != value else value for value in values.tolist()]


def _open(path: Path) -> Any:
    return path.open("x", encoding="utf-8", newline="")
