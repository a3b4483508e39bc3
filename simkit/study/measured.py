"""The tables [[measured]]: measured sweeps and the builds they belong to."""

from __future__ import annotations

from pathlib import Path

from simkit.study.expression import ExpressionError
from simkit.study.model import MeasuredFile
from simkit.study.sweep import Sweep, entries
from simkit.study.tables import Notes, Table
from simkit.study.units import nearest


def read_measured(
    tables: list[Table], notes: Notes, sweep: Sweep, numbers: dict[str, float], folder: Path
) -> tuple[MeasuredFile, ...]:
    """Read every [[measured]].

    Parameters
    ----------
    tables : list of Table
    notes : Notes
    sweep : Sweep
    numbers : dict of str to float
        Numbers of [values], which a build's values may use.
    folder : Path
        Folder of the study, from which file names count.

    Returns
    -------
    tuple of MeasuredFile
        The files need not exist yet: a build is often planned before it is measured.
    """
    found = (_read_one(table, notes, sweep, numbers, folder) for table in tables)
    return tuple(measured for measured in found if measured is not None)


def _read_one(
    table: Table, notes: Notes, sweep: Sweep, numbers: dict[str, float], folder: Path
) -> MeasuredFile | None:
    name = table.text("file", 'name the measured file, as in file = "build_1.s1p"')
    build: dict[str, float] = {}
    swept = [value.name for value in sweep.swept]
    for path, key, raw in entries(table):
        if key == "file" or key in notes.broken:
            continue
        dimension = notes.names.get(key) or (notes.slots.get(key) if key in swept else None)
        full = f"{table.label}.{key}"
        if dimension is None:
            hint = nearest(key, ["file", *notes.names, *swept])
            advice = f"do you mean `{hint}`?" if hint else "say the build by those alone"
            what = f"is neither a name of [values] nor a swept key; {advice}"
            notes.report(path, full, what, raw)
            continue
        quantity = notes.expression(raw, dimension, path, full)
        if quantity is None:
            continue
        try:
            build[key] = quantity.expression.evaluate(numbers)
        except ExpressionError as error:
            notes.report(path, full, str(error), raw)
    return MeasuredFile(folder / name, build) if name is not None else None
