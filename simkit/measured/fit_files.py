"""Measured sweeps made ready for a fit: their dips, the band the model covers, fewer points.

Each file gets the model of its build; builds that are held at the same values share one.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace

import numpy as np

from simkit.errors import GeometryError, MeasurementError, StudyError
from simkit.measured.dips import measured_dips, pinned_dip, smooth
from simkit.measured.fit_problem import INDEPENDENT, FitFile, referred
from simkit.measured.measurement import ComplexArray, FloatArray, Measurement
from simkit.measured.quality import quality_notes
from simkit.measured.simulator import REFERENCE_OHM, STEPS, Engine, Surrogate, build_surrogate
from simkit.measured.variation import SCALE, Variation
from simkit.response.features import Dip

MOST_POINTS = 240
"""Neighbours are averaged down to about so many; their errors are shared anyway."""

LARGEST_TURN_RAD = 0.3
"""What a feed line may turn the reflection by within one mean, which then loses 0.4 % of it."""

POINTS_ACROSS = 8
"""Points kept across the narrowest dip."""

FIRST_SIGMA = 0.02
"""Residual of |reflection| assumed before the first look: a directivity of -34 dB."""


def fit_files(
    variation: Variation,
    measurements: Sequence[Measurement],
    bounds: Mapping[str, tuple[float, float]],
    builds: Sequence[Mapping[str, float]],
    pins: Sequence[Mapping[int, float]] | None,
    also: Mapping[str, tuple[float, float]],
    surrogate: Surrogate | None,
    progress: Callable[[int, int], None] | None,
) -> tuple[list[FitFile], list[Engine | None], list[str]]:
    """Files with the model of their builds, the engine behind each (None if given), and notes.

    Raises
    ------
    MeasurementError
        If there is no file, no frequency in common, or not every antenna within the bounds can be
        built.
    """
    if not measurements:
        raise MeasurementError("no measured file is given; name at least one")
    antenna = variation.study.nominal()
    axes = dict(bounds)
    for name, pair in also.items():
        as_cut = [build[name] for build in builds if name in build]
        reached = [*pair, *axes.get(name, pair), *as_cut]
        axes[name] = (min(reached), max(reached))
    made: dict[tuple[tuple[str, float], ...], tuple[Surrogate, Engine | None]] = {}
    files: list[FitFile] = []
    engines: list[Engine | None] = []
    notes = []
    band = (antenna.frequency.start_hz, antenna.frequency.stop_hz)
    for place, raw in enumerate(measurements):
        measurement = raw.renormalised(antenna.reference_ohm)
        build = dict(builds[place])
        held = {k: v for k, v in build.items() if k not in axes}
        key = tuple(sorted(held.items()))
        if surrogate is not None:
            made[key] = surrogate, None
        elif key not in made:
            common = _common(measurement, band)
            made[key] = _solved(variation, held, axes, common, progress)
        model, engine = made[key]
        dips, dip_notes = measured_dips(measurement)
        expected = _expected(model, measurement.reference_ohm)
        said = (*measurement.notes, *quality_notes(measurement, expected), *dip_notes)
        notes += [f"{measurement.path.name}: {note}" for note in said]
        cut = _cut(measurement, model.band_hz, bounds.get(SCALE, (1.0, 1.0)), band)
        notes += _lost_notes(measurement, cut, dips)
        pinned = _pinned(pins[place] if pins is not None else {}, dips, measurement)
        noise = smooth(cut).noise
        cut = _thinned(cut, dips, _delay_s(model))
        weight = 1 / (FIRST_SIGMA * np.sqrt(max(len(cut.frequency_hz) / INDEPENDENT, 1.0)))
        files.append(FitFile(cut, build, model, tuple(dips), noise, pinned, float(weight)))
        engines.append(engine)
    return files, engines, notes


def _solved(
    variation: Variation,
    held: Mapping[str, float],
    axes: Mapping[str, tuple[float, float]],
    band_hz: tuple[float, float],
    progress: Callable[[int, int], None] | None,
) -> tuple[Surrogate, Engine]:
    """The model over the bounds; an antenna that cannot be built there is said to lie there."""
    try:
        return build_surrogate(variation, held, axes, band_hz, progress=progress)
    except (GeometryError, StudyError) as error:
        text = variation.text
        reach = ", ".join(
            f"{name} from {text(name, low)} to {text(name, high)}"
            for name, (low, high) in axes.items()
        )
        raise MeasurementError(
            f"not every antenna within the bounds ({reach}) can be built: {error}; narrow the "
            "bounds"
        ) from error


def _expected(surrogate: Surrogate, reference_ohm: float) -> tuple[FloatArray, ComplexArray]:
    """What the model shows in the middle of the bounds."""
    middle = {axis.name: float(axis.nodes[[0, -1]].mean()) for axis in surrogate.axes}
    frequency = np.linspace(*surrogate.band_hz, STEPS)
    gamma = surrogate.reflection(middle, frequency)
    return frequency, referred(gamma, REFERENCE_OHM, reference_ohm)


def _common(measurement: Measurement, band: tuple[float, float]) -> tuple[float, float]:
    low = max(float(measurement.frequency_hz[0]), band[0])
    high = min(float(measurement.frequency_hz[-1]), band[1])
    if not low < high:
        raise MeasurementError(
            f"{measurement.path}: measured from {measurement.frequency_hz[0] / 1e6:g} to "
            f"{measurement.frequency_hz[-1] / 1e6:g} MHz, the study's band is {band[0] / 1e6:g} to "
            f"{band[1] / 1e6:g} MHz: no frequency in common; change [frequency] or measure there"
        )
    return low, high


def _cut(
    measurement: Measurement,
    band: tuple[float, float],
    scale: tuple[float, float],
    study_band: tuple[float, float],
) -> Measurement:
    """The part of a sweep that the model covers whatever the values are."""
    low = max(band[0] / scale[0] * 1.005, study_band[0])
    high = min(band[1] / scale[1] * 0.995, study_band[1])
    inside = (measurement.frequency_hz >= low) & (measurement.frequency_hz <= high)
    if inside.sum() < 11:
        few = f"only {points} points lie" if (points := int(inside.sum())) else "no point lies"
        raise MeasurementError(
            f"{measurement.path}: {few} from {low / 1e6:.1f} to "
            f"{high / 1e6:.1f} MHz, where the model can be compared for all values within the "
            "bounds; narrow the bounds, or widen [frequency] of the study and the measured band"
        )
    return replace(
        measurement,
        frequency_hz=measurement.frequency_hz[inside],
        reflection=measurement.reflection[inside],
    )


def _lost_notes(whole: Measurement, cut: Measurement, dips: Sequence[Dip]) -> list[str]:
    """Say which measured dips lie where the model does not reach."""
    low, high = float(cut.frequency_hz[0]), float(cut.frequency_hz[-1])
    lost = [d.frequency_hz for d in dips if not low <= d.frequency_hz <= high]
    if not lost:
        return []
    places = ", ".join(f"{place / 1e6:.1f}" for place in lost)
    return [
        f"{whole.path.name}: only {low / 1e6:.0f} to {high / 1e6:.0f} MHz can be compared for all "
        f"values within the bounds, so the measured dip at {places} MHz is left out of the curves; "
        "narrow the bounds, or give the study (or the stored sweep) a wider band"
    ]


def _delay_s(surrogate: Surrogate) -> float:
    """Of the feed line as drawn, one way."""
    if surrogate.feedline is None:
        return 0.0
    middle = sum(surrogate.band_hz) / 2
    return surrogate.feedline.chain({}).delay_s(middle)


def _thinned(measurement: Measurement, dips: Sequence[Dip], delay_s: float) -> Measurement:
    """Means of neighbouring points, as many as leave each dip and each turn well sampled."""
    frequency, gamma = measurement.frequency_hz, measurement.reflection
    group = len(frequency) // MOST_POINTS
    step = float(np.median(np.diff(frequency)))
    widths = [dip.bandwidth_hz for dip in dips if np.isfinite(dip.bandwidth_hz)]
    if widths:
        group = min(group, int(min(widths) / step / POINTS_ACROSS))
    if delay_s:
        group = min(group, int(LARGEST_TURN_RAD / (4 * np.pi * step * delay_s)))
    if group < 2:
        return measurement
    count = len(frequency) // group * group
    return replace(
        measurement,
        frequency_hz=frequency[:count].reshape(-1, group).mean(axis=1),
        reflection=gamma[:count].reshape(-1, group).mean(axis=1),
    )


def _pinned(
    wanted: Mapping[int, float], dips: Sequence[Dip], measurement: Measurement
) -> dict[int, int]:
    return {n: pinned_dip(dips, frequency, measurement) for n, frequency in wanted.items()}
