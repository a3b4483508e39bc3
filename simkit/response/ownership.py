"""Which mode causes which dip, conductance peak and resonance.

Near a feature the feed admittance is the sum of the modes' own admittances; the mode that carries
most of the conductance there owns it. Nearness alone would mislead: a dip lies per cents above its
pole, and a neighbour that the feed hardly excites may lie between.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import TypeVar

import numpy as np

from simkit.geometry.wires import FloatArray
from simkit.response.features import (
    ConductancePeak,
    Dip,
    Resonance,
    conductance_peaks,
    find_dips,
    find_resonances,
    impedance_q_at,
    reflection,
)
from simkit.response.modes import NaturalMode
from simkit.response.rational import ComplexArray

LEAST_SHARE = 0.25
"""A mode owns a feature only if it carries this part of the feed conductance there."""

FARTHEST_HALF_WIDTHS = 3.0
"""A feature farther from the pole than this many half widths is the background's."""

Feature = TypeVar("Feature", Dip, ConductancePeak, Resonance)


@dataclass(frozen=True)
class OwnedFeatures:
    """Features of one mode; None where it has none.

    `series` and `parallel` are the resonances; `q` is the impedance Q at the dip, NaN without one.
    """

    peak: ConductancePeak | None = None
    dip: Dip | None = None
    series: Resonance | None = None
    parallel: Resonance | None = None
    q: float = field(default=np.nan)


def owned_features(
    modes: Sequence[NaturalMode],
    frequency_hz: FloatArray,
    impedance_ohm: ComplexArray,
    reference_ohm: float,
    dips: Sequence[Dip] | None = None,
) -> tuple[OwnedFeatures, ...]:
    """Hand the features of a feed impedance to the modes that cause them.

    Parameters
    ----------
    modes : sequence of NaturalMode
    frequency_hz : (F,) float array
    impedance_ohm : (F,) complex array
    reference_ohm : float
        To which dips refer.
    dips : sequence of Dip, optional
        Those behind a feed line; those of the feed impedance if left out.

    Returns
    -------
    tuple of OwnedFeatures
        One for each mode.
    """
    admittance = 1 / impedance_ohm
    share = _Shares(modes, frequency_hz, admittance.real)
    if dips is None:
        dips = find_dips(frequency_hz, reflection(impedance_ohm, reference_ohm))
    peaks = share.owners(
        conductance_peaks(frequency_hz, impedance_ohm), lambda p: -p.resistance_ohm
    )
    owned_dips = share.owners(dips, lambda d: d.return_loss_db)
    resonances = find_resonances(frequency_hz, impedance_ohm)
    series = share.owners(
        [r for r in resonances if r.kind == "series"], lambda r: -r.resistance_ohm
    )
    parallel = share.owners(
        [r for r in resonances if r.kind == "parallel"], lambda r: r.resistance_ohm
    )
    found = []
    for index in range(len(modes)):
        dip = owned_dips.get(index)
        q_dip = (
            impedance_q_at(dip.frequency_hz, frequency_hz, impedance_ohm) if dip else float("nan")
        )
        found.append(
            OwnedFeatures(peaks.get(index), dip, series.get(index), parallel.get(index), q_dip)
        )
    return tuple(found)


class _Shares:
    """Part of the feed conductance that each mode carries."""

    def __init__(
        self, modes: Sequence[NaturalMode], frequency_hz: FloatArray, conductance_s: FloatArray
    ) -> None:
        self.modes = modes
        self.frequency_hz = frequency_hz
        self.conductance_s = conductance_s

    def owner(self, frequency_hz: float) -> tuple[int, float]:
        """Index of the owning mode and its share; -1 if no mode owns what lies there."""
        total = float(np.interp(frequency_hz, self.frequency_hz, self.conductance_s))
        best, best_share = -1, LEAST_SHARE
        for index, mode in enumerate(self.modes):
            if abs(frequency_hz - mode.frequency_hz) > FARTHEST_HALF_WIDTHS * mode.pole_hz.imag:
                continue
            own = float(mode.feed_admittance(np.array([frequency_hz]))[0].real)
            if own / total > best_share:
                best, best_share = index, own / total
        return best, best_share

    def owners(
        self, features: Sequence[Feature], strength: Callable[[Feature], float]
    ) -> dict[int, Feature]:
        """Features by mode; of several that fall to one mode, the strongest."""
        found: dict[int, Feature] = {}
        for feature in features:
            index, _ = self.owner(feature.frequency_hz)
            if index >= 0 and (index not in found or strength(feature) > strength(found[index])):
                found[index] = feature
        return found
