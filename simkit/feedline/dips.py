"""Dips of a load behind a chain, found however fast a long line turns the reflection."""

from __future__ import annotations

import numpy as np

from simkit.feedline.chain import Chain
from simkit.feedline.oneport import OnePort
from simkit.response.features import Dip, find_dips

LARGEST_STEP_RAD = 0.3
"""A reflection may turn by so much from one frequency to the next: a spline through it then errs by
2e-5 at most."""

MOST_POINTS = 50_000


def connector_dips(chain: Chain, load: OnePort) -> list[Dip]:
    """Find the minima of |reflection| at the connector.

    Parameters
    ----------
    chain : Chain
    load : OnePort

    Returns
    -------
    list of Dip
        Lowest frequency first. They are looked for on a finer grid than the load's where a long
        line turns the reflection too fast for a smooth curve through the load's frequencies.
    """
    f = load.frequency_hz
    if len(f) < 2 or not chain.elements:
        return find_dips(f, load.referred_to(chain.reference_ohm).reflection)
    turn_rad = 4 * np.pi * (f[-1] - f[0]) * chain.delay_s(float(f[len(f) // 2]))
    count = min(int(np.ceil(turn_rad / LARGEST_STEP_RAD)) + 1, MOST_POINTS)
    fine = load if count <= len(f) else load.at(np.linspace(f[0], f[-1], count))
    return find_dips(fine.frequency_hz, chain.reflection(fine))
