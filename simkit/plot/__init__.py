"""Pictures of antennas and results: each function takes and returns a matplotlib Axes.

No function touches pyplot or any global setting; without `ax` it makes a figure of its own, which
is reached as ``ax.figure`` and written by ``ax.figure.savefig(path)``.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from simkit.plot.charge import plot_charge
    from simkit.plot.crosssection import plot_crosssection
    from simkit.plot.current import plot_current
    from simkit.plot.density import (
        plot_charge_map,
        plot_charge_maps,
        plot_current_map,
        plot_current_maps,
    )
    from simkit.plot.feedline import plot_feedline, plot_feedline_match, plot_feedline_path
    from simkit.plot.geometry import plot_geometry
    from simkit.plot.impedance import plot_impedance
    from simkit.plot.kinds import KINDS
    from simkit.plot.matching import plot_match, plot_match_path
    from simkit.plot.overlay import plot_overlay
    from simkit.plot.pattern import plot_pattern, plot_pattern_cuts
    from simkit.plot.reflection import plot_reflection
    from simkit.plot.save import save_all, save_plot
    from simkit.plot.schematic import plot_schematic
    from simkit.plot.smith import plot_smith
    from simkit.plot.tracks import MeasuredBuild, plot_tracks

__all__ = [
    "KINDS",
    "MeasuredBuild",
    "plot_charge",
    "plot_charge_map",
    "plot_charge_maps",
    "plot_crosssection",
    "plot_current",
    "plot_current_map",
    "plot_current_maps",
    "plot_feedline",
    "plot_feedline_match",
    "plot_feedline_path",
    "plot_geometry",
    "plot_impedance",
    "plot_match",
    "plot_match_path",
    "plot_overlay",
    "plot_pattern",
    "plot_pattern_cuts",
    "plot_reflection",
    "plot_schematic",
    "plot_smith",
    "plot_tracks",
    "save_all",
    "save_plot",
]

_HOME = {
    "KINDS": "kinds",
    "MeasuredBuild": "tracks",
    "plot_charge": "charge",
    "plot_charge_map": "density",
    "plot_charge_maps": "density",
    "plot_crosssection": "crosssection",
    "plot_current": "current",
    "plot_current_map": "density",
    "plot_current_maps": "density",
    "plot_feedline": "feedline",
    "plot_feedline_match": "feedline",
    "plot_feedline_path": "feedline",
    "plot_geometry": "geometry",
    "plot_impedance": "impedance",
    "plot_match": "matching",
    "plot_match_path": "matching",
    "plot_overlay": "overlay",
    "plot_pattern": "pattern",
    "plot_pattern_cuts": "pattern",
    "plot_reflection": "reflection",
    "plot_schematic": "schematic",
    "plot_smith": "smith",
    "plot_tracks": "tracks",
    "save_all": "save",
    "save_plot": "save",
}


def __getattr__(name: str) -> object:
    if name in _HOME:
        return getattr(import_module(f"simkit.plot.{_HOME[name]}"), name)
    raise AttributeError(f"module 'simkit.plot' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
