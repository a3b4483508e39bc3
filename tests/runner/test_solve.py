"""One case from strips to stored features: statuses, shapes, invariants of the whole pipeline."""

from dataclasses import replace

import numpy as np
import pytest

from simkit.engine import pynec
from simkit.errors import EngineError
from simkit.geometry import build_wires, plan_mesh
from simkit.response.features import reflection
from simkit.runner import currents, radiation
from simkit.runner.identity import MODEL_VERSION, engine_version
from simkit.runner.solve import solve_case
from simkit.store.schema import MODES, PHI_DEG, POSITIONS, SAMPLES, THETA_DEG, VARIABLES, Status
from simkit.study.model import CutFeed, Strip


def solved(antenna, plan=None):
    result = solve_case(antenna, plan or plan_mesh([antenna]))
    assert result.status in (Status.SOLVED, Status.DOUBTFUL), result.reason
    return result.arrays


def modes_of(arrays, name="mode_frequency"):
    return arrays[name][np.isfinite(arrays["mode_frequency"])]


@pytest.fixture(scope="module")
def bent(make):
    return make.dipole(
        [(1, 0), (56, 0), (56, 34)], [(-1, 0), (-49, 0), (-49, 25)], 4, metal=make.brass
    )


@pytest.fixture(scope="module")
def bent_result(bent):
    return solve_case(bent, plan_mesh([bent]))


def test_a_sound_case_is_solved(bent_result):
    assert bent_result.status == Status.SOLVED
    assert bent_result.reason == ""
    assert bent_result.seconds > 0
    assert bent_result.solves == np.isfinite(bent_result.arrays["sample_frequency"]).sum() <= 20


def test_every_variable_of_the_store_is_filled_in_its_shape(bent, bent_result):
    grid = build_wires(bent, plan_mesh([bent]))
    sizes = {
        "frequency": 271,
        "mode": MODES,
        "strip": 2,
        "position": POSITIONS,
        "theta": len(THETA_DEG),
        "phi": len(PHI_DEG),
        "sample": SAMPLES,
        "segment": grid.segments,
    }
    of_the_run = {"status", "reason", "case_key", "seconds", "solves", "worker"}
    of_feed_lines = {"impedance_at_connector", "feedline"}
    assert set(bent_result.arrays) == set(VARIABLES) - of_the_run - of_feed_lines
    for name, value in bent_result.arrays.items():
        expected = tuple(sizes[dim] for dim in VARIABLES[name].dims[1:])
        assert np.shape(value) == expected, name
        kind = np.asarray(value).dtype.kind
        assert kind == {"c": "c", "f": "f", "i": "i"}[VARIABLES[name].dtype[0]], name


def test_modes_fill_the_slots_from_below(bent_result):
    arrays = bent_result.arrays
    count = len(modes_of(arrays))
    assert count == 3
    assert np.all(np.diff(arrays["mode_frequency"][:count]) > 0)
    assert list(arrays["mode_half_waves"][: count + 1]) == [1, 2, 3, -1]
    assert list(arrays["driven"][count:]) == [-1] * (MODES - count)
    for name in ("mode_q", "pattern_frequency", "peak_gain", "efficiency", "power_balance"):
        assert np.isfinite(arrays[name][:count]).all(), name
        assert np.isnan(arrays[name][count:]).all(), name


def test_mode_currents_are_scaled_to_a_real_one(bent_result):
    for slot in range(3):
        current = bent_result.arrays["mode_current"][slot]
        assert abs(current).max() == pytest.approx(1)
        assert current.flat[np.argmax(abs(current))] == pytest.approx(1, abs=1e-12)
        # Open ends carry nothing; the current goes through the gap, into one strip, out of one.
        # (Zero but for the rounding of the interpolation.)
        assert abs(current[:, -1]).max() < 1e-15
        assert current[0, 0] == pytest.approx(-current[1, 0], abs=0.1)


def test_impedance_is_passive(bent_result):
    assert bent_result.arrays["impedance"].real.min() > 0


def test_efficiency_is_below_one_for_brass_and_one_for_perfect_metal(bent, make):
    """A strip of 0.15 mm brass loses a per cent or so."""
    brass = modes_of(solved(bent), "efficiency")
    perfect = modes_of(solved(replace(bent, metal=replace(make.brass, conductivity_s_per_m=None))))
    assert np.all((brass > 0.9) & (brass < 0.999))
    assert len(perfect) == 3


def test_perfect_metal_loses_nothing(make):
    arrays = solved(make.straight(150, 6, 40))
    assert modes_of(arrays, "efficiency") == pytest.approx(1, abs=1e-12)
    assert modes_of(arrays, "peak_gain") == pytest.approx(modes_of(arrays, "directivity"))


def test_worse_metal_lowers_q_and_efficiency_and_keeps_the_balance(bent, make):
    poor = solved(replace(bent, metal=replace(make.brass, conductivity_s_per_m=1e5)))
    good = solved(bent)
    assert np.all(modes_of(poor, "efficiency") < modes_of(good, "efficiency") - 0.05)
    assert np.all(modes_of(poor, "mode_q") < 0.97 * modes_of(good, "mode_q"))
    # Losses are counted with the same currents as in the lossless case: 1 % as for sound grids.
    assert modes_of(poor, "power_balance") == pytest.approx(1, abs=0.01)


@pytest.mark.parametrize("at", [75, 40, 55])
def test_power_balances_on_straight_strips(make, at):
    assert modes_of(solved(make.straight(150, 6, at)), "power_balance") == pytest.approx(
        1, abs=5e-3
    )


def test_stored_gain_is_symmetric_about_the_strips_plane(bent_result):
    gain = bent_result.arrays["gain"][:3]
    assert gain == pytest.approx(gain[:, ::-1], abs=1e-6)
    assert gain[..., 0] == pytest.approx(gain[..., -1], abs=1e-6)


def test_peak_gain_is_at_least_what_the_grid_shows(bent_result):
    arrays = bent_result.arrays
    for slot in range(3):
        # A direction in a principal plane is preferred to one that is hardly stronger.
        assert -0.01 < arrays["peak_gain"][slot] - arrays["gain"][slot].max() < 0.2


def test_of_a_ring_of_maxima_the_one_in_the_strips_plane_is_named(make):
    """The 3/2-wave pattern of a straight strip is a cone of about 42 degrees around it."""
    arrays = solved(make.straight(150, 6, 75))
    slot = int(np.flatnonzero(arrays["mode_half_waves"] == 3)[0])
    assert arrays["peak_theta"][slot] == 90.0
    assert abs(np.cos(np.deg2rad(arrays["peak_phi"][slot]))) == pytest.approx(
        np.cos(np.deg2rad(42.6)), abs=0.02
    )


def test_bad_geometry_is_refused_with_the_reason(make):
    good = make.strip([(0, 0), (60, 0), (60, 40), (30, 40), (30, 20)], 3, 12)
    bad = make.strip([(0, 0), (60, 0), (60, 40), (30, 40), (30, -40)], 3, 12)
    result = solve_case(bad, plan_mesh([good, bad]))
    assert result.status == Status.REFUSED
    assert "crosses or overlaps itself near (30, 0) mm" in result.reason
    assert result.solves == 0
    assert result.arrays == {}


def test_a_strip_too_wide_for_its_segments_is_refused(make):
    fine, fat = (replace(make.ell(60, width, 90, 20), model="line") for width in (4, 18))
    result = solve_case(fat, plan_mesh([fine, fat]))
    assert result.status == Status.REFUSED
    assert "narrow" in result.reason


def test_an_engine_error_fails_the_case(make, monkeypatch):
    antenna = make.straight(150, 6, 40)

    def fail(*_args, **_options):
        raise EngineError("1 wire at 300 MHz: the engine failed while solving (Unknown exception)")

    monkeypatch.setattr(currents, "solve_wires", fail)
    result = solve_case(antenna, plan_mesh([antenna]))
    assert result.status == Status.FAILED
    assert "failed while solving" in result.reason


def test_a_bug_of_ours_is_not_swallowed(make, monkeypatch):
    antenna = make.straight(150, 6, 40)

    def slip(*_args, **_options):
        raise ZeroDivisionError("ours")

    monkeypatch.setattr(currents, "solve_wires", slip)
    with pytest.raises(ZeroDivisionError, match="ours"):
        solve_case(antenna, plan_mesh([antenna]))


def test_power_that_does_not_balance_makes_a_case_doubtful(make, monkeypatch):
    antenna = make.straight(150, 6, 40)
    honest = radiation.radiated_power_w
    monkeypatch.setattr(radiation, "radiated_power_w", lambda *a: 1.05 * honest(*a))
    result = solve_case(antenna, plan_mesh([antenna]))
    assert result.status == Status.DOUBTFUL
    assert "radiated and lost power are 1.05" in result.reason
    assert len(modes_of(result.arrays)) == 3


def test_a_sweep_that_does_not_settle_makes_a_case_doubtful(make, monkeypatch):
    antenna = make.straight(150, 6, 40)
    monkeypatch.setattr(currents, "SAMPLES", 10)
    result = solve_case(antenna, plan_mesh([antenna]))
    assert result.status == Status.DOUBTFUL
    assert "did not settle within 10 samples" in result.reason


def test_a_limit_of_the_rules_makes_a_case_doubtful(make):
    antenna = replace(make.straight(80, 18, 40), model="line")
    result = solve_case(antenna, plan_mesh([antenna]))
    assert result.status == Status.DOUBTFUL
    assert "of its length wide" in result.reason


def test_identity_names_model_and_engine():
    assert pynec.engine_version() == f"PyNEC {engine_version()}"
    assert MODEL_VERSION


def test_the_same_case_twice_gives_the_same_bits(bent, bent_result):
    again = solved(bent)
    for name, value in bent_result.arrays.items():
        assert np.array_equal(np.asarray(value), np.asarray(again[name]), equal_nan=True), name


@pytest.mark.parametrize("factor", [2.0, 0.4])
def test_scaling_lengths_and_wavelength_together_changes_nothing(make, factor):
    band = make.band(0.3e9, 3e9, 91)
    small = make.ell(70, 4, 90, 25, band=band)
    stretched = make.band(band.start_hz / factor, band.stop_hz / factor, 91)
    large = make.ell(70 * factor, 4 * factor, 90, 25 * factor, band=stretched)
    one, other = solved(small), solved(large)
    # Rounding may choose other samples, so only to within the sweep's tolerance.
    gammas = [reflection(arrays["impedance"], 50.0) for arrays in (one, other)]
    assert gammas[1] == pytest.approx(gammas[0], abs=1e-3)
    scaled = modes_of(other) * factor
    assert len(scaled) == 2
    assert scaled == pytest.approx(modes_of(one), rel=1e-4)
    assert other["gain"][:2] == pytest.approx(one["gain"][:2], abs=0.01)


def test_a_mirrored_antenna_has_the_same_numbers(bent):
    """West is the longer arm in one, east in the other: what is read at the feed is the same."""
    flipped = tuple(
        replace(strip, path_m=tuple((-x, y) for x, y in strip.path_m)) for strip in bent.strips
    )
    one, other = solved(bent), solved(replace(bent, strips=flipped))
    assert other["impedance"] == pytest.approx(one["impedance"], rel=1e-9)
    assert other["mode_frequency"] == pytest.approx(one["mode_frequency"], rel=1e-9, nan_ok=True)
    assert other["mode_current"][:3] == pytest.approx(one["mode_current"][:3], abs=1e-9)
    turned = one["gain"][:3][..., (18 - np.arange(37)) % 36]
    assert other["gain"][:3] == pytest.approx(turned, abs=1e-3)


def test_turning_the_antenna_in_its_plane_turns_the_pattern(make):
    """By 90 degrees, a step of the pattern's grid."""
    path = np.array([(0, 0), (60, 0), (80, 40)])
    one = solved(make.strip(path, 4, 22))
    other = solved(make.strip(np.stack([-path[:, 1], path[:, 0]], axis=1), 4, 22))
    assert other["impedance"] == pytest.approx(one["impedance"], rel=1e-6)
    assert other["gain"][:2] == pytest.approx(
        one["gain"][:2][..., (np.arange(37) - 9) % 36], abs=1e-3
    )


@pytest.mark.parametrize("factor", [2.0, 0.4])
def test_scaling_a_grid_changes_nothing(make, factor):
    """A taper with a bend: rails, their radius, ends and corner all follow."""

    def of(scale):
        band = make.band(0.4e9 / scale, 2.2e9 / scale, 31)
        antenna = make.strip([(0, 0), (70 * scale, 0), (120 * scale, 30 * scale)], 10, 30)
        (one,) = antenna.strips
        widths = tuple(w * scale for w in (0.004, 0.008, 0.010))
        feed = CutFeed("strip", 0.03 * scale, 0.0005 * scale)
        one = replace(one, width_m=widths[-1], widths_m=widths)
        return replace(antenna, strips=(one,), feed=feed, frequency=band)

    one, other = solved(of(1.0)), solved(of(factor))
    assert modes_of(other) * factor == pytest.approx(modes_of(one), rel=1e-4)
    assert other["impedance"] == pytest.approx(one["impedance"], rel=2e-3)


def test_a_mirrored_grid_has_the_same_numbers(make):
    """Rails change places, so the random projection of the sweep sees another order.

    The two fits then differ by up to the sweep's tolerance, 1e-3 of the median current; near the
    antiresonance, where the feed current is small, that is more of the impedance.
    """
    path = [(0, 0), (60, 0), (80, 40)]
    one, other = (
        solved(replace(make.strip([(x, sign * y) for x, y in path], 5, 22), model="grid"))
        for sign in (1, -1)
    )
    assert other["impedance"] == pytest.approx(one["impedance"], rel=4e-3)
    assert modes_of(other) == pytest.approx(modes_of(one), rel=1e-4)


@pytest.mark.parametrize("model", ["line", "grid"])
def test_currents_between_the_samples_are_those_of_a_direct_solution(make, model):
    """Ten times the sweep's tolerance, which holds between two models of the fit."""
    antenna = replace(make.straight(150, 1.5, 37.5), model=model)
    grid = build_wires(antenna, plan_mesh([antenna]))
    sweep = currents.sweep_currents(antenna, grid)
    for frequency in np.linspace(0.35e9, 2.9e9, 7):
        wanted = currents.solve_wires(
            grid.wires, grid.radius_m, frequency, [grid.source, grid.probe]
        )
        found = sweep.model(np.array([frequency]))[0].reshape(2, -1)
        for row, exact in zip(found, wanted, strict=True):
            assert abs(row - exact).max() < 1e-2 * abs(exact).max()


def test_rails_fed_off_centre_have_all_modes(make):
    band = make.band(0.278352e9, 3.180067e9, 201)
    antenna = replace(make.straight(150, 1.5, 37.5, band=band), model="grid")
    assert list(solved(antenna)["mode_half_waves"][:3]) == [1, 2, 3]


def tee(arm, make):
    antenna = make.straight(2 * arm, 5, 25)
    stem = Strip("stem", ((arm * 1e-3, 0.0), (arm * 1e-3, 0.03)), 0.005)
    return replace(antenna, strips=(*antenna.strips, stem))


def taper(arm, make):
    antenna = make.strip([(-arm, 0), (0, 0), (arm, 0)], 12, arm)
    (one,) = antenna.strips
    return replace(antenna, strips=(replace(one, widths_m=(0.012, 0.004, 0.012)),))


def bow(arm, make):
    radius = arm / 1.2
    angles = (np.arange(61) / 30 - 1) * 1.2
    return make.strip([(radius * np.sin(a), radius * np.cos(a)) for a in angles], 6, arm)


KINDS = ("straight", "off-centre", "ell", "vee", "tee", "bow")


@pytest.mark.parametrize(
    ("kind", "model"),
    [
        *((kind, "line") for kind in KINDS),
        *((kind, "grid") for kind in KINDS[:4]),
        *(pytest.param(k, "grid", marks=pytest.mark.long) for k in ("tee", "bow", "taper")),
    ],
)
def test_modes_move_smoothly_with_a_length_swept_in_tenths_of_a_millimetre(make, kind, model):
    """One mesh stretched: what is left of a cubic is fit error, under 0.005 %."""
    makers = {
        "straight": lambda arm: make.dipole([(1, 0), (arm, 0)], [(-1, 0), (-arm, 0)], 8),
        "off-centre": lambda arm: make.straight(2 * arm, 6, 40),
        "ell": lambda arm: make.ell(arm, 5, 90, 25),
        "vee": lambda arm: make.vee(arm, 8, 60),
        "tee": lambda arm: tee(arm, make),
        "bow": lambda arm: bow(arm, make),
        "taper": lambda arm: taper(arm, make),
    }
    arms = 60 + 0.1 * np.arange(13)
    # A rail model of many unknowns need not be solved for more than its first two modes.
    band = make.band(0.3e9, 3e9 if model == "line" else 2.6e9, 91)
    antennas = [replace(makers[kind](arm), model=model, frequency=band) for arm in arms]
    plan = plan_mesh(antennas)
    modes = np.array([modes_of(solved(antenna, plan)) for antenna in antennas])
    assert modes.shape[1] >= 2
    around = arms - arms.mean()
    rest = modes - np.stack([np.polyval(np.polyfit(around, f, 3), around) for f in modes.T], axis=1)
    assert np.max(abs(rest) / modes) < 5e-5
    assert np.all(np.diff(modes, axis=0) < 0)
