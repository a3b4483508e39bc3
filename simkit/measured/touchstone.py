"""Reading measured sweeps from Touchstone files."""

from __future__ import annotations

import io
import warnings
from os import PathLike
from pathlib import Path

import numpy as np

from simkit.errors import MeasurementError
from simkit.measured.measurement import ComplexArray, FloatArray, Measurement
from simkit.measured.sheet import Sheet, read_sheet, refuse

MIN_POINTS = 11
"""With fewer points a dip cannot be told from a slope, nor its bandwidth be read."""

MAX_FREQUENCY_HZ = 1e13
"""No network analyser goes further: above it the unit of the option line is wrong."""

MOST_POINTS = 20_000
"""No more are kept: the search for dips in noise takes time as the square of their number."""

ACTIVE_LIMIT = 1.02
"""|reflection| up to this is calibration error and noise (0.17 dB, the usual tracking error)."""

ABSURD_REFLECTION = 100.0
"""40 dB of gain: the numbers are no reflection at all."""


def read_touchstone(path: str | PathLike[str], port: int | None = None) -> Measurement:
    """Read the reflection at one port from a Touchstone file (version 1.1 or 2.0).

    Parameters
    ----------
    path : path
        Its ending tells the number of ports: ``.s1p``, ``.s2p``.
    port : int, optional
        Counted from 1. May be left out for one-port files only.

    Returns
    -------
    Measurement

    Raises
    ------
    MeasurementError
        If the file cannot be used; the text names the file, the line where it applies, what is
        wrong and what to do.

    Notes
    -----
    Impedances (Z) and admittances (Y) are converted to reflections. The other ports of a file with
    several are taken as terminated in their reference resistance. The file is read as text only;
    nothing in it is ever executed or unpickled.
    """
    file = Path(path)
    sheet = read_sheet(file)
    chosen = _chosen_port(file, sheet.ports, port)
    frequency, raw = _parsed(file, sheet)
    _check_frequencies(file, frequency)
    reflection = _reflection(file, sheet, raw)[:, chosen - 1, chosen - 1]
    _check_reflection(file, frequency, reflection)
    active = _active_note(frequency, reflection)
    frequency, reflection, averaged = _averaged(frequency, reflection)
    return Measurement(
        path=file,
        frequency_hz=frequency,
        reflection=np.ascontiguousarray(reflection),
        reference_ohm=sheet.reference_ohm[chosen - 1],
        notes=(*sheet.notes, *active, *averaged),
        comments=tuple(sheet.comments),
    )


def _chosen_port(path: Path, ports: int, port: int | None) -> int:
    if port is None:
        if ports > 1:
            refuse(
                path,
                f"the file holds {ports} ports and none was chosen; say which one the antenna was "
                f"connected to: port=1 to port={ports} (--port on the command line)",
            )
        return 1
    if not 1 <= port <= ports:
        refuse(path, f"port {port} does not exist; the file holds {ports}, counted from 1")
    return port


def _parsed(path: Path, sheet: Sheet) -> tuple[FloatArray, ComplexArray]:
    """Frequencies in hertz and raw (F, N, N) matrices by the Touchstone parser of scikit-rf.

    `skrf.Network` would try to unpickle the file first, so its parser is called directly.
    """
    from skrf.io import Touchstone

    stream = io.StringIO(sheet.plain_text())
    stream.name = f"data.s{sheet.ports}p"
    try:
        # Values too large for the format's arithmetic come out infinite and are refused after.
        with warnings.catch_warnings(), np.errstate(all="ignore"):
            warnings.simplefilter("ignore")
            data = Touchstone(stream)
    except (ValueError, IndexError, OverflowError) as error:
        raise MeasurementError(
            f"{path}: the data are not laid out as Touchstone ({error}); export the sweep again"
        ) from error
    return np.asarray(data.f, dtype=np.float64), np.asarray(data.s, dtype=np.complex128)


def _check_frequencies(path: Path, frequency: FloatArray) -> None:
    if len(frequency) < MIN_POINTS:
        refuse(
            path,
            f"the sweep has {len(frequency)} point(s), at least {MIN_POINTS} are needed; "
            "measure 201 or more over the band",
        )
    if frequency.min() < 0:
        refuse(path, f"the frequency {frequency.min():g} Hz is negative; the file is damaged")
    if frequency.max() > MAX_FREQUENCY_HZ:
        refuse(
            path,
            f"the sweep would reach {frequency.max():.3g} Hz; the unit in the option line does not "
            "fit the frequencies (if they are in hertz, write '# Hz')",
        )
    step = np.diff(frequency)
    if (step < 0).any():
        place = int(np.flatnonzero(step < 0)[0])
        high, low = frequency[place : place + 2] / 1e6
        refuse(
            path,
            f"the frequencies are not sorted: after point {place + 1} ({high:.8g} MHz) comes "
            f"{low:.8g} MHz; export one ascending sweep",
        )
    if (step == 0).any():
        place = int(np.flatnonzero(step == 0)[0])
        refuse(
            path,
            f"the frequency {frequency[place] / 1e6:.8g} MHz is repeated (point {place + 2}); "
            "remove one of the two points",
        )


def _reflection(path: Path, sheet: Sheet, raw: ComplexArray) -> ComplexArray:
    """(F, N, N) scattering matrices from whatever parameters the file holds."""
    if sheet.parameter == "s":
        return raw
    if sheet.parameter not in "zy":
        refuse(
            path,
            f"{sheet.parameter.upper()} parameters describe no reflection at one port; export S",
        )
    one = np.eye(sheet.ports)
    normal = raw if not sheet.version2 else raw * _norm(sheet)
    sign = 1.0 if sheet.parameter == "z" else -1.0
    try:
        with np.errstate(all="ignore"):
            # S = (z - 1)(z + 1)^-1 = (1 - y)(1 + y)^-1; both factors commute.
            return np.asarray(sign * np.linalg.solve(normal + one, normal - one))
    except np.linalg.LinAlgError:
        refuse(path, "a value equals minus the reference resistance; measure again")


def _norm(sheet: Sheet) -> FloatArray:
    """Factors that refer impedances or admittances in SI units to the reference resistances."""
    root = np.sqrt(np.outer(sheet.reference_ohm, sheet.reference_ohm))
    return np.asarray(1.0 / root if sheet.parameter == "z" else root, dtype=np.float64)


def _check_reflection(path: Path, frequency: FloatArray, reflection: ComplexArray) -> None:
    unusable = ~np.isfinite(reflection)
    if unusable.any():
        place = int(np.flatnonzero(unusable)[0])
        refuse(
            path,
            f"the reflection at {frequency[place] / 1e6:.8g} MHz is not a finite number; "
            "drop the point or measure again",
        )
    largest = float(np.abs(reflection).max())
    if largest > ABSURD_REFLECTION:
        refuse(
            path,
            f"|reflection| reaches {largest:.3g}; the format in the option line (RI, MA, DB) or "
            "the parameter (S, Z, Y) does not fit the numbers",
        )


def _averaged(
    frequency: FloatArray, reflection: ComplexArray
) -> tuple[FloatArray, ComplexArray, list[str]]:
    """Means of neighbours where there are more points than anything can be gained from."""
    group = -(-len(frequency) // MOST_POINTS)
    if group < 2:
        return frequency, reflection, []
    count = len(frequency) // group * group
    note = f"{len(frequency)} points are averaged in groups of {group}"
    return (
        frequency[:count].reshape(-1, group).mean(axis=1),
        reflection[:count].reshape(-1, group).mean(axis=1),
        [note],
    )


def _active_note(frequency: FloatArray, reflection: ComplexArray) -> list[str]:
    size = np.abs(reflection)
    above = int((size > ACTIVE_LIMIT).sum())
    if not above:
        return []
    place = int(np.argmax(size))
    return [
        f"|reflection| exceeds 1 at {above} of {len(size)} points (up to {size[place]:.3f} at "
        f"{frequency[place] / 1e6:.1f} MHz), which a passive antenna cannot do: check calibration"
    ]
