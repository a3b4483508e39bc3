"""What the connector shows of a case: impedance behind the feed line, losses, realised gain."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from simkit.feedline.build import build_chain
from simkit.feedline.chain import Chain, ChainResult
from simkit.feedline.dips import connector_dips
from simkit.feedline.oneport import OnePort
from simkit.geometry.wires import FloatArray
from simkit.response.features import Dip
from simkit.response.rational import ComplexArray
from simkit.study.feedline_text import feedline_text
from simkit.study.model import Antenna

LEAST_FACTOR = 1e-10
"""A smaller part of the power counts as this: gains end at -100 dB."""

_NEEDED = ("impedance", "dip_frequency", "pattern_frequency", "driven", "efficiency", "peak_gain")


@dataclass(frozen=True, eq=False)
class Connector:
    """The antenna of one case seen from its connector.

    Attributes
    ----------
    antenna : Antenna
    chain : Chain
        Without elements if the study has no feed line.
    load : OnePort
        The antenna at its feed.
    seen : ChainResult
    """

    antenna: Antenna
    chain: Chain
    load: OnePort
    seen: ChainResult

    @classmethod
    def of(
        cls, antenna: Antenna, frequency_hz: FloatArray, impedance_ohm: ComplexArray
    ) -> Connector:
        """Put the feed line before an antenna.

        Parameters
        ----------
        antenna : Antenna
        frequency_hz : (F,) float array
        impedance_ohm : (F,) complex array
            At the feed.

        Raises
        ------
        FeedlineError
            The feed line cannot be.
        """
        chain = build_chain(antenna)
        load = OnePort.from_impedance(frequency_hz, impedance_ohm, antenna.reference_ohm)
        return cls(antenna, chain, load, chain.terminate(load))

    def dips(self) -> list[Dip]:
        """Minima of |reflection| at the connector."""
        return connector_dips(self.chain, self.load)

    def judged(self, of_modes: Mapping[str, Any]) -> tuple[list[str], list[str]]:
        """What to distrust in the feed line, and what to know of it without distrust.

        Parameters
        ----------
        of_modes : mapping of str to (M,) float array
            As for `arrays`.

        Returns
        -------
        doubts : list of str
            Lines used beyond what holds for them where a mode is seen at the connector; anywhere
            in the band if no mode is.
        notes : list of str
            The same where no mode is: the curve is less sure there, the modes' values are not.
        """
        place = _places(of_modes)
        place = place[np.isfinite(place)]
        if not place.size:
            return list(self.seen.doubts), []
        found = [text for element in self.chain.elements for text in element.doubts(place)]
        if found:
            return list(dict.fromkeys(found)), []
        return [], [f"no mode is seen there, but {text}" for text in self.seen.doubts]

    def arrays(self, of_modes: Mapping[str, Any]) -> dict[str, Any]:
        """Arrays of the store.

        Parameters
        ----------
        of_modes : mapping of str to (M,) float array
            `dip_frequency`, `driven`, `pattern_frequency`, `efficiency` and `peak_gain` of the
            case; the last three are missing in a case without modes.

        Returns
        -------
        dict of str to ndarray
            Per mode at its dip, else, for a mode the feed excites, at its conductance peak.
        """
        nowhere = np.full(len(of_modes["dip_frequency"]), np.nan)
        network, mismatch = self._at(_places(of_modes))
        passed = network * mismatch
        taken_db = 10 * np.log10(np.maximum(passed, LEAST_FACTOR))
        arrays = {
            "network_efficiency": network,
            "mismatch_factor": mismatch,
            "total_efficiency": of_modes.get("efficiency", nowhere) * passed,
            "realised_gain": of_modes.get("peak_gain", nowhere) + taken_db,
        }
        if self.antenna.feedline:
            arrays["impedance_at_connector"] = self.seen.impedance_ohm[-1]
            arrays["feedline"] = feedline_text(self.antenna.feedline)
        return arrays

    def _at(self, frequency_hz: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Network efficiency and mismatch factor at some frequencies, NaN where one is NaN."""
        network, mismatch = np.full((2, len(frequency_hz)), np.nan)
        known = np.isfinite(frequency_hz)
        if known.any():
            wanted, place = np.unique(frequency_hz[known], return_inverse=True)
            seen = self.chain.terminate(self.load.at(wanted))
            # Where next to nothing passes, rounding may make it more than comes in.
            network[known] = np.minimum(seen.efficiency, 1.0)[place]
            mismatch[known] = seen.mismatch_factor[place]
        return network, mismatch


def _places(of_modes: Mapping[str, Any]) -> FloatArray:
    """Hertz of each mode's dip, else, if the feed excites it, of its conductance peak."""
    dip = of_modes["dip_frequency"]
    nowhere = np.full(len(dip), np.nan)
    peak = np.where(of_modes["driven"] == 1, of_modes.get("pattern_frequency", nowhere), nowhere)
    return np.where(np.isfinite(dip), dip, peak)


def added_later(antenna: Antenna, stored: Mapping[str, Any]) -> dict[str, Any]:
    """What a case solved by an earlier simkit lacks of the connector.

    Parameters
    ----------
    antenna : Antenna
    stored : mapping of str to ndarray
        Its arrays, without the dimension ``case``.
    """
    band = antenna.frequency
    frequency_hz = np.linspace(band.start_hz, band.stop_hz, band.points)
    arrays = {name: np.asarray(stored[name]) for name in _NEEDED}
    if not np.isfinite(arrays["impedance"]).all():
        return {}
    return Connector.of(antenna, frequency_hz, arrays["impedance"]).arrays(arrays)
