"""Paths, strips, mesh plans and wire grids."""

from simkit.geometry.line_model import build_wires
from simkit.geometry.mesh import MeshPlan, plan_mesh
from simkit.geometry.wires import Chain, StripSpan, Wire, WireGrid

__all__ = ["Chain", "MeshPlan", "StripSpan", "Wire", "WireGrid", "build_wires", "plan_mesh"]
