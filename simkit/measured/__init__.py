"""Measured sweeps: reading them, finding their dips, setting them beside the simulation."""

from simkit.measured.comparison import Comparison, ModeLine, compare
from simkit.measured.measurement import Measurement
from simkit.measured.touchstone import read_touchstone

__all__ = ["Comparison", "Measurement", "ModeLine", "compare", "read_touchstone"]
