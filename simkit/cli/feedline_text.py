"""What `simkit check` says of a feed line: its items, the lines they are made of, their doubts."""

from __future__ import annotations

import math

from simkit.cli.output import frequency_text, labelled, number_text, table
from simkit.study.model import Antenna, LineItem, TappedItem

_KINDS = {LineItem: "line,", TappedItem: "line,"}
"""Before what the element says of itself, which begins with its length."""


def feedline_parts(antenna: Antenna) -> list[str]:
    """Return the chain from the feed to the connector, one labelled part each; none without one."""
    if not antenna.feedline:
        return []
    from simkit.feedline import FeedlineError, build_chain

    try:
        chain = build_chain(antenna)
    except FeedlineError as error:
        return [labelled("Feed line", f"cannot be: {error}")]
    band = antenna.frequency
    middle_hz = (band.start_hz + band.stop_hz) / 2
    head = ["item", "from the feed to the connector", "impedance", "velocity", "loss", "good up to"]
    rows = []
    for item, element in zip(antenna.feedline, chain.elements, strict=True):
        line = getattr(element, "line", None)
        cells = [""] * 4
        if line is not None:
            values = line.values([middle_hz])
            limit_hz = line.frequency_limit_hz
            cells = [
                number_text(float(values.impedance_ohm[0].real), 2, "ohm"),
                number_text(float(values.permittivity[0]) ** -0.5, 4),
                number_text(float(values.attenuation_db_per_m[0]), 3, "dB/m"),
                frequency_text(limit_hz) if math.isfinite(limit_hz) else "any",
            ]
        about = f"{_KINDS.get(type(item), '')} {element.about}".strip()
        rows.append([item.name, about, *cells])
    lines = [
        table(head, rows),
        f"lines at {frequency_text(middle_hz)}; velocity over that of light; at the connector "
        f"reflections refer to {antenna.reference_ohm:.6g} ohm",
    ]
    ends = [band.start_hz, band.stop_hz]
    doubts = dict.fromkeys(doubt for e in chain.elements for doubt in e.doubts(ends))
    return [
        labelled("Feed line", "\n".join(lines)),
        *(labelled("Limit", f"{doubt}; a case with a mode there is doubtful") for doubt in doubts),
    ]
