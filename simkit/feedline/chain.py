"""The chain from the antenna's terminals to the connector: impedance, power and loss on the way."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike

from simkit.feedline.checks import ComplexArray, FloatArray, frequencies, positive
from simkit.feedline.checks import quantity as q
from simkit.feedline.elements import Element
from simkit.feedline.oneport import OnePort, impedance_of
from simkit.feedline.waves import terminated
from simkit.response.features import return_loss_db

if TYPE_CHECKING:
    import skrf


NOTHING = 1e-12
"""Part of the available power that is rounding error."""


@dataclass(frozen=True, eq=False)
class ChainResult:
    """A load seen through a chain: P planes, E = P - 1 elements, F frequencies.

    Attributes
    ----------
    frequency_hz : (F,) float
    planes : tuple of str
        "terminals", then the element behind which the plane lies, up to the connector.
    reflection : (P, F) complex
        Towards the antenna at each plane.
    passed : (P, F) float
        Power through each plane over the power available at the connector from a source of the
        reference resistance.
    reference_ohm : float
    doubts : tuple of str
    """

    frequency_hz: FloatArray
    planes: tuple[str, ...]
    reflection: ComplexArray
    passed: FloatArray
    reference_ohm: float
    doubts: tuple[str, ...] = ()

    @property
    def impedance_ohm(self) -> ComplexArray:
        """Impedance towards the antenna at each plane, (P, F); infinite for an open circuit."""
        return impedance_of(self.reflection, self.reference_ohm)

    @property
    def connector(self) -> OnePort:
        """What the connector shows."""
        return OnePort(self.frequency_hz, self.reflection[-1], self.reference_ohm)

    @property
    def return_loss_db(self) -> FloatArray:
        """At the connector, (F,); infinite at an exact match."""
        return return_loss_db(self.reflection[-1])

    @property
    def lost(self) -> FloatArray:
        """Power lost in each element over the available power, (E, F)."""
        return np.asarray(self.passed[1:] - self.passed[:-1])

    @property
    def efficiency(self) -> FloatArray:
        """Power into the antenna over power into the connector, (F,).

        0 where the antenna takes nothing, as a purely reactive one does.
        """
        into = self.passed[-1]
        some = into > NOTHING
        return np.asarray(np.where(some, self.passed[0] / np.where(some, into, 1), 0.0))

    @property
    def mismatch_factor(self) -> FloatArray:
        """Power into the connector over the available power, (F,): 1 - |reflection|^2."""
        return np.asarray(self.passed[-1])

    @property
    def realised_factor(self) -> FloatArray:
        """Power into the antenna over the available power, (F,).

        Times the antenna's gain (IEEE Std 145: without mismatch) it is the realised gain at the
        connector.
        """
        return np.asarray(self.passed[0])

    def as_rows(self, frequency_hz: float) -> list[dict[str, float | str]]:
        """Return one row a plane at the sample nearest to a frequency."""
        place = int(np.argmin(abs(self.frequency_hz - frequency_hz)))
        rows: list[dict[str, float | str]] = []
        impedance = self.impedance_ohm[:, place]
        loss = np.concatenate([[0.0], self.lost[:, place]])
        for number, plane in enumerate(self.planes):
            rows.append(
                {
                    "plane": plane,
                    "resistance_ohm": float(impedance[number].real),
                    "reactance_ohm": float(impedance[number].imag),
                    "return_loss_db": float(return_loss_db(self.reflection[number, place])),
                    "lost": float(loss[number]),
                }
            )
        return rows

    def as_text(self, frequency_hz: float) -> str:
        """Return a table of planes and losses at the sample nearest to a frequency."""
        place = int(np.argmin(abs(self.frequency_hz - frequency_hz)))
        lines = [
            f"at {q(float(self.frequency_hz[place]), 'Hz')}, "
            f"return loss against {self.reference_ohm:g} ohm:"
        ]
        for row in self.as_rows(frequency_hz):
            resistance, reactance = float(row["resistance_ohm"]), float(row["reactance_ohm"])
            impedance = "open" if np.isinf(resistance) else f"{resistance:.2f} {reactance:+.2f}j"
            lines.append(
                f"  {impedance:>20} ohm {float(row['return_loss_db']):6.1f} dB "
                f"{float(row['lost']):7.2%} lost   {row['plane']}"
            )
        lines.append(
            f"  efficiency {self.efficiency[place]:.2%}, mismatch {self.mismatch_factor[place]:.2%}"
            f", both {self.realised_factor[place]:.2%} of the available power"
        )
        return "\n".join(lines + [f"  doubtful: {doubt}" for doubt in self.doubts])


@dataclass(frozen=True)
class Chain:
    """Elements from the antenna's terminals to the connector.

    Attributes
    ----------
    elements : tuple of Element
        The first is nearest to the antenna.
    reference_ohm : float
        Of the connector.
    """

    elements: tuple[Element, ...] = ()
    reference_ohm: float = 50.0

    def __post_init__(self) -> None:
        positive("reference resistance of the connector", self.reference_ohm, "ohm")

    def terminate(self, load: OnePort) -> ChainResult:
        """Put a load on the antenna's side.

        Parameters
        ----------
        load : OnePort
            Its frequencies are those of the result.

        Returns
        -------
        ChainResult

        Notes
        -----
        Every number stays finite for open, shorted and purely reactive loads and for stubs that
        short the line, because only reflections are handled.
        """
        f, reference = load.frequency_hz, self.reference_ohm
        reflection = [load.referred_to(reference).reflection]
        inward = []
        for element in self.elements:
            matrix = element.scattering(f, reference)
            seen, wave = terminated(matrix, reflection[-1])
            reflection.append(seen)
            inward.append(wave)
        incident = [np.ones(len(f), dtype=np.complex128)]
        for wave in reversed(inward):
            incident.append(incident[-1] * wave)
        waves = np.array(incident[::-1])
        curves = np.array(reflection)
        doubts = [text for element in self.elements for text in element.doubts(f)]
        return ChainResult(
            f,
            ("terminals", *(element.about for element in self.elements)),
            curves,
            np.abs(waves) ** 2 * (1 - np.abs(curves) ** 2),
            reference,
            tuple(dict.fromkeys(doubts)),
        )

    def reflection(self, load: OnePort) -> ComplexArray:
        """Return the reflection at the connector alone, (F,) complex."""
        seen = load.referred_to(self.reference_ohm).reflection
        for element in self.elements:
            seen, _ = terminated(element.scattering(load.frequency_hz, self.reference_ohm), seen)
        return seen

    def delay_s(self, frequency_hz: float) -> float:
        """Return the delay of all elements one by one at a frequency, one way and without sign."""
        step = 1e-6
        f, total = np.array([1 - step, 1 + step]) * frequency_hz, 0.0
        for element in (part for whole in self.elements for part in whole.parts):
            first, second = element.scattering(f, self.reference_ohm)[:, 1, 0]
            if first and second:
                total += abs(float(np.angle(second / first))) / (2 * np.pi * (f[1] - f[0]))
        return total

    def path(
        self, load: OnePort, frequency_hz: float, points: int = 60
    ) -> list[tuple[Element, ComplexArray]]:
        """Return the way through the Smith chart at one frequency, simple element by element.

        Returns
        -------
        list of (Element, (points,) complex)
            Reflection against the reference as the element grows from nothing to all of it.
        """
        seen = load.at([frequency_hz]).referred_to(self.reference_ohm).reflection
        found = []
        for element in (part for whole in self.elements for part in whole.parts):
            steps = [
                terminated(element.scattering([frequency_hz], self.reference_ohm, part), seen)[0]
                for part in np.linspace(0, 1, points)
            ]
            found.append((element, np.concatenate(steps)))
            seen = steps[-1]
        return found

    def network(self, frequency_hz: ArrayLike) -> skrf.Network:
        """Return the whole chain as a two-port of scikit-rf, port 1 at the connector.

        The cascade is that library's. Real reference resistance throughout, so that its different
        definitions of waves are one; write it with ``write_touchstone``.
        """
        import skrf

        f = frequencies(frequency_hz)
        band = skrf.Frequency.from_f(f, unit="hz")
        through = np.tile(np.array([[0, 1], [1, 0]], dtype=np.complex128), (len(f), 1, 1))
        matrices = [e.scattering(f, self.reference_ohm) for e in reversed(self.elements)]
        networks = [
            skrf.Network(frequency=band, s=matrix, z0=self.reference_ohm, s_def="power")
            for matrix in (matrices or [through])
        ]
        return skrf.network.cascade_list(networks)
