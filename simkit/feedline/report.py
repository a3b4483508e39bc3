"""What the design of a match gives: networks with their worth, and the table of them."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from string import ascii_uppercase

from simkit.feedline.bound import MatchBound
from simkit.feedline.chain import Chain
from simkit.feedline.checks import quantity as q
from simkit.feedline.vary import Dimension


@dataclass(frozen=True)
class Design:
    """A network and how well it matches the band.

    Attributes
    ----------
    kind : str
    chain : Chain
    dimensions : tuple of Dimension
        All that is built: lengths, values, sizes of lines.
    worst_db : float
        Smallest return loss over the band, at most 100.
    changed_db : float
        The same once the most sensitive dimension is off by 1 %.
    sensitive : str
        Name of that dimension; empty if there is none.
    tolerance_db : float
        Smallest return loss with every bought part at either end of its tolerance; `worst_db`
        without parts.
    efficiency : float
        Smallest part of the accepted power that reaches the antenna, over the band.
    doubts : tuple of str
    """

    kind: str
    chain: Chain
    dimensions: tuple[Dimension, ...]
    worst_db: float
    changed_db: float
    sensitive: str
    tolerance_db: float
    efficiency: float
    doubts: tuple[str, ...] = ()

    @property
    def about(self) -> str:
        """The elements from the antenna to the connector."""
        return "; ".join(element.about for element in self.chain.elements) or "nothing"

    def as_row(self) -> dict[str, float | str]:
        """Return the numbers by name."""
        return {
            "kind": self.kind,
            "worst_return_loss_db": self.worst_db,
            "return_loss_after_1_percent_db": self.changed_db,
            "most_sensitive": self.sensitive,
            "return_loss_within_tolerance_db": self.tolerance_db,
            "efficiency": self.efficiency,
            "network": self.about,
        }


@dataclass(frozen=True)
class MatchReport:
    """Networks for one load and band, the best first.

    Attributes
    ----------
    start_hz, stop_hz, reference_ohm : float
    before_db : float
        Smallest return loss over the band without a network.
    designs : tuple of Design
    bound : MatchBound
    wanted_db : float
    notes : tuple of str
        Kinds of network that give nothing here, and why.
    """

    start_hz: float
    stop_hz: float
    reference_ohm: float
    before_db: float
    designs: tuple[Design, ...]
    bound: MatchBound
    wanted_db: float
    notes: tuple[str, ...] = ()

    @property
    def best(self) -> Design:
        """The first design."""
        return self.designs[0]

    def as_rows(self) -> list[dict[str, float | str]]:
        """Return one row a design."""
        return [{"rank": rank, **design.as_row()} for rank, design in enumerate(self.designs, 1)]

    def as_text(self, most: int = 10) -> str:
        """Return the table of the best designs, the bound and the notes."""
        shown = self.designs[:most]
        enough = ", no less than wanted: no network is needed"
        lines = [
            f"match to {self.reference_ohm:g} ohm from {q(self.start_hz, 'Hz')} to "
            f"{q(self.stop_hz, 'Hz')}; without a network at least {self.before_db:.1f} dB "
            f"return loss{enough if self.before_db >= self.wanted_db else ''}",
            *self._table(shown),
        ]
        if more := len(self.designs) - len(shown):
            lines.append(f"{more} more, with less left when 1 % off")
        lines.append(self._verdict())
        doubts = dict.fromkeys(d for design in shown for d in design.doubts)
        return "\n".join([*lines, *_merged(self.notes), *(f"doubtful: {d}" for d in doubts)])

    def _table(self, shown: Sequence[Design]) -> list[str]:
        """Two lines a design: its numbers, and under them what it is made of."""
        named = _named_lines(shown)
        head = ("rank", "kind", "worst", "1 % off", "tolerance", "efficiency", "most sensitive")
        rows = [
            (
                f"{rank}",
                design.kind,
                f"{design.worst_db:.1f} dB",
                f"{design.changed_db:.1f} dB",
                f"{design.tolerance_db:.1f} dB",
                f"{100 * design.efficiency:.1f} %",
                _with_letter(design, named) or "-",
            )
            for rank, design in enumerate(shown, 1)
        ]
        widths = [max(len(row[column]) for row in (head, *rows)) for column in range(len(head))]
        lines = [_aligned(head, widths)]
        for row, design in zip(rows, shown, strict=True):
            about = design.about
            # Longer words first: those of one line may begin those of another.
            for text, letter in sorted(named.items(), key=lambda item: -len(item[0])):
                about = about.replace(text, f"line {letter}")
            lines += [_aligned(row, widths), f"{'':{widths[0] + 2}}{about}"]
        return lines + [f"line {letter}: {text}" for text, letter in named.items()]

    def _verdict(self) -> str:
        centre_hz = (self.start_hz + self.stop_hz) / 2
        bound = self.bound.as_text(centre_hz)
        if self.bound.return_loss_db < self.wanted_db:
            return f"{self.wanted_db:g} dB cannot be had without loss: {bound}"
        return bound[0].upper() + bound[1:]


def _with_letter(design: Design, named: Mapping[str, str]) -> str:
    """The most sensitive dimension; a line by its letter, not by its place in the network."""
    words = re.fullmatch(r"line (?:(\d+) )?(.*)", design.sensitive)
    if words is None:
        return design.sensitive
    lines = (getattr(element, "line", None) for element in design.chain.elements)
    distinct = [line.about for line in dict.fromkeys(lines) if line is not None]
    return f"line {named[distinct[int(words[1] or 1) - 1]]} {words[2]}"


def _named_lines(designs: Sequence[Design]) -> dict[str, str]:
    """A letter, or two, for the words of each line."""
    lines = (getattr(e, "line", None) for design in designs for e in design.chain.elements)
    texts = list(dict.fromkeys(line.about for line in lines if line is not None))
    letters = [a + b for a in ("", *ascii_uppercase) for b in ascii_uppercase]
    return dict(zip(texts, letters, strict=False))


def _aligned(cells: Sequence[str], widths: Sequence[int]) -> str:
    """Words flush left, numbers flush right."""
    last = len(cells) - 1
    padded = (
        cell.ljust(width) if column in (1, last) else cell.rjust(width)
        for column, (cell, width) in enumerate(zip(cells, widths, strict=True))
    )
    return "  ".join(padded).rstrip()


def _merged(notes: Sequence[str]) -> list[str]:
    """One line for kinds of network that give nothing for the same reason."""
    kinds: dict[str, list[str]] = {}
    for note in notes:
        kind, _, why = note.partition(": ")
        kinds.setdefault(why, []).append(kind)
    return [f"{', '.join(names)}: {why}" for why, names in kinds.items()]
