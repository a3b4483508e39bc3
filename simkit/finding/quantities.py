"""The quantities a condition may name, their units and what they mean; the only list of them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

Kind = Literal["mode", "band", "case", "swept"]
"""What a quantity belongs to: a natural mode, a band of frequencies, the whole case, the sweep."""


@dataclass(frozen=True)
class Quantity:
    """One quantity a condition may name.

    Attributes
    ----------
    name : str
    kind : {"mode", "band", "case", "swept"}
    unit : str
        SI unit, "1" for pure numbers, "dB" or "dBi"; "" for words.
    source : str
        Variable of the store it is read from; for a band how it is computed.
    meaning : str
        One line for users.
    shown : str
        Unit to print it in; empty for frequencies, which choose their prefix.
    digits : int
        Digits after the point when printed; -1 for six significant ones.
    """

    name: str
    kind: Kind
    unit: str
    source: str
    meaning: str
    shown: str = "1"
    digits: int = -1


def _frequency(name: str, source: str, meaning: str) -> Quantity:
    return Quantity(name, "mode", "Hz", source, meaning, "")


def _of_mode(name: str, unit: str, source: str, meaning: str, digits: int) -> Quantity:
    return Quantity(name, "mode", unit, source, meaning, unit, digits)


def _in_band(name: str, unit: str, meaning: str, digits: int) -> Quantity:
    return Quantity(name, "band", unit, name, meaning, unit, digits)


_ALL = (
    _frequency("frequency", "mode_frequency", "natural frequency"),
    _of_mode("q", "1", "mode_q", "Q of the natural mode", 2),
    Quantity(
        "error", "mode", "1", "mode_frequency_error",
        "relative standard error of the natural frequency", "%", 2,
    ),
    _frequency("dip", "dip_frequency", "frequency of the dip at the connector"),
    _of_mode("dip_return_loss", "dB", "dip_return_loss", "return loss at the dip", 1),
    _frequency("dip_bandwidth", "dip_bandwidth", "band around the dip with 10 dB return loss"),
    _frequency("resonance", "series_resonance_frequency", "series resonance at the feed"),
    _of_mode("resistance", "ohm", "series_resonance_resistance", "resistance at that resonance", 1),
    _of_mode("gain", "dBi", "peak_gain", "largest gain in any direction", 1),
    _of_mode("directivity", "dBi", "directivity", "directivity in the direction of that gain", 1),
    Quantity("efficiency", "mode", "1", "efficiency", "radiation efficiency", "%", 1),
    Quantity(
        "network_efficiency", "mode", "1", "network_efficiency",
        "power into the antenna over power into the connector", "%", 1,
    ),
    Quantity(
        "total_efficiency", "mode", "1", "total_efficiency",
        "radiated power over power available at the connector", "%", 1,
    ),
    _of_mode("realised_gain", "dBi", "realised_gain", "gain less feed line and mismatch", 1),
    _in_band("worst_return_loss", "dB", "smallest return loss in the band, at the connector", 1),
    _in_band("best_return_loss", "dB", "largest return loss in the band, at the connector", 1),
    _in_band("worst_vswr", "1", "largest VSWR in the band, at the connector", 2),
    _in_band("best_vswr", "1", "smallest VSWR in the band, at the connector", 2),
    Quantity(
        "status", "case", "", "status", "solved, doubtful, refused, failed, timed-out, waiting"
    ),
    Quantity("case", "case", "1", "case", "number of the case, from 0"),
    Quantity("seconds", "case", "s", "seconds", "time the case took", "s", 2),
    Quantity("solves", "case", "1", "solves", "frequencies solved by the engine"),
)  # fmt: skip

QUANTITIES = {quantity.name: quantity for quantity in _ALL}
"""Name to quantity. Besides these a condition may name every swept value of the study."""

OF = {"mode": " of 1/2 wave", "band": " in 863 MHz .. 870 MHz", "case": "", "swept": ""}
"""How a quantity of each kind goes on, by example."""

_ASKED_OF = {
    "mode": "of 1/2 wave",
    "band": "in LOW .. HIGH",
    "case": "",
    "swept": "",
}


def quantity_rows() -> list[dict[str, str]]:
    """Return the documented list, one row a quantity: ``quantity``, ``unit``, ``meaning``."""
    rows = [
        {
            "quantity": f"{quantity.name} {_ASKED_OF[quantity.kind]}".rstrip(),
            "unit": "" if quantity.unit in ("", "1") else quantity.unit,
            "meaning": quantity.meaning,
        }
        for quantity in _ALL
    ]
    swept = {"quantity": "NAME", "unit": "as written", "meaning": "a swept value of the study"}
    return [*rows, swept]
