"""Measured sweeps: reading them, finding their dips, setting them beside the simulation."""

from simkit.measured.comparison import Comparison, compare
from simkit.measured.fit import fit
from simkit.measured.fit_result import FitResult
from simkit.measured.measurement import Measurement
from simkit.measured.mode_line import ModeLine
from simkit.measured.nearest import nearest_cases
from simkit.measured.plane import delay_of_s, extended
from simkit.measured.poles import measured_modes
from simkit.measured.targets import Target
from simkit.measured.touchstone import read_touchstone
from simkit.measured.trim import Trim, trim_fitted
from simkit.measured.trim_pair import PairTrim, trim_pair
from simkit.measured.variation import Known

__all__ = [
    "Comparison",
    "FitResult",
    "Known",
    "Measurement",
    "ModeLine",
    "PairTrim",
    "Target",
    "Trim",
    "compare",
    "delay_of_s",
    "extended",
    "fit",
    "measured_modes",
    "nearest_cases",
    "read_touchstone",
    "trim_fitted",
    "trim_pair",
]
