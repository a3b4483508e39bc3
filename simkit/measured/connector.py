"""From the impedance at the feed to the impedance at the connector.

The only place where a measured sweep and a simulated one meet at a reference plane. Without a feed
line between them the connector is the feed.
"""

from __future__ import annotations

from simkit.measured.measurement import ComplexArray, FloatArray
from simkit.study.model import Antenna


def at_connector(
    antenna: Antenna, frequency_hz: FloatArray, impedance_ohm: ComplexArray
) -> ComplexArray:
    """Return the impedance at the connector, ohm.

    Parameters
    ----------
    antenna : Antenna
        Says what lies between feed and connector.
    frequency_hz : (F,) float array
    impedance_ohm : (F,) complex array
        At the feed.
    """
    del antenna, frequency_hz
    return impedance_ohm
