"""Export: choose the cases, then one of the forms."""

from __future__ import annotations

import re
from collections.abc import Sequence
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING

from simkit.errors import ExportError
from simkit.exports.outcome import Exported, Seen

if TYPE_CHECKING:
    import xarray as xr

FORMS = ("netcdf", "csv", "touchstone")


def export(
    results: xr.Dataset | str | PathLike[str],
    path: str | PathLike[str],
    to: str,
    *,
    where: str | None = None,
    only: Sequence[str] = (),
    curves: bool = False,
    overwrite: bool = False,
    name: str | None = None,
    seen: Seen | None = None,
) -> Exported:
    """Write results in a form other programs read.

    Parameters
    ----------
    results : xarray.Dataset or path
        What `simkit.open_results` returns, some cases of it, or the results folder.
    path : path
        File to write; for Touchstone a folder, which gets one file a case.
    to : {"netcdf", "csv", "touchstone"}
        netCDF 3: every variable, complex ones as ``NAME_real`` and ``NAME_imag``. CSV: one row a
        case and mode. Touchstone 1.1: reflection at the connector.
    where : str, optional
        Condition that selects cases, as for `simkit.query`.
    only : sequence of str
        netCDF: variables to write in place of all.
    curves : bool
        CSV: one row a case and frequency instead: impedance and reflection at the connector.
    overwrite : bool
        Replace what is there.
    name : str, optional
        What Touchstone files are called; that of the results folder, or the title, if left out.
    seen : callable, optional
        Told how many cases are done, now and then.

    Returns
    -------
    Exported

    Raises
    ------
    ExportError
        There is something at `path`, it cannot be written, or it would be too large for its form.
    ConditionError
        The condition cannot be understood.
    StoreError
        The results cannot be read.

    Notes
    -----
    Files are written aside and renamed when they are whole. Numbers are written so that the same
    floating-point numbers are read back; what a case does not have is NaN or an empty cell.
    """
    from simkit.finding.select import opened, query

    if to not in FORMS:
        raise ExportError(f"the form {to!r} is not known; there are {', '.join(FORMS)}")
    if only and to != "netcdf":
        raise ExportError(f"only certain variables can be chosen for netcdf, not for {to}")
    if curves and to != "csv":
        raise ExportError(f"curves are a table of csv; {to} has them in any case")
    dataset = opened(results)
    if where is not None:
        dataset = query(dataset, where)
    if not dataset.sizes["case"]:
        raise ExportError("no case is selected: there is nothing to hand on")
    target = Path(path)
    report = seen or (lambda done: None)
    if to == "netcdf":
        from simkit.exports.netcdf import write_netcdf

        return write_netcdf(dataset, target, only, report, overwrite=overwrite)
    if to == "csv":
        from simkit.exports.tables import write_curves, write_modes

        write = write_curves if curves else write_modes
        return write(dataset, target, report, overwrite=overwrite)
    from simkit.exports.touchstone import write_touchstone

    stem = name or _stem(results, dataset)
    return write_touchstone(dataset, target, stem, report, overwrite=overwrite)


def _stem(results: xr.Dataset | str | PathLike[str], dataset: xr.Dataset) -> str:
    """The name of the results folder if it is known, else the title, fit for a file name."""
    if isinstance(results, str | PathLike):
        return folder_name(results)
    words = re.findall(r"\w+", str(dataset.attrs.get("title", "")).lower())
    return "_".join(words)[:60] or "study"


def folder_name(results: str | PathLike[str]) -> str:
    """Return the name of a results folder, which is that of the study file."""
    from simkit.store.remote import place

    folder = place(results)
    if isinstance(folder, Path):
        folder = folder.resolve()
    return folder.parent.name if folder.suffix == ".zarr" else folder.name
