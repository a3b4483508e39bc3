"""Names, dimensions, types and meanings of everything kept in a results store.

This table is the single place where a variable of the store is defined. The solver returns arrays
under these names, the writer lays out the zarr arrays from it, the readers take units from it.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum

import numpy as np

MODES = 10
"""Slots for natural modes per case, filled from the lowest frequency up; the rest is NaN."""

POSITIONS = 101
"""Places along each strip, 0 (start of its path) to 1 (end), at which mode currents are kept."""

SAMPLES = 40
"""Largest number of frequencies the adaptive sweep may solve for one case."""

THETA_DEG = np.arange(0.0, 181.0, 10.0)
PHI_DEG = np.arange(0.0, 361.0, 10.0)


class Status(IntEnum):
    """How a case stands. `waiting` is what a chunk that was never written reads as."""

    WAITING = 0
    SOLVED = 1
    DOUBTFUL = 2
    REFUSED = 3
    FAILED = 4
    TIMED_OUT = 5

    @property
    def label(self) -> str:
        """The word shown to users, as in `timed-out`."""
        return self.name.lower().replace("_", "-")


@dataclass(frozen=True)
class Variable:
    """One array of the store.

    Attributes
    ----------
    dims : tuple of str
    dtype : str
        numpy type string.
    units : str
        Unit as UDUNITS text, "1" for pure numbers, "" for codes and text.
    meaning : str
        One line for users, kept as `long_name`.
    """

    dims: tuple[str, ...]
    dtype: str
    units: str
    meaning: str


def _per_mode(units: str, meaning: str) -> Variable:
    return Variable(("case", "mode"), "f8", units, meaning)


def _per_segment(dtype: str, units: str, meaning: str) -> Variable:
    return Variable(("case", "segment"), dtype, units, meaning)


VARIABLES: dict[str, Variable] = {
    "status": Variable(("case",), "i1", "", "how the case stands, see flag_meanings"),
    "reason": Variable(("case",), "str", "", "why a case is not simply solved"),
    "case_key": Variable(("case",), "str", "", "hash of resolved inputs, model and engine version"),
    "seconds": Variable(("case",), "f8", "s", "time the case took"),
    "solves": Variable(("case",), "i4", "1", "frequencies solved by the engine"),
    "worker": Variable(("case",), "str", "", "process and machine that settled the case"),
    "impedance": Variable(("case", "frequency"), "c16", "ohm", "impedance at the feed gap"),
    "impedance_at_connector": Variable(
        ("case", "frequency"), "c16", "ohm", "impedance behind the feed line, at the connector"
    ),
    "feedline": Variable(
        ("case",), "str", "", "resolved items from feed to connector as JSON, SI; empty: none"
    ),
    # Natural modes: feed-independent.
    "mode_frequency": _per_mode("Hz", "natural frequency, real part of the pole"),
    "mode_q": _per_mode("1", "quality factor of the pole, Re/(2 Im)"),
    "mode_half_waves": Variable(
        ("case", "mode"),
        "i2",
        "1",
        "half waves of current along the tip-to-tip path; -1: no mode, or one of the feed cable",
    ),
    "path_on_plane": Variable(
        ("case",),
        "i1",
        "",
        "1: the path stands on a ground plane and mode_half_waves counts path and image, so "
        "quarter waves of the path; 0: it does not; -1: no solution",
    ),
    "mode_frequency_error": _per_mode("1", "relative standard error of the natural frequency"),
    "mode_current": Variable(
        ("case", "mode", "strip", "position"),
        "c16",
        "1",
        "mode current along each strip, positive from start to end, largest value 1 and real",
    ),
    # The feed cable; NaN in studies without one.
    "mode_on_cable": _per_mode(
        "1", "part of the mode's squared current that flows on the feed cable, along its length"
    ),
    "cable_current": _per_mode(
        "dB",
        "common-mode current on the feed cable at its start over the feed current, at the "
        "conductance peak",
    ),
    # Features a measurement shows, owned by the mode that causes them; NaN where there is none.
    "conductance_peak_frequency": _per_mode("Hz", "maximum of the conductance at the feed"),
    "conductance_peak_resistance": _per_mode("ohm", "1/G at the conductance peak"),
    "series_resonance_frequency": _per_mode("Hz", "reactance at the feed crosses zero upwards"),
    "series_resonance_resistance": _per_mode("ohm", "resistance at the series resonance"),
    "parallel_resonance_frequency": _per_mode("Hz", "reactance at the feed crosses zero downwards"),
    "parallel_resonance_resistance": _per_mode("ohm", "resistance at the parallel resonance"),
    "dip_frequency": _per_mode("Hz", "minimum of |reflection| at the connector"),
    "dip_return_loss": _per_mode("dB", "return loss at the dip, positive"),
    "dip_bandwidth": _per_mode("Hz", "band around the dip with at least 10 dB return loss"),
    "impedance_q": _per_mode("1", "Q from the feed impedance at the dip (Yaghjian & Best 2005)"),
    # At the connector, each at the mode's dip, else at its conductance peak.
    "network_efficiency": _per_mode(
        "1", "power into the antenna over power into the connector, at the dip; 1: no loss between"
    ),
    "mismatch_factor": _per_mode(
        "1", "power into the connector over available power, at the dip: 1 - |reflection|^2"
    ),
    "total_efficiency": _per_mode(
        "1", "radiated power over power available at the connector, at the dip"
    ),
    "realised_gain": _per_mode(
        "dBi",
        "realised gain, IEEE Std 145: peak_gain (at pattern_frequency) less what feed line and "
        "mismatch take at the dip",
    ),
    # Radiation: driven from the feed at the conductance peak, or the mode's own current.
    "pattern_frequency": _per_mode("Hz", "frequency of the pattern"),
    "driven": Variable(
        ("case", "mode"),
        "i1",
        "",
        "1: pattern of the antenna driven at its feed; 0: of the mode current alone; -1: no mode",
    ),
    "gain": Variable(("case", "mode", "theta", "phi"), "f4", "dBi", "gain, IEEE Std 145"),
    "peak_gain": _per_mode("dBi", "largest gain over all directions"),
    "peak_theta": _per_mode("degree", "polar angle from +z of the largest gain"),
    "peak_phi": _per_mode("degree", "azimuth from +x of the largest gain"),
    "directivity": _per_mode("dBi", "directivity in the direction of the largest gain"),
    "efficiency": _per_mode(
        "1", "radiation efficiency; over real earth what the earth takes counts as lost"
    ),
    "power_balance": _per_mode(
        "1", "radiated plus lost power over input power; 1 if consistent, NaN over real earth"
    ),
    # The rational model, enough to evaluate everything at any frequency of the band.
    "sample_frequency": Variable(("case", "sample"), "f8", "Hz", "frequencies solved, ascending"),
    "weight": Variable(
        ("case", "sample"), "c16", "1", "barycentric weight, 0 for a sample that only verified"
    ),
    "surface_resistance": Variable(
        ("case", "sample"), "f8", "ohm", "resistance per square of one face of the metal"
    ),
    "current": Variable(
        ("case", "sample", "segment"), "c16", "A", "segment currents for 1 V at the feed"
    ),
    "probe_current": Variable(
        ("case", "sample", "segment"), "c16", "A", "segment currents for 1 V at the second source"
    ),
    # The wire grid.
    "x": _per_segment("f8", "m", "segment middle"),
    "y": _per_segment("f8", "m", "segment middle"),
    "z": _per_segment("f8", "m", "segment middle"),
    "direction_x": _per_segment("f8", "1", "unit vector along positive current"),
    "direction_y": _per_segment("f8", "1", "unit vector along positive current"),
    "direction_z": _per_segment("f8", "1", "unit vector along positive current"),
    "length": _per_segment("f8", "m", "segment length"),
    "conductor_factor": _per_segment("f8", "1/m", "resistance per metre over surface resistance"),
    "series_inductance": _per_segment("f8", "H/m", "series inductance due to the carrier"),
    "loss_inductance": _per_segment("f8", "H/m", "its loss: resistance per metre over omega"),
    "strip_index": _per_segment("i2", "", "strip the segment belongs to; -1 feed gap, -2 cable"),
    "strip_position": _per_segment(
        "f8", "1", "place along the strip, 0..1; NaN off the centre line"
    ),
    "model_gap": Variable(("case",), "f8", "m", "gap the engine's source acts like"),
    "study_gap": Variable(("case",), "f8", "m", "feed gap of the study, to which impedance refers"),
    "feed_width": Variable(
        ("case",), "f8", "m", "strip width at the feed, twice for a feed on a plane"
    ),
    "ground_permittivity": Variable(
        ("case",), "f8", "1", "relative permittivity below z = 0; NaN in free space"
    ),
    "ground_conductivity": Variable(
        ("case",), "f8", "S/m", "below z = 0: infinite for a perfect plane, NaN in free space"
    ),
    "wire_radius": Variable(("case",), "f8", "m", "radius of every wire of the model"),
    "source_segment": Variable(("case",), "i4", "1", "first segment with the feed, 0-based"),
    "source_weight": _per_segment(
        "f8", "1", "part of the feed voltage across the segment, 0 off the feed"
    ),
}
"""Every variable except one coordinate per swept value, which takes the value's own name.

Coordinates: `case` 0.., `frequency` Hz, `mode` 0.., `strip` (names), `position` 0..1, `theta` and
`phi` degrees. Design documents call `strip_index` simply ``strip``; as `strip` names the dimension
of `mode_current` the per-segment array carries the longer name.
"""

ADDED_LATER = frozenset(
    {
        "impedance_at_connector",
        "feedline",
        "network_efficiency",
        "mismatch_factor",
        "total_efficiency",
        "realised_gain",
        "mode_on_cable",
        "cable_current",
    }
)
"""Variables that stores of an earlier simkit lack; their cases are as good and are taken over."""
