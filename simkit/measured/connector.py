"""From the feed to the connector: where a measured sweep and a simulated one meet.

Everything measured is measured at the connector. A model is interpolated at the feed, where its
curves change slowly with the antenna's values, and the feed line is put before it afterwards: its
values then need no solution of the antenna, and long lines no finer interpolation.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from simkit.measured.measurement import ComplexArray, FloatArray
from simkit.measured.variation import SCALE, Variation
from simkit.response.features import Dip
from simkit.study.model import Antenna

if TYPE_CHECKING:
    from simkit.feedline.chain import Chain

REMEMBERED = 64
"""Chains kept, for unknowns of a fit that change no value."""


def at_connector(
    antenna: Antenna, frequency_hz: FloatArray, impedance_ohm: ComplexArray
) -> ComplexArray:
    """Return the impedance at the connector, ohm; infinite for an open circuit.

    Parameters
    ----------
    antenna : Antenna
        Says what lies between feed and connector.
    frequency_hz : (F,) float array
        Ascending.
    impedance_ohm : (F,) complex array
        At the feed.

    Raises
    ------
    FeedlineError
        If the feed line cannot be.
    """
    if not antenna.feedline:
        return impedance_ohm
    from simkit.feedline.build import build_chain
    from simkit.feedline.oneport import OnePort

    load = OnePort.from_impedance(frequency_hz, impedance_ohm, antenna.reference_ohm)
    return build_chain(antenna).terminate(load).connector.impedance_ohm


def values_of_line_alone(
    variation: Variation,
    base: Mapping[str, float],
    bounds: Mapping[str, tuple[float, float]],
) -> tuple[str, ...]:
    """Return the names whose values change the feed line and nothing else.

    Parameters
    ----------
    variation : Variation
    base : mapping of str to float
        Overrides that always hold.
    bounds : mapping of str to (float, float)

    Raises
    ------
    StudyError
        If the values make no antenna.
    """
    if not variation.study.nominal().feedline:
        return ()
    middle = dict(base) | {name: (low + high) / 2 for name, (low, high) in bounds.items()}

    def bare(values: Mapping[str, float]) -> Antenna:
        return replace(variation.antenna(values), feedline=())

    one = bare(middle)
    return tuple(
        name
        for name, pair in bounds.items()
        if all(bare({**middle, name: value}) == one for value in pair)
    )


class FeedLineModel:
    """The feed line of a study as a function of its values.

    Parameters
    ----------
    variation : Variation
    base : mapping of str to float
        Overrides that all points share: the build as cut.
    """

    def __init__(self, variation: Variation, base: Mapping[str, float]) -> None:
        self.variation, self.base = variation, dict(base)
        self._chains: dict[tuple[tuple[str, float], ...], Chain] = {}

    def chain(self, values: Mapping[str, float]) -> Chain:
        """Return the chain for some values, SI; `scale` does not stretch it.

        Raises
        ------
        StudyError, FeedlineError
            If the values make no feed line.
        """
        from simkit.feedline.build import build_chain

        asked = {name: value for name, value in values.items() if name != SCALE}
        key = tuple(sorted(asked.items()))
        if key not in self._chains:
            if len(self._chains) >= REMEMBERED:
                self._chains.pop(next(iter(self._chains)))
            self._chains[key] = build_chain(self.variation.antenna({**self.base, **asked}))
        return self._chains[key]

    def through(
        self,
        values: Mapping[str, float],
        frequency_hz: FloatArray,
        reflection: ComplexArray,
        reference_ohm: float,
    ) -> ComplexArray:
        """Return the reflection at the connector for one at the feed, both for one reference."""
        from simkit.feedline.oneport import OnePort

        chain = self.chain(values)
        # A band of no width asks for one frequency many times.
        f, first, back = np.unique(frequency_hz, return_index=True, return_inverse=True)
        seen = OnePort(
            f, chain.reflection(OnePort(f, reflection[first], reference_ohm)), chain.reference_ohm
        )
        found: ComplexArray = seen.referred_to(reference_ohm).reflection[back]
        return found

    def dips(
        self,
        values: Mapping[str, float],
        frequency_hz: FloatArray,
        reflection: ComplexArray,
        reference_ohm: float,
    ) -> list[Dip]:
        """Return the dips at the connector for a reflection at the feed."""
        from simkit.feedline.dips import connector_dips
        from simkit.feedline.oneport import OnePort

        load = OnePort(frequency_hz, reflection, reference_ohm)
        return connector_dips(self.chain(values), load)


def owners(
    places_hz: Iterable[float],
    conductance_s: Iterable[float],
    natural_hz: FloatArray,
    q: FloatArray,
    peak_ohm: FloatArray,
) -> list[int]:
    """Return for each place which mode carries most of the conductance at the feed, -1 for none.

    Parameters
    ----------
    places_hz, conductance_s : (D,) float
        Frequencies, and the conductance at the feed there.
    natural_hz, q, peak_ohm : (M,) float arrays
        Of the modes; `peak_ohm` is one over the conductance of each at its peak, NaN for a mode
        that the feed does not excite.

    Notes
    -----
    The rule of `simkit.response.ownership`, with each mode's conductance as that of its pole alone.
    """
    from simkit.response.ownership import FARTHEST_HALF_WIDTHS, LEAST_SHARE

    half_width = natural_hz / (2 * q)
    found = []
    for place, total in zip(places_hz, conductance_s, strict=True):
        off = (place - natural_hz) / half_width
        own = np.where(np.isfinite(peak_ohm), 1 / peak_ohm, 0.0) / (1 + off**2)
        share = np.where(abs(off) <= FARTHEST_HALF_WIDTHS, own / total, 0.0)
        best = int(np.argmax(share)) if len(share) else -1
        found.append(best if best >= 0 and share[best] > LEAST_SHARE else -1)
    return found
