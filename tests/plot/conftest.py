"""Results made from simple formulas: names, dimensions and attributes as in a store.

Five arm lengths times three widths; case 10 is refused, case 4 is doubtful, and case 8 lacks the
3/2-wave mode. Two strips, both described from the feed outwards. The numbers are plausible, not
simulated.
"""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

from simkit.store.schema import MODES, PHI_DEG, POSITIONS, THETA_DEG, VARIABLES, Status

ARMS_M = np.array([0.070, 0.073, 0.076, 0.079, 0.082])
WIDTHS_M = np.array([0.004, 0.008, 0.012])
GAP_M = 0.002
SEGMENTS = 31
FREQUENCY_HZ = np.linspace(0.3e9, 3.0e9, 271)
REFUSED, DOUBTFUL, WITHOUT_MODE_3 = 10, 4, 8
C = 299_792_458.0


def mode_frequency_hz(arm_m: float, width_m: float, half_waves: int) -> float:
    length = 2 * arm_m + GAP_M
    return half_waves * 0.98 * C / (2 * (length + 1.4 * width_m / half_waves))


def _empty() -> dict[str, tuple[tuple[str, ...], np.ndarray, dict[str, str]]]:
    sizes = {
        "case": 15,
        "frequency": FREQUENCY_HZ.size,
        "mode": MODES,
        "strip": 2,
        "position": POSITIONS,
        "theta": THETA_DEG.size,
        "phi": PHI_DEG.size,
        "sample": 3,
        "segment": SEGMENTS,
    }
    fills = {"c": complex(np.nan, np.nan), "f": np.nan, "i": -1}
    found = {}
    for name, variable in VARIABLES.items():
        shape = tuple(sizes[dim] for dim in variable.dims)
        dtype = "U120" if variable.dtype == "str" else variable.dtype
        values = np.full(shape, fills.get(variable.dtype[0], ""), dtype=dtype)
        attrs = {"long_name": variable.meaning}
        if variable.units:
            attrs["units"] = variable.units
        found[name] = (variable.dims, values, attrs)
    return found


def _impedance(modes: list[tuple[float, float, float]]) -> np.ndarray:
    """Admittance of series circuits: resistance, Q and frequency of each."""
    admittance = np.zeros(FREQUENCY_HZ.size, dtype=complex)
    for frequency, q, resistance in modes:
        detuning = FREQUENCY_HZ / frequency - frequency / FREQUENCY_HZ
        admittance += 1 / (resistance * (1 + 1j * q * detuning))
    return 1 / admittance


def _gain(half_waves: int) -> np.ndarray:
    """Dipole along x: sinusoidal current of so many half waves."""
    theta, phi = np.meshgrid(np.deg2rad(THETA_DEG), np.deg2rad(PHI_DEG), indexing="ij")
    along = np.sin(theta) * np.cos(phi)
    across = np.sqrt(np.maximum(1 - along**2, 1e-9))
    argument = half_waves * np.pi / 2 * along
    field = (np.cos(argument) if half_waves % 2 else np.sin(argument)) / across
    gain = 10 * np.log10(np.maximum(np.abs(field) ** 2 * 1.64, 1e-8))
    return gain.astype("f4")


@pytest.fixture(scope="session")
def dataset() -> xr.Dataset:
    data = _empty()
    value = {name: entry[1] for name, entry in data.items()}
    arms, widths = np.repeat(ARMS_M, 3), np.tile(WIDTHS_M, 5)
    for case, (arm, width) in enumerate(zip(arms, widths, strict=True)):
        if case == REFUSED:
            value["status"][case] = Status.REFUSED
            value["reason"][case] = "strip east: its path crosses itself at (12, 0) mm"
            continue
        value["status"][case] = Status.DOUBTFUL if case == DOUBTFUL else Status.SOLVED
        _fill_modes(value, case, arm, width)
        _fill_wires(value, case, arm, width)
    return xr.Dataset(
        data,
        {
            "case": np.arange(15),
            "frequency": ("frequency", FREQUENCY_HZ, {"units": "Hz"}),
            "mode": np.arange(MODES),
            "strip": ["east", "west"],
            "position": np.linspace(0, 1, POSITIONS),
            "theta": ("theta", THETA_DEG, {"units": "degree"}),
            "phi": ("phi", PHI_DEG, {"units": "degree"}),
            "arm": ("case", arms, {"units": "m", "display_unit": "mm", "long_name": "arm"}),
            "width": ("case", widths, {"units": "m", "display_unit": "mm", "long_name": "width"}),
        },
        {
            "title": "Creek gauge link, 868 MHz",
            "reference_ohm": 50.0,
            "swept": {"arm": "arm", "width": "width"},
            "feedline": [],
        },
    )


def _fill_modes(value: dict[str, np.ndarray], case: int, arm: float, width: float) -> None:
    position = np.linspace(0, 1, POSITIONS)
    circuits = []
    numbers = [1, 2] if case == WITHOUT_MODE_3 else [1, 2, 3]
    for slot, n in enumerate(numbers):
        frequency, q = mode_frequency_hz(arm, width, n), 5.0 + 1.5 * n
        value["mode_frequency"][case, slot] = frequency
        value["mode_half_waves"][case, slot] = n
        value["mode_q"][case, slot] = q
        # Along the path west tip -> feed -> east tip; both strips are described from the feed out.
        east = np.sin(n * np.pi * (0.5 + 0.5 * position)) * np.exp(0.02j * n * position)
        west = -np.sin(n * np.pi * (0.5 - 0.5 * position))
        largest = max((east[np.argmax(abs(east))], west[np.argmax(abs(west))]), key=abs)
        value["mode_current"][case, slot] = np.stack([east, west]) / largest
        value["gain"][case, slot] = _gain(n)
        top = np.unravel_index(np.argmax(_gain(n)), _gain(n).shape)
        value["peak_gain"][case, slot] = _gain(n)[top]
        value["peak_theta"][case, slot] = THETA_DEG[top[0]]
        value["peak_phi"][case, slot] = PHI_DEG[top[1]]
        value["driven"][case, slot] = n % 2
        value["pattern_frequency"][case, slot] = 1.01 * frequency
        if n % 2:
            circuits.append((1.02 * frequency, q, 62.0 + 8 * n))
            value["dip_frequency"][case, slot] = 1.03 * frequency
            value["dip_return_loss"][case, slot] = 15.0 - n
            value["series_resonance_frequency"][case, slot] = 1.02 * frequency
            value["series_resonance_resistance"][case, slot] = 62.0 + 8 * n
    value["impedance"][case] = _impedance(circuits)


def _fill_wires(value: dict[str, np.ndarray], case: int, arm: float, width: float) -> None:
    """Fifteen segments a side and one in the gap, along x from the west tip to the east tip."""
    position = (np.arange(15) + 0.5) / 15
    east_x = GAP_M / 2 + arm * position
    x = np.concatenate([-east_x[::-1], [0.0], east_x])
    value["x"][case], value["y"][case], value["z"][case] = x, 0.0, 0.0
    value["direction_x"][case], value["direction_y"][case] = 1.0, 0.0
    value["direction_z"][case] = 0.0
    value["length"][case] = arm / 15
    value["length"][case, 15] = GAP_M
    value["strip_index"][case] = np.repeat([1, -1, 0], [15, 1, 15])
    value["strip_position"][case] = np.concatenate([position[::-1], [np.nan], position])
    value["source_segment"][case] = 15
    value["source_weight"][case] = np.arange(SEGMENTS) == 15
    value["study_gap"][case] = value["model_gap"][case] = GAP_M
    value["feed_width"][case] = width
    value["wire_radius"][case] = width / 4
