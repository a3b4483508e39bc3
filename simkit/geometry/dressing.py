"""What the metal and its carrier do to the wires: wider static radius, series inductance, losses.

Every wire model asks here, by the width of the strip at the place, so line and grid see the same
carrier.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.constants import mu_0

from simkit.geometry.conductor import crowding_per_m
from simkit.geometry.wires import FloatArray
from simkit.study.model import Antenna, Metal


@dataclass(frozen=True)
class Dressing:
    """Metal and carrier of one antenna."""

    metal: Metal

    def kappa(self, width_m: float) -> complex:
        """Lowering of the strip's potential by the carrier, times 2 pi eps0; 0 without one."""
        del width_m
        return 0j

    def effective_width_m(self, width_m: float) -> float:
        """Width of the bare strip with the static radius of this one on its carrier."""
        return float(width_m * np.exp(self.kappa(width_m).real))

    def wire_loads(self, width_m: FloatArray, share: FloatArray) -> tuple[FloatArray, ...]:
        """Series loads of wires.

        Parameters
        ----------
        width_m : (W,) float array
            Width of the strip each wire belongs to; 0 for metal drawn across a strip.
        share : (W,) float array
            How many wires carry the strip's current side by side.

        Returns
        -------
        conductor_factor_per_m, inductance_h_per_m, loss_inductance_h_per_m : (W,) float arrays
            Resistance per metre over the surface resistance of one face; series inductance that
            takes back what the wider radius takes away; its imaginary part, the plastic's loss.
        """
        factor, inductance, loss = (np.zeros(len(width_m)) for _ in range(3))
        for width in np.unique(width_m[width_m > 0]):
            here = width_m == width
            kappa = self.kappa(float(width))
            if self.metal.conductivity_s_per_m is not None:
                factor[here] = crowding_per_m(float(width), self.metal.thickness_m)
            inductance[here] = mu_0 / (2 * np.pi) * kappa.real
            loss[here] = -mu_0 / (2 * np.pi) * kappa.imag
        return factor * share, inductance * share, loss * share


def dressing_of(antenna: Antenna) -> Dressing:
    """Metal and carrier of an antenna."""
    return Dressing(antenna.metal)
