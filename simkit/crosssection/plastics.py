"""Plastics a carrier may be made of: solid permittivity and loss, with a source per value.

Plastics of one name differ by maker, colour and moisture by 5 % in permittivity and by several
times in loss. Where a result hinges on it, fit the permittivity to a measured build.
"""

from __future__ import annotations

from dataclasses import dataclass
from difflib import get_close_matches

from simkit.crosssection.dielectrics import DielectricError, complex_permittivity

ZECHMEISTER = "Zechmeister & Lacik 2019: range of ABS, PET, PLA and copolyester at 1 to 10 GHz"
PICHA = "Picha et al., Processes 10(9) 1881, 2022: range of PLA, PETG, ABS, ASA at 1 to 100 MHz"
VON_HIPPEL = "von Hippel, Dielectric Materials and Applications, 1954 (from memory), at"
PRACTICE = "common practice, without a source"


@dataclass(frozen=True)
class Plastic:
    """Solid plastic.

    Attributes
    ----------
    permittivity : float
        Relative, real part.
    permittivity_range : (float, float)
        What the source or practice allows for.
    loss_tangent : float
    loss_tangent_range : (float, float)
    from_hz, to_hz : float
        Frequencies the values are meant for.
    source : str
        Where the ranges come from. Values inside a range that names several plastics at once are
        a choice within it, marked as common practice.
    """

    permittivity: float
    permittivity_range: tuple[float, float]
    loss_tangent: float
    loss_tangent_range: tuple[float, float]
    from_hz: float
    to_hz: float
    source: str

    @property
    def complex_permittivity(self) -> complex:
        """Return eps' (1 - j tan delta)."""
        return complex_permittivity(self.permittivity, self.loss_tangent)


def plastic(name: str) -> Plastic:
    """Return the plastic of that name, upper and lower case alike.

    Raises
    ------
    DielectricError
        If the name is unknown.
    """
    for known, entry in PLASTICS.items():
        if known.casefold() == name.strip().casefold():
            return entry
    near = get_close_matches(name.casefold(), [known.casefold() for known in PLASTICS], n=1)
    hint = next((f"; did you mean {known}?" for known in PLASTICS if known.casefold() in near), "")
    raise DielectricError(
        f"carrier material '{name}' is unknown{hint or '.'} Known are {', '.join(PLASTICS)}; "
        "or give permittivity and loss_tangent instead"
    )


def _printed(permittivity: float, loss_tangent: float, source: str) -> Plastic:
    """A printing plastic at radio frequencies, within the measured ranges of its kind."""
    return Plastic(permittivity, (2.55, 2.95), loss_tangent, (0.003, 0.03), 300e6, 10e9, source)


PLASTICS: dict[str, Plastic] = {
    "PLA": _printed(2.75, 0.010, f"{ZECHMEISTER}; values: {PRACTICE}"),
    "ABS": _printed(2.65, 0.007, f"{ZECHMEISTER}; values: {PRACTICE}"),
    "PET": _printed(2.85, 0.010, f"{ZECHMEISTER}; values: {PRACTICE}"),
    "copolyester": _printed(2.75, 0.012, f"{ZECHMEISTER}; values: {PRACTICE}"),
    "PETG": Plastic(
        2.75,
        (2.55, 3.48),
        0.010,
        (0.0003, 0.043),
        300e6,
        10e9,
        f"{PICHA}, falling towards the copolyester of {ZECHMEISTER}; values: {PRACTICE}",
    ),
    "ASA": Plastic(
        2.85,
        (2.55, 3.48),
        0.010,
        (0.0003, 0.043),
        300e6,
        10e9,
        f"{PICHA}, falling towards the ABS of {ZECHMEISTER}; values: {PRACTICE}",
    ),
    "PC": Plastic(2.8, (2.7, 3.0), 0.006, (0.004, 0.012), 300e6, 10e9, PRACTICE),
    "PP": Plastic(2.25, (2.2, 2.3), 0.0005, (0.0002, 0.002), 300e6, 10e9, PRACTICE),
    "PA12": Plastic(2.9, (2.6, 3.6), 0.02, (0.01, 0.05), 300e6, 10e9, PRACTICE + ", dry"),
    "PMMA": Plastic(2.60, (2.55, 2.7), 0.0057, (0.004, 0.01), 1e9, 10e9, f"{VON_HIPPEL} 3 GHz"),
    "PS": Plastic(2.55, (2.5, 2.6), 0.0003, (0.0002, 0.001), 1e9, 10e9, f"{VON_HIPPEL} 3 GHz"),
    "PE": Plastic(2.26, (2.2, 2.35), 0.0003, (0.0002, 0.001), 1e9, 10e9, f"{VON_HIPPEL} 3 GHz"),
    "PTFE": Plastic(2.1, (2.0, 2.1), 0.0002, (0.0001, 0.0005), 1e9, 10e9, f"{VON_HIPPEL} 3 GHz"),
    "FR4": Plastic(
        4.4, (4.1, 4.8), 0.018, (0.012, 0.025), 100e6, 6e9, PRACTICE + ": laminate data sheets"
    ),
}
"""Name to solid plastic. Filled, foamed and conductive kinds differ widely: give numbers."""
