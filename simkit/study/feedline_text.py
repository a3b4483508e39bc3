"""A resolved feed line as text and back: how results keep it beside the numbers it made."""

from __future__ import annotations

import json
from dataclasses import asdict
from typing import Any

from simkit.study.model import (
    CoaxialLine,
    DataSheetLine,
    ExtensionItem,
    FeedLineItem,
    LineItem,
    PartItem,
    StripLine,
    StubItem,
    TappedItem,
    TransformerItem,
)

_CLASSES: dict[str, Any] = {
    "line": LineItem,
    "stub": StubItem,
    "tapped-line": TappedItem,
    "part": PartItem,
    "transformer": TransformerItem,
    "port-extension": ExtensionItem,
    "strips": StripLine,
    "coaxial": CoaxialLine,
    "uniform": DataSheetLine,
}
_TAG = "is"


def feedline_text(items: tuple[FeedLineItem, ...]) -> str:
    """Return the items as JSON, from the antenna to the connector; empty without any."""
    return json.dumps([_tagged(item) for item in items]) if items else ""


def feedline_of_text(text: str) -> tuple[FeedLineItem, ...]:
    """Return the items that `feedline_text` wrote, to the last bit.

    Raises
    ------
    ValueError
        The text is something else.
    """
    if not text:
        return ()
    try:
        return tuple(_made(item) for item in json.loads(text))
    except (KeyError, TypeError, AttributeError, ValueError) as error:
        raise ValueError(f"this is no feed line: {text[:80]}") from error


def _tagged(value: Any) -> dict[str, Any]:
    tag = next(tag for tag, cls in _CLASSES.items() if isinstance(value, cls))
    plain = asdict(value)
    if hasattr(value, "line"):
        plain["line"] = _tagged(value.line)
    return {_TAG: tag, **plain}


def _made(plain: dict[str, Any]) -> Any:
    fields = dict(plain)
    cls = _CLASSES[fields.pop(_TAG)]
    if isinstance(fields.get("line"), dict):
        fields["line"] = _made(fields["line"])
    return cls(**fields)
