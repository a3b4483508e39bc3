"""Reading a study file: text in, a `Study` out, or one error that lists every problem."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from os import PathLike
from pathlib import Path
from typing import Any

from simkit.errors import Problem, StudyError
from simkit.study.blueprint import Blueprint
from simkit.study.expression import ExpressionError
from simkit.study.locate import KeyPath, locate
from simkit.study.measured import read_measured
from simkit.study.model import Antenna, Case, MeasuredFile
from simkit.study.resolve import resolve
from simkit.study.schema import read_blueprint
from simkit.study.sweep import Method, Sweep, SweptValue, read_sweep
from simkit.study.tables import Notes, Quantity, Table, written_unit
from simkit.study.units import find_unit, usual_unit
from simkit.study.values import Values, read_values, value_name

LONGEST_FILE = 1_000_000
"""Bytes a study file may have."""

DEEPEST_NESTING = 12
"""Levels of arrays and tables a study file may have."""


@dataclass(frozen=True)
class Study:
    """A study file, understood.

    Attributes
    ----------
    title : str
    path : Path
    text : str
        The file as read.
    values : dict of str to float
        Names of [values] at their nominal numbers, SI.
    sweep : Sweep
    measured : tuple of MeasuredFile
    blueprint : Blueprint
    """

    title: str
    path: Path
    text: str = field(repr=False)
    values: dict[str, float]
    sweep: Sweep
    measured: tuple[MeasuredFile, ...]
    blueprint: Blueprint = field(repr=False)
    moving: tuple[Quantity, ...] = field(repr=False)
    """Values to evaluate anew for every case because they depend on swept ones."""
    units: dict[str, str] = field(repr=False)
    lines: dict[str, int] = field(repr=False)

    @property
    def swept(self) -> tuple[SweptValue, ...]:
        """What the study varies, in its order."""
        return self.sweep.swept

    @property
    def method(self) -> Method:
        """How the swept values combine."""
        return self.sweep.method

    @property
    def case_count(self) -> int:
        """Number of cases, 1 without a sweep."""
        return self.sweep.case_count

    @property
    def shape(self) -> tuple[int, ...]:
        """Counts per swept value for a grid, the number of cases for a list, () without a sweep."""
        return self.sweep.shape

    def case(self, index: int) -> Case:
        """Return one point of the sweep.

        Parameters
        ----------
        index : int
            0 to `case_count` - 1; in a grid the last swept name varies fastest.

        Returns
        -------
        Case
            Without an antenna, and with the reason in `refused`, if this point does not resolve.

        Raises
        ------
        IndexError
            If there is no such case.
        """
        if not 0 <= index < self.case_count:
            raise IndexError(f"case {index}: this study has cases 0 to {self.case_count - 1}")
        point = self.sweep.point(index)
        antenna, problems = self._resolve(point)
        refused = "; ".join(problem.as_text(self.path.name) for problem in problems)
        return Case(index, point, antenna, refused)

    def cases(self) -> Iterator[Case]:
        """Yield every case in order."""
        for index in range(self.case_count):
            yield self.case(index)

    def nominal(self) -> Antenna:
        """Return the antenna with every value as the file states it, without the sweep."""
        antenna, problems = resolve(self.blueprint, self.values)
        if antenna is None:  # `load_study` lets no such study out
            raise StudyError(str(self.path), problems)
        return antenna

    def display_unit(self, name: str) -> str:
        """Return the unit the user wrote for a value or dotted key, "1" for a pure number.

        Raises
        ------
        KeyError
            If the study has no such value or key.
        """
        return self.units[name]

    def line_of(self, key: str) -> int | None:
        """Return the line of a dotted key, or of the nearest key around it that is written.

        A name of [values] may stand for its key: ``arm`` for ``values.arm``.
        """
        if key in self.values:
            key = f"values.{key}"
        while key:
            if key in self.lines:
                return self.lines[key]
            key = key.rpartition(".")[0]
        return None

    def _resolve(self, point: Mapping[str, float]) -> tuple[Antenna | None, tuple[Problem, ...]]:
        numbers = {**self.values, **point}
        for quantity in self.moving:
            try:
                numbers[value_name(quantity)] = quantity.expression.evaluate(numbers)
            except ExpressionError as error:
                return None, (Problem(str(error), quantity.key, quantity.written, quantity.line),)
        return resolve(self.blueprint, numbers)


def load_study(path: str | PathLike[str]) -> Study:
    """Read a study file.

    Parameters
    ----------
    path : path-like
        TOML file.

    Returns
    -------
    Study

    Raises
    ------
    StudyError
        If anything in the file is wrong; it lists every problem with its line. A problem that only
        some points of the sweep have does not raise but refuses these cases.
    """
    path = Path(path)
    return parse_study(path, _read_text(path))


def parse_study(path: Path, text: str) -> Study:
    """Understand a study's text; `path` is the file it stands in, or is to stand in.

    Raises
    ------
    StudyError
        As `load_study`.
    """
    data, lines = _parse(path, text)
    return _Builder(path, text, data, lines).run()


def _read_text(path: Path) -> str:
    try:
        if path.is_dir():
            raise StudyError(str(path), [Problem("is a folder; name the study file in it")])
        with path.open("rb") as file:
            content = file.read(LONGEST_FILE + 1)
        if len(content) > LONGEST_FILE:
            what = f"is larger than {LONGEST_FILE:,} bytes; a study file is a short text"
            raise StudyError(str(path), [Problem(what)])
        return content.decode("utf-8-sig")
    except FileNotFoundError:
        what = "there is no such file; `simkit new NAME` writes one to start from"
        raise StudyError(str(path), [Problem(what)]) from None
    except UnicodeDecodeError as error:
        line = content[: error.start].count(b"\n") + 1
        what = "is not UTF-8 text here; save the file as UTF-8"
        raise StudyError(str(path), [Problem(what, line=line)]) from error
    except (OSError, ValueError) as error:
        if isinstance(error, StudyError):
            raise
        reason = getattr(error, "strerror", None) or error
        raise StudyError(str(path), [Problem(f"cannot be read: {reason}")]) from error


def _parse(path: Path, text: str) -> tuple[dict[str, Any], dict[KeyPath, int]]:
    try:
        data = tomllib.loads(text)
        _check_depth(data)
        return data, locate(text)
    except RecursionError:
        what = f"is nested deeper than {DEEPEST_NESTING} levels; no study needs that"
        raise StudyError(str(path), [Problem(what)]) from None
    except ValueError as error:  # its children include TOMLDecodeError
        raise StudyError(str(path), [_syntax_problem(text, str(error))]) from error


def _check_depth(data: dict[str, Any]) -> None:
    level: list[Any] = [data]
    for _ in range(DEEPEST_NESTING):
        lists = [item for item in level if isinstance(item, list)]
        tables = [item.values() for item in level if isinstance(item, dict)]
        level = [child for children in (*lists, *tables) for child in children]
    if any(isinstance(item, list | dict) for item in level):
        raise RecursionError


def _syntax_problem(text: str, message: str) -> Problem:
    place = re.search(r" \(at line (\d+), column (\d+)\)$", message)
    if place is not None:
        line: int | None = int(place[1])
        message = message[: place.start()] + f", at column {place[2]}"
    elif message.endswith(" (at end of document)"):
        line = text.rstrip().count("\n") + 1
        message = message.removesuffix(" (at end of document)") + ", at the end of the file"
    else:
        line = None
    message = message[:1].lower() + message[1:]
    return Problem(f"this is not TOML: {message}; text stands in quotes, tables in [ ]", line=line)


class _Builder:
    """Goes through the tables of one file and gathers everything wrong with it."""

    def __init__(
        self, path: Path, text: str, data: dict[str, Any], lines: dict[KeyPath, int]
    ) -> None:
        self.path = path
        self.text = text
        self.notes = Notes(lines)
        self.root = Table(data, (), "", self.notes)

    def run(self) -> Study:
        root, notes = self.root, self.notes
        title = root.text("title", 'give the study a title, as in title = "Creek gauge link"')
        values, numbers = read_values(root.table("values"), notes)
        blueprint = read_blueprint(root)
        sweep = read_sweep(root.table("sweep"), root.table("sampling"), notes, numbers)
        measured = read_measured(root.tables("measured"), notes, sweep, numbers, self.path.parent)
        root.close()
        self.check_shared(blueprint, values, sweep)
        if not notes.problems:
            self.check_effect(blueprint, values, sweep)
        problems = [*notes.problems, *resolve(blueprint, numbers)[1]]
        if problems or title is None:
            raise StudyError(str(self.path), sorted(problems, key=lambda p: p.line or 0))
        swept = [value.name for value in sweep.swept]
        return Study(
            title=title,
            path=self.path,
            text=self.text,
            values=numbers,
            sweep=sweep,
            measured=measured,
            blueprint=blueprint,
            moving=values.affected_by(swept),
            units=self.display_units(sweep),
            lines=self.named_lines(blueprint),
        )

    def check_shared(self, blueprint: Blueprint, values: Values, sweep: Sweep) -> None:
        """Report what all cases must share but would vary with a swept value."""
        swept = {value.name for value in sweep.swept}
        moving = swept | {value_name(quantity) for quantity in values.affected_by(swept)}
        for quantity in blueprint.shared():
            used = sorted(quantity.expression.names & moving)
            if used:
                what = f"depends on `{used[0]}`, which the sweep varies; all cases must share it"
                problem = Problem(what, quantity.key, quantity.written, quantity.line)
                self.notes.problems.append(problem)

    def check_effect(self, blueprint: Blueprint, values: Values, sweep: Sweep) -> None:
        """Report swept values that change nothing."""
        used = blueprint.names()
        for name in (value.name for value in sweep.swept if value.name in values.names()):
            moving = {name} | {value_name(quantity) for quantity in values.affected_by([name])}
            if not moving & used:
                what = (
                    "nothing in the antenna depends on this value; use it there or do not sweep it"
                )
                self.notes.report(("sweep", name), f"sweep.{name}", what)

    def display_units(self, sweep: Sweep) -> dict[str, str]:
        """Return for every quantity of the file the unit its user would read it in."""
        units: dict[str, str] = {}
        for key, quantity in self.notes.quantities.items():
            name = key.removeprefix("values.")
            if name.startswith(("sweep.", "measured[")):
                continue
            others = (units.get(other) for other in sorted(quantity.expression.names))
            alike = (u for u in others if u and find_unit(u).dimension == quantity.dimension)
            units[name] = (
                sweep.units.get(name)
                or written_unit(quantity)
                or next(alike, None)
                or usual_unit(quantity.dimension)
            )
        return units

    def named_lines(self, blueprint: Blueprint) -> dict[str, int]:
        """Return the line of every key, strips and items of the feed line by their names."""
        names = {
            "strip": [strip["name"] for strip in self.root.data["strip"]],
            "feedline": [item.name for item in blueprint.feedline],
        }
        lines: dict[str, int] = {}
        for path, line in self.notes.lines.items():
            parts = [str(part) for part in path]
            if path[0] in names and len(path) > 1:
                parts[1] = names[str(path[0])][int(path[1])]
            lines[".".join(parts)] = line
        return lines
