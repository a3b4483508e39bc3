"""What a trim aims at: a mode's dip, a band, a return loss; each as a number that is to be zero."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np

from simkit.measured.measurement import FloatArray
from simkit.measured.trim_model import TrimModel, band_text, decibels

DIP_STEP = 0.001
"""Relative distance of a dip from its target that counts like `MATCH_STEP`: one per mille."""

MATCH_STEP = 0.01
"""Difference in |reflection| that counts like `DIP_STEP`."""


@dataclass(frozen=True)
class Target:
    """One thing to reach.

    Attributes
    ----------
    kind : {"dip", "band", "match"}
        The dip of a mode at a frequency; a band with the same |reflection| at both its edges, which
        makes the worst of it as small as a dip allows; a return loss, in the dip or over a band.
    half_waves : int
        Of the mode that is aimed with.
    band_hz : (float, float)
        Equal for a dip; NaN for the return loss in a dip.
    return_loss_db : float
        Wanted at least; NaN for the other kinds.
    """

    kind: Literal["dip", "band", "match"]
    half_waves: int
    band_hz: tuple[float, float] = (float("nan"), float("nan"))
    return_loss_db: float = float("nan")

    @property
    def middle_hz(self) -> float:
        """Where the dip is looked for."""
        return float(np.sqrt(self.band_hz[0] * self.band_hz[1]))

    @property
    def over_band(self) -> bool:
        """There is a band, not just one frequency."""
        return self.band_hz[1] > self.band_hz[0]

    def off(
        self, model: TrimModel, changes: Mapping[str, float], x: FloatArray | None = None
    ) -> float:
        """How far the target is missed after some changes, in the steps above; NaN without a dip.

        Positive: the dip is too high, the band's lower edge is worse matched than the upper, the
        match falls short.
        """
        if self.kind == "band":
            edges = model.reflection_size(np.array(self.band_hz), changes, x)
            return float(edges[0] - edges[1]) / MATCH_STEP
        if self.kind == "match":
            return (self.size(model, changes, x) - 10 ** (-self.return_loss_db / 20)) / MATCH_STEP
        return float(np.log(model.dip_hz(self.half_waves, changes, x) / self.middle_hz)) / DIP_STEP

    def size(
        self, model: TrimModel, changes: Mapping[str, float], x: FloatArray | None = None
    ) -> float:
        """Largest |reflection| in the band, or that of the dip without one."""
        if self.over_band:
            return model.worst(self.band_hz, changes, x)
        dip = model.dip(self.half_waves, changes, x)
        return 10 ** (-dip.return_loss_db / 20) if dip else float("nan")

    def shown(
        self, model: TrimModel, changes: Mapping[str, float], x: FloatArray | None = None
    ) -> float:
        """What a user reads of it: the dip's frequency (Hz), or the least return loss (dB)."""
        if self.kind == "dip":
            return model.dip_hz(self.half_waves, changes, x)
        return decibels(self.size(model, changes, x))

    def tracked(
        self, model: TrimModel, changes: Mapping[str, float], x: FloatArray | None = None
    ) -> float:
        """What goes evenly with a dimension: the dip's frequency (Hz), or a return loss (dB).

        The match over a band has a maximum instead of a slope, so its dip stands for it.
        """
        if self.kind == "band":
            return model.dip_hz(self.half_waves, changes, x)
        return self.shown(model, changes, x)

    def text(self, model: TrimModel) -> str:
        """Return ``1/2 wave dip at 868.0 MHz`` or the like."""
        label = model.label(self.half_waves)
        if self.kind == "dip":
            return f"{label} dip at {band_text(self.band_hz)}"
        if self.kind == "band":
            return f"best match of the {label} mode over {band_text(self.band_hz)}"
        where = f"over {band_text(self.band_hz)}" if self.over_band else f"in the {label} dip"
        return f"return loss of {self.return_loss_db:g} dB {where}"
