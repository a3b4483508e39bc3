"""The matched creek gauge: what its studies promise holds in the model."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import simkit
from simkit.geometry import plan_mesh
from simkit.runner.solve import solve_case
from simkit.store.schema import Status
from simkit.study import load_study

STUDIES = Path(__file__).parents[2] / "studies"
LINK_HZ = (863e6, 870e6)


def worst_db(impedance_ohm) -> np.ndarray:
    """Smallest return loss over the last axis."""
    gamma = (impedance_ohm - 50) / (impedance_ohm + 50)
    return -20 * np.log10(np.abs(gamma).max(-1))


def test_the_match_at_the_connector():
    """In the model, without a store: 34.0 dB on the link, 19.0 dB where it was designed."""
    antenna = load_study(STUDIES / "creek_gauge_matched.toml").nominal()
    solved = solve_case(antenna, plan_mesh([antenna]))
    assert solved.status is Status.SOLVED
    band = antenna.frequency
    f = np.linspace(band.start_hz, band.stop_hz, band.points)
    found = [
        worst_db(solved.arrays["impedance_at_connector"][(f >= low) & (f <= high)])
        for low, high in (LINK_HZ, (845e6, 890e6))
    ]
    # 15 dB are promised; the README's numbers to their last digit, a coarser mesh being 0.2 dB off.
    assert found == pytest.approx([34.0, 19.0], abs=0.5)
    assert solved.arrays["network_efficiency"][0] == pytest.approx(0.995, abs=5e-4)


@pytest.mark.long
def test_two_per_cent_in_every_dimension_leave_fifteen_decibels(tmp_path):
    study = load_study(STUDIES / "creek_gauge_matched_spread.toml")
    nominal = load_study(STUDIES / "creek_gauge_matched.toml").values
    for swept in study.swept:
        assert max(abs(np.array(swept.values) / nominal[swept.name] - 1)) <= 0.02 + 1e-9
    assert {swept.name for swept in study.swept} == set(nominal)
    simkit.run(study, results=tmp_path, workers=2)
    builds = simkit.open_results(tmp_path / "creek_gauge_matched_spread")
    link = builds["impedance_at_connector"].sel(frequency=slice(*LINK_HZ))
    worst = worst_db(link.transpose("case", "frequency").values)
    assert len(worst) == 40
    assert min(worst) > 18
