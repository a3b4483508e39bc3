"""A word on balance: a symmetric antenna on a line with one earthy side, and nothing between."""

from __future__ import annotations

import math
import textwrap

from simkit.cli.output import labelled
from simkit.geometry.placement import stands_on_plane
from simkit.study.model import (
    Antenna,
    CoaxialLine,
    CutFeed,
    DataSheetLine,
    EndFeed,
    FeedLineMake,
    StripLine,
    TransformerItem,
)
from simkit.study.resolve_cable import feed_end_m

ALIKE = 0.05
"""Metal counts as symmetric if this part of it at most has no counterpart."""

ADVICE = (
    "{what} has one side that is its outside too; joined to a symmetric antenna it carries current "
    "there, which shifts dips and bends the pattern. Put a balun (a `transformer` item) or a choke "
    "at the feed, lead the line away in the plane of symmetry, and see what its outside does with "
    "a [cable] table."
)
WIDTH = 100
"""Of the lines of the advice."""


def balance_parts(antenna: Antenna) -> list[str]:
    """Return advice on balance as one labelled part; none where there is nothing to say."""
    if antenna.cable is not None:
        return []
    if any(isinstance(item, TransformerItem) for item in antenna.feedline):
        return []
    lines = [line for item in antenna.feedline if (line := getattr(item, "line", None)) is not None]
    words = [word for line in lines if (word := _unbalanced(line))]
    if not words or not is_symmetric(antenna):
        return []
    return [labelled("Balance", textwrap.fill(ADVICE.format(what=words[0]), WIDTH))]


def _unbalanced(line: FeedLineMake) -> str:
    """What to call a line with one side outside; empty for a balanced one."""
    if isinstance(line, CoaxialLine):
        return "The coaxial line"
    if isinstance(line, DataSheetLine):
        return "A line given by its data sheet, most likely coaxial,"
    if isinstance(line, StripLine) and line.kind == "strip-over-plate":
        return "The strip over a plate"
    return ""


def is_symmetric(antenna: Antenna) -> bool:
    """Whether the metal is its own image, mirrored or turned, with the sides of the feed swapped.

    An antenna that stands on a plane at its feed has an earthy side of its own.
    """
    from shapely import affinity, union_all

    from simkit.errors import GeometryError
    from simkit.geometry.outlines import outline

    try:
        metal = union_all([outline(strip) for strip in antenna.strips])
    except GeometryError:
        return False
    (x1, y1), (x2, y2) = _sides(antenna)
    if any(stands_on_plane(side, antenna) for side in ((x1, y1), (x2, y2))):
        return False
    middle = ((x1 + x2) / 2, (y1 + y2) / 2)
    across = math.degrees(math.atan2(y2 - y1, x2 - x1))
    straight = affinity.rotate(metal, -across, origin=middle)
    images = (
        affinity.scale(straight, xfact=-1, origin=middle),
        affinity.rotate(straight, 180, origin=middle),
    )
    return any(
        straight.symmetric_difference(image).area < ALIKE * straight.area for image in images
    )


def _sides(antenna: Antenna) -> tuple[tuple[float, float], tuple[float, float]]:
    feed = antenna.feed
    strips = {strip.name: strip for strip in antenna.strips}
    if isinstance(feed, EndFeed):
        return (
            feed_end_m(strips[feed.from_strip], feed.from_end, feed),
            feed_end_m(strips[feed.to_strip], feed.to_end, feed),
        )
    assert isinstance(feed, CutFeed)  # the only other kind
    strip = strips[feed.strip]
    return feed_end_m(strip, "start", feed), feed_end_m(strip, "end", feed)
