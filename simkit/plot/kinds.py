"""The pictures there are, by name. Nothing is drawn or imported before one is asked for."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Kind:
    """One kind of picture.

    Attributes
    ----------
    name : str
        As in ``simkit plot DIR NAME`` and in the file name.
    about : str
        What it shows, one line.
    function : str
        Name of the function in `simkit.plot` that draws it.
    of_one_case : bool
        False for pictures over the whole sweep.
    of_feedline : bool
        Only for studies with a feed line.
    """

    name: str
    about: str
    function: str
    of_one_case: bool = True
    of_feedline: bool = False


KINDS: dict[str, Kind] = {
    kind.name: kind
    for kind in (
        Kind(
            "geometry",
            "strips to scale with feed, sizes and the wires of the model",
            "plot_geometry",
        ),
        Kind(
            "impedance",
            "resistance and reactance at the feed (and behind a feed line), modes and resonances",
            "plot_impedance",
        ),
        Kind(
            "reflection",
            "reflection at the connector in dB with the dips and the modes they belong to",
            "plot_reflection",
        ),
        Kind(
            "smith",
            "reflection at the connector in a Smith chart with the dips marked",
            "plot_smith",
        ),
        Kind(
            "feedline",
            "the feed line from the antenna to the connector, to scale",
            "plot_feedline",
            of_feedline=True,
        ),
        Kind(
            "feedline_path",
            "its way through the Smith chart, item by item, at the deepest dip",
            "plot_feedline_path",
            of_feedline=True,
        ),
        Kind(
            "feedline_match",
            "reflection before and after: at the feed and at the connector",
            "plot_feedline_match",
            of_feedline=True,
        ),
        Kind("current", "current of each natural mode along the strip", "plot_current"),
        Kind("charge", "charge of each natural mode along the strip", "plot_charge"),
        Kind(
            "current_map",
            "current density of the lowest modes on the metal, maxima and nodes",
            "plot_current_maps",
        ),
        Kind("charge_map", "charge density of the lowest modes on the metal", "plot_charge_maps"),
        Kind("pattern", "gain of each mode in the three principal planes", "plot_pattern_cuts"),
        Kind("carrier", "cross-section of the widest strip with its carrier", "plot_crosssection"),
        Kind("tracks", "modes and dips against a swept value", "plot_tracks", of_one_case=False),
    )
}
"""Kind of each picture by its name, in the order in which `save_all` draws them."""
