"""The stored cases that come nearest to a measured sweep, over it."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from simkit.plot.fit import MEASURED
from simkit.plot.style import frequency_unit, legend_beside, mode_style, new_axes, put_title, tidy

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.axes import Axes

    from simkit.measured.measurement import Measurement
    from simkit.measured.nearest import NearCase


def plot_nearest(
    measurement: Measurement, cases: Sequence[NearCase], *, ax: Axes | None = None
) -> Axes:
    """Draw |reflection| of a measurement and of the cases nearest to it, the best one boldest.

    Parameters
    ----------
    measurement : Measurement
        Referred to the study's resistance.
    cases : sequence of NearCase
        From `simkit.measured.nearest_cases`.
    ax : matplotlib.axes.Axes, optional
        A new figure is made if left out.
    """
    from simkit.measured.wording import quantity_text

    ax = new_axes(ax, (10.5, 5.2))
    tidy(ax)
    unit = frequency_unit(measurement.frequency_hz)
    said = next((f"\nthe measured file says: {c[:80]}" for c in measurement.comments if c), "")
    put_title(ax, f"{measurement.path.name} and the stored cases nearest to it{said}")
    for rank, near in enumerate(cases):
        style = mode_style(rank + 1)
        values = ", ".join(
            quantity_text(name, value, near.units.get(name, "1"))
            for name, value in near.values.items()
        )
        ax.plot(
            near.frequency_hz * unit.factor,
            20 * np.log10(np.maximum(np.abs(near.reflection), 1e-4)),
            color=style.colour,
            linestyle=style.linestyle,
            linewidth=2.0 if rank == 0 else 1.1,
            zorder=3.5 if rank == 0 else 2.5,
            label=f"{rank + 1}: case {near.case}\n{values}",
        )
    ax.plot(
        measurement.frequency_hz * unit.factor,
        20 * np.log10(np.maximum(np.abs(measurement.reflection), 1e-4)),
        color=MEASURED,
        linewidth=2.6,
        alpha=0.75,
        zorder=3,
        label="measured",
    )
    ax.set_xlabel(unit.label("frequency"))
    ax.set_ylabel(f"|reflection| (dB re {measurement.reference_ohm:g} ohm)")
    legend_beside(ax)
    return ax
