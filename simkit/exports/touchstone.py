"""Touchstone: one file a case with the reflection at the connector.

The form is version 1.1 of the Touchstone file specification (EIA/IBIS Open Forum, 2002): comments
behind ``!``, one option line, then frequency, real and imaginary part of S11.
"""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from simkit.errors import ExportError
from simkit.exports.aside import new_files
from simkit.exports.outcome import Exported, Seen
from simkit.finding.reading import damage_in_words
from simkit.finding.select import parts
from simkit.store.read import connector_impedance, swept_names
from simkit.store.schema import Status

if TYPE_CHECKING:
    import xarray as xr

LEAST_DIGITS = 4


def write_touchstone(
    dataset: xr.Dataset, folder: Path, stem: str, seen: Seen, *, overwrite: bool
) -> Exported:
    """Write ``STEM_case_0007.s1p`` for every chosen case that has a solution."""
    numbers = dataset["case"].values.astype(int)
    there = _solved(dataset)
    names = file_names(stem, numbers[there])
    needed = dataset[[connector_impedance(dataset), "status", "reason"]]
    if not names:
        raise ExportError("none of the selected cases has a solution: there is nothing to hand on")
    with new_files(folder, names, overwrite=overwrite) as aside:
        left = iter(names)
        for rows in parts(needed):
            part = needed.isel(case=rows)
            with damage_in_words(part):
                part.load()
            for place in np.flatnonzero(there[rows]):
                (aside / next(left)).write_text(
                    touchstone_text(part.isel(case=int(place))), encoding="ascii"
                )
            seen(rows.stop)
    return Exported(folder, len(names), len(numbers) - len(names))


def file_names(stem: str, numbers: np.ndarray[tuple[int], np.dtype[np.int64]]) -> list[str]:
    """Names that sort in the order of the cases."""
    digits = max(LEAST_DIGITS, len(str(max(numbers, default=0))))
    return [f"{stem}_case_{number:0{digits}d}.s1p" for number in numbers]


def _solved(dataset: xr.Dataset) -> np.ndarray[tuple[int], np.dtype[np.bool_]]:
    """Cases with an impedance, as far as their status tells."""
    return np.isin(dataset["status"].values, (Status.SOLVED, Status.DOUBTFUL))


def touchstone_text(case: xr.Dataset) -> str:
    """Return the file of one case.

    Parameters
    ----------
    case : xarray.Dataset
        Without the dimension `case`.

    Returns
    -------
    str
        ASCII; what is not is replaced in the comments.
    """
    from simkit.response.features import reflection

    name = connector_impedance(case)
    reference = float(case.attrs.get("reference_ohm", 50.0))
    gamma = reflection(case[name].values, reference)
    lines = [f"! {line}" for line in _comments(case, name, reference)]
    lines.append(f"# Hz S RI R {reference!r}")
    columns = (case["frequency"].values, gamma.real, gamma.imag)
    lines += [
        f"{hz!r} {real!r} {imag!r}"
        for hz, real, imag in zip(*(column.tolist() for column in columns), strict=True)
    ]
    return "\n".join([*lines, ""]).encode("ascii", "replace").decode("ascii")


def _comments(case: xr.Dataset, name: str, reference_ohm: float) -> list[str]:
    from simkit import __version__
    from simkit.study.units import as_text

    status = Status(int(case["status"])).label
    lines = [
        f"{case.attrs.get('title', 'study')}: case {int(case['case'])}, computed by simkit "
        f"{case.attrs.get('simkit_version', __version__)}"
    ]
    for study_name, stored in swept_names(case).items():
        value = case[stored]
        unit = str(value.attrs.get("display_unit", value.attrs.get("units", "1")))
        lines.append(f"{study_name} = {as_text(float(value), unit, 12)}")
    plane = "connector" if name == "impedance_at_connector" else "feed"
    lines.append(f"reflection at the {plane}, reference impedance {reference_ohm:g} ohm")
    reason = str(case["reason"].values)
    lines.append(f"status: {status}" + (f": {reason}" if reason else ""))
    return [" ".join(line.split()) for line in lines]
