"""Cross-sections of strips and carriers: plane electrostatics and what follows from it.

The carrier's kappa, the equivalent radius of strips, bars and bundles of wires, and the
permittivity of solid and partly filled plastics. Pure numpy and scipy; knows nothing of studies.
"""

from simkit.crosssection.carrier_kappa import Kappa, kappa, kappa_matrix
from simkit.crosssection.dielectrics import (
    DielectricError,
    complex_permittivity,
    mixed_permittivity,
    printed_layers,
)
from simkit.crosssection.plastics import PLASTICS, Plastic, plastic
from simkit.crosssection.radius import charge_parts, static_radius_m, strip_radius_m
from simkit.crosssection.section import CrossSection, FlatConductor, Layer, single_strip

__all__ = [
    "PLASTICS",
    "CrossSection",
    "DielectricError",
    "FlatConductor",
    "Kappa",
    "Layer",
    "Plastic",
    "charge_parts",
    "complex_permittivity",
    "kappa",
    "kappa_matrix",
    "mixed_permittivity",
    "plastic",
    "printed_layers",
    "single_strip",
    "static_radius_m",
    "strip_radius_m",
]
