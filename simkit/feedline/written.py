"""A study with a matching network added to it, as text: nothing of the original is lost."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from typing import TYPE_CHECKING

from simkit.feedline.items import Item, toml_text

if TYPE_CHECKING:
    from simkit.study import Study

_MEASURED = re.compile(r"\s*\[\[\s*measured\s*\]\]")
_HEADER = re.compile(r"\s*\[")
NOT_COMPARABLE = "measured without the network below, so not to be compared with it:"


def with_network(
    study: Study,
    items: Iterable[Item],
    comments: Iterable[str],
    values: Mapping[str, float] | None = None,
) -> str:
    """Return the study's text with items added between its feed line, if any, and the connector.

    Parameters
    ----------
    study : Study
    items : iterable of dict
    comments : iterable of str
        Lines of a comment above the items.
    values : mapping of str to float, optional
        Values, SI, that the network was designed for, where they differ from the file's.

    Raises
    ------
    MeasurementError
        If a value does not stand alone on its line.

    Notes
    -----
    Tables ``[[measured]]`` become comments: their builds had no such network.
    """
    text = study.text
    if values:
        from simkit.measured.variation import Variation

        text = Variation(study).rewritten(values, why="matched here")
    text = without_measured(text.replace("\r\n", "\n"))
    return f"{text.rstrip()}\n\n{toml_text(items, comments)}"


def without_measured(text: str) -> str:
    """Return a study's text with its ``[[measured]]`` tables turned into comments."""
    lines = []
    inside = False
    for line in text.split("\n"):
        starts = bool(_MEASURED.match(line))
        if starts and not inside:
            lines.append(f"# {NOT_COMPARABLE}")
        inside = starts or (inside and not _HEADER.match(line))
        plain = not line.strip() or line.lstrip().startswith("#")
        lines.append(line if plain or not inside else f"# {line}")
    return "\n".join(lines)
