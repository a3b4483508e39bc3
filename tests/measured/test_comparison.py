"""A measured sweep beside hand-made results whose answers are known."""

import json
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from simkit.errors import MeasurementError, StoreError
from simkit.measured import Measurement, compare
from simkit.response.features import find_dips, reflection
from simkit.store.schema import Status

BAND = np.linspace(0.3e9, 3.0e9, 541)
ARMS = (0.070, 0.076, 0.082)
WIDTHS = (0.004, 0.008)
SLOTS = 5


def branch(frequency, resistance, inductance, resonance):
    return resistance + 2j * np.pi * inductance * (frequency - resonance**2 / frequency)


def impedance(frequency, first, third, second=None):
    """A dipole of two modes; `second` adds the even mode, narrow and little excited."""
    admittance = (
        1 / branch(frequency, 70.0, 60e-9, first)
        + 1 / branch(frequency, 100.0, 45e-9, third)
        + 2j * np.pi * frequency * 0.1e-12
    )
    if second is not None:
        admittance = admittance + 1 / branch(frequency, 900.0, 1e-6, second)
    return 1 / admittance


def results(arms=ARMS, widths=WIDTHS):
    """Three modes per case; the middle one, even, owns no dip."""
    values = [(arm, width) for arm in arms for width in widths]
    count = len(values)
    table = {
        name: np.full((count, SLOTS), np.nan)
        for name in (
            "mode_frequency",
            "mode_q",
            "dip_frequency",
            "dip_return_loss",
            "dip_bandwidth",
        )
    }
    half_waves = np.full((count, SLOTS), -1, dtype="i2")
    curves = np.empty((count, len(BAND)), complex)
    for row, (arm, width) in enumerate(values):
        first, third = 0.9e9 * 0.076 / arm, (2.7e9 - 5e9 * (width - 0.008)) * 0.076 / arm
        curves[row] = impedance(BAND, first, third)
        low, high = find_dips(BAND, reflection(curves[row], 50.0))
        table["mode_frequency"][row, :3] = first / 1.03, 2 * first / 1.02, third / 1.02
        table["mode_q"][row, :3] = 4.7, 6.5, 7.9
        half_waves[row, :3] = 1, 2, 3
        for slot, dip in ((0, low), (2, high)):
            table["dip_frequency"][row, slot] = dip.frequency_hz
            table["dip_return_loss"][row, slot] = dip.return_loss_db
            table["dip_bandwidth"][row, slot] = dip.bandwidth_hz
    return xr.Dataset(
        {name: (("case", "mode"), data) for name, data in table.items()}
        | {
            "mode_half_waves": (("case", "mode"), half_waves),
            "impedance": (("case", "frequency"), curves),
            "status": ("case", np.full(count, int(Status.SOLVED), dtype="i1")),
            "reason": ("case", np.full(count, "", dtype=object)),
        },
        coords={
            "case": np.arange(count),
            "frequency": BAND,
            "arm": ("case", [arm for arm, _ in values], {"units": "m", "display_unit": "mm"}),
            "width": ("case", [width for _, width in values], {"units": "m"}),
        },
        attrs={
            "title": "Creek gauge link",
            "reference_ohm": 50.0,
            "swept": {"arm": "arm", "width": "width"},
        },
    )


def bench(first, third, second=None, points=541, stop_hz=3.0e9, noise=1e-3):
    frequency = np.linspace(0.3e9, stop_hz, points)
    gamma = reflection(impedance(frequency, first, third, second), 50.0)
    rng = np.random.default_rng(3)
    gamma = gamma + noise * (rng.standard_normal(points) + 1j * rng.standard_normal(points))
    return Measurement(Path("build_1.s1p"), frequency, gamma, 50.0)


def test_one_line_per_mode_with_ratios():
    found = compare(results(), bench(0.9e9 * 0.98, 2.7e9 * 0.99), case=3)
    assert [line.label for line in found.lines] == ["1/2 wave", "1 wave", "3/2 wave"]
    low, even, high = found.lines
    # A thousandth of noise moves the broad dips by up to a thousandth.
    assert low.ratio == pytest.approx(0.98, abs=2e-3)
    assert high.ratio == pytest.approx(0.99, abs=2e-3)
    assert not even.is_paired
    assert np.isnan([even.simulated_hz, even.measured_hz]).all()
    assert (low.simulated_ratio, low.measured_ratio) == (1.0, 1.0)
    assert high.simulated_ratio == high.simulated_hz / low.simulated_hz
    assert high.measured_ratio == pytest.approx(high.simulated_ratio * 0.99 / 0.98, rel=3e-3)
    assert low.q == 4.7
    assert low.measured_return_loss_db == pytest.approx(low.simulated_return_loss_db, abs=0.3)
    assert found.unpaired == ()
    assert found.values == {"arm": 0.076, "width": 0.008}


def test_text_shows_case_modes_dashes_and_conclusion():
    text = compare(results(), bench(0.9e9 * 0.98, 2.7e9 * 0.98), case=3).as_text()
    lines = text.split("\n")
    assert lines[0] == "build_1.s1p beside case 3 (arm 76 mm, width 8 mm)"
    pair = "simul. meas."
    assert lines[3].split() == f"mode {pair} {pair} {pair} m./s. {pair} {pair}".split()
    assert lines[5].split()[:3] == ["1/2", "wave", "873.8"]
    assert lines[5].split()[4] == "4.7"
    assert lines[6].split()[-7:] == ["-"] * 7
    assert len({len(line) for line in lines[4:8]}) == 1
    assert "measured/simulated 0.980" in text
    assert "they move alike, as they do with a wrong length" in text
    unlike = compare(results(), bench(0.9e9 * 0.98, 2.7e9), case=3).as_text()
    assert "they move unlike" in unlike


def pole_of(resistance, inductance, resonance):
    """Zero of R + jwL + 1/jwC: natural frequency and Q of a series circuit."""
    decay = resistance / (4 * np.pi * inductance)
    frequency = np.sqrt(resonance**2 - decay**2)
    return frequency, frequency / (2 * decay)


def test_q_is_read_from_the_sweep_where_the_data_support_it():
    found = compare(results(), bench(0.9e9 * 0.98, 2.7e9 * 0.98), case=3)
    low, even, high = found.lines
    for line, circuit in ((low, (70.0, 60e-9, 0.9e9 * 0.98)), (high, (100.0, 45e-9, 2.7e9 * 0.98))):
        frequency, q = pole_of(*circuit)
        # Noise of a thousandth; the capacitance across the feed changes no pole of the admittance.
        assert line.measured_natural_hz == pytest.approx(frequency, rel=5e-3)
        assert line.measured_q == pytest.approx(q, rel=0.03)
        assert abs(line.measured_q - q) < 3 * line.measured_q_sigma
        row = line.as_row()
        assert row["measured_q"] == line.measured_q
        assert row["measured_q_standard_error"] == line.measured_q_sigma > 0
    assert np.isnan(even.measured_q)
    assert even.as_row()["measured_q"] is None
    assert f"{low.measured_q:.1f} +-" in found.as_text()


def test_a_noisy_sweep_supports_no_q():
    found = compare(results(), bench(0.9e9, 2.7e9, noise=0.12), case=3)
    assert all(np.isnan(line.measured_q) for line in found.lines if not line.is_paired)
    assert np.isnan(found.lines[2].measured_q)


def test_the_reference_plane_is_judged_by_the_simulated_phase():
    good = bench(0.9e9 * 0.98, 2.7e9 * 0.98)
    turn = np.exp(-4j * np.pi * good.frequency_hz * 150e-12)
    behind = Measurement(good.path, good.frequency_hz, good.reflection * turn, 50.0)
    found = compare(results(), behind, case=3)
    assert found.natural.model.delay_s == pytest.approx(150e-12, abs=6e-12)
    assert any("ps one way (45 mm of air) behind" in note for note in found.notes)
    # With the delay taken off the modes are read as without it.
    straight = compare(results(), good, case=3)
    assert not any("of air)" in note for note in straight.notes)
    assert found.lines[0].measured_q == pytest.approx(straight.lines[0].measured_q, rel=0.03)
    ahead = Measurement(good.path, good.frequency_hz, good.reflection / turn, 50.0)
    assert any("ahead of" in note for note in compare(results(), ahead, case=3).notes)


def test_behind_a_feed_line_no_natural_modes_are_read():
    data = results()
    data["impedance_at_connector"] = data["impedance"]
    data.attrs["feedline"] = True
    found = compare(data, bench(0.9e9, 2.7e9), case=3)
    assert found.natural is None
    assert np.isnan(found.lines[0].measured_q)


def test_an_ambiguous_pair_is_marked_in_the_table_and_in_the_rows():
    data = results()
    # The even mode now shows, and lies beside the third: one measured dip may be of either.
    data["dip_frequency"][3, 1] = 2.60e9
    data["mode_frequency"][3, 1] = 2.55e9
    data["dip_return_loss"][3, 1] = float(data["dip_return_loss"][3, 2])
    found = compare(data, bench(0.9e9, 2.66e9), case=3)
    marked = [line for line in found.lines if line.ambiguous]
    assert len(marked) == 1
    assert f"{marked[0].label} ?" in found.as_text()
    assert sum(row["ambiguous"] for row in found.as_rows()) == 1
    assert any("ambiguous: the dip at" in note for note in found.notes)


def test_without_a_dip_no_case_is_said_to_fit_best():
    flat = bench(0.9e9, 2.7e9)
    flat = Measurement(flat.path, flat.frequency_hz, 0.9 + 0 * flat.reflection, 50.0)
    found = compare(results(), flat)
    assert any("no measured dip tells the 6 cases in question apart" in n for n in found.notes)
    assert "no measured dip could be paired" in found.as_text()


def test_rows_are_plain_and_keep_unpaired_dips():
    measurement = bench(0.9e9, 2.7e9, second=1.35e9)
    found = compare(results(), measurement, case=3)
    (lost,) = found.unpaired
    assert lost.frequency_hz == pytest.approx(1.35e9, rel=0.01)
    rows = found.as_rows()
    assert json.loads(json.dumps(rows, allow_nan=False)) == rows
    assert [row["mode"] for row in rows] == ["1/2 wave", "1 wave", "3/2 wave", "unpaired"]
    assert rows[1]["measured_dip_hz"] is None
    assert rows[3]["measured_dip_hz"] == lost.frequency_hz
    assert rows[3]["half_waves"] is None
    assert {tuple(row) for row in rows} == {tuple(rows[0])}
    assert "unpaired: measured dip at 134" in found.as_text()


def test_an_even_mode_of_the_build_is_recognised_without_a_modelled_dip():
    found = compare(results(), bench(0.9e9 * 0.97, 2.7e9 * 0.97, second=1.8e9 * 0.97), case=3)
    even = found.lines[1]
    assert even.measured_hz == pytest.approx(1.8e9 * 0.97, rel=0.01)
    assert np.isnan(even.ratio)
    assert even.measured_ratio == pytest.approx(2.0, rel=0.01)
    assert any("1 wave mode is measured but not excited" in note for note in found.notes)


def test_the_case_that_fits_best_is_taken_and_said():
    # 82 mm and 4 mm wide: the last but one case.
    found = compare(results(), bench(0.9e9 * 0.076 / 0.082, 2.72e9 * 0.076 / 0.082))
    assert found.case == 4
    assert "of 6 cases in question this one's dips fit the measured ones best" in found.notes


def test_the_build_chooses_its_case():
    measurement = bench(0.9e9, 2.7e9)
    exact = compare(results(), measurement, build={"arm": 0.082 * (1 + 1e-9), "width": 0.004})
    assert exact.case == 4
    assert exact.notes == ()
    near = compare(results(), measurement, build={"arm": 0.0745, "width": 0.008, "tape": 1.0})
    assert near.case == 3
    assert near.notes == (
        "the build's tape is not swept in this study and does not choose the case",
        "no case has the build's values; the nearest differs by +2.01% in arm",
    )


def test_a_build_that_leaves_a_swept_value_open_takes_the_best_of_the_rest():
    # Cut narrow, so the third mode is 20 MHz up; arms of 82 mm would fit worse than those of 76 mm.
    found = compare(results(), bench(0.9e9, 2.72e9), build={"arm": 0.076})
    assert found.case == 2
    assert found.notes == ("of 2 cases in question this one's dips fit the measured ones best",)
    wide = compare(results(), bench(0.9e9, 2.70e9), build={"arm": 0.076})
    assert wide.case == 3


def test_unsolved_cases_are_refused_or_passed_over():
    dataset = results()
    dataset["status"][3] = int(Status.REFUSED)
    dataset["reason"][3] = "the strip crosses itself"
    dataset["status"][1] = int(Status.DOUBTFUL)
    measurement = bench(0.9e9, 2.7e9)
    with pytest.raises(
        StoreError, match=r"case 3 has no solution .* refused, the strip crosses itse"
    ):
        compare(dataset, measurement, case=3)
    with pytest.raises(StoreError, match="case 3 has no solution"):
        compare(dataset, measurement, build={"arm": 0.076, "width": 0.008})
    with pytest.raises(
        StoreError, match="case 17 is not in these results: they hold the cases 0 to"
    ):
        compare(dataset, measurement, case=17)
    assert compare(dataset, measurement).case != 3
    near = compare(dataset, measurement, build={"arm": 0.0761, "width": 0.008})
    assert near.case == 5
    assert ", doubtful" in compare(dataset, measurement, case=1).as_text()
    dataset["status"][:] = int(Status.TIMED_OUT)
    with pytest.raises(StoreError, match="no case of these results is solved"):
        compare(dataset, measurement)


def test_another_reference_is_converted_with_a_note():
    measurement = bench(0.9e9, 2.7e9).renormalised(75.0)
    measurement = Measurement(
        measurement.path, measurement.frequency_hz, measurement.reflection, 75.0
    )
    found = compare(results(), measurement, case=3)
    plain = compare(results(), bench(0.9e9, 2.7e9), case=3)
    assert found.measurement.reference_ohm == 50.0
    assert found.lines[0].measured_hz == pytest.approx(plain.lines[0].measured_hz, rel=1e-3)
    assert "converted to the 50 ohm of the study" in found.as_text()


def test_a_measurement_elsewhere_is_refused_and_a_short_one_is_not():
    dataset = results()
    frequency = np.linspace(4e9, 6e9, 101)
    far = Measurement(Path("far.s1p"), frequency, np.full(101, 0.5 + 0j), 50.0)
    with pytest.raises(
        MeasurementError, match=r"far.s1p: measured from 4000 to 6000 MHz, simulated"
    ):
        compare(dataset, far)
    short = compare(dataset, bench(0.9e9, 2.7e9, points=301, stop_hz=1.5e9), case=3)
    assert short.lines[0].is_paired
    assert not short.lines[2].is_paired


def test_no_dip_at_all_is_said():
    flat = Measurement(Path("open.s1p"), BAND, np.full(len(BAND), 0.97 + 0j), 50.0)
    text = compare(results(), flat, case=3).as_text()
    assert "no measured dip could be paired" in text
    assert "no dip stands out of the measured curve" in text


def test_one_case_without_a_case_dimension():
    found = compare(results().isel(case=3), bench(0.9e9, 2.7e9))
    assert found.case == 3
    assert found.values == {"arm": 0.076, "width": 0.008}
