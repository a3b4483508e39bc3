"""What makes two cases the same: a hash of everything their numbers depend on."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Sequence
from dataclasses import asdict
from importlib.metadata import PackageNotFoundError, version
from typing import Any

import numpy as np
from numpy.typing import NDArray

from simkit.store.layout import SweptColumn, layout_hash
from simkit.study.feedline_text import feedline_text
from simkit.study.model import Antenna, Case

MODEL_VERSION = "7"
"""Raise it with every change that alters numbers: rules, engine settings, sweep, modes, patterns.

Cases solved under another model version are never mixed with new ones; they are solved anew.
"""


def engine_version() -> str:
    """Version of the installed field engine, "none" without one."""
    try:
        return version("PyNEC")
    except PackageNotFoundError:
        return "none"


def program_versions() -> dict[str, str]:
    """What must be the same wherever cases of one run are solved."""
    from simkit import __version__

    return {
        "simkit": __version__,
        "model": MODEL_VERSION,
        "engine": engine_version(),
        "store": layout_hash(),
    }


def canonical_json(value: Any) -> str:
    """JSON with sorted keys; floats as their shortest exact text, so equal text is equal value."""
    return json.dumps(value, sort_keys=True, separators=(",", ":"))


def sha256(text: str) -> str:
    """Hexadecimal hash of a text."""
    return hashlib.sha256(text.encode()).hexdigest()


def case_key(case: Case, study_part: str) -> str:
    """Hash of one case.

    Parameters
    ----------
    case : Case
    study_part : str
        What all cases of the study share: mesh plan, model and engine version.

    Returns
    -------
    str
        64 hexadecimal digits; swept values count through the antenna they resolve to.
    """
    inputs = case.refused if case.antenna is None else canonical_json(_inputs(case.antenna))
    return sha256(f"{inputs}\n{study_part}")


def _inputs(antenna: Antenna) -> dict[str, Any]:
    """All an antenna is made of; without a feed line or a cable nothing of one, as ever."""
    inputs = asdict(antenna)
    if antenna.cable is None:
        del inputs["cable"]
    del inputs["feedline"]
    if antenna.feedline:
        inputs["feedline"] = feedline_text(antenna.feedline)
    return inputs


def study_identity(
    keys: NDArray[np.bytes_], swept: Sequence[SweptColumn], shape: Sequence[int]
) -> str:
    """Hash of a whole run: equal if the store of one run can be continued by another."""
    digest = hashlib.sha256(keys.tobytes())
    for column in swept:
        digest.update(canonical_json([column.name, column.units]).encode())
        digest.update(np.asarray(column.values, dtype="<f8").tobytes())
    digest.update(canonical_json([list(shape), layout_hash()]).encode())
    return digest.hexdigest()
