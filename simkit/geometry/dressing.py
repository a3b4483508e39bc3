"""What metal and carrier do to the wires: wider static radius, series inductance, losses, ends.

Every wire model asks here, by the width of the strip at the place, so line and grid see the same
carrier.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np
from scipy.constants import mu_0

from simkit.crosssection.carrier_kappa import kappa
from simkit.crosssection.dielectrics import printed_layers
from simkit.crosssection.ends import EndCorrection, end_correction
from simkit.crosssection.section import CrossSection, single_strip
from simkit.geometry.chain_line import ChainLine
from simkit.geometry.conductor import crowding_per_m
from simkit.geometry.strips import equivalent_radius_m
from simkit.geometry.wires import FloatArray
from simkit.study.model import Antenna, Carrier, Metal

NODES_PER_OCTAVE = 2
"""For strips of changing width kappa is solved at fixed widths, so many an octave, and found in
between by a cubic through four of them; the same widths serve all cases of a sweep."""

CARRIER_ERROR = 0.0015
"""Standard error of mode frequencies that the carrier adds: the model of radius and inductance was
0.15 % off on the one lossless flush carrier for which there is a solution of the fields."""


@dataclass(frozen=True)
class Dressing:
    """Metal and carrier of one antenna, for strips between two widths (metres)."""

    metal: Metal
    carrier: Carrier | None
    narrowest_m: float
    widest_m: float

    def kappa(self, width_m: float) -> complex:
        """Lowering of the strip's potential by the carrier, times 2 pi eps0; 0 without one.

        Its imaginary part is negative for a plastic with losses.
        """
        if self.carrier is None:
            return 0j
        if self.widest_m < self.narrowest_m * (1 + 1e-6):
            return _kappa(self.metal, self.carrier, width_m)
        return _kappa_between(self.metal, self.carrier, width_m)

    def effective_width_m(self, width_m: float) -> float:
        """Width of the bare foil in air with the static radius of this strip on its carrier."""
        return float(4 * self.radius_m(width_m))

    def radius_m(self, width_m: float) -> float:
        """Static radius of a strip of a width on its carrier, metres."""
        radius = equivalent_radius_m(width_m, self.metal.thickness_m)
        return float(radius * np.exp(self.kappa(width_m).real))

    def wire_loads(self, width_m: FloatArray, part: FloatArray) -> tuple[FloatArray, ...]:
        """Series loads of wires.

        Parameters
        ----------
        width_m : (W,) float array
            Width of the strip each wire belongs to; 0 for metal drawn across a strip.
        part : (W,) float array
            Part of the strip's current that the wire carries, over 0.

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
        return factor / part, inductance / part, loss / part

    def with_tips(self, line: ChainLine) -> ChainLine:
        """The chain with what the carrier takes off its open ends, beyond a bare strip's share."""
        if self.carrier is None or line.closed:
            return line
        return replace(
            line,
            start_tip_m=0.0 if line.start else self._tip(float(line.width_after_m[0])).shortening_m,
            end_tip_m=0.0 if line.end else self._tip(float(line.width_before_m[-1])).shortening_m,
        )

    def _tip(self, width_m: float) -> EndCorrection:
        assert self.carrier is not None  # only asked for with a carrier
        return _end(self.metal, self.carrier, width_m)

    def error_and_doubts(self, lines: tuple[ChainLine, ...]) -> tuple[float, tuple[str, ...]]:
        """What the carrier adds to the relative error of mode frequencies, and its limits."""
        if self.carrier is None:
            return 0.0, ()
        of_ends, doubts = 0.0, []
        for line in lines:
            ends = [] if line.start or line.closed else [float(line.width_after_m[0])]
            ends += [] if line.end or line.closed else [float(line.width_before_m[-1])]
            for width in ends:
                correction = self._tip(width)
                of_ends += correction.error_m / max(line.length_m, width)
                doubts += [doubt for doubt in correction.doubts if doubt not in doubts]
        # Both ends err alike, by one table; the model along the strip errs on its own.
        error = float(np.hypot(CARRIER_ERROR, of_ends))
        return error, tuple(
            f"carrier: {doubt} is more than the correction of open ends covers, so mode "
            f"frequencies may be off by {2e2 * error:.1f} %"
            for doubt in doubts
        )


@lru_cache(maxsize=4096)
def _section(metal: Metal, carrier: Carrier, width_m: float) -> CrossSection:
    layers = printed_layers(
        carrier.permittivity,
        carrier.thickness_m,
        carrier.infill,
        skins_m=(carrier.skin_m, carrier.skin_m),
        rule=carrier.mixing,
    )
    sides = (carrier.overhang_m - carrier.offset_m, carrier.overhang_m + carrier.offset_m)
    depth = carrier.depth_m
    if carrier.side == "both":
        layers, depth = layers + layers[::-1], carrier.thickness_m
    return single_strip(width_m, layers, sides, depth_m=depth, metal_thickness_m=metal.thickness_m)


@lru_cache(maxsize=4096)
def _kappa(metal: Metal, carrier: Carrier, width_m: float) -> complex:
    return complex(kappa(_section(metal, carrier, width_m)))


def _kappa_between(metal: Metal, carrier: Carrier, width_m: float) -> complex:
    """Kappa at any width from the fixed widths around it (cubic Lagrange in the logarithm)."""
    at = NODES_PER_OCTAVE * np.log2(width_m * 1e3)
    nodes = int(np.floor(at)) + np.arange(-1, 3)
    widths = 1e-3 * 2.0 ** (nodes / NODES_PER_OCTAVE)
    values = np.array([_kappa(metal, carrier, float(width)) for width in widths])
    apart = nodes[:, None] - nodes[None]
    np.fill_diagonal(apart, 1)
    away = at - nodes
    weights = [np.prod(np.delete(away, k)) / np.prod(apart[k]) for k in range(len(nodes))]
    return complex(np.asarray(weights) @ values)


@lru_cache(maxsize=4096)
def _end(metal: Metal, carrier: Carrier, width_m: float) -> EndCorrection:
    return end_correction(_section(metal, carrier, width_m), carrier.end_overhang_m)


def section_of(antenna: Antenna) -> CrossSection:
    """Cross-section of the widest strip on its carrier; the antenna must have one."""
    assert antenna.carrier is not None  # told by the caller
    widest = max(width for strip in antenna.strips for width in strip.widths)
    return _section(antenna.metal, antenna.carrier, widest)


def dressing_of(antenna: Antenna) -> Dressing:
    """Metal and carrier of an antenna."""
    widths = [width for strip in antenna.strips for width in strip.widths]
    return Dressing(antenna.metal, antenna.carrier, min(widths), max(widths))
