"""Finding cases among many: named quantities, conditions on them, the cases that satisfy one."""

from simkit.finding.select import query

__all__ = ["query"]
