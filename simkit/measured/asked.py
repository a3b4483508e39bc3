"""What a user writes on a command line about measured files, turned into numbers."""

from __future__ import annotations

import re
from collections.abc import Sequence
from fractions import Fraction
from typing import TYPE_CHECKING, Literal

from simkit.errors import MeasurementError
from simkit.measured.measurement import Measurement
from simkit.measured.plane import delay_of_s, extended
from simkit.measured.touchstone import read_touchstone
from simkit.study.expression import ExpressionError
from simkit.study.parser import parse
from simkit.study.units import FREQUENCY, LENGTH, TIME, Dimension, describe

if TYPE_CHECKING:
    from simkit.measured.targets import Target
    from simkit.study import Study


def number(what: str, text: str, *wanted: Dimension) -> tuple[float, Dimension]:
    """Return a text such as ``868 MHz`` in SI and its dimension, which must be one of `wanted`.

    Raises
    ------
    MeasurementError
    """
    try:
        expression = parse(text.strip())
        found, value = expression.dimension({}), expression.evaluate({})
    except ExpressionError as error:
        raise MeasurementError(f"{what} {text}: {error}") from error
    if found not in wanted:
        needed = " or ".join(describe(dimension) for dimension in wanted)
        raise MeasurementError(f"{what} {text}: {needed} is needed, but this is {describe(found)}")
    return value, found


def frequency_hz(what: str, text: str) -> float:
    """Return a frequency in Hz.

    Raises
    ------
    MeasurementError
    """
    value = number(what, text, FREQUENCY)[0]
    if not value > 0:
        raise MeasurementError(f"{what} {text}: the frequency must be positive")
    return value


def band_hz(what: str, text: str) -> tuple[float, float]:
    """Return ``868 MHz`` as a band of no width, ``863 MHz..870 MHz`` as one.

    Raises
    ------
    MeasurementError
    """
    low, dots, high = text.partition("..")
    first = frequency_hz(what, low)
    last = frequency_hz(what, high) if dots else first
    if last < first:
        raise MeasurementError(f"{what} {text}: the band's edges must ascend")
    return first, last


def half_waves_of(text: str, *, on_plane: bool) -> int:
    """Return the number of a mode from its label: ``1/2``, ``3/2 wave``; quarters on a plane.

    Raises
    ------
    MeasurementError
    """
    word = text.lower().replace("waves", "").replace("wave", "").strip()
    try:
        count = Fraction(word) * (4 if on_plane else 2)
    except (ValueError, ZeroDivisionError):
        count = Fraction(0)
    if count.denominator != 1 or count <= 0:
        example = "1/4 or 3/4" if on_plane else "1/2, 1 or 3/2"
        raise MeasurementError(
            f"{text!r} is no mode; write its length in wavelengths as the tables do: {example}"
        )
    return int(count)


def pins_of(texts: Sequence[str], *, on_plane: bool) -> dict[int, float]:
    """Return pinned pairs from texts such as ``3/2=2.81 GHz``.

    Raises
    ------
    MeasurementError
    """
    found = {}
    for text in texts:
        mode, mark, frequency = text.partition("=")
        if not mark:
            raise MeasurementError(f"--pin {text}: write MODE=FREQUENCY, as in 3/2=2.81GHz")
        found[half_waves_of(mode, on_plane=on_plane)] = frequency_hz("--pin", frequency)
    return found


def targets_of(modes: Sequence[str], texts: Sequence[str], *, on_plane: bool) -> tuple[Target, ...]:
    """Return what a trim aims at: one target or two, a return loss last.

    Each frequency or band belongs to the mode named in the same place, a return loss to the first
    mode, and to its band if it has one.

    Raises
    ------
    MeasurementError
    """
    from simkit.measured.targets import Target

    losses = [text for text in texts if re.fullmatch(r"\s*[-+0-9.eE]+\s*[dD][bB]\s*", text)]
    places = [text for text in texts if text not in losses]
    if len(places) != len(modes) or len(losses) > 1 or not 1 <= len(texts) <= 2:
        raise MeasurementError(
            f"{len(modes)} --mode and {len(texts)} --target do not go together: give one mode with "
            "a frequency or a band, two modes with one each, or one mode with a frequency or a "
            "band and a return loss such as '15 dB'"
        )
    found = []
    for mode, text in zip(modes, places, strict=True):
        band = band_hz("--target", text)
        kind: Literal["band", "dip"] = "band" if band[1] > band[0] else "dip"
        found.append(Target(kind, half_waves_of(mode, on_plane=on_plane), band))
    for text in losses:
        loss = float(text.lower().replace("db", ""))
        if not 0 < loss <= 60:
            raise MeasurementError(
                f"--target {text}: a return loss lies between 0 and 60 dB, as in '15 dB'"
            )
        nan = float("nan")
        band = found[0].band_hz if found[0].over_band else (nan, nan)
        found.append(Target("match", found[0].half_waves, band, loss))
    return tuple(found)


def stands(study: Study) -> bool:
    """Whether the metal of a study stands on a ground plane, so that modes count quarters."""
    from simkit.geometry.placement import stands_on_plane

    antenna = study.nominal()
    ends = [point for strip in antenna.strips for point in (strip.path_m[0], strip.path_m[-1])]
    return any(stands_on_plane(point, antenna) for point in ends)


def measurements(
    paths: Sequence[str], port: int | None, extension: str | None
) -> list[Measurement]:
    """Read files and move their reference plane by a delay, or a length with its dielectric.

    `extension` is ``120 ps``, ``35 mm`` (of air) or ``35 mm in 2.1``.

    Raises
    ------
    MeasurementError
    """
    delay = extension_s(extension) if extension else 0.0
    return [extended(read_touchstone(path, port), delay) for path in paths]


def extension_s(text: str) -> float:
    """Return the one-way delay of a port extension, s.

    Raises
    ------
    MeasurementError
    """
    size, inside, dielectric = text.partition(" in ")
    value, dimension = number("--extension", size, TIME, LENGTH)
    if dimension == TIME:
        if inside:
            raise MeasurementError(f"--extension {text}: a delay needs no dielectric")
        return value
    try:
        permittivity = float(dielectric) if inside else 1.0
    except ValueError:
        raise MeasurementError(
            f"--extension {text}: the dielectric is a number, as in '35 mm in 2.1'"
        ) from None
    return delay_of_s(value, permittivity)


def build_in(study: Study, measurement: Measurement) -> dict[str, float]:
    """Return the values as cut of the build a measured file belongs to, {} if none is named."""
    for file in study.measured:
        if file.path.name == measurement.path.name:
            return dict(file.build)
    return {}
