"""Errors a user can meet. Each says what is wrong, where, which limit it breaks and what to do."""

from __future__ import annotations

from dataclasses import dataclass


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


class MeasurementError(SimkitError, ValueError):
    """A measured file cannot be used."""


class FeedlineError(SimkitError, ValueError):
    """A line, a network or a wish for a match that cannot be."""
