"""The unknowns of a fit, and how far the model is from the measured sweeps for given ones."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from scipy.optimize import least_squares
from scipy.stats import qmc

from simkit.measured.bench_errors import (
    ANALYSER,
    AnalyserErrors,
    Echoes,
    ErrorSizes,
    warp,
    with_capacitance,
)
from simkit.measured.measurement import ComplexArray, FloatArray, Measurement
from simkit.measured.pairing import ModelledDip, Pairing
from simkit.measured.simulator import REFERENCE_OHM, Surrogate
from simkit.measured.variation import Known, Variation
from simkit.response.features import Dip, find_dips

To = Literal["complex", "magnitude", "features"]

CANDIDATES = 128
"""Points of the bounds that are tried by pairing before the best ones start a search."""

STARTS = 3
SEED = 6

DIP_SIGMA = 0.002
"""Relative error of a measured dip's frequency: a directivity of -36 dB moves a dip of Q 5 by 0.3 %
at worst."""

LEAST_RESIDUAL = 0.003
"""No model of wires follows a curve better than this, however little noise there is."""

INDEPENDENT = 40
"""Points of a sweep that count as independent at most: what separates analyser and model from the
truth is smooth."""

DEPTH_SIGMA = 0.1
"""Error of |reflection| in a dip, the model's of the match included."""

LOST_DIP = 5.0
"""Residual of a measured dip, in standard deviations, where the model has lost its own."""

EXPECTED_OVER_POLE = 1.02
"""Where the frequency error of a mode without a dip is put."""


@dataclass(frozen=True, eq=False)
class FitFile:
    measurement: Measurement
    build: dict[str, float]
    surrogate: Surrogate
    dips: tuple[Dip, ...]
    noise: float
    pins: dict[int, int]
    weight: float = 0.0


class FitProblem:
    """Residuals over the unknowns: free values in half widths of their bounds, then errors.

    The errors are in standard deviations: one per mode, one of all modes, the level of the
    impedance, the capacitance, then `ANALYSER` for each file.
    """

    def __init__(
        self,
        variation: Variation,
        files: Sequence[FitFile],
        bounds: Mapping[str, tuple[float, float]],
        known: Mapping[str, Known],
        sizes: ErrorSizes,
        to: To,
    ) -> None:
        self.variation, self.files, self.to, self.sizes = variation, list(files), to, sizes
        self.names = tuple(bounds)
        self.bounds = dict(bounds)
        self.known = dict(known)
        pairs = [bounds[name] for name in self.names]
        self.middle = np.array([(low + high) / 2 for low, high in pairs])
        self.half = np.array([(high - low) / 2 for low, high in pairs])
        self.half_waves = tuple(sorted({n for file in files for n in file.surrogate.half_waves}))
        self.pairings: list[tuple[tuple[int, int], ...]] = [() for _ in files]
        sweeps = [file.measurement for file in files] if to == "complex" else []
        self.echoes = [Echoes.of(sweep.frequency_hz, sweep.reflection, sizes) for sweep in sweeps]

    @property
    def free(self) -> int:
        """Number of free values."""
        return len(self.names)

    @property
    def unknowns(self) -> int:
        """Free values and errors."""
        return self.common + ANALYSER * len(self.files)

    @property
    def common(self) -> int:
        """Unknowns that all files share; they come first."""
        return self.free + len(self.half_waves) + 3

    def values(self, x: FloatArray, build: Mapping[str, float]) -> dict[str, float]:
        """Numbers for every value the model depends on, SI."""
        numbers = self.middle + self.half * x[: self.free]
        nominal = {
            name: build.get(name, self.variation.nominal(name))
            for file in self.files
            for name in file.surrogate.names
        }
        if any(file.surrogate.feedline is not None for file in self.files):
            nominal = dict(build) | nominal  # a build may say how its feed line was cut
        return nominal | dict(zip(self.names, map(float, numbers), strict=True))

    def at(self, values: Mapping[str, float]) -> FloatArray:
        """Unknowns of given values without errors."""
        x = np.zeros(self.unknowns)
        for place, name in enumerate(self.names):
            x[place] = np.clip((values[name] - self.middle[place]) / self.half[place], -1, 1)
        return x

    def mode_errors(self, x: FloatArray) -> FloatArray:
        """Relative frequency error of each mode of `half_waves`."""
        own = x[self.free : self.free + len(self.half_waves)] * self.sizes.mode
        return np.asarray(own + x[self.common - 3] * self.sizes.model)

    def level(self, x: FloatArray) -> float:
        """Factor of the modelled impedance."""
        return float(np.exp(x[self.common - 2] * self.sizes.level))

    def capacitance_f(self, x: FloatArray) -> float:
        """Capacitance across the feed."""
        return float(x[self.common - 1] * self.sizes.capacitance_f)

    def analyser(self, x: FloatArray, place: int) -> AnalyserErrors:
        """Errors of one file."""
        start = self.common + place * ANALYSER
        return AnalyserErrors.of(x[start : start + ANALYSER], self.sizes)

    def true_curve(
        self, x: FloatArray, surrogate: Surrogate, values: Mapping[str, float], f: FloatArray
    ) -> ComplexArray:
        """Reflection at the connector, reference `REFERENCE_OHM`, without the analyser."""
        modes, seen = surrogate.feed_modes(values), surrogate.places_hz(values)
        errors = self.mode_errors(x)[[self.half_waves.index(n) for n in modes.half_waves]]
        places = np.where(np.isfinite(seen), seen, modes.natural_hz * EXPECTED_OVER_POLE)
        gamma = surrogate.at_feed(values, warp(f, places, errors))
        gamma = referred(gamma, REFERENCE_OHM * self.level(x), REFERENCE_OHM)
        gamma = with_capacitance(f, gamma, self.capacitance_f(x), REFERENCE_OHM)
        return surrogate.through(values, f, gamma)

    def shown(self, x: FloatArray, place: int) -> ComplexArray:
        """What the analyser shows of one file's antenna, in the file's reference."""
        file = self.files[place]
        f = file.measurement.frequency_hz
        gamma = self.true_curve(x, file.surrogate, self.values(x, file.build), f)
        gamma = referred(gamma, REFERENCE_OHM, file.measurement.reference_ohm)
        return self.analyser(x, place).apply(f, gamma)

    def residuals(self, x: FloatArray) -> FloatArray:
        """Weighted differences of all files, then the priors."""
        parts = []
        for place, file in enumerate(self.files):
            if self.to == "features":
                parts.append(self.feature_residuals(x, place))
                continue
            shown, measured = self.shown(x, place), file.measurement.reflection
            if self.to == "magnitude":
                parts.append(file.weight * (abs(measured) - abs(shown)))
            else:
                off = self.echoes[place].whitened(measured - shown, file.weight)
                parts += [off.real, off.imag]
        return np.concatenate([*parts, *self.priors(x)])

    def priors(self, x: FloatArray) -> list[FloatArray]:
        """Rows of the priors: of the known values, then of the errors."""
        numbers = self.middle + self.half * x[: self.free]
        rows = [
            (numbers[self.names.index(k.name)] - k.value) / k.sigma for k in self.known.values()
        ]
        return [np.array(rows), x[self.free :]]

    def feature_residuals(self, x: FloatArray, place: int) -> FloatArray:
        """Dips against dips of the paired modes: frequency and depth."""
        file = self.files[place]
        modes = file.surrogate.modes(self.values(x, file.build))
        errors = dict(zip(self.half_waves, self.mode_errors(x), strict=True))
        rows = []
        for half_waves, dip in self.pairings[place]:
            where = modes.half_waves.index(half_waves)
            if not np.isfinite(modes.dip_hz[where]):
                if file.surrogate.feedline is not None:  # it comes and goes with the values
                    rows += [LOST_DIP, LOST_DIP]
                continue
            modelled = modes.dip_hz[where] * (1 - errors[half_waves])
            measured = file.dips[dip]
            rows.append(np.log(modelled / measured.frequency_hz) / DIP_SIGMA)
            depths = 10 ** (-np.array([modes.return_loss_db[where], measured.return_loss_db]) / 20)
            rows.append((depths[0] - depths[1]) / DEPTH_SIGMA)
        return np.array(rows)

    def pair(self, x: FloatArray, place: int) -> Pairing:
        """Pair one file's dips with the modes at some unknowns."""
        file = self.files[place]
        modes = file.surrogate.modes(self.values(x, file.build))
        heard = [ModelledDip(d.frequency_hz, 10 ** (-d.return_loss_db / 20)) for d in file.dips]
        band = file.surrogate.band_hz
        swept = (file.measurement.frequency_hz[0], file.measurement.frequency_hz[-1])
        pins = [
            (modes.half_waves.index(n), j) for n, j in file.pins.items() if n in modes.half_waves
        ]
        return modes.pair(heard, band, (float(swept[0]), float(swept[1])), pins)

    def settle_pairs(self, x: FloatArray) -> None:
        """Keep the pairing at some unknowns for the features."""
        for place, file in enumerate(self.files):
            names = file.surrogate.half_waves
            found = {names[i]: j for i, j in self.pair(x, place).pairs}
            self.pairings[place] = tuple(sorted(found.items()))

    def misfit(self, x: FloatArray) -> float:
        """How badly the modes at some unknowns fit the measured dips."""
        return sum(self.pair(x, place).misfit for place in range(len(self.files)))

    def starts(self) -> list[FloatArray]:
        """Nominal values and an even choice of the bounds, best paired first."""
        points = [np.zeros(self.free)]
        if self.free:
            cloud = qmc.Sobol(self.free, seed=SEED).random(CANDIDATES)
            points += list(2 * cloud - 1)
        full = [np.concatenate([point, np.zeros(self.unknowns - self.free)]) for point in points]
        costs = [self.misfit(x) + 0.5 * float(np.sum(self.priors(x)[0] ** 2)) for x in full]
        return [full[k] for k in np.argsort(costs)[:STARTS]]

    def solve(self, start: FloatArray) -> FloatArray:
        """Least squares from one start."""
        limit = np.full(self.unknowns, np.inf)
        limit[: self.free] = 1.0
        found = least_squares(
            self.residuals,
            np.clip(start, -0.999 * limit, 0.999 * limit),
            bounds=(-limit, limit),
            x_scale=1.0,
            xtol=1e-7,
            ftol=1e-9,
            max_nfev=60,
        )
        return np.asarray(found.x)

    def reweigh(self, x: FloatArray) -> None:
        """Set each file's weight from the size and the correlation length of its residual."""
        for place, file in enumerate(self.files):
            off = file.measurement.reflection - self.shown(x, place)
            if self.to == "complex":
                off = self.echoes[place].removed(off, file.weight)
            size = max(float(np.sqrt(np.mean(np.abs(off) ** 2) / 2)), file.noise, LEAST_RESIDUAL)
            alike = max(correlation_length(off), len(off) / INDEPENDENT)
            self.files[place] = replace(file, weight=float(1 / (size * np.sqrt(alike))))

    def jacobian(self, x: FloatArray) -> FloatArray:
        """Central differences of the residuals, (R, U)."""
        step = 1e-4
        columns = []
        for place in range(self.unknowns):
            ahead, back = x.copy(), x.copy()
            ahead[place] += step
            back[place] -= step
            columns.append((self.residuals(ahead) - self.residuals(back)) / (2 * step))
        return np.array(columns).T


def referred(gamma: ComplexArray, from_ohm: float, to_ohm: float) -> ComplexArray:
    """Refer a reflection to another resistance."""
    step = (from_ohm - to_ohm) / (from_ohm + to_ohm)
    return np.asarray((gamma + step) / (1 + step * gamma))


def correlation_length(off: ComplexArray) -> float:
    """Points of a residual that count as one, at least 1.

    The integral of the correlation up to where it has died away.
    """
    count = len(off)
    spectrum = np.fft.fft(off, 2 * count)
    correlation = np.fft.ifft(abs(spectrum) ** 2)[:count].real
    if not correlation[0] > 0:
        return 1.0
    correlation = correlation / correlation[0]
    low = np.flatnonzero(correlation < 0.1)
    stop = int(low[0]) if len(low) else count
    return float(1 + 2 * correlation[1:stop].sum())


def modelled_dip(
    problem: FitProblem, x: FloatArray, file: int, half_waves: int, changes: Mapping[str, float]
) -> Dip | None:
    """Dip a mode owns in the fitted model, errors of the model included, those of the bench not.

    `changes` are differences (SI) to add to values of the file's build.
    """
    chosen = problem.files[file]
    values = problem.values(x, chosen.build)
    values = {name: value + changes.get(name, 0.0) for name, value in values.items()}
    modes = chosen.surrogate.modes(values)
    if half_waves not in modes.half_waves:
        return None
    place = modes.dip_hz[modes.half_waves.index(half_waves)]
    if not np.isfinite(place):
        return None
    low, high = chosen.surrogate.band_hz
    f = np.linspace(max(0.85 * place, low), min(1.15 * place, high), 301)
    gamma = problem.true_curve(x, chosen.surrogate, values, f)
    dips = find_dips(f, referred(gamma, REFERENCE_OHM, chosen.measurement.reference_ohm))
    return min(dips, key=lambda dip: abs(dip.frequency_hz - place)) if dips else None
