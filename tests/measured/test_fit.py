"""Fits and trims on a response that is a formula, so that the truth is known."""

import re
from dataclasses import replace

import numpy as np
import pytest

from simkit.errors import MeasurementError, StoreError
from simkit.measured import fit_files
from simkit.measured.bench_errors import ErrorSizes, with_capacitance
from simkit.measured.fit import _confounding, fit
from simkit.measured.fit_problem import correlation_length, referred
from simkit.measured.simulator import Axis, Surrogate, chebyshev
from simkit.measured.stored import surrogate_of_results
from simkit.measured.targets import Target
from simkit.measured.trim import trim_fitted
from simkit.measured.trim_pair import trim_pair
from simkit.measured.trim_words import factor_lines
from simkit.measured.variation import Known, Variation
from simkit.study import load_study

from . import synthetic
from .test_comparison import bench as stored_bench
from .test_comparison import results as stored_results

FREE_EPS = {"eps": (2.1, 3.3)}
BOTH = {"arm": (72e-3, 76e-3), "eps": (2.1, 3.3)}


@pytest.fixture(scope="module")
def study(tmp_path_factory):
    path = tmp_path_factory.mktemp("study") / "gauge.toml"
    path.write_text(synthetic.STUDY)
    return load_study(path)


@pytest.fixture(scope="module")
def model():
    return synthetic.surrogate()


@pytest.fixture(scope="module")
def known_length(study, model):
    data = synthetic.measured(74.4e-3, 3.0, directivity=0.012 + 0.005j)
    return fit(study, [data], FREE_EPS, known=[Known("arm", 74.4e-3, 0.1e-3)], surrogate=model)


def test_interpolation_is_as_good_as_a_solution(model):
    f = np.linspace(*model.band_hz, 300)
    exact = synthetic.node(73.1e-3, 2.41).reflect(f)
    found = model.reflection({"arm": 73.1e-3, "eps": 2.41}, f)
    # A tenth of the usual directivity: never what limits a fit.
    assert np.abs(found - exact).max() < 1.6e-3


def test_scale_moves_everything_by_one_factor(model):
    f = np.linspace(0.8e9, 2.6e9, 50)
    here = {"arm": 74e-3, "eps": 2.7}
    scaled = model.reflection({**here, "scale": 1.02}, f)
    assert scaled == pytest.approx(model.reflection(here, f * 1.02), abs=1e-9)
    dips = model.modes({**here, "scale": 1.02}).dip_hz
    assert dips * 1.02 == pytest.approx(model.modes(here).dip_hz, rel=1e-12)


@pytest.mark.parametrize("to", ["complex", "magnitude", "features"])
def test_permittivity_is_found_with_the_length_known(study, model, to):
    data = synthetic.measured(74.4e-3, 3.0)
    result = fit(
        study, [data], FREE_EPS, known=[Known("arm", 74.4e-3, 0.1e-3)], surrogate=model, to=to
    )
    value = next(v for v in result.values if v.name == "eps")
    # Noise of 1e-3 alone: far within the interval, which is made for worse analysers.
    assert value.value == pytest.approx(3.0, rel=0.03)
    assert value.low < 3.0 < value.high
    assert dict(result.curves[0].pairs) == {1: 0, 3: 1}


def test_the_interval_holds_the_model_error(study, model):
    data = synthetic.measured(74.4e-3, 3.0, noise=1e-5)
    known = [Known("arm", 74.4e-3, 0.001e-3)]
    # A good analyser, whose own errors leave a tenth of what the model's do.
    good = ErrorSizes(directivity=1e-3, source_match=1e-3)
    value = fit(study, [data], FREE_EPS, known=known, surrogate=model, sizes=good).values[0]
    # 0.2 % of each of two modes over sensitivities of 0.07 and 0.09.
    assert value.sigma / value.value > 0.002 / np.sqrt(2) / 0.09
    small = replace(good, model=1e-6, mode=1e-6, capacitance_f=1e-16, level=1e-5)
    sure = fit(study, [data], FREE_EPS, known=known, surrogate=model, sizes=small).values[0]
    assert sure.sigma < 0.5 * value.sigma


@pytest.mark.parametrize("delay_s", [0.37e-9, 0.62e-9])
def test_a_leak_behind_some_cable_is_no_permittivity(study, model, delay_s):
    """-36 dB at any phase; as noise from point to point it took 2 % of permittivity with it."""
    turn = np.exp(-4j * np.pi * np.linspace(*synthetic.BAND, 401) * delay_s)
    errors = []
    for phase in (1, 1j, -1, -1j):
        data = synthetic.measured(74.4e-3, 3.0, directivity=0.0158 * phase * turn)
        known = [Known("arm", 74.4e-3, 0.1e-3)]
        found = fit(study, [data], FREE_EPS, known=known, surrogate=model).values[0]
        errors.append(found.value / 3.0 - 1)
    # Measured 1.1 and 0.9 %.
    assert np.sqrt(np.mean(np.square(errors))) < 0.014


def test_length_and_permittivity_together_are_called_confounded(study, model):
    data = synthetic.measured(74.4e-3, 3.0)
    result = fit(study, [data], BOTH, surrogate=model)
    (pair,) = result.confounded
    assert {pair.first, pair.second} == {"arm", "eps"}
    assert pair.correlation < -0.9
    # The product is right although neither value is.
    truth = 74.4e-3 * 3.0**pair.exponent
    assert pair.product == pytest.approx(truth, rel=4 * pair.relative_sigma)
    # To know either leaves sqrt(1 - r^2) of the other's interval: 7 times narrower at -0.99.
    assert pair.times_narrower == pytest.approx(1 / np.sqrt(1 - pair.correlation**2))
    alone = [1.96 * pair.alone_sigma[0] / 74.35e-3, 1.96 * pair.alone_sigma[1] / 3.03]
    held = [Known("arm", 74.4e-3, 1e-6)], [Known("eps", 3.0, 1e-6)]
    for k, (known, name) in enumerate(zip(held, ("eps", "arm"), strict=True)):
        values = fit(study, [data], BOTH, known=known, surrogate=model).values
        sigma = next(v.sigma for v in values if v.name == name)
        assert pair.alone_sigma[1 - k] / sigma == pytest.approx(pair.times_narrower, rel=0.1)
    text = result.as_text()
    parted = f"arm and eps cannot be told apart by these data (correlation {pair.correlation:.3f})"
    assert parted in text
    assert f"they determine arm * eps^0.08, within {1.96 * pair.relative_sigma:.2%}" in text
    said = re.search(r"arm alone within ([\d.]+)%, eps alone within ([\d.]+)%", text)
    assert [float(x) / 100 for x in said.groups()] == pytest.approx(alone, rel=0.02)
    narrower = (
        f"were one known, the other's interval would be {pair.times_narrower:.1f} times narrower"
    )
    assert narrower in text


def test_a_milder_confounding_is_told_too_and_three_values_together(study, model):
    """A free scale besides hides half of what ties length and permittivity: they keep -0.82."""
    data = synthetic.measured(74.4e-3, 3.0, noise=1e-6)
    free = BOTH | {"scale": (0.97, 1.03)}
    known = [Known("scale", 1.0, 0.03)]
    result = fit(study, [data], free, known=known, surrogate=model)
    (pair,) = result.confounded
    assert -0.9 < pair.correlation < -0.75
    text = result.as_text()
    assert "arm and eps can hardly be told apart by these data (correlation -0.8" in text
    said = f"{pair.times_narrower:.1f} times narrower: measure one and say so with --known"
    assert said in text
    assert "scale cannot be told apart from arm and eps together" in text
    # With the scale known the other two are as bad as without it; what is known of it stays in.
    known = [Known("scale", 1.0, 0.002)]
    (pair,) = fit(study, [data], free, known=known, surrogate=model).confounded
    assert pair.correlation < -0.95


def test_values_that_are_not_positive_are_confounded_without_a_product():
    """Two shifts, of which the second does half of what the first does."""
    trade = np.array([[1.0, -2.0], [-2.0, 4.0]]) * 1e-6 + np.diag([1e-9, 1e-9])
    found = _confounding(("arm", "offset"), np.array([74e-3, -1e-3]), trade, -0.9996)
    assert np.isnan(found.product)
    assert found.trade == pytest.approx(-2.0, rel=1e-3)
    turned = _confounding(("eps", "arm"), np.array([3.0, 74e-3]), np.diag([9e-2, 1e-8]), -0.9)
    assert (turned.first, turned.second) == ("arm", "eps")


def test_values_known_well_enough_are_not_called_confounded(study, model):
    data = [synthetic.measured(74.4e-3, 3.0)]
    result = fit(study, data, FREE_EPS, also={"arm": (72e-3, 76e-3)}, surrogate=model)
    assert result.confounded == ()
    assert "told apart" not in result.as_text()


def test_delay_of_the_reference_plane_is_told(study, model):
    data = synthetic.measured(74.4e-3, 3.0, delay_s=70e-12)
    result = fit(study, [data], FREE_EPS, known=[Known("arm", 74.4e-3, 0.1e-3)], surrogate=model)
    assert result.curves[0].errors.delay_s == pytest.approx(70e-12, abs=5e-12)
    assert "set the port extension" in result.as_text()


def test_a_value_at_its_bound_is_reported(study, model):
    data = synthetic.measured(74.4e-3, 3.0)
    result = fit(study, [data], {"eps": (2.1, 2.6)}, surrogate=model)
    assert result.values[0].at_bound
    assert "ran to its bound 2.6" in result.as_text()


def test_several_builds_share_one_permittivity(study, model):
    data = [synthetic.measured(arm, 3.0, seed=k) for k, arm in enumerate((73e-3, 75.5e-3))]
    builds = [{"arm": 73e-3}, {"arm": 75.5e-3}]
    result = fit(
        study, data, FREE_EPS, builds=builds, also={"arm": (72e-3, 76e-3)}, surrogate=model
    )
    assert len(result.curves) == 2
    assert result.values[0].value == pytest.approx(3.0, rel=0.03)


def test_the_fitted_study_holds_the_values(study, known_length, tmp_path):
    path = tmp_path / "fitted.toml"
    path.write_text(known_length.study_text())
    again = load_study(path)
    fitted = known_length.fitted()
    assert again.values["eps"] == pytest.approx(fitted["eps"], rel=1e-5)
    assert again.values["arm"] == pytest.approx(fitted["arm"], rel=1e-5)
    assert again.values["half"] == pytest.approx(fitted["arm"] / 2, rel=1e-5)
    assert "# fitted, was 74 mm; as drawn" in path.read_text()


def test_nothing_free_is_refused(study, model):
    with pytest.raises(MeasurementError, match="nothing is free to fit"):
        fit(study, [synthetic.measured(74e-3, 2.7)], {}, surrogate=model)


def test_another_band_is_refused(study, model):
    data = synthetic.measured(74e-3, 2.7, band=(5e9, 6e9))
    with pytest.raises(MeasurementError, match=r"build\.s1p: no point lies from"):
        fit(study, [data], FREE_EPS, also={"arm": (72e-3, 76e-3)}, surrogate=model)


def test_pinning_a_dip_that_is_not_there_is_refused(study, model):
    with pytest.raises(MeasurementError, match=r"no measured dip lies within 2% of the pinned"):
        fit(
            study,
            [synthetic.measured(74e-3, 2.7)],
            FREE_EPS,
            pins=[{3: 2.0e9}],
            also={"arm": (72e-3, 76e-3)},
            surrogate=model,
        )


def test_no_dip_at_all_still_gives_an_answer_with_a_note(study, model):
    data = synthetic.measured(74e-3, 2.7)
    flat = type(data)(data.path, data.frequency_hz, 0.9 + 0 * data.reflection, 50.0)
    result = fit(study, [flat], FREE_EPS, also={"arm": (72e-3, 76e-3)}, surrogate=model)
    assert any("no dip stands out" in note for note in result.notes)
    text = result.as_text()
    assert "still differs visibly" in text
    assert "no dip from 414 to 3109 MHz, where the study has them at 904 and 2805 MHz" in text


@pytest.fixture(scope="module")
def flat():
    data = synthetic.measured(74e-3, 2.7)
    return replace(data, reflection=0.9 + 0 * data.reflection)


def test_intervals_end_at_the_bounds_which_are_then_told(study, model, flat):
    result = fit(study, [flat], BOTH, surrogate=model)
    for value in result.values:
        assert (value.low, value.high) == value.bounds
        assert value.is_cut == (True, True)
    text = result.as_text()
    assert "the data do not narrow arm: its interval is that of its bounds, 72 mm to 76 mm" in text
    assert "the data do not narrow eps" in text
    assert "told apart" not in text  # not even together are they known within their bounds
    head = result.study_text().split("\n")[1]
    assert head.endswith("from 72 mm to 76 mm (its bounds: the data do not narrow it)")


def test_one_end_of_an_interval_at_a_bound_is_told(study, model):
    data = synthetic.measured(74.4e-3, 3.0)
    bounds = {"eps": (2.1, 3.02)}
    result = fit(study, [data], bounds, known=[Known("arm", 74.4e-3, 0.1e-3)], surrogate=model)
    value = result.values[0]
    assert value.is_cut == (False, True)
    assert value.high == 3.02
    assert "the upper end of its interval is its bound 3.02, the data alone" in result.as_text()


def aims_at(arm, eps):
    """Both dips of an antenna as targets."""
    places = {n: mode[0] for n, mode in synthetic.node(arm, eps).modes.items()}
    return tuple(Target("dip", n, (place, place)) for n, place in places.items())


def test_no_trim_without_any_measured_dip(study, model, flat):
    result = fit(study, [flat], FREE_EPS, also={"arm": (71e-3, 77e-3)}, surrogate=model)
    said = r"build\.s1p: no dip from 414 to 3109 MHz, so nothing measured .* 904 MHz.* sweep where"
    with pytest.raises(MeasurementError, match=said):
        trim_fitted(result, 1, 0.93e9, "arm", (71e-3, 77e-3))
    aims = aims_at(73.5e-3, 2.8)
    with pytest.raises(MeasurementError, match=said):
        trim_pair(result, aims, {"arm": (71e-3, 77e-3), "eps": (2.1, 3.3)})
    # A repeat of the same build that shows its dips is enough.
    twice = [synthetic.measured(74.4e-3, 3.0), flat]
    result = fit(study, twice, FREE_EPS, also={"arm": (71e-3, 77e-3)}, surrogate=model)
    assert trim_fitted(result, 1, 0.9e9, "arm", (71e-3, 77e-3)).is_measured


def test_a_trim_of_a_mode_that_was_not_measured_is_marked(study, model, known_length):
    data = synthetic.measured(74.4e-3, 3.0, band=(0.5e9, 1.6e9))
    reach = {"arm": (71e-3, 77e-3)}
    result = fit(study, [data], FREE_EPS, also=reach, surrogate=model)
    mark = "UNSUPPORTED: no measured dip is known to be of the 3/2 wave mode"
    cut = trim_fitted(result, 3, 2.85e9, "arm", reach["arm"])
    assert not cut.is_measured
    assert mark in cut.as_text()
    assert "--pin '3/2=FREQUENCY'" in cut.as_text()
    assert "UNSUPPORTED" not in trim_fitted(result, 1, 0.9e9, "arm", reach["arm"]).as_text()
    aims = aims_at(73.5e-3, 2.8)
    pair = trim_pair(result, aims, reach | {"eps": (2.1, 3.3)})
    assert pair.unmeasured == ("3/2 wave",)
    assert mark in pair.as_text()
    assert trim_pair(known_length, aims, reach | {"eps": (2.1, 3.3)}).unmeasured == ()


def test_trim_lands_on_the_target(known_length):
    target = 0.93e9
    cut = trim_fitted(known_length, 1, target, "arm", (71e-3, 77e-3))
    after = synthetic.node(74.4e-3 + cut.change, 3.0).modes[1][0]
    # Half the 0.5 % a trim is wanted to keep.
    assert after == pytest.approx(target, rel=2.5e-3)
    assert cut.change < 0
    assert cut.low < cut.change < cut.high
    # Frequency goes with 1/arm here: plain scaling is right by construction.
    assert cut.correction_factor == pytest.approx(1.0, abs=0.02)
    text = cut.as_text()
    assert "cut -" in text
    assert "3/2 wave dip moves by" in text
    assert "MHz/mm" in "\n".join(factor_lines([cut]))


def test_trim_warns_when_metal_must_be_added(known_length):
    cut = trim_fitted(known_length, 1, 0.88e9, "arm", (71e-3, 77e-3))
    assert cut.adds_metal
    assert "metal must be added" in cut.as_text()


def test_a_small_cut_with_a_wide_interval_goes_in_steps(known_length):
    present = trim_fitted(known_length, 1, 0.92e9, "arm", (71e-3, 77e-3)).present_hz
    cut = trim_fitted(known_length, 1, present * 1.006, "arm", (71e-3, 77e-3))
    assert cut.in_steps
    assert 0.3 <= cut.first_share <= 0.6
    assert "% first" in cut.as_text()


def test_no_cut_where_the_dip_is_right(known_length):
    present = trim_fitted(known_length, 1, 0.92e9, "arm", (71e-3, 77e-3)).present_hz
    cut = trim_fitted(known_length, 1, present * 1.0002, "arm", (71e-3, 77e-3))
    assert "cut nothing" in cut.as_text()


def test_a_target_out_of_reach_is_refused(known_length):
    with pytest.raises(MeasurementError, match=r"1500\.0 MHz is out of reach"):
        trim_fitted(known_length, 1, 1.5e9, "arm", (71e-3, 77e-3))
    with pytest.raises(MeasurementError, match="does not vary `width`"):
        trim_fitted(known_length, 1, 0.9e9, "width", (5e-3, 7e-3))


def test_correlation_length_of_noise_and_of_a_slow_ripple():
    rng = np.random.default_rng(5)
    noise = rng.standard_normal(500) + 1j * rng.standard_normal(500)
    assert correlation_length(noise) < 2
    slow = np.exp(2j * np.pi * np.arange(500) / 200)
    assert correlation_length(slow) > 30
    assert correlation_length(np.zeros(5, complex)) == 1.0


def test_capacitance_and_reference_are_those_of_circuits():
    f, z = np.array([1e9]), np.array([60 - 20j])
    gamma = (z - 50) / (z + 50)
    loaded = 1 / (1 / z + 2j * np.pi * f * 0.2e-12)
    assert with_capacitance(f, gamma, 0.2e-12, 50.0) == pytest.approx((loaded - 50) / (loaded + 50))
    assert referred(gamma, 50.0, 75.0) == pytest.approx((z - 75) / (z + 75))


@pytest.mark.parametrize(
    ("text", "match"),
    [
        ("arm", "write NAME=LOW..HIGH"),
        ("arm=77 mm..74 mm", "first bound must be below"),
        ("arm=2..3", "a length is needed"),
        ("arn=70 mm..74 mm", "do you mean `arm`"),
        ("carrier.infill=0.2..0.4", "must be written in the study"),
    ],
)
def test_bounds_that_cannot_be_read(study, text, match):
    with pytest.raises(MeasurementError, match=match):
        Variation(study).bounds(text)


@pytest.mark.parametrize(
    ("text", "match"),
    [
        ("arm = 74 mm", "write NAME = VALUE"),
        ("arm = 74 mm +- 0 mm", "must be positive"),
        ("arm = 74 mm +- 1", "a length is needed"),
    ],
)
def test_knowledge_that_cannot_be_read(study, text, match):
    with pytest.raises(MeasurementError, match=match):
        Variation(study).known(text)


def test_overrides_move_dependent_values_and_dotted_keys(study):
    variation = Variation(study)
    antenna = variation.antenna({"arm": 70e-3, "carrier.permittivity": 2.2})
    assert antenna.strips[0].path_m[-1][0] == pytest.approx(71e-3)
    assert antenna.carrier.relative_permittivity == 2.2
    assert variation.known("arm=74.5 mm ± 0.1 mm") == Known(
        "arm", pytest.approx(74.5e-3), pytest.approx(0.1e-3)
    )


def test_a_sweep_that_does_not_cover_the_bounds_is_refused():
    xr = pytest.importorskip("xarray")
    dataset = xr.Dataset(
        {"status": ("case", np.ones(3, dtype="i1"))},
        coords={"case": np.arange(3), "arm": ("case", [0.07, 0.074, 0.078], {"units": "m"})},
        attrs={"swept": {"arm": "arm"}},
    )
    with pytest.raises(StoreError, match="does not vary `eps`"):
        surrogate_of_results(dataset, {"eps": (2.0, 3.0)})
    with pytest.raises(StoreError, match="narrow them"):
        surrogate_of_results(dataset, {"arm": (0.06, 0.075)})


def test_a_stored_sweep_gives_what_the_formula_behind_it_gives(study):
    """Cases of a grid, interpolated over arm and width; the truth lies between them."""
    arms = (0.070, 0.072, 0.074, 0.076, 0.078, 0.080)
    stored = stored_results(arms, (0.004, 0.006, 0.008))
    bounds = {"arm": (73.2e-3, 75.2e-3), "width": (5e-3, 7e-3)}
    model = surrogate_of_results(stored, bounds)
    # Four nodes around the bounds are enough, the far ones would only narrow the band.
    assert model.axes[0].nodes == pytest.approx([0.072, 0.074, 0.076, 0.078])
    data = stored_bench(0.9e9 * 76 / 74.3, (2.7e9 + 5e9 * 0.0015) * 76 / 74.3)
    result = fit(study, [data], bounds, known=[Known("width", 6.5e-3, 0.1e-3)], surrogate=model)
    value = next(v for v in result.values if v.name == "arm")
    assert value.low < 74.3e-3 < value.high
    assert value.value == pytest.approx(74.3e-3, rel=5e-3)
    assert np.isnan(result.surrogate_error)


def test_a_value_held_at_a_stored_one_needs_no_other():
    stored = stored_results((0.070, 0.074, 0.078), (0.004, 0.008))
    with pytest.raises(StoreError, match="only 2 values of `width`"):
        surrogate_of_results(stored, {"arm": (0.071, 0.077), "width": (0.005, 0.006)})
    model = surrogate_of_results(stored, {"arm": (0.071, 0.077), "width": (0.008, 0.008)})
    assert [len(axis.nodes) for axis in model.axes] == [3, 1]
    f = np.linspace(0.8e9, 1.2e9, 9)
    exact = stored["impedance"].sel(case=3).interp(frequency=f).values
    # Cubic splines of the curve against straight lines between its points.
    found = model.reflection({"arm": 0.074, "width": 0.008}, f)
    assert found == pytest.approx((exact - 50) / (exact + 50), abs=2e-3)


def test_a_dip_beyond_the_stored_band_is_named(study):
    stored = stored_results((0.070, 0.076, 0.082), (0.004, 0.006, 0.008))
    bounds = {"arm": (71e-3, 81e-3), "width": (5e-3, 7e-3)}
    data = stored_bench(0.9e9, 2.7e9)
    result = fit(study, [data], bounds, surrogate=surrogate_of_results(stored, bounds))
    assert any("so the measured dip at 27" in note for note in result.notes)


class FormulaEngine:
    """Solves single points of one build by the formula."""

    solves = 3

    def __init__(self, arm):
        self.arm = arm

    def node(self, values):
        return synthetic.node(self.arm, values["eps"])


def test_each_build_is_checked_against_solutions_of_its_own(study, monkeypatch):
    def build_surrogate(variation, base, bounds, band_hz, *, progress=None):
        axis = Axis("eps", chebyshev(*bounds["eps"], 7))
        nodes = [synthetic.node(base["arm"], eps) for eps in axis.nodes]
        band = (synthetic.BAND[0] / 1.1, synthetic.BAND[1] * 1.1)
        return Surrogate([axis], nodes, band), FormulaEngine(base["arm"])

    monkeypatch.setattr(fit_files, "build_surrogate", build_surrogate)
    arms = (72e-3, 75.5e-3)
    data = [synthetic.measured(arm, 3.0, seed=k) for k, arm in enumerate(arms)]
    result = fit(study, data, FREE_EPS, builds=[{"arm": arm} for arm in arms])
    # The builds differ by 5 % in frequency, which makes 0.4 and more of the reflection.
    assert result.surrogate_error < 1e-3
    assert result.solves == 6
    assert result.values[0].value == pytest.approx(3.0, rel=0.03)


def test_a_value_in_which_the_builds_differ_is_not_fitted_to_all(study, model):
    data = [synthetic.measured(arm, 3.0) for arm in (73e-3, 75.5e-3)]
    builds = [{"arm": 73e-3}, {"arm": 75.5e-3}]
    with pytest.raises(MeasurementError, match=r"`arm` cannot be fitted .* 73 mm and 75.5 mm"):
        fit(study, data, BOTH, builds=builds, surrogate=model)
    with pytest.raises(MeasurementError, match="leave it as cut, free `scale`"):
        fit(study, data, BOTH, builds=[{}, {"arm": 75.5e-3}], surrogate=model)
    same = [{"arm": 73e-3}, {"arm": 73e-3}]
    assert fit(study, data[:1] * 2, BOTH, builds=same, surrogate=model).curves[1].pairs
