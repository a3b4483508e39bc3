"""Pattern, gain, efficiency and power balance of the modes of one case."""

from __future__ import annotations

from typing import Any

import numpy as np

from simkit.geometry import WireGrid
from simkit.response.modes import NaturalMode
from simkit.response.ownership import OwnedFeatures
from simkit.response.pattern import (
    Radiators,
    gain_grid_dbi,
    radiated_power_w,
)
from simkit.response.peak import peak_direction
from simkit.response.rational import ComplexArray, Sweep
from simkit.runner.arrays import padded
from simkit.runner.currents import resistance_ohm_per_m
from simkit.store.schema import MODES, PHI_DEG, THETA_DEG
from simkit.study.model import Antenna


def radiation_of(
    antenna: Antenna, grid: WireGrid, sweep: Sweep, mode: NaturalMode, owned: OwnedFeatures
) -> dict[str, Any]:
    """Pattern, gain, efficiency and power balance of one mode.

    A mode the feed excites is shown as it is driven, at its conductance peak; the others by their
    own current at the natural frequency, with the balance taken for the second source.

    Over real earth there is no balance. What the earth takes is the rest of the input power and
    counts as lost; a mode that the feed does not excite has none, so it is taken to lose the same
    part as the currents of the second source.
    """
    driven = owned.peak is not None
    frequency_hz = owned.peak.frequency_hz if owned.peak else mode.frequency_hz
    both = sweep.model(np.array([frequency_hz]))[0].reshape(2, -1)
    fed, source = (both[0], grid.source) if driven else (both[1], grid.probe)
    shown = fed if driven else mode.current
    radiators = Radiators.of(grid, antenna.ground)
    resistance = grid.per_segment(resistance_ohm_per_m(antenna, grid, frequency_hz))

    def lost_w(current: ComplexArray) -> float:
        return float(0.5 * np.sum(resistance * abs(current) ** 2 * radiators.length_m))

    input_w = 0.5 * sum(volts * fed[segment].real for segment, volts in source)
    radiated_w = radiated_power_w(radiators, fed, frequency_hz)
    balance = (radiated_w + lost_w(fed)) / input_w
    radiated_share = radiated_w / input_w
    if not driven:
        radiated_w = radiated_power_w(radiators, shown, frequency_hz)
    efficiency = radiated_w / (radiated_w + lost_w(shown))
    if antenna.ground is not None and antenna.ground.kind == "earth":
        efficiency, balance = radiated_share, float("nan")
    gain = gain_grid_dbi(
        radiators, shown, frequency_hz, radiated_w / efficiency, THETA_DEG, PHI_DEG
    )
    top = np.unravel_index(int(np.argmax(gain)), gain.shape)
    theta, phi, intensity = peak_direction(
        radiators, shown, frequency_hz, (float(THETA_DEG[top[0]]), float(PHI_DEG[top[1]])), 10.0
    )
    directivity = 10 * np.log10(4 * np.pi * intensity / radiated_w)
    return {
        "pattern_frequency": frequency_hz,
        "driven": int(driven),
        "gain": gain,
        "peak_gain": directivity + 10 * np.log10(efficiency),
        "peak_theta": theta,
        "peak_phi": phi,
        "directivity": directivity,
        "efficiency": efficiency,
        "power_balance": balance,
    }


def stacked(rows: list[dict[str, Any]]) -> dict[str, Any]:
    """One array a name from one dict a mode, padded to the slots of the store."""
    gain = np.full((MODES, len(THETA_DEG), len(PHI_DEG)), np.nan)
    driven = np.full(MODES, -1)
    for index, row in enumerate(rows):
        gain[index], driven[index] = row["gain"], row["driven"]
    names = [name for name in rows[0] if name not in ("gain", "driven")] if rows else []
    columns: dict[str, Any] = {name: padded([row[name] for row in rows]) for name in names}
    return columns | {"gain": gain, "driven": driven}
