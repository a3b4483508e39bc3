"""Errors a user can meet. Each says what is wrong, where, which limit it breaks and what to do."""

from __future__ import annotations

from dataclasses import dataclass

_EXCERPT = 90
"""Characters of a condition shown around the place of an error."""


class SimkitError(Exception):
    """Root of every error simkit raises on purpose; anything else is a bug of simkit."""


@dataclass(frozen=True)
class Problem:
    """One thing wrong in a study file.

    Attributes
    ----------
    what : str
        One sentence: what is wrong, with the limit and the remedy.
    key : str
        Dotted key in the study (``strip.east.width``), empty if the whole file is meant.
    value : str
        The offending value as the user wrote it, empty if there is none.
    line : int or None
        Line number in the study file, counted from 1.
    """

    what: str
    key: str = ""
    value: str = ""
    line: int | None = None

    def as_text(self, file: str) -> str:
        """Return ``file:line: key = value: what`` with the parts that are known."""
        place = f"{file}:{self.line}" if self.line is not None else file
        subject = f"{self.key} = {self.value}" if self.value else self.key
        return f"{place}: {subject}: {self.what}" if subject else f"{place}: {self.what}"


class StudyError(SimkitError, ValueError):
    """A study file cannot be understood; carries every problem found in it."""

    def __init__(self, file: str, problems: list[Problem] | tuple[Problem, ...]) -> None:
        self.file = file
        self.problems = tuple(problems)
        super().__init__("\n".join(problem.as_text(file) for problem in self.problems))


class GeometryError(SimkitError, ValueError):
    """The metal cannot be built or modelled as described; the case is `refused`."""


class EngineError(SimkitError, RuntimeError):
    """The field engine failed or returned what is no solution; the case is `failed`."""


class StoreError(SimkitError, OSError):
    """A results folder cannot be read, written or continued."""


class DamageError(StoreError):
    """Results of some cases are damaged on the disk; they can be solved anew."""


class ConditionError(SimkitError, ValueError):
    """A condition that selects cases cannot be understood; its text points at the place."""

    def __init__(self, condition: str, start: int, stop: int, what: str) -> None:
        self.condition = condition
        self.start = start
        self.stop = stop
        begin = max(0, start - _EXCERPT // 2)
        line = condition[begin : begin + _EXCERPT]
        mark = "^" * max(1, min(stop, begin + _EXCERPT) - start)
        super().__init__(f"{what}\n  {line}\n  {' ' * (start - begin)}{mark}")


class ExportError(SimkitError, OSError):
    """Data cannot be handed on: where they should go, or in the form that was asked for."""


class MeasurementError(SimkitError, ValueError):
    """A measured file cannot be used."""


class FeedlineError(SimkitError, ValueError):
    """A line, a network or a wish for a match that cannot be."""
