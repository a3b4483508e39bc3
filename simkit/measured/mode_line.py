"""One mode of a comparison: what the simulation says of it and what the measurement does."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from simkit.response.labels import half_wave_label

NAN = float("nan")


@dataclass(frozen=True)
class ModeLine:
    """One mode, simulated and measured; NaN for what does not exist.

    Attributes
    ----------
    half_waves : int
    natural_hz, q : float
        Of the simulated natural mode.
    simulated_hz, simulated_return_loss_db, simulated_bandwidth_hz : float
        The dip the mode owns in the simulation; the band has at least 10 dB return loss.
    measured_hz, measured_return_loss_db, measured_bandwidth_hz : float
        The measured dip paired with it.
    simulated_ratio, measured_ratio : float
        Dip over that of the lowest mode which has both.
    on_plane : bool
        `half_waves` counts the metal together with its image in a ground plane.
    measured_natural_hz, measured_natural_sigma_hz, measured_q, measured_q_sigma : float
        The natural mode read from the sweep itself, with standard errors; NaN where the data do not
        support one.
    ambiguous : bool
        Another pairing is nearly as good.
    """

    half_waves: int
    natural_hz: float
    q: float
    simulated_hz: float = NAN
    simulated_return_loss_db: float = NAN
    simulated_bandwidth_hz: float = NAN
    measured_hz: float = NAN
    measured_return_loss_db: float = NAN
    measured_bandwidth_hz: float = NAN
    simulated_ratio: float = NAN
    measured_ratio: float = NAN
    on_plane: bool = False
    measured_natural_hz: float = NAN
    measured_natural_sigma_hz: float = NAN
    measured_q: float = NAN
    measured_q_sigma: float = NAN
    ambiguous: bool = False

    @property
    def label(self) -> str:
        """The mode's length: ``1/2 wave``, ``1 wave``, ``3/2 wave``; quarters on a plane."""
        return half_wave_label(self.half_waves, self.on_plane)

    @property
    def ratio(self) -> float:
        """Measured over simulated dip frequency."""
        return self.measured_hz / self.simulated_hz

    @property
    def is_paired(self) -> bool:
        """Both dips exist."""
        return bool(np.isfinite(self.ratio))

    def as_row(self) -> dict[str, Any]:
        """Plain values, SI; None for what does not exist."""
        numbers = {
            "natural_frequency_hz": self.natural_hz,
            "measured_natural_frequency_hz": self.measured_natural_hz,
            "measured_natural_standard_error_hz": self.measured_natural_sigma_hz,
            "q": self.q,
            "measured_q": self.measured_q,
            "measured_q_standard_error": self.measured_q_sigma,
            "simulated_dip_hz": self.simulated_hz,
            "measured_dip_hz": self.measured_hz,
            "measured_over_simulated": self.ratio,
            "simulated_return_loss_db": self.simulated_return_loss_db,
            "measured_return_loss_db": self.measured_return_loss_db,
            "simulated_bandwidth_hz": self.simulated_bandwidth_hz,
            "measured_bandwidth_hz": self.measured_bandwidth_hz,
            "simulated_ratio": self.simulated_ratio,
            "measured_ratio": self.measured_ratio,
        }
        known = {key: value if np.isfinite(value) else None for key, value in numbers.items()}
        number = self.half_waves if self.half_waves >= 0 else None
        return {"mode": self.label, "half_waves": number} | known | {"ambiguous": self.ambiguous}
