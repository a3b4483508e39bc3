"""Mode charges along the path."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

from simkit.plot import plot_charge

ARM_M, GAP_M = 0.076, 0.002


@pytest.mark.parametrize("half_waves", [1, 2, 3])
def test_line_charge_of_a_sinusoid_in_nanocoulomb_per_metre(
    dataset: xr.Dataset, half_waves: int
) -> None:
    """The fixture's arms carry sin(n pi s/L), L twice an arm: q = (k/omega) cos, sign after T/4."""
    ax = plot_charge(dataset, 7, half_waves=[half_waves])
    (line,) = [one for one in ax.get_lines() if "wave" in str(one.get_label())]
    x, charge = np.asarray(line.get_xydata()).T
    k = half_waves * np.pi / (2 * ARM_M)
    omega = 2 * np.pi * float(dataset["mode_frequency"][7, half_waves - 1])
    along = np.where(x < 77, x, x - 2) / 1e3
    wanted = -k / omega * np.cos(k * along) * 1e9
    # The fixture's current stands still over the gap, which the two segments beside it feel.
    away = abs(x - 77) > 12
    # Segments of 5 mm: (kh)^2/3 at the tips; the pole's phase, 1/(2Q), takes half its square.
    bound = ((k * 5.1e-3) ** 2 / 3 + 0.01) * abs(wanted).max()
    np.testing.assert_allclose(charge[away], wanted[away], atol=bound)
    assert charge[0] < 0  # the first half wave of current is positive: it empties the first tip


def test_labels_and_limits(dataset: xr.Dataset) -> None:
    ax = plot_charge(dataset, 7)
    assert ax.get_ylabel() == "line charge for a largest current of 1 A (nC/m)"
    assert ax.get_xlabel() == "distance along the strip from the tip of 'west' (mm)"
    shown = np.concatenate([np.asarray(one.get_ydata(), float) for one in ax.get_lines()[1:]])
    low, high = ax.get_ylim()
    assert low < np.nanmin(shown)
    assert high > np.nanmax(shown)
    texts = [text.get_text().split(":")[0] for text in ax.get_legend().get_texts()]
    assert texts == ["1/2 wave", "1 wave", "3/2 wave"]


def test_refused_case_shows_its_reason(dataset: xr.Dataset) -> None:
    assert plot_charge(dataset, 10).texts[0].get_text().startswith("refused: ")
