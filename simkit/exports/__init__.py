"""Handing results on: netCDF, tables, Touchstone files."""

from simkit.exports.entry import export, folder_name
from simkit.exports.outcome import Exported

__all__ = ["Exported", "export", "folder_name"]
