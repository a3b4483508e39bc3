"""Paths, strips, mesh plans and wire grids."""

from simkit.geometry.build import build_wires
from simkit.geometry.mesh import plan_mesh
from simkit.geometry.mesh_plan import MeshPlan
from simkit.geometry.network import chains_of
from simkit.geometry.wires import Chain, StripSpan, Wire, WireGrid

__all__ = [
    "Chain",
    "MeshPlan",
    "StripSpan",
    "Wire",
    "WireGrid",
    "build_wires",
    "chains_of",
    "plan_mesh",
]
