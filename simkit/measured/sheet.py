"""The text of a Touchstone file, checked line by line and brought into one plain form.

The parser behind `read_touchstone` takes an option line in one order only, reads numbers until it
has enough of them even past the end of the file, takes falling frequencies of a two-port file for
noise data, and scales normalised admittances the wrong way. So the text it gets is prepared here:
comments and foreign sections dropped, the options in standard order, every number checked with its
line; what concerns the meaning of the numbers (parameter kind, reference) stays on our side.

References
----------
IBIS Open Forum, Touchstone File Format Specification, versions 1.1 (2002) and 2.0 (2009).
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass, field
from pathlib import Path
from typing import NoReturn

from simkit.errors import MeasurementError

MAX_BYTES = 32_000_000
"""A bench analyser stores at most some hundred thousand points, about 6 MB of text."""

MAX_PORTS = 32

_UNITS = ("hz", "khz", "mhz", "ghz")
_PARAMETERS = ("s", "y", "z", "g", "h")
_FORMATS = ("db", "ma", "ri")
_OPTIONS = (*_UNITS, *_PARAMETERS, *_FORMATS)
_KEPT_KEYWORDS = ("[two-port data order]", "[matrix format]")


@dataclass
class Sheet:
    """What the text of a file says, before its numbers are interpreted.

    Attributes
    ----------
    ports : int
    unit, parameter, form : str
        Options in lower case: frequency unit, kind of data, number format.
    reference_ohm : list of float
        One number for all ports or one each.
    version2 : bool
        Touchstone 2.0: impedances and admittances are not normalised.
    rows : list of (int, list of float)
        Line number and numbers of every data line.
    """

    ports: int = 0
    unit: str = ""
    parameter: str = "s"
    form: str = "ma"
    reference_ohm: list[float] = field(default_factory=list)
    version2: bool = False
    expected_points: int | None = None
    keywords: list[str] = field(default_factory=list)
    rows: list[tuple[int, list[float]]] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)
    comments: list[str] = field(default_factory=list)

    def plain_text(self) -> str:
        """Return the same data as the parser understands them; parameters named S whatever."""
        head = []
        if self.version2:
            head = ["[Version] 2.0"]
        head.append(f"# {self.unit} S {self.form} R 50")
        if self.version2:
            head += [f"[Number of Ports] {self.ports}", *self.keywords, "[Network Data]"]
        return "\n".join(
            [*head, *(" ".join(repr(number) for number in row) for _, row in self.rows), ""]
        )


def refuse(path: Path, what: str, line: int | None = None) -> NoReturn:
    """Raise a MeasurementError that begins with the file and, if known, the line."""
    place = f"{path}:{line}" if line is not None else str(path)
    raise MeasurementError(f"{place}: {what}")


def read_sheet(path: Path) -> Sheet:
    """Read and check the text of a Touchstone file.

    Raises
    ------
    MeasurementError
        If the file cannot be read as text or breaks the format.
    """
    # Not splitlines: it also breaks at characters that stand in comments of older code pages.
    lines = re.split(r"\r\n|\r|\n", _text(path))
    sheet = _Reader(path).read(lines)
    _settle_ports(path, sheet)
    _drop_noise(sheet)
    _check_counts(path, sheet)
    return sheet


def _text(path: Path) -> str:
    try:
        size = path.stat().st_size
        if size > MAX_BYTES:
            refuse(
                path,
                f"the file is {size / 1e6:.0f} MB, the limit is {MAX_BYTES / 1e6:.0f} MB; "
                "export fewer points (a thousand over the band are plenty)",
            )
        raw = path.read_bytes()
    except FileNotFoundError:
        refuse(path, "there is no such file; check the name and the folder")
    except OSError as error:
        refuse(path, f"the file cannot be read ({error.strerror}); name a Touchstone file")
    except ValueError as error:  # a NUL in the name
        refuse(path, f"the name cannot be opened ({error})")
    if not raw.strip():
        refuse(path, "the file is empty; export the sweep again")
    return _decoded(path, raw)


def _decoded(path: Path, raw: bytes) -> str:
    if raw.startswith((b"\xff\xfe", b"\xfe\xff")):
        text = raw.decode("utf-16", errors="replace")
    else:
        try:
            text = raw.decode("utf-8-sig")
        except UnicodeDecodeError:
            text = raw.decode("latin-1")
    odd = sum(1 for letter in text[:4096] if ord(letter) < 32 and letter not in "\t\n\r\f\x1a")
    if "\0" in text or odd > 8:
        refuse(
            path,
            "the file is binary, not text; export the sweep as Touchstone (.s1p), "
            "not as an instrument state or a picture",
        )
    return text.replace("\x1a", "")


class _Reader:
    """Goes through the lines once; the state is the sheet and the section being read."""

    def __init__(self, path: Path) -> None:
        self.path = path
        self.sheet = Sheet()
        self.section = "network"

    def read(self, lines: list[str]) -> Sheet:
        for number, line in enumerate(lines, start=1):
            content, mark, comment = line.partition("!")
            if mark:
                self.sheet.comments.append(comment.strip())
            content = content.strip()
            if content:
                self._line(number, content)
        if not self.sheet.unit:
            refuse(
                self.path,
                "there is no option line (such as '# MHz S RI R 50') that says unit and format; "
                "export as Touchstone or put that line before the data",
            )
        if any(text.lower().startswith("port impedance") for text in self.sheet.comments):
            self.sheet.notes.append(
                "port impedances given in comments are ignored; the option line counts"
            )
        return self.sheet

    def _line(self, number: int, content: str) -> None:
        if content.startswith("["):
            self._keyword(number, content)
        elif self.section == "skipped":
            return
        elif content.startswith("#"):
            self._options(number, content)
        elif self.section == "reference":
            self.sheet.reference_ohm += self._numbers(number, content)
        else:
            self.sheet.rows.append((number, self._numbers(number, content)))

    def _numbers(self, number: int, content: str) -> list[float]:
        if not self.sheet.unit:
            refuse(
                self.path,
                "data come before any option line (such as '# MHz S RI R 50'); this is not a "
                "Touchstone file, or its head is missing",
                number,
            )
        values = []
        for word in content.split():
            value = _number(word)
            if value is None:
                hint = "; write decimals with a point" if "," in word else ""
                refuse(
                    self.path,
                    f"{word[:40]!r} is not a number{hint}; the file is damaged or not Touchstone",
                    number,
                )
            if not math.isfinite(value):
                refuse(
                    self.path,
                    f"{word[:40]!r} is no measured value; drop the point or measure again",
                    number,
                )
            values.append(value)
        return values

    def _options(self, number: int, content: str) -> None:
        if self.sheet.unit:
            self.sheet.notes.append(f"line {number}: a second option line is ignored")
            return
        words = content[1:].lower().split()
        self.sheet.unit = "ghz"
        while words:
            self._option(number, words.pop(0), words)

    def _option(self, number: int, word: str, rest: list[str]) -> None:
        """Take one word of the option line, and the resistances after an R off the rest."""
        if word in _UNITS:
            self.sheet.unit = word
        elif word in _PARAMETERS:
            self.sheet.parameter = word
        elif word in _FORMATS:
            self.sheet.form = word
        elif word.startswith("r"):
            numbers = [word[1:]] if word != "r" else []
            while rest and rest[0] not in _OPTIONS:  # the options may stand in any order
                numbers.append(rest.pop(0))
            self.sheet.reference_ohm = [self._resistance(number, text) for text in numbers]
        else:
            refuse(
                self.path,
                f"the option {word[:40]!r} is unknown; an option line reads "
                "'# <Hz|kHz|MHz|GHz> <S|Z|Y> <RI|MA|DB> R <ohm>'",
                number,
            )

    def _resistance(self, number: int, text: str) -> float:
        value = _number(text)
        if value is None or not (math.isfinite(value) and value > 0):
            refuse(
                self.path,
                f"the reference resistance {text[:40]!r} is not a positive number of ohm; "
                "correct the option line ('R 50')",
                number,
            )
        return value

    def _keyword(self, number: int, content: str) -> None:
        name, _, value = content.partition("]")
        name, value = f"{name.lower()}]", value.strip()
        self.section = "network"
        if name == "[version]":
            self.sheet.version2 = value.startswith("2")
        elif name == "[number of ports]":
            self.sheet.ports = self._count(number, name, value)
        elif name == "[number of frequencies]":
            self.sheet.expected_points = self._count(number, name, value)
        elif name == "[reference]":
            self.section = "reference"
            self.sheet.reference_ohm = self._numbers(number, value)
        elif name in ("[noise data]", "[begin information]", "[end]"):
            self.section = "skipped"
        elif name == "[mixed-mode order]":
            refuse(self.path, "mixed-mode data are not understood; export plain ports", number)
        elif name in _KEPT_KEYWORDS:
            self._layout(number, name, value)

    def _layout(self, number: int, name: str, value: str) -> None:
        allowed = ("12_21", "21_12") if "order" in name else ("full", "lower", "upper")
        if value.lower() not in allowed:
            refuse(self.path, f"{name} {value[:40]!r} is not one of {', '.join(allowed)}", number)
        self.sheet.keywords.append(f"{name} {value.lower()}")

    def _count(self, number: int, name: str, value: str) -> int:
        if not re.fullmatch(r"\d{1,9}", value, flags=re.ASCII) or int(value) == 0:
            refuse(self.path, f"{name} {value[:40]!r} is not a positive whole number", number)
        return int(value)


def _number(word: str) -> float | None:
    """The number a word stands for, None if it is not one; Python's underscores do not count."""
    try:
        return float(word) if "_" not in word else None
    except ValueError:
        return None


def _settle_ports(path: Path, sheet: Sheet) -> None:
    match = re.fullmatch(r"\.[sgyhz](\d{1,4})p", path.suffix.lower(), flags=re.ASCII)
    named = int(match.group(1)) if match else 0
    if not (sheet.version2 and sheet.ports):
        sheet.ports = named
    if sheet.ports == 0:
        refuse(
            path,
            "the name does not say how many ports the file holds; rename a one-port file to "
            "end in .s1p",
        )
    if sheet.ports > MAX_PORTS:
        refuse(path, f"{sheet.ports} ports are more than the {MAX_PORTS} that are read")
    if not sheet.reference_ohm:
        sheet.reference_ohm = [50.0]
    if len(sheet.reference_ohm) == 1:
        sheet.reference_ohm = sheet.reference_ohm * sheet.ports
    if len(sheet.reference_ohm) != sheet.ports or min(sheet.reference_ohm) <= 0:
        refuse(
            path,
            f"{len(sheet.reference_ohm)} reference resistances for {sheet.ports} port(s): give "
            "one for all or one each, all positive",
        )


def _drop_noise(sheet: Sheet) -> None:
    """Noise parameters end a two-port file of version 1 as lines of five numbers."""
    if sheet.ports == 2 and not sheet.version2:
        while len(sheet.rows) > 1 and len(sheet.rows[-1][1]) == 5:
            sheet.rows.pop()


def _check_counts(path: Path, sheet: Sheet) -> None:
    if not sheet.rows:
        refuse(path, "there are no data after the option line; export the sweep again")
    triangle = any("lower" in word or "upper" in word for word in sheet.keywords)
    ports = sheet.ports
    wanted = 1 + (ports * (ports + 1) if triangle else 2 * ports**2)
    if ports <= 2:
        _check_lines(path, sheet, wanted)
    total = sum(len(row) for _, row in sheet.rows)
    if total % wanted:
        refuse(
            path,
            f"{total} numbers do not make whole points of {wanted} for {ports} ports; the file "
            "is truncated, export it again",
        )
    points = total // wanted
    if sheet.expected_points is not None and sheet.expected_points != points:
        refuse(
            path,
            f"the file announces {sheet.expected_points} frequencies and holds {points}; it is "
            "truncated or was edited, export it again",
        )


def _check_lines(path: Path, sheet: Sheet, wanted: int) -> None:
    last = sheet.rows[-1][0]
    for number, row in sheet.rows:
        if len(row) == wanted:
            continue
        if number == last and len(row) < wanted:
            refuse(
                path,
                f"the last line has {len(row)} of {wanted} numbers: the file is truncated; "
                "export it again",
                number,
            )
        hint = ""
        if sheet.ports == 1 and len(row) == 9:
            hint = "; if these are two ports, rename the file to end in .s2p and choose one"
        refuse(
            path,
            f"the line has {len(row)} numbers where {wanted} belong "
            f"({sheet.ports}-port data){hint}",
            number,
        )
