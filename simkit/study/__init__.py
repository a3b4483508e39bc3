"""Study files: text, units and expressions, the schema, and the cases a sweep makes."""

from __future__ import annotations

from simkit.study.load import Study, load_study
from simkit.study.sweep import SweptValue

__all__ = ["Study", "SweptValue", "load_study"]
