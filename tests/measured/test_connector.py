"""Measured sweeps taken at the connector: the feed line in comparison, fit and trim."""

from __future__ import annotations

import itertools
from dataclasses import replace

import numpy as np
import pytest
import skrf
from scipy.constants import c
from skrf.media import DefinedGammaZ0

from simkit.feedline import OnePort
from simkit.measured import compare
from simkit.measured.connector import FeedLineModel, at_connector, owners, values_of_line_alone
from simkit.measured.fit import fit
from simkit.measured.measurement import Measurement
from simkit.measured.nearest import nearest_cases
from simkit.measured.pairing import ModelledDip
from simkit.measured.simulator import Engine, Surrogate
from simkit.measured.stored import surrogate_of_results
from simkit.measured.touchstone import read_touchstone
from simkit.measured.trim import trim_fitted
from simkit.measured.variation import Known, Variation
from simkit.response.features import find_dips, reflection
from simkit.runner import run
from simkit.runner.progress import QuietProgress
from simkit.store import open_results
from simkit.study import load_study

from . import synthetic

LINE = """
[[feedline]]
kind = "line"
name = "pair"
length = "45 mm"
line = "uniform"
impedance = "110 ohm"
velocity_factor = 0.8
[[feedline]]
kind = "stub"
length = "30 mm"
line = "uniform"
impedance = "90 ohm"
[[feedline]]
kind = "line"
name = "cable"
length = "400 mm"
line = "uniform"
impedance = "50 ohm"
velocity_factor = 0.7
"""

LENGTH = {"feedline.pair.length": (30e-3, 60e-3)}
KNOWN_ARM = [Known("arm", 74.4e-3, 0.1e-3)]


def line(frequency_hz, impedance_ohm, velocity_factor):
    """A line without loss of an independent library."""
    return DefinedGammaZ0(
        skrf.Frequency.from_f(frequency_hz, unit="hz"),
        z0_port=50.0,
        z0=impedance_ohm,
        gamma=2j * np.pi * frequency_hz / (velocity_factor * c),
    )


def behind(frequency_hz, impedance_ohm, pair_m=45e-3, stub_m=30e-3, cable_m=0.4):
    """Reflection behind the feed line above, by scikit-rf's own elements."""
    pair, stub = line(frequency_hz, 110.0, 0.8), line(frequency_hz, 90.0, 1.0)
    cable = line(frequency_hz, 50.0, 0.7)
    load = pair.load(reflection(impedance_ohm, 50.0))
    load.renormalize(50.0)
    network = (
        cable.line(cable_m, "m")
        ** stub.shunt_delay_short(stub_m, "m")
        ** pair.line(pair_m, "m", z0=110.0)
        ** load
    )
    return network.s[:, 0, 0]


def measured(arm=74.4e-3, eps=3.0, noise=1e-3, points=401, **lengths_m):
    frequency_hz = np.linspace(*synthetic.BAND, points)
    gamma = behind(frequency_hz, synthetic.impedance(frequency_hz, arm, eps), **lengths_m)
    rng = np.random.default_rng(4)
    gamma = gamma + noise * (rng.standard_normal(points) + 1j * rng.standard_normal(points))
    return Measurement(synthetic.Path("gauge.s1p"), frequency_hz, gamma, 50.0)


@pytest.fixture(scope="module")
def study(tmp_path_factory):
    path = tmp_path_factory.mktemp("study") / "gauge.toml"
    path.write_text(synthetic.STUDY + LINE)
    return load_study(path)


@pytest.fixture(scope="module")
def model(study):
    """The formula's surrogate, which knows nothing but the feed, behind the study's feed line."""
    bare = synthetic.surrogate()
    nodes = []
    for (arm, eps), node in zip(
        itertools.product(*(axis.nodes for axis in bare.axes)), bare.nodes, strict=True
    ):
        f = np.linspace(*synthetic.BAND, 801)
        peaks = {}
        for number, (dip_hz, *_) in node.modes.items():
            place = int(np.argmin(abs(f - dip_hz)))
            peaks[number] = (dip_hz, 1 / (1 / synthetic.impedance(f, arm, eps)[place]).real)
        nodes.append(replace(node, peaks=peaks))
    variation = Variation(study)
    names = ["feedline.pair.length", "feedline.stub.length"]
    band = (synthetic.BAND[0] / 1.1, synthetic.BAND[1] * 1.1)
    return Surrogate(bare.axes, nodes, band, FeedLineModel(variation, {}), names)


def at(model, **values):
    return {
        "arm": 74.4e-3,
        "eps": 3.0,
        "feedline.pair.length": 45e-3,
        "feedline.stub.length": 30e-3,
    } | values


def test_the_model_at_the_connector_is_scikit_rfs_cascade(model):
    f = np.linspace(0.6e9, 3.0e9, 300)
    values = at(model, **{"feedline.pair.length": 52e-3})
    expected = behind(f, synthetic.impedance(f, 74.4e-3, 3.0), pair_m=52e-3)
    # the interpolation of the antenna is 1.6e-3 off at most; the line may turn that up
    assert np.abs(model.reflection(values, f) - expected).max() < 4e-3


def test_dips_are_those_of_the_connector_and_belong_to_modes(model):
    f = np.linspace(*model.band_hz, 4001)
    curve = behind(f, synthetic.impedance(f, 74.4e-3, 3.0))
    found = model.modes(at(model))
    assert found.half_waves == (1, 3)
    places = [dip.frequency_hz for dip in find_dips(f, curve)]
    for mode in range(2):
        assert np.isfinite(found.dip_hz[mode])
        off = min(abs(place / found.dip_hz[mode] - 1) for place in places)
        assert off < 1e-3  # of the interpolated antenna
    feed = model.feed_modes(at(model))
    assert abs(found.dip_hz[0] / feed.dip_hz[0] - 1) > 0.01
    assert np.array_equal(found.natural_hz, feed.natural_hz)


def test_a_length_of_the_feed_line_is_fitted(study, model):
    data = measured(pair_m=51e-3)
    result = fit(study, [data], LENGTH, known=KNOWN_ARM, also={"eps": (2.9, 3.1)}, surrogate=model)
    value = result.values[0]
    assert value.name == "feedline.pair.length"
    assert value.low < 51e-3 < value.high
    # an error of 10 ps of the analyser's delay looks like 2.4 mm of this line
    assert value.value == pytest.approx(51e-3, abs=1.5e-3)
    assert result.rms_after < 0.02 < result.rms_before
    # the line's own two nanoseconds are no missing port extension
    assert not any("the phase turns like behind" in note for note in result.notes)


@pytest.mark.parametrize("to", ["magnitude", "features"])
def test_other_measures_find_it_too(study, model, to):
    # without noise: the dips alone are four numbers for an antenna and a line
    data = measured(stub_m=33e-3, noise=1e-4)
    free = {"feedline.stub.length": (25e-3, 38e-3)}
    known = [*KNOWN_ARM, Known("eps", 3.0, 0.02)]
    result = fit(study, [data], free, known=known, surrogate=model, to=to)
    value = result.values[0]
    assert value.low < 33e-3 < value.high
    assert value.value == pytest.approx(33e-3, abs=1.5e-3)


def test_antenna_and_line_are_fitted_together(study, model):
    data = measured(eps=2.5, stub_m=33e-3)
    free = {"eps": (2.1, 3.3), "feedline.stub.length": (25e-3, 38e-3)}
    result = fit(study, [data], free, known=KNOWN_ARM, surrogate=model)
    found = result.fitted()
    assert found["eps"] == pytest.approx(2.5, rel=0.05)
    assert found["feedline.stub.length"] == pytest.approx(33e-3, abs=1e-3)
    assert "feedline.stub.length: 3" in result.as_text()
    text = result.study_text()
    assert 'length = "33' in text
    assert "fitted, was 30 mm" in text


def test_a_delay_that_is_left_is_called_one_of_the_connector(study, model):
    data = measured()
    turn = np.exp(-4j * np.pi * data.frequency_hz * 90e-12)
    late = replace(data, reflection=data.reflection * turn)
    known = [*KNOWN_ARM, Known("eps", 3.0, 0.05)]
    text = fit(study, [late], {}, known=known, surrogate=model).as_text()
    assert "the reference plane misses the connector by +9" in text


def test_a_dip_is_trimmed_by_the_feed_line(study, model):
    data = measured()
    known = [*KNOWN_ARM, Known("eps", 3.0, 0.05)]
    result = fit(study, [data], {}, known=known, also=LENGTH, surrogate=model)
    present = model.modes(at(model)).dip_hz[0]
    target = present * 1.01
    cut = trim_fitted(result, 1, target, "feedline.pair.length", (30e-3, 60e-3))
    assert abs(cut.change) > 1e-3
    f = np.linspace(0.7 * target, 1.3 * target, 2001)
    moved = behind(f, synthetic.impedance(f, 74.4e-3, 3.0), pair_m=45e-3 + cut.change)
    places = np.array([dip.frequency_hz for dip in find_dips(f, moved)])
    # half of the 0.5 % a trim is wanted to keep
    assert abs(places / target - 1).min() < 2.5e-3
    assert cut.of_feedline
    text = cut.as_text()
    assert "plain scaling" not in text
    assert "change `feedline.pair.length` by" in text
    assert "metal" not in text


def test_scale_is_of_the_antenna_alone(model):
    f = np.linspace(0.8e9, 2.6e9, 50)
    scaled = model.reflection(at(model, scale=1.02), f)
    load = OnePort(f, model.at_feed(at(model), f * 1.02))
    assert scaled == pytest.approx(model.feedline.chain({}).reflection(load), abs=1e-12)


def test_a_build_says_how_its_line_was_cut(study, model):
    data = measured(cable_m=0.45)
    known = [*KNOWN_ARM, Known("eps", 3.0, 0.02)]
    right = fit(
        study, [data], LENGTH, known=known, builds=[{"feedline.cable.length": 0.45}],
        surrogate=model,
    )  # fmt: skip
    assert right.values[0].value == pytest.approx(45e-3, abs=1.5e-3)
    assert right.rms_after < 0.02


def test_names_of_the_line_alone(tmp_path):
    path = tmp_path / "gauge.toml"
    path.write_text(synthetic.STUDY + LINE.replace('"30 mm"', '"half"'))
    bounds = {
        "feedline.pair.length": (0.03, 0.05),
        "feedline.cable.velocity_factor": (0.6, 0.8),
        "width": (5e-3, 7e-3),
        "half": (0.03, 0.04),
        "arm": (0.07, 0.08),
    }
    variation = Variation(load_study(path))
    # `half` is used by the stub and by no strip; `width` by the strips
    assert values_of_line_alone(variation, {}, bounds) == (
        "feedline.pair.length",
        "feedline.cable.velocity_factor",
        "half",
    )
    path.write_text(synthetic.STUDY)
    assert values_of_line_alone(Variation(load_study(path)), {}, {"arm": (0.07, 0.08)}) == ()


def test_a_dip_belongs_to_the_mode_that_takes_the_power():
    natural, q = np.array([0.9e9, 1.8e9, 2.7e9]), np.array([5.0, 6.0, 7.0])
    peak_ohm = np.array([70.0, np.nan, 100.0])
    conductance = [1 / 75, 1 / 75, 1 / 110, 1 / 5]
    places = [0.93e9, 1.82e9, 2.75e9, 0.93e9]
    # a mode that is not driven owns nothing, nor does one with too small a share
    assert owners(places, conductance, natural, q, peak_ohm) == [0, -1, 2, -1]
    # three half widths are the limit, 0.27 GHz here
    assert owners([1.16e9, 1.18e9], [2e-3, 2e-3], natural, q, peak_ohm) == [0, -1]


def test_dips_that_no_mode_owns_take_none_away(model):
    """A stub that resonates between the modes makes a dip of its own."""
    f = np.linspace(*model.band_hz, 4001)
    values = at(model, **{"feedline.stub.length": 38e-3})
    modes = model.modes(values)
    assert len(modes.loose) >= 1
    curve = behind(f, synthetic.impedance(f, 74.4e-3, 3.0), stub_m=38e-3)
    dips = find_dips(f, curve)
    heard = [ModelledDip(dip.frequency_hz, 10 ** (-dip.return_loss_db / 20)) for dip in dips]
    band = (float(f[0]), float(f[-1]))
    found = modes.pair(heard, band, band)
    assert len(found.others) == len(modes.loose)
    for i, j in found.others:
        assert modes.loose[i].frequency_hz == pytest.approx(heard[j].frequency_hz, rel=2e-3)
    for i, j in found.pairs:
        assert modes.dip_hz[i] == pytest.approx(heard[j].frequency_hz, rel=2e-3)
    doubtful = modes.doubtful(found, heard, band, band)
    assert all(i < len(modes.half_waves) for i, _ in doubtful)


def test_impedance_at_the_connector(study):
    f = np.linspace(0.5e9, 3e9, 101)
    impedance = synthetic.impedance(f, 74e-3, 2.7)
    antenna = study.nominal()
    found = reflection(at_connector(antenna, f, impedance), 50.0)
    assert found == pytest.approx(behind(f, impedance), abs=1e-9)
    assert at_connector(replace(antenna, feedline=()), f, impedance) is impedance


# -- with the engine -------------------------------------------------------------------------------

SWEEP = """
[sweep]
arm = ["72 mm", "74 mm", "76 mm"]
feedline.pair.length = ["40 mm", "45 mm"]
"""


@pytest.fixture(scope="module")
def solved(tmp_path_factory):
    """A study with a feed line, run over arms and lengths of line."""
    folder = tmp_path_factory.mktemp("solved")
    path = folder / "gauge.toml"
    bare = synthetic.STUDY.replace("points = 401", "points = 281")
    carrier = bare[bare.index("[carrier]") : bare.index("[feed]")]
    bare = bare.replace(carrier, "").replace('half = "arm/2"', "").replace("eps = 2.7", "")
    path.write_text(bare + LINE + SWEEP)
    study = load_study(path)
    summary = run(study, folder / "out", workers=1, progress=QuietProgress())
    return study, open_results(summary.results_dir)


@pytest.fixture(scope="module")
def build(solved, tmp_path_factory):
    """A file written by scikit-rf: the case of 74 mm, every mode 1 % higher, a line of 42 mm."""
    _, dataset = solved
    case = dataset.isel(case=2)
    assert float(case["arm"]) == pytest.approx(74e-3)
    f = dataset["frequency"].values
    inside = f * 1.01 <= f[-1]
    gamma = behind(f[inside] * 1.01, case["impedance"].values[inside], pair_m=42e-3)
    band = skrf.Frequency.from_f(f[inside] * 1.01, unit="hz")
    path = tmp_path_factory.mktemp("build") / "gauge_build.s1p"
    network = skrf.Network(frequency=band, s=gamma, z0=50.0)
    network.write_touchstone(str(path.with_suffix("")))
    return read_touchstone(path)


def test_compare_is_at_the_connector(solved, tmp_path):
    _, dataset = solved
    case = dataset.isel(case=3)
    f = dataset["frequency"].values
    network = skrf.Network(
        frequency=skrf.Frequency.from_f(f, unit="hz"),
        s=behind(f, case["impedance"].values),
        z0=50.0,
    )
    network.write_touchstone(str(tmp_path / "same"))
    found = compare(dataset, read_touchstone(tmp_path / "same.s1p"))
    assert found.case == 3
    paired = [line for line in found.lines if line.is_paired]
    assert len(paired) >= 1
    for mode in paired:
        # the measured dip is smoothed before it is found
        assert mode.ratio == pytest.approx(1.0, abs=1e-3)
    assert np.abs(found.simulated_reflection - found.measurement.reflection).max() < 1e-8
    taken = {mode.measured_hz for mode in paired}
    loose = [dip for dip in found.unpaired if dip.frequency_hz not in taken]
    assert len(loose) >= 1
    said = [note for note in found.notes if "is the feed line's: the model has it at" in note]
    assert len(said) == len(loose)
    assert found.agreement().grade in ("excellent", "very good")
    nearest = nearest_cases(dataset, found.measurement)
    assert nearest[0].case == 3
    assert nearest[0].curve < 1e-6


def test_a_stored_sweep_is_interpolated_at_the_feed(solved):
    study, dataset = solved
    bounds = {"arm": (72e-3, 76e-3), "feedline.stub.length": (25e-3, 35e-3)}
    model = surrogate_of_results(dataset, bounds, Variation(study))
    assert [axis.name for axis in model.axes] == ["arm"]
    assert set(model.line_names) == {"feedline.pair.length", "feedline.stub.length"}
    f = np.linspace(*model.band_hz, 200)
    for case, pair_m in ((4, 40e-3), (1, 45e-3)):
        values = {
            "arm": float(dataset["arm"][case]),
            "feedline.pair.length": pair_m,
            "feedline.stub.length": 30e-3,
        }
        stored = reflection(dataset["impedance"][case].values, 50.0)
        own = np.interp(f, dataset["frequency"].values, stored.real) + 1j * np.interp(
            f, dataset["frequency"].values, stored.imag
        )
        # straight lines between 10 MHz samples
        assert np.abs(model.at_feed(values, f) - own).max() < 5e-3
        at_connector = reflection(dataset["impedance_at_connector"][case].values, 50.0)
        inside = slice(20, -40)
        f_own = dataset["frequency"].values[inside]
        assert np.abs(model.reflection(values, f_own) - at_connector[inside]).max() < 2e-3


def test_fitting_a_length_of_line_asks_the_engine_for_one_antenna(solved, build, monkeypatch):
    study, _ = solved
    asked, solve = [], Engine._solve
    monkeypatch.setattr(Engine, "_solve", lambda *a: (asked.append(a[1]), solve(*a))[1])
    free = {"feedline.pair.length": (35e-3, 55e-3), "scale": (0.97, 1.03)}
    result = fit(study, [build], free)
    assert len(set(asked)) == len(asked) == 1
    found = result.fitted()
    assert found["feedline.pair.length"] == pytest.approx(42e-3, abs=1.5e-3)
    assert found["scale"] == pytest.approx(1 / 1.01, abs=4e-3)
    assert result.surrogate_error < 1e-3


def test_fitting_by_the_stored_sweep(solved, build):
    study, dataset = solved
    free = {"feedline.pair.length": (35e-3, 55e-3), "arm": (72e-3, 76e-3)}
    model = surrogate_of_results(dataset, free, Variation(study))
    result = fit(study, [build], free, surrogate=model)
    found = result.fitted()
    assert found["feedline.pair.length"] == pytest.approx(42e-3, abs=1.5e-3)
    # 1 % higher in frequency is about 1 % shorter
    assert found["arm"] == pytest.approx(74e-3 / 1.01, abs=0.3e-3)
