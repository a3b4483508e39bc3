"""Cases up to the connector: the stored network against scikit-rf's own, losses, and whole runs."""

from __future__ import annotations

import re
from dataclasses import replace

import numpy as np
import pytest
import skrf
from scipy.constants import c
from skrf.media import DistributedCircuit

from simkit.geometry import plan_mesh
from simkit.response.evaluate import chain_of_case, impedance_at
from simkit.response.features import find_dips, reflection
from simkit.runner import currents, run
from simkit.runner.identity import case_key
from simkit.runner.progress import QuietProgress
from simkit.runner.solve import solve_case
from simkit.store import open_results
from simkit.store import schema as schema_module
from simkit.store.schema import ADDED_LATER, Status
from simkit.study import load_study
from simkit.study.model import (
    Antenna,
    Case,
    CutFeed,
    DataSheetLine,
    ExtensionItem,
    FrequencyBand,
    LineItem,
    Metal,
    PartItem,
    Strip,
    StripLine,
    StubItem,
    TransformerItem,
)

OHM_75 = DataSheetLine(75.0, 0.66, 2.0, 0.9e9, 0.004)


@pytest.fixture(scope="module")
def gauge(make):
    """A gauge's strip, fed off its middle, of lossy metal."""
    return make.straight(150, 6, 65, metal=make.brass, band=make.band(0.5e9, 2.6e9, 211))


@pytest.fixture(scope="module")
def solve(gauge):
    """Arrays of the gauge behind a feed line; all share one set of currents."""
    plan = plan_mesh([gauge])

    def solve(*items, status=Status.SOLVED, antenna=gauge):
        result = solve_case(replace(antenna, feedline=items), plan)
        assert result.status is status, result.reason
        return result.arrays

    return solve


def media(frequency_hz, impedance_ohm, velocity_factor, db_per_m, at_hz, loss_tangent):
    """A cable from its data sheet: line constants written down apart from simkit's own."""
    omega, speed = 2 * np.pi * frequency_hz, velocity_factor * c
    neper_per_m = db_per_m * np.log(10) / 20 * np.sqrt(frequency_hz / at_hz)
    capacitance = 1 / (impedance_ohm * speed)
    return DistributedCircuit(
        skrf.Frequency.from_f(frequency_hz, unit="hz"),
        z0_port=50.0,
        C=capacitance,
        L=impedance_ohm / speed,
        R=2 * impedance_ohm * neper_per_m,
        G=omega * capacitance * loss_tangent,
    )


def at_band(arrays, gauge):
    band = gauge.frequency
    return np.linspace(band.start_hz, band.stop_hz, band.points), arrays["impedance"]


def of_modes(arrays, name):
    return arrays[name][np.isfinite(arrays["mode_frequency"])]


def test_the_stored_connector_is_scikit_rfs_own_cascade(gauge, solve):
    arrays = solve(
        LineItem("cable", OHM_75, 47e-3),
        StubItem("stub", OHM_75, 23e-3, "short", "shunt"),
        PartItem("coil", "inductor", 3.3e-9, "series", np.inf),
        PartItem("gap", "capacitor", 1.1e-12, "shunt", np.inf),
    )
    frequency_hz, impedance = at_band(arrays, gauge)
    cable = media(frequency_hz, 75.0, 0.66, 2.0, 0.9e9, 0.004)
    network = (
        cable.shunt_capacitor(1.1e-12)
        ** cable.inductor(3.3e-9)
        ** cable.shunt_delay_short(23e-3, "m")
        ** cable.line(47e-3, "m")
        ** cable.load(reflection(impedance, 50.0))
    )
    expected = network.s[:, 0, 0]
    found = reflection(arrays["impedance_at_connector"], 50.0)
    # the same formulas in another order: nothing but rounding lies between
    assert found == pytest.approx(expected, abs=1e-9)
    assert abs(found - reflection(impedance, 50.0)).max() > 0.5


def test_a_matched_line_only_turns_the_phase(solve):
    without, behind = solve(), solve(LineItem("cable", DataSheetLine(50.0, 0.7), 83e-3))
    at_feed = reflection(without["impedance"], 50.0)
    turned = reflection(behind["impedance_at_connector"], 50.0)
    assert abs(turned) == pytest.approx(abs(at_feed), abs=1e-12)
    assert abs(np.angle(turned / at_feed)).max() > 1
    # a flat minimum of a curve that is splined between samples 10 MHz apart, turned or not
    for name, off in (("dip_frequency", 1e-5), ("dip_return_loss", 1e-3), ("realised_gain", 1e-3)):
        assert behind[name] == pytest.approx(without[name], rel=off, nan_ok=True)
    assert np.isfinite(without["dip_frequency"][0])
    network = behind["network_efficiency"]
    assert network[np.isfinite(network)] == pytest.approx(1.0, abs=1e-12)


def test_what_belongs_to_the_feed_stays_there(solve):
    without, behind = solve(), solve(LineItem("cable", OHM_75, 60e-3))
    for name in without:
        if name.startswith(("conductance", "series_res", "parallel", "mode_", "gain", "peak")):
            assert np.array_equal(without[name], behind[name], equal_nan=True), name
    assert behind["dip_frequency"][0] != without["dip_frequency"][0]
    assert "impedance_at_connector" not in without


def test_a_quarter_wave_matches_the_resonance(solve):
    without = solve()
    at_hz = without["series_resonance_frequency"][0]
    resistance = without["series_resonance_resistance"][0]
    other = solve(
        LineItem("quarter", DataSheetLine(np.sqrt(50 * resistance)), c / at_hz / 4),
    )
    # at the resonance the match is exact; the dip may lie a part of its width beside it
    assert other["dip_frequency"][0] == pytest.approx(at_hz, rel=2e-3)
    assert other["dip_return_loss"][0] > 40
    assert without["dip_return_loss"][0] < 20
    assert other["mismatch_factor"][0] == pytest.approx(1.0, abs=1e-4)
    gain = other["peak_gain"][0]
    assert other["realised_gain"][0] == pytest.approx(gain, abs=1e-3)


def test_losses_and_gains_add_up(solve):
    pad = 1.5  # dB
    cable = LineItem("cable", DataSheetLine(50.0, 0.7, pad / 10, 1e9), 10.0)
    arrays = solve(cable)
    for name in ("network_efficiency", "mismatch_factor", "total_efficiency"):
        known = arrays[name][np.isfinite(arrays[name])]
        assert len(known) >= 2
        assert ((known > 0) & (known <= 1)).all(), name
    dip_hz, loss_db = arrays["dip_frequency"][0], arrays["dip_return_loss"][0]
    mismatch = 1 - 10 ** (-loss_db / 10)
    # ten metres turn the reflection by 60 rad between two frequencies of the study
    assert arrays["mismatch_factor"][0] == pytest.approx(mismatch, rel=1e-5)
    # of a matched cable: what arrives at the load and is reflected there passes it twice
    once = 10 ** (-pad * np.sqrt(dip_hz / 1e9) / 10)
    reflected = 10 ** (-loss_db / 10) / once**2
    passed = once * (1 - reflected)
    # the cable's attenuation makes its impedance a little complex: reflections of 3e-4
    assert arrays["network_efficiency"][0] == pytest.approx(passed / mismatch, rel=1e-3)
    total = arrays["efficiency"][0] * arrays["network_efficiency"][0] * mismatch
    assert arrays["total_efficiency"][0] == pytest.approx(total, rel=1e-5)
    realised = arrays["peak_gain"][0] + 10 * np.log10(total / arrays["efficiency"][0])
    assert arrays["realised_gain"][0] == pytest.approx(realised, abs=1e-4)


def test_without_a_feed_line_mismatch_alone_is_taken_off(solve):
    arrays = solve()
    dip = arrays["dip_return_loss"][0]
    assert arrays["network_efficiency"][0] == 1.0
    assert arrays["mismatch_factor"][0] == pytest.approx(1 - 10 ** (-dip / 10), rel=1e-6)
    driven = of_modes(arrays, "driven") == 1
    assert np.array_equal(np.isfinite(of_modes(arrays, "realised_gain")), driven)


def test_a_mode_without_a_dip_is_judged_at_its_conductance_peak(solve):
    arrays = solve(TransformerItem("balun", 1 / 40_000, 0.0, 50.0))
    assert not np.isfinite(arrays["dip_frequency"]).any()
    frequency_hz = np.linspace(0.5e9, 2.6e9, 211)
    seen = abs(reflection(arrays["impedance"] * 40_000, 50.0)) ** 2
    expected = 1 - np.interp(arrays["conductance_peak_frequency"][0], frequency_hz, seen)
    # between samples 10 MHz apart the curve is taken as straight here
    assert arrays["mismatch_factor"][0] == pytest.approx(expected, rel=5e-3)


def test_a_line_used_beyond_its_model_makes_the_case_doubtful(solve, gauge):
    wide = LineItem("pair", StripLine("two-strips", 30e-3, 20e-3), 30e-3)
    result = solve_case(replace(gauge, feedline=(wide,)), plan_mesh([gauge]))
    assert result.status is Status.DOUBTFUL
    assert "two strips 30 mm wide, 20 mm apart in air: above" in result.reason
    dips, peaks = result.arrays["dip_frequency"], result.arrays["conductance_peak_frequency"]
    highest = np.nanmax(np.where(np.isfinite(dips), dips, peaks)) / 1e6
    used = [float(text) for text in re.findall(r"used up to ([\d.]+) MHz", result.reason)]
    # Every limit names the mode seen highest, with four digits.
    assert used == pytest.approx([highest] * len(used), rel=5e-4)
    assert used


@pytest.mark.parametrize(
    ("high_hz", "status", "words"),
    [
        (1.5e9, Status.SOLVED, ""),
        (2.6e9, Status.SOLVED, "no mode is seen there, but two strips 15 mm wide"),
        (3.2e9, Status.DOUBTFUL, "two strips 15 mm wide"),
    ],
)
def test_a_line_is_doubted_only_where_a_mode_is_seen(make, high_hz, status, words):
    """17 mm across are an eighth of a wavelength at 2204 MHz; modes near 0.9, 1.85 and 2.83 GHz."""
    antenna = make.straight(150, 6, 75, band=make.band(0.5e9, high_hz, 136))
    pair = LineItem("pair", StripLine("two-strips", 15e-3, 2e-3), 30e-3)
    result = solve_case(replace(antenna, feedline=(pair,)), plan_mesh([antenna]))
    assert result.status is status
    assert result.reason.startswith(words)
    assert (f"above {c / 8 / 17e-3 / 1e6:.4g} MHz" in result.reason) == bool(words)


def test_a_feed_line_that_cannot_be_refuses_the_case(gauge):
    bad = LineItem("pair", StripLine("two-strips", 6e-3, 3e-3, conductivity_s_per_m=1e7), 30e-3)
    result = solve_case(replace(gauge, feedline=(bad,)), plan_mesh([gauge]))
    assert result.status is Status.REFUSED
    assert result.reason.startswith("thickness of metal with loss is 0 mm")
    assert result.arrays == {}


def test_the_engine_is_asked_once_for_all_feed_lines_of_an_antenna(make, monkeypatch):
    asked = []
    wires = currents.solve_wires
    monkeypatch.setattr(
        currents, "solve_wires", lambda *a, **k: (asked.append(1), wires(*a, **k))[1]
    )
    antenna = make.straight(143.21, 6, 65, band=make.band(0.6e9, 1.4e9, 41))
    plan = plan_mesh([antenna])
    found = [
        solve_case(replace(antenna, feedline=(ExtensionItem("e", delay),)), plan)
        for delay in (1e-10, 2e-10)
    ]
    assert len(asked) == found[0].solves == found[1].solves
    gamma = [reflection(result.arrays["impedance_at_connector"], 50.0) for result in found]
    turn = np.exp(-4j * np.pi * np.linspace(0.6e9, 1.4e9, 41) * 1e-10)
    assert gamma[1] == pytest.approx(gamma[0] * turn, abs=1e-12)


def test_a_case_without_a_feed_line_keeps_the_key_it_always_had():
    antenna = Antenna(
        (Strip("gauge", ((0.0, 0.0), (0.15, 0.0)), 0.006),),
        Metal("brass", 1.5e7, 0.15e-3),
        CutFeed("gauge", 0.05, 0.001),
        50.0,
        FrequencyBand(0.3e9, 3e9, 271),
    )
    key = case_key(Case(0, {}, antenna), "mesh and versions")
    # as computed before there were feed lines
    assert key == "9056368a08b1bf528038221a853fc30b1e64854a4e7967fa141b48922ee977a8"
    keys = {
        case_key(Case(0, {}, replace(antenna, feedline=(item,))), "mesh and versions")
        for item in (
            ExtensionItem("a", 1e-10),
            ExtensionItem("a", 2e-10),
            LineItem("a", OHM_75, 1e-10),
            LineItem("a", replace(OHM_75, loss_tangent=0.0), 1e-10),
        )
    }
    assert len(keys | {key}) == 5


# -- whole runs ------------------------------------------------------------------------------------

TEXT = """\
title = "Ford"
[[strip]]
name = "arm"
path = [["0 mm", "0 mm"], ["150 mm", "0 mm"]]
width = "6 mm"
[feed]
strip = "arm"
at = "65 mm"
[frequency]
start = "600 MHz"
stop = "1.4 GHz"
points = 81
"""

LINE = """
[[feedline]]
kind = "line"
name = "pair"
length = "40 mm"
line = "two-strips"
width = "6 mm"
separation = "2 mm"
[[feedline]]
kind = "stub"
like = "pair"
length = "18 mm"
"""


@pytest.fixture
def go(direct, tmp_path):
    """Run a study text into ``out`` in this process."""

    def go(text):
        path = tmp_path / "ford.toml"
        path.write_text(text, encoding="utf-8")
        study = load_study(path)
        summary = run(study, tmp_path / "out", workers=1, progress=QuietProgress())
        return summary, open_results(summary.results_dir).load()

    return go


def swept(*lengths_mm):
    listed = ", ".join(f'"{length} mm"' for length in lengths_mm)
    return f"{TEXT}{LINE}[sweep]\nfeedline.pair.length = [{listed}]\n"


def test_a_swept_feed_line_is_run_stored_and_resumed(go):
    summary, first = go(swept(40, 50))
    assert (summary.reused, summary.solved) == (0, 2)
    assert first.attrs["feedline"] == ["pair", "stub"]
    assert first["feedline.pair.length"].values.tolist() == [0.04, 0.05]
    assert np.array_equal(*first["impedance"].values)
    case = first.isel(case=1)
    frequency_hz = first["frequency"].values
    gamma = reflection(case["impedance_at_connector"].values, 50.0)
    dips = [dip.frequency_hz for dip in find_dips(frequency_hz, gamma)]
    assert float(case["dip_frequency"][0]) == pytest.approx(dips[0], rel=1e-12)
    assert [element.length_m for element in chain_of_case(case).elements] == [0.05, 0.018]
    # one more length: the others are taken over, each bit of them
    summary, second = go(swept(40, 45, 50))
    assert (summary.reused, summary.solved) == (2, 1)
    for name in first.data_vars:
        assert second[name].isel(case=[0, 2]).variable.equals(first[name].variable), name
    # another stub changes every case
    summary, _ = go(swept(40, 45, 50).replace("18 mm", "19 mm"))
    assert (summary.reused, summary.solved) == (0, 3)


def test_any_frequency_at_either_plane(go):
    _, dataset = go(TEXT + LINE)
    case = dataset.isel(case=0)
    frequency_hz = dataset["frequency"].values
    for plane, name in (("feed", "impedance"), ("connector", "impedance_at_connector")):
        # the same model at the same frequencies
        found = impedance_at(case, frequency_hz, plane)
        assert found == pytest.approx(case[name].values, rel=1e-9)
        again = impedance_at(case, frequency_hz[[7, 3, 7]], plane)  # in any order, repeated
        assert again == pytest.approx(found[[7, 3, 7]], rel=1e-9)


def test_without_a_feed_line_the_connector_is_the_feed(go):
    _, dataset = go(TEXT)
    assert dataset["impedance_at_connector"].equals(dataset["impedance"])
    assert "which is the feed" in dataset["impedance_at_connector"].attrs["long_name"]
    assert dataset.attrs["feedline"] == []
    case = dataset.isel(case=0)
    assert chain_of_case(case).elements == ()
    assert impedance_at(case, [0.9e9], "connector") == impedance_at(case, [0.9e9])


def test_results_of_an_earlier_layout_are_taken_over_and_completed(go, monkeypatch):
    _, fresh = go(TEXT)
    names = dict(schema_module.VARIABLES)
    with monkeypatch.context() as patched:
        for name in ADDED_LATER:
            patched.delitem(schema_module.VARIABLES, name)
        patched.setattr("simkit.runner.connector.Connector.arrays", lambda self, of_modes: {})
        patched.setattr("simkit.runner.solve.cable_arrays", lambda *arguments: {})
        summary, old = go(TEXT + "# another text\n")
    # They come back at the end, and their order counts in the hash of the layout.
    schema_module.VARIABLES.update({name: schema_module.VARIABLES.pop(name) for name in names})
    assert list(schema_module.VARIABLES) == list(names)
    assert dict(schema_module.VARIABLES) == names
    assert not ADDED_LATER & set(old.data_vars) - {"impedance_at_connector"}
    summary, again = go(TEXT)
    assert (summary.reused, summary.solved) == (1, 0)
    for name in names:
        if name not in ("seconds", "worker"):
            assert again[name].equals(fresh[name]), name
