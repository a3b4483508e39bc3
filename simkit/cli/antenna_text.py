"""What `simkit check` says of an antenna: strips, joints, sheet, feed, metal and surroundings."""

from __future__ import annotations

import math
from collections.abc import Sequence
from itertools import combinations
from typing import TYPE_CHECKING

from simkit.cli.balance_text import balance_parts
from simkit.cli.feedline_text import feedline_parts
from simkit.cli.output import labelled, length_text, table
from simkit.errors import GeometryError
from simkit.geometry.outlines import bounding_box_m, developed_length_m, metal_area_m2
from simkit.study.model import (
    NO_ROTATION,
    Antenna,
    Cable,
    Carrier,
    CutFeed,
    Strip,
    StripEnd,
)

if TYPE_CHECKING:
    from simkit.geometry.chain_line import ChainLine

_SHOWN_POINTS = 6
_TOUCH_M = 1e-6

_MIXING = {
    "plastic-host": "Maxwell Garnett, the plastic as host",
    "bruggeman": "Bruggeman",
    "series": "layers across the field",
    "parallel": "layers along the field",
}


def antenna_text(antenna: Antenna) -> str:
    """Return strips, joints, sheet, feed, feed line, metal, carrier, placement and ground."""
    parts = [labelled("Strips", strips_table(antenna.strips))]
    joints = joints_lines(antenna)
    if joints:
        parts.append(labelled("Joints", "\n".join(joints)))
    sheet = sheet_text(antenna.strips)
    if sheet:
        parts.append(labelled("Sheet", sheet))
    parts.append(labelled("Feed", feed_text(antenna)))
    if antenna.cable is not None:
        parts.append(labelled("Cable", cable_text(antenna, antenna.cable)))
    parts += feedline_parts(antenna) + balance_parts(antenna)
    parts.append(labelled("Metal", metal_text(antenna)))
    if antenna.carrier is not None:
        parts.append(labelled("Carrier", carrier_text(antenna)))
    parts += placed_parts(antenna)
    return "\n".join(parts)


# -- strips ----------------------------------------------------------------------------------------


def strips_table(strips: Sequence[Strip]) -> str:
    """Return one line per strip: name, width, developed length, path."""
    rows = [
        [strip.name, width_text(strip), length_text(developed_length_m(strip)), _path(strip)]
        for strip in strips
    ]
    return table(["name", "width", "developed", "centre line, mm"], rows)


def width_text(strip: Strip) -> str:
    """Return the width, for a taper from its start over its extremes to its end."""
    widths = strip.widths
    if max(widths) - min(widths) < 1e-9:
        return length_text(widths[0])
    shown = [widths[0]]
    inner = [w for w in (min(widths), max(widths)) if w not in (widths[0], widths[-1])]
    inner.sort(key=widths.index)
    shown += [*inner, widths[-1]]
    return ", ".join(length_text(w).removesuffix(" mm") for w in shown) + " mm"


def _path(strip: Strip) -> str:
    points = [_mm(point) for point in strip.path_m]
    if len(points) > _SHOWN_POINTS:
        left_out = len(points) - 4
        points = [*points[:3], f"... {left_out} more ...", points[-1]]
    return " ".join(points)


def _mm(point_m: Sequence[float]) -> str:
    # To a nanometre, so that rounding does not show as 3.5e-15.
    return "(" + ", ".join(f"{round(value * 1e3, 6) + 0.0:.4g}" for value in point_m) + ")"


def sheet_text(strips: tuple[Strip, ...]) -> str:
    """Return the metal to cut: area, length and box; empty for strips no sheet can be cut to."""
    try:
        area = metal_area_m2(strips)
        left, low, right, high = bounding_box_m(strips)
    except GeometryError:
        return ""
    total = sum(developed_length_m(strip) for strip in strips)
    return (
        f"{area * 1e4:.4g} cm2 of metal, {length_text(total)} of strip; it fits "
        f"{length_text(right - left)} by {length_text(high - low)}, from {_mm((left, low))} to "
        f"{_mm((right, high))} mm"
    )


# -- joints ----------------------------------------------------------------------------------------


def joints_lines(antenna: Antenna) -> list[str]:
    """Return one sentence for each place where strips are joined."""
    ends = _ends(antenna)
    met = [(a, b) for a, b in combinations(ends, 2) if math.dist(a[2], b[2]) < _touch(antenna)]
    places: list[list[tuple[str, StripEnd, tuple[float, float]]]] = []
    for a, b in met:
        here = next((p for p in places if a in p or b in p), None)
        if here is None:
            places.append([a, b])
        else:
            here += [end for end in (a, b) if end not in here]
    lines = []
    for here in places:
        names = [f"{name}.{end}" for name, end, _ in here]
        lines.append(f"{', '.join(names[:-1])} and {names[-1]} meet at {_mm(here[0][2])} mm")
    joined = {(name, end) for here in places for name, end, _ in here}
    return lines + _branches(antenna, joined)


def _ends(antenna: Antenna) -> list[tuple[str, StripEnd, tuple[float, float]]]:
    fed: set[tuple[str, StripEnd]] = set()
    feed = antenna.feed
    if not isinstance(feed, CutFeed):
        fed = {(feed.from_strip, feed.from_end), (feed.to_strip, feed.to_end)}
    found: list[tuple[str, StripEnd, tuple[float, float]]] = []
    for strip in antenna.strips:
        found.append((strip.name, "start", strip.path_m[0]))
        found.append((strip.name, "end", strip.path_m[-1]))
    return [end for end in found if end[:2] not in fed]


def _touch(antenna: Antenna) -> float:
    return max(_TOUCH_M, 1e-3 * min(min(strip.widths) for strip in antenna.strips))


def _branches(antenna: Antenna, joined: set[tuple[str, StripEnd]]) -> list[str]:
    from simkit.geometry import chains_of

    try:
        chains = chains_of(antenna, tips=False)
    except GeometryError:
        return []
    lines = []
    for chain in chains:
        for joint, place in ((chain.start, 0.0), (chain.end, chain.length_m)):
            if joint is None:
                continue
            host = chains[joint.chain]
            branch, end = _end_at(antenna, chain, place)
            if (branch, end) in joined:
                continue
            on = _strip_at(antenna, host, float(host.arcs_m[joint.vertex]))
            lines.append(f"{branch}.{end} ends on {on} at {_mm(host.points[joint.vertex])} mm")
    return lines


def _end_at(antenna: Antenna, chain: ChainLine, place_m: float) -> tuple[str, StripEnd]:
    """Strip, and which end of it, at one end of a chain."""
    span = min(chain.spans, key=lambda s: min(abs(s.start_m - place_m), abs(s.end_m - place_m)))
    at_start = abs(span.start_m - place_m) < abs(span.end_m - place_m)
    return antenna.strips[span.strip].name, "start" if at_start else "end"


def _strip_at(antenna: Antenna, chain: ChainLine, arc_m: float) -> str:
    def away(span_start: float, span_end: float) -> float:
        low, high = sorted((span_start, span_end))
        turns = (0.0, chain.length_m, -chain.length_m) if chain.closed else (0.0,)
        return min(max(low - arc_m - t, arc_m + t - high, 0.0) for t in turns)

    span = min(chain.spans, key=lambda s: away(s.start_m, s.end_m))
    return antenna.strips[span.strip].name


# -- feed and metal --------------------------------------------------------------------------------


def feed_text(antenna: Antenna) -> str:
    """Return where the source sits and what reflections refer to."""
    feed = antenna.feed
    if isinstance(feed, CutFeed):
        place = (
            f"a cut {length_text(feed.gap_m)} wide across {feed.strip}, "
            f"{length_text(feed.at_m)} along its centre line"
        )
    else:
        place = (
            f"between {feed.from_strip}.{feed.from_end} and {feed.to_strip}.{feed.to_end}, "
            f"{length_text(_end_gap_m(antenna))} apart"
        )
    return f"{place}; reflections refer to {antenna.reference_ohm:.6g} ohm"


def cable_text(antenna: Antenna, cable: Cable) -> str:
    """Return where the cable is joined, how it runs, and how thick the model takes it to be."""
    from simkit.geometry.cable import level_error
    from simkit.geometry.dressing import dressing_of

    side = f"{cable.strip}.{cable.end}"
    if isinstance(antenna.feed, CutFeed):
        side = f"the side of the cut towards {side}"
    points = [_mm(point) for point in cable.points_m]
    if len(points) > _SHOWN_POINTS:
        points = [*points[:3], f"... {len(points) - 4} more ...", points[-1]]
    radius = dressing_of(antenna).radius_m(max(strip.width_m for strip in antenna.strips))
    error = level_error(cable, radius)
    way = "too high" if error > 0 else "too low"
    return "\n".join(
        [
            f"{length_text(cable.length_m)} of braid {length_text(cable.diameter_m)} thick, joined "
            f"to {side}, through {' '.join(points)} mm (x, y and along the normal)",
            f"the model's wires are {length_text(2 * radius)} thick, as suits the strips, so "
            f"off its resonances the current on the cable is up to {abs(error):.0%} {way}",
        ]
    )


def _end_gap_m(antenna: Antenna) -> float:
    feed = antenna.feed
    if isinstance(feed, CutFeed):
        return feed.gap_m
    paths = {strip.name: strip.path_m for strip in antenna.strips}
    first = paths[feed.from_strip][0 if feed.from_end == "start" else -1]
    second = paths[feed.to_strip][0 if feed.to_end == "start" else -1]
    return math.dist(first, second)


def metal_text(antenna: Antenna) -> str:
    """Return material, thickness and conductivity."""
    metal = antenna.metal
    if metal.conductivity_s_per_m is None:
        return "perfect conductor" + (
            f", {metal.thickness_m * 1e3:.3g} mm" if metal.thickness_m else ""
        )
    return (
        f"{metal.material}, {metal.thickness_m * 1e3:.3g} mm, {metal.conductivity_s_per_m:.3g} S/m"
    )


# -- surroundings ----------------------------------------------------------------------------------


def carrier_text(antenna: Antenna) -> str:
    """Return the plastic, the shape of the carrier and what it does to strips of each width."""
    carrier = antenna.carrier
    assert carrier is not None  # only called for antennas with one
    return "\n".join([*carrier_lines(carrier), *_kappa_lines(antenna)])


def carrier_lines(carrier: Carrier) -> list[str]:
    """Return plastic, mixture and shape of a carrier as described, one line each."""
    from simkit.crosssection import printed_layers

    lines = [
        f"{carrier.material}: permittivity {carrier.relative_permittivity:.4g}, loss tangent "
        f"{carrier.loss_tangent:.3g} of the solid plastic"
    ]
    if carrier.infill < 1:
        layers = printed_layers(
            carrier.permittivity,
            carrier.thickness_m,
            carrier.infill,
            skins_m=(carrier.skin_m, carrier.skin_m),
            rule=carrier.mixing,
        )
        core = layers[len(layers) // 2].permittivity.real
        skins = f" between skins of {length_text(carrier.skin_m)}" if carrier.skin_m else ""
        lines.append(
            f"infill {carrier.infill:.3g}: permittivity {core:.4g}{skins} "
            f"({_MIXING[carrier.mixing]})"
        )
    side = {
        "below": f"{length_text(carrier.thickness_m)} thick, under the strips",
        "both": f"{length_text(carrier.thickness_m)} thick on either side of the strips",
        "embedded": f"{length_text(carrier.thickness_m)} thick, the strips "
        f"{length_text(carrier.depth_m)} under its top",
    }[carrier.side]
    offset = f", strips {length_text(carrier.offset_m)} off its middle" if carrier.offset_m else ""
    lines.append(
        f"{side}; beyond the edges {length_text(carrier.overhang_m)}, beyond open ends "
        f"{length_text(carrier.end_overhang_m)}{offset}"
    )
    return lines


def _kappa_lines(antenna: Antenna) -> list[str]:
    from simkit.geometry import chains_of
    from simkit.geometry.dressing import dressing_of

    dressing = dressing_of(antenna)
    widths = sorted({width for strip in antenna.strips for width in strip.widths})
    if len(widths) > 3:
        widths = [widths[0], widths[len(widths) // 2], widths[-1]]
    lines = []
    for width in widths:
        kappa = dressing.kappa(width)
        loss = f" (loss {-kappa.imag:.3g})" if kappa.imag else ""
        lines.append(
            f"width {length_text(width)}: kappa {kappa.real:.4f}{loss}, so a static radius "
            f"{math.exp(kappa.real):.3f} times that in air"
        )
    try:
        chains = chains_of(antenna)
    except GeometryError:
        return lines
    tips: dict[float, float] = {}
    for chain in chains:
        if not chain.closed and chain.start is None:
            tips[float(chain.width_after_m[0])] = chain.start_tip_m
        if not chain.closed and chain.end is None:
            tips[float(chain.width_before_m[-1])] = chain.end_tip_m
    for width, tip in sorted(tips.items()):
        way = "taken off" if tip >= 0 else "added to"
        lines.append(
            f"open ends {length_text(width)} wide: {length_text(abs(tip))} {way} the wire, besides "
            "a bare strip's share"
        )
    return lines


def placed_parts(antenna: Antenna) -> list[str]:
    """Return how the antenna stands in space and over what, one labelled part each."""
    parts = []
    placement, ground = antenna.placement, antenna.ground
    words = []
    if placement.rotation != NO_ROTATION:
        axes = [_direction(column) for column in zip(*placement.rotation, strict=True)]
        words.append(
            f"turned: x of the drawing points along {axes[0]}, y along {axes[1]}, its normal along "
            f"{axes[2]}"
        )
    if any(placement.shift_m):
        words.append(f"shifted by {_mm(placement.shift_m)} mm")
    if words:
        heights = [
            placement.rotation[2][0] * x + placement.rotation[2][1] * y + placement.shift_m[2]
            for strip in antenna.strips
            for x, y in strip.path_m
        ]
        words.append(
            f"centre lines from z = {length_text(min(heights))} to {length_text(max(heights))}"
        )
        parts.append(labelled("Placement", "\n".join(words)))
    if ground is not None and ground.kind == "plane":
        parts.append(labelled("Ground", "perfect plane at z = 0"))
    elif ground is not None:
        parts.append(
            labelled(
                "Ground",
                f"earth below z = 0: permittivity {ground.relative_permittivity:.4g}, "
                f"{ground.conductivity_s_per_m:.3g} S/m",
            )
        )
    return parts


def _direction(vector: Sequence[float]) -> str:
    return "(" + ", ".join(f"{round(value, 9) + 0.0:.3g}" for value in vector) + ")"
