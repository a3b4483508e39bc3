"""From the feed line of a resolved study to a chain of elements."""

from __future__ import annotations

from functools import lru_cache
from typing import Any

from simkit.feedline.chain import Chain
from simkit.feedline.elements import (
    Element,
    Kind,
    LineSection,
    Lumped,
    PortExtension,
    Stub,
    TappedLine,
    Transformer,
)
from simkit.feedline.line import Line
from simkit.feedline.lines import CoplanarStrips, StripOverPlate, TwoStrips
from simkit.feedline.round_lines import Coaxial, UniformLine
from simkit.study.model import (
    Antenna,
    CoaxialLine,
    DataSheetLine,
    ExtensionItem,
    FeedLineItem,
    FeedLineMake,
    LineItem,
    PartItem,
    PartKind,
    StripLine,
    StubItem,
    TappedItem,
)

CACHED = 512
"""Chains and lines a process keeps. A line keeps its plane solution, which is what costs."""

_PARTS: dict[PartKind, Kind] = {"resistor": "R", "inductor": "L", "capacitor": "C"}


def build_chain(antenna: Antenna) -> Chain:
    """Return what lies between the feed and the connector of an antenna.

    Parameters
    ----------
    antenna : Antenna

    Returns
    -------
    Chain
        Without elements if the study has no feed line. Equal feed lines give the same object
        within a process, and equal lines share their plane solution.

    Raises
    ------
    FeedlineError
        If a line or a part cannot be; a study keeps what it asks for within their limits.
    """
    return chain_of(antenna.feedline, antenna.reference_ohm)


@lru_cache(maxsize=CACHED)
def chain_of(items: tuple[FeedLineItem, ...], reference_ohm: float) -> Chain:
    """Return the chain of resolved items, the first at the antenna; else as `build_chain`."""
    return Chain(tuple(_element(item) for item in items), reference_ohm)


def _element(item: FeedLineItem) -> Element:
    if isinstance(item, LineItem):
        return LineSection(line_of(item.line), item.length_m)
    if isinstance(item, StubItem):
        return Stub(line_of(item.line), item.length_m, item.end, item.connection)
    if isinstance(item, TappedItem):
        return TappedLine(line_of(item.line), item.from_antenna_m, item.beyond_m, item.end)
    if isinstance(item, PartItem):
        return Lumped(_PARTS[item.part], item.value, item.connection, item.q)
    if isinstance(item, ExtensionItem):
        return PortExtension(item.delay_s)
    return Transformer(item.impedance_ratio, item.loss_db, item.nominal_ohm)


@lru_cache(maxsize=CACHED)
def line_of(make: FeedLineMake) -> Line:
    """Return the line that is made so; equal ones are one object within a process.

    Raises
    ------
    FeedlineError
        If a size is out of range.
    """
    if isinstance(make, CoaxialLine):
        return Coaxial(
            make.inner_m,
            make.outer_m,
            make.permittivity,
            make.loss_tangent,
            make.conductivity_s_per_m,
        )
    if isinstance(make, DataSheetLine):
        return UniformLine(
            make.impedance_ohm,
            make.velocity_factor,
            make.attenuation_db_per_m,
            make.attenuation_at_hz,
            make.loss_tangent,
        )
    return _strips(make)


def _strips(make: StripLine) -> Line:
    shared: dict[str, Any] = {
        "thickness_m": make.thickness_m,
        "permittivity": make.permittivity,
        "loss_tangent": make.loss_tangent,
        "overhang_m": make.overhang_m,
        "conductivity_s_per_m": make.conductivity_s_per_m,
    }
    if make.kind == "strip-over-plate":
        return StripOverPlate(make.width_m, make.distance_m, **shared)
    shared["other_width_m"] = make.other_width_m
    if make.kind == "two-strips":
        return TwoStrips(make.width_m, make.distance_m, **shared)
    return CoplanarStrips(make.width_m, make.distance_m, make.sheet_m, **shared)
