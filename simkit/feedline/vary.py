"""Dimensions of a chain: read them, change them together or one by one."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, fields, is_dataclass, replace
from typing import Any

from simkit.feedline.chain import Chain
from simkit.feedline.checks import quantity as q
from simkit.feedline.elements import UNITS, Element, Lumped
from simkit.feedline.line import Line

_LENGTHS = ("length_m", "antenna_side_m", "end_side_m")
_OF_LINES = (
    "impedance_ohm",
    "velocity_factor",
    "width_m",
    "other_width_m",
    "separation_m",
    "height_m",
    "gap_m",
    "sheet_m",
    "inner_m",
    "outer_m",
)

_WORDS = {
    "length_m": "length",
    "antenna_side_m": "antenna to tap",
    "end_side_m": "tap to end",
    "impedance_ohm": "impedance",
    "velocity_factor": "velocity factor",
    "width_m": "width",
    "other_width_m": "other width",
    "separation_m": "separation",
    "height_m": "height",
    "gap_m": "gap",
    "sheet_m": "sheet",
    "inner_m": "inner diameter",
    "outer_m": "outer diameter",
}


@dataclass(frozen=True)
class Dimension:
    """One number of a chain that is built: a length, a part's value, or a size of a line.

    Attributes
    ----------
    name : str
        In words, with the element's number from the antenna.
    value : float
    unit : str
    element : int or None
        Its element; None for a size of a line, which all elements of that line share.
    field : str
    line : Line or None
    """

    name: str
    value: float
    unit: str
    element: int | None
    field: str
    line: Line | None = None

    @property
    def text(self) -> str:
        """Name and value."""
        return f"{self.name} {q(self.value, self.unit)}"

    def scaled(self, chain: Chain, factor: float) -> Chain:
        """Return the chain with this dimension times a factor."""
        value = self.value * factor
        if self.element is not None:
            return _with_element(chain, self.element, {self.field: value})
        assert self.line is not None
        if self.field == "velocity_factor":
            value = min(value, 1.0)
        other = _changed(self.line, {self.field: value})
        elements = (
            _changed(element, {"line": other}) if _line_of(element) == self.line else element
            for element in chain.elements
        )
        return replace(chain, elements=tuple(elements))


def dimensions(chain: Chain) -> tuple[Dimension, ...]:
    """Return all dimensions of a chain that are not 0: lengths, values, then sizes of its lines."""
    return (*free_dimensions(chain), *_line_dimensions(chain))


def free_dimensions(chain: Chain) -> tuple[Dimension, ...]:
    """Return lengths and values of parts."""
    return tuple(_own_dimensions(chain.elements))


def _own_dimensions(elements: Sequence[Element]) -> Iterator[Dimension]:
    for number, element in enumerate(elements):
        if isinstance(element, Lumped):
            name = f"{element.connection} {element.kind}"
            yield Dimension(name, element.value, UNITS[element.kind], number, "value")
        for field in _LENGTHS:
            value = getattr(element, field, 0.0)
            # A tapped line's length is the sum of two others, not a field of its own.
            if value and is_dataclass(element) and field in {f.name for f in fields(element)}:
                word = "stub" if hasattr(element, "connection") else "section"
                name = f"{word} {_WORDS[field]}" if field == "length_m" else _WORDS[field]
                yield Dimension(name, value, "m", number, field)


def _line_dimensions(chain: Chain) -> Iterator[Dimension]:
    lines = [_line_of(element) for element in chain.elements]
    distinct = list(dict.fromkeys(line for line in lines if line is not None))
    for number, line in enumerate(distinct, start=1):
        which = f"line {number} " if len(distinct) > 1 else "line "
        names: list[str] = [f.name for f in fields(line)] if is_dataclass(line) else []
        for field in _OF_LINES:
            value = getattr(line, field, None) if field in names else None
            if value:
                unit = "m" if field.endswith("_m") else "ohm" if field.endswith("_ohm") else ""
                yield Dimension(f"{which}{_WORDS[field]}", value, unit, None, field, line)


def _line_of(element: Element) -> Line | None:
    return getattr(element, "line", None)


def _with_element(chain: Chain, number: int, changes: dict[str, Any]) -> Chain:
    elements = list(chain.elements)
    elements[number] = _changed(elements[number], changes)
    return replace(chain, elements=tuple(elements))


def _changed(value: Any, changes: dict[str, Any]) -> Any:
    return replace(value, **changes)
