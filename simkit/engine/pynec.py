"""The one module that talks to the field engine: wires in, numpy currents out.

The engine reports every failure as the same unspecific exception, returns ``None`` or NaN for some
inputs and frees its results together with its context. So each call here builds a context, solves,
copies the numbers and drops the context; what went in is added to whatever goes wrong.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from importlib.metadata import version
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from simkit.errors import EngineError
from simkit.geometry.wires import Wire
from simkit.study.model import Ground

ComplexArray = NDArray[np.complex128]

EarthMethod = Literal["integrals", "reflection"]

Source = Sequence[tuple[int, float]]
"""Segments (0-based, through all wires) with the voltage impressed on each, in volts."""


@dataclass(frozen=True)
class SeriesLoad:
    """Distributed series impedance of one wire, per metre at the solved frequency."""

    resistance_ohm_per_m: float = 0.0
    inductance_h_per_m: float = 0.0


@dataclass(frozen=True)
class LumpedLoad:
    """A series connection of R, L and C on one segment; a capacitance of 0 means none."""

    segment: int
    resistance_ohm: float = 0.0
    inductance_h: float = 0.0
    capacitance_f: float = 0.0


def engine_version() -> str:
    """Return name and version of the field engine, part of every case's identity."""
    return f"PyNEC {version('PyNEC')}"


def solve_wires(
    wires: Sequence[Wire],
    radius_m: float,
    frequency_hz: float,
    sources: Sequence[Source],
    *,
    series: Sequence[SeriesLoad] = (),
    lumped: Sequence[LumpedLoad] = (),
    extended_kernel: bool = True,
    ground: Ground | None = None,
    earth: EarthMethod = "integrals",
) -> ComplexArray:
    """Solve for the segment currents of several excitations at one frequency.

    The matrix is filled and factorised once; further excitations cost a few per cent.

    Parameters
    ----------
    wires : sequence of Wire
        Checked beforehand (`simkit.geometry.checks`); the engine itself hangs or returns nonsense
        on bad input.
    radius_m : float
        One radius for all wires: the engine errs badly where radii meet.
    frequency_hz : float
    sources : sequence of Source
        One entry an excitation.
    series : sequence of SeriesLoad, optional
        Distributed load of each wire; empty for none.
    lumped : sequence of LumpedLoad, optional
    extended_kernel : bool
        Current on the wire surface instead of the axis; for straight runs of thick wires.
    ground : Ground or None
        Below z = 0. Wires that end at exactly z = 0 on a perfect plane are connected to it.
    earth : {"integrals", "reflection"}
        How real earth is solved; see Notes.

    Returns
    -------
    (len(sources), S) complex array
        Current at the middle of each segment, ampere, positive from the start of its wire.

    Raises
    ------
    EngineError
        The engine failed, or its result is missing, not finite, or takes no power.

    Notes
    -----
    A perfect plane is exact: images of all wires. Real earth by Sommerfeld's integrals (with
    Norton's approximation far away) costs 40 ms more for each frequency, for the tables the engine
    makes of them, and holds for wires from 0.08 wavelengths up; nearer to the earth these tables
    fail outright. Fresnel's reflection coefficients cost nothing and never fail, but err by 1 ohm
    in the impedance of a half-wave dipole 0.3 wavelengths up, 10 ohm at 0.1, 30 ohm at 0.02.
    """
    what = f"{len(wires)} wires of radius {radius_m * 1e3:.4g} mm at {frequency_hz / 1e6:.6g} MHz"
    if not (np.isfinite(frequency_hz) and frequency_hz > 0):
        raise EngineError(f"{what}: the frequency must be positive, else the engine hangs")
    step = "building the wires"
    try:
        context = _context(wires, radius_m, extended_kernel, ground)
        step = "setting loads, ground and frequency"
        _add_ground(context, ground, earth)
        _add_loads(context, wires, series, lumped)
        context.fr_card(0, 1, frequency_hz / 1e6, 0.0)
        step = "solving"
        places = _places(wires)
        rows = [_execute(context, index, source, places) for index, source in enumerate(sources)]
    except RuntimeError as error:  # the engine's only exception type
        raise EngineError(f"{what}: the engine failed while {step} ({error})") from error
    currents = np.array(rows, dtype=np.complex128)
    _screen(currents, sources, len(places), what)
    return currents


def _context(
    wires: Sequence[Wire], radius_m: float, extended_kernel: bool, ground: Ground | None
) -> Any:
    import PyNEC

    context = PyNEC.nec_context()
    geometry = context.get_geometry()
    for tag, wire in enumerate(wires, start=1):
        geometry.wire(tag, wire.segments, *wire.start_m, *wire.end_m, radius_m, 1.0, 1.0)
    # 1: the current of wires that end at z = 0 goes on into the plane.
    context.geometry_complete(1 if ground is not None and ground.kind == "plane" else 0)
    context.set_extended_thin_wire_kernel(extended_kernel)
    return context


def _add_ground(context: Any, ground: Ground | None, earth: EarthMethod) -> None:
    if ground is None:
        return
    if ground.kind == "plane":
        context.gn_card(1, 0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0)
        return
    kind = 2 if earth == "integrals" else 0
    constants = ground.relative_permittivity, ground.conductivity_s_per_m
    context.gn_card(kind, 0, *constants, 0.0, 0.0, 0.0, 0.0)


def _add_loads(
    context: Any,
    wires: Sequence[Wire],
    series: Sequence[SeriesLoad],
    lumped: Sequence[LumpedLoad],
) -> None:
    for tag, (wire, load) in enumerate(zip(wires, series, strict=False), start=1):
        if load.resistance_ohm_per_m or load.inductance_h_per_m:
            context.ld_card(
                2, tag, 1, wire.segments, load.resistance_ohm_per_m, load.inductance_h_per_m, 0.0
            )
    places = _places(wires)
    for part in lumped:
        tag, segment = places[part.segment]
        context.ld_card(
            0, tag, segment, segment, part.resistance_ohm, part.inductance_h, part.capacitance_f
        )


def _places(wires: Sequence[Wire]) -> list[tuple[int, int]]:
    """Engine's (tag, segment within the tag), both from 1, of each segment."""
    return [
        (tag, segment)
        for tag, wire in enumerate(wires, start=1)
        for segment in range(1, wire.segments + 1)
    ]


def _execute(
    context: Any, index: int, source: Source, places: list[tuple[int, int]]
) -> ComplexArray:
    for segment, volts in source:
        tag, within = places[segment]
        context.ex_card(0, tag, within, 0, volts, 0.0, 0.0, 0.0, 0.0, 0.0)
    context.xq_card(0)
    result = context.get_structure_currents(index)
    if result is None:
        raise RuntimeError("it returned no currents")
    return np.array(result.get_current(), dtype=np.complex128)


def _screen(currents: ComplexArray, sources: Sequence[Source], segments: int, what: str) -> None:
    if currents.shape != (len(sources), segments):
        raise EngineError(
            f"{what}: the engine returned currents of shape {currents.shape}, "
            f"expected {(len(sources), segments)}"
        )
    if not np.all(np.isfinite(currents)):
        raise EngineError(f"{what}: the engine returned currents that are not finite")
    for row, source in zip(currents, sources, strict=True):
        power_w = 0.5 * sum(volts * row[segment].real for segment, volts in source)
        if power_w <= 0:
            raise EngineError(
                f"{what}: the source would take {power_w:.3g} W; a passive antenna takes more "
                "than none, so the wires are outside the engine's validity"
            )
