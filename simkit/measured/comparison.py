"""A measured sweep beside a simulated case, mode by mode."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from simkit.errors import MeasurementError, StoreError
from simkit.measured.dips import measured_dips, pinned_dip
from simkit.measured.fsv import Agreement, agreement, decibels
from simkit.measured.measurement import ComplexArray, FloatArray, Measurement
from simkit.measured.mode_line import NAN, ModeLine
from simkit.measured.natural import TOLD_DELAY_S, natural_beside, natural_pairs
from simkit.measured.pairing import ModelledDip, Pairing
from simkit.measured.poles import MeasuredMode, MeasuredModes
from simkit.measured.quality import quality_notes
from simkit.measured.selection import (
    CaseModes,
    IntArray,
    as_cases,
    is_solved,
    modes_of_cases,
    row_of_case,
    rows_of_build,
    simulated_reflection,
    with_loose_dips,
)
from simkit.measured.wording import comparison_text
from simkit.response.features import Dip
from simkit.response.labels import half_wave_label
from simkit.store.read import has_feedline, swept_names
from simkit.store.schema import Status

if TYPE_CHECKING:
    import xarray as xr


@dataclass(frozen=True, eq=False)
class Comparison:
    """A measured sweep beside one simulated case.

    Attributes
    ----------
    measurement : Measurement
        Referred to the reference resistance of the study.
    title : str
        Of the study.
    case : int
    values : dict of str to float
        Swept values of the case, SI.
    units : dict of str to str
        Their SI units.
    status : str
        ``solved`` or ``doubtful``.
    frequency_hz : (F,) float array
    simulated_reflection : (F,) complex array
    lines : tuple of ModeLine
        One per natural mode of the case, lowest first.
    unpaired : tuple of Dip
        Measured dips that belong to no mode.
    notes : tuple of str
    natural : MeasuredModes or None
        Natural modes read from the sweep; None where a feed line lies before the antenna, or no dip
        was paired.
    """

    measurement: Measurement
    title: str
    case: int
    values: dict[str, float]
    units: dict[str, str]
    status: str
    frequency_hz: FloatArray
    simulated_reflection: ComplexArray
    lines: tuple[ModeLine, ...]
    unpaired: tuple[Dip, ...]
    notes: tuple[str, ...]
    natural: MeasuredModes | None = None

    def agreement(self) -> Agreement:
        """How alike the curves are, |reflection| in dB by IEEE Std 1597.1."""
        measured = decibels(self.measurement.reflection)
        return agreement(
            self.measurement.frequency_hz,
            measured,
            self.frequency_hz,
            decibels(self.simulated_reflection),
        )

    @property
    def file_comment(self) -> str:
        """The first line in which the measured file says what it is, empty if it does not."""
        return next((text for text in self.measurement.comments if text), "")

    def as_rows(self) -> list[dict[str, Any]]:
        """One dictionary per mode, then one per unpaired dip, SI; None for what does not exist."""
        head = {"file": str(self.measurement.path), "case": self.case}
        rows = [head | line.as_row() for line in self.lines]
        lost = [
            ModeLine(-1, NAN, NAN, NAN, NAN, NAN, dip.frequency_hz, dip.return_loss_db,
                     dip.bandwidth_hz)
            for dip in self.unpaired
        ]  # fmt: skip
        return rows + [head | line.as_row() | {"mode": "unpaired"} for line in lost]

    def as_text(self) -> str:
        """The comparison as a table with what to conclude from it."""
        return comparison_text(self)


def compare(
    dataset: xr.Dataset,
    measurement: Measurement,
    case: int | None = None,
    *,
    build: Mapping[str, float] | None = None,
    pins: Mapping[int, float] | None = None,
) -> Comparison:
    """Set a measured sweep beside one case of the results.

    Parameters
    ----------
    dataset : xarray.Dataset
        As `simkit.open_results` returns it.
    measurement : Measurement
        As `simkit.read_touchstone` returns it; renormalised to the study's reference if needed.
    case : int, optional
        Label of the case. If left out, the case of the `build` or else the one whose dips fit the
        measured ones best as they stand.
    build : mapping of str to float, optional
        Swept values as cut, SI; the nearest solved case is taken, with a note unless it is exact.
    pins : mapping of int to float, optional
        Half waves of a mode to the frequency (Hz) of the measured dip that is certainly its own.

    Returns
    -------
    Comparison

    Raises
    ------
    StoreError
        If the case does not exist or was not solved, or none was.
    MeasurementError
        If sweep and simulation have no frequency in common.
    """
    dataset = as_cases(dataset)
    if not is_solved(dataset).any():
        raise StoreError(
            "no case of these results is solved, so there is nothing to compare with; "
            "run the study, or see simkit status for the reasons"
        )
    reference = float(dataset.attrs.get("reference_ohm", 50.0))
    measurement = measurement.renormalised(reference)
    bands = _bands(dataset, measurement)
    dips, dip_notes = measured_dips(measurement)
    heard = [ModelledDip(dip.frequency_hz, 10 ** (-dip.return_loss_db / 20)) for dip in dips]
    every = modes_of_cases(dataset)
    rows, build_notes = _candidates(dataset, case, build)
    row, fit_notes = _best_row(rows, every, heard, bands)
    expected = simulated_reflection(dataset.isel(case=row), reference)
    notes = [*measurement.notes, *quality_notes(measurement, expected), *dip_notes]
    notes += [*build_notes, *fit_notes]
    every[row] = with_loose_dips(dataset.isel(case=row), every[row], reference)
    fixed = _fixed_pairs(every[row], dips, pins or {}, measurement)
    pairing = every[row].pair(heard, *bands, fixed)
    doubtful = every[row].doubtful(pairing, heard, *bands, fixed)
    notes += _ambiguity_notes(every[row], dips, doubtful)
    notes += _feedline_notes(every[row], dips, pairing)
    notes += _doubt_notes(dataset, row)
    notes += _unexcited_notes(dataset.isel(case=row), every[row], pairing)
    found = _Found(dips, pairing, {i for i, _ in doubtful})
    return _comparison(dataset, row, measurement, every[row], found, notes)


def _bands(
    dataset: xr.Dataset, measurement: Measurement
) -> tuple[tuple[float, float], tuple[float, float]]:
    simulated = dataset["frequency"].values
    band = (float(simulated[0]), float(simulated[-1]))
    swept = (float(measurement.frequency_hz[0]), float(measurement.frequency_hz[-1]))
    if band[0] > swept[1] or swept[0] > band[1]:
        raise MeasurementError(
            f"{measurement.path}: measured from {swept[0] / 1e6:g} to {swept[1] / 1e6:g} MHz, "
            f"simulated from {band[0] / 1e6:g} to {band[1] / 1e6:g} MHz: no frequency in common; "
            "change [frequency] of the study or measure that band"
        )
    return band, swept


def _candidates(
    dataset: xr.Dataset, case: int | None, build: Mapping[str, float] | None
) -> tuple[IntArray, list[str]]:
    """Places of the cases that may be meant."""
    if case is not None:
        return np.array([row_of_case(dataset, case)]), []
    if build:
        return rows_of_build(dataset, build)
    return np.flatnonzero(is_solved(dataset)), []


def _best_row(
    rows: IntArray,
    every: list[CaseModes],
    heard: list[ModelledDip],
    bands: tuple[tuple[float, float], tuple[float, float]],
) -> tuple[int, list[str]]:
    """Place of the case whose dips fit as they stand, and how it was chosen."""
    if len(rows) == 1:
        return int(rows[0]), []
    misfit = [every[row].pair(heard, *bands).misfit for row in rows]
    row = int(rows[int(np.argmin(misfit))])
    if not heard:
        return row, [
            f"no measured dip tells the {len(rows)} cases in question apart: name one with --case"
        ]
    return row, [f"of {len(rows)} cases in question this one's dips fit the measured ones best"]


def _doubt_notes(dataset: xr.Dataset, row: int) -> list[str]:
    if int(dataset["status"].values[row]) != Status.DOUBTFUL:
        return []
    reason = str(dataset["reason"].values[row]) if "reason" in dataset else ""
    return [f"the simulated case is doubtful: {reason or 'no reason is stored'}"]


def _feedline_notes(modes: CaseModes, dips: list[Dip], pairing: Pairing) -> list[str]:
    return [
        f"the measured dip at {dips[j].frequency_hz / 1e6:.1f} MHz is the feed line's: the model "
        f"has it at {modes.loose[i].frequency_hz / 1e6:.1f} MHz, where no mode takes most of the "
        "power"
        for i, j in pairing.others
    ]


def _unexcited_notes(case: xr.Dataset, modes: CaseModes, pairing: Pairing) -> list[str]:
    driven: set[int] = set()
    if "driven" in case:
        driven = set(case["mode_half_waves"].values[case["driven"].values == 1].tolist())
    notes = []
    for i, _ in pairing.pairs:
        if np.isfinite(modes.dip_hz[i]):
            continue
        label = half_wave_label(modes.half_waves[i], modes.on_plane)
        if modes.half_waves[i] in driven:
            notes.append(
                f"the {label} mode is measured, but the model shows no dip of it at the connector: "
                "what lies between feed and connector is not as modelled"
            )
        else:
            notes.append(
                f"the {label} mode is measured but not excited by the modelled feed: the build is "
                "not symmetric there, or its cable radiates"
            )
    return notes


def _fixed_pairs(
    modes: CaseModes, dips: list[Dip], pins: Mapping[int, float], measurement: Measurement
) -> list[tuple[int, int]]:
    found = []
    for half_waves, frequency in pins.items():
        if half_waves not in modes.half_waves:
            known = ", ".join(half_wave_label(n, modes.on_plane) for n in modes.half_waves)
            raise MeasurementError(
                f"the pinned {half_wave_label(half_waves, modes.on_plane)} mode is not among those "
                f"of this case: {known}"
            )
        found.append((modes.half_waves.index(half_waves), pinned_dip(dips, frequency, measurement)))
    return found


def _ambiguity_notes(
    modes: CaseModes, dips: list[Dip], doubtful: Mapping[tuple[int, int], Pairing]
) -> list[str]:
    notes = []
    for (i, j), other in doubtful.items():
        instead = [k for k, dip in other.pairs if dip == j]
        what = (
            f"it may as well be the {half_wave_label(modes.half_waves[instead[0]], modes.on_plane)}"
            if instead
            else "it may as well belong to none"
        )
        notes.append(
            f"ambiguous: the dip at {dips[j].frequency_hz / 1e6:.1f} MHz is taken for the "
            f"{half_wave_label(modes.half_waves[i], modes.on_plane)} mode, but {what}; "
            "pin it if you know"
        )
    return notes


@dataclass(frozen=True)
class _Found:
    """What was found in the sweep: dips, whose they are, and the modes with doubtful ones."""

    dips: list[Dip]
    pairing: Pairing
    doubtful: set[int]

    def ratios(self, modes: CaseModes) -> FloatArray:
        """Measured over simulated dip of each mode, NaN without both, (M,)."""
        ratios = np.full(len(modes.half_waves), np.nan)
        for i, j in self.pairing.pairs:
            ratios[i] = self.dips[j].frequency_hz / modes.dip_hz[i]
        return ratios


def _comparison(
    dataset: xr.Dataset,
    row: int,
    measurement: Measurement,
    modes: CaseModes,
    found: _Found,
    notes: list[str],
) -> Comparison:
    case = dataset.isel(case=row)
    frequency, gamma = simulated_reflection(case, measurement.reference_ohm)
    swept = swept_names(dataset)
    taken = {j for _, j in found.pairing.pairs}
    natural = None
    ratios = found.ratios(modes)
    owners: dict[int, MeasuredMode] = {}
    if np.isfinite(ratios).any() and not has_feedline(dataset):
        common = float(np.exp(np.nanmean(np.log(ratios))))
        natural = natural_beside(measurement, frequency, gamma, common)
        owners = natural_pairs(modes, natural, common, ratios)
        notes = [*notes, *_plane_notes(natural)]
    return Comparison(
        measurement=measurement,
        title=str(dataset.attrs.get("title", "")),
        case=int(case["case"]),
        values={name: float(case[name]) for name in swept},
        units={name: str(dataset[name].attrs.get("units", "1")) for name in swept},
        status=Status(int(case["status"])).label,
        frequency_hz=frequency,
        simulated_reflection=gamma,
        lines=_lines(modes, found, owners),
        unpaired=tuple(dip for j, dip in enumerate(found.dips) if j not in taken),
        notes=tuple(notes),
        natural=natural,
    )


def _plane_notes(natural: MeasuredModes) -> list[str]:
    delay = natural.model.delay_s
    if abs(delay) < TOLD_DELAY_S:
        return []
    return [
        f"the phase runs {abs(delay) * 1e12:.0f} ps one way ({abs(delay) * 2.998e11:.0f} mm of "
        f"air) {'behind' if delay > 0 else 'ahead of'} the simulated one: set the port extension "
        "or --extension, unless the feed is elsewhere"
    ]


def _lines(
    modes: CaseModes, found: _Found, owners: Mapping[int, MeasuredMode]
) -> tuple[ModeLine, ...]:
    owner = {i: found.dips[j] for i, j in found.pairing.pairs}
    both = [i for i in sorted(owner) if np.isfinite(modes.dip_hz[i])]
    base = both[0] if both else None
    lines = []
    for i, half_waves in enumerate(modes.half_waves):
        dip = owner.get(i, Dip(NAN, NAN, NAN, NAN))
        mode = owners.get(i, MeasuredMode(NAN, NAN, NAN, NAN, supported=False))
        simulated = float(modes.dip_hz[i])
        lines.append(
            ModeLine(
                half_waves=half_waves,
                on_plane=modes.on_plane,
                natural_hz=float(modes.natural_hz[i]),
                q=float(modes.q[i]),
                simulated_hz=simulated,
                simulated_return_loss_db=float(modes.return_loss_db[i]),
                simulated_bandwidth_hz=float(modes.bandwidth_hz[i]),
                measured_hz=dip.frequency_hz,
                measured_return_loss_db=dip.return_loss_db,
                measured_bandwidth_hz=dip.bandwidth_hz,
                simulated_ratio=NAN if base is None else simulated / float(modes.dip_hz[base]),
                measured_ratio=NAN if base is None else dip.frequency_hz / owner[base].frequency_hz,
                measured_natural_hz=mode.frequency_hz,
                measured_natural_sigma_hz=mode.frequency_sigma_hz,
                measured_q=mode.q,
                measured_q_sigma=mode.q_sigma,
                ambiguous=i in found.doubtful,
            )
        )
    return tuple(lines)
