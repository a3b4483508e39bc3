"""Strips, from the description to the stored features, against a full-wave solution."""

from functools import cache

import numpy as np
import pytest
from scipy.special import gamma

from simkit.geometry import build_wires, plan_mesh
from simkit.geometry.strips import equivalent_radius_m
from simkit.response.pattern import Radiators, far_field, intensity_w_per_sr, radiated_power_w
from simkit.runner.currents import sweep_currents
from simkit.runner.solve import solve_case
from simkit.store.schema import Status
from simkit.study.model import Antenna, CutFeed, FrequencyBand, Metal, Strip

PERFECT = Metal("perfect", None, 0.0)
FEED_PLACES_MM = (75.0, 37.5, 50.0, 61.0, 20.0)
QUANTITIES = ("mode_mhz", "mode_q", "peak_mhz", "peak_ohm", "dip_mhz", "dip_db")
STORED = {
    "mode_mhz": ("mode_frequency", 1e-6),
    "mode_q": ("mode_q", 1.0),
    "peak_mhz": ("conductance_peak_frequency", 1e-6),
    "peak_ohm": ("conductance_peak_resistance", 1.0),
    "dip_mhz": ("dip_frequency", 1e-6),
    "dip_db": ("dip_return_loss", 1.0),
}


def antenna(path_mm, width_mm, feed_at_mm, stop_ghz, model="auto", widths_mm=()):
    path = tuple((x * 1e-3, y * 1e-3) for x, y in path_mm)
    widths = tuple(w * 1e-3 for w in widths_mm)
    return Antenna(
        strips=(Strip("strip", path, max(widths or (width_mm * 1e-3,)), widths),),
        metal=PERFECT,
        feed=CutFeed("strip", feed_at_mm * 1e-3, width_mm * 1e-4),
        reference_ohm=50.0,
        frequency=FrequencyBand(0.1e9, stop_ghz * 1e9, 1451),
        model=model,
    )


def described(data, model="auto"):
    if "tips" in data:
        middle = data["length"] / 2
        path = [(-middle, 0.0), (0.0, 0.0), (middle, 0.0)]
        widths = (data["tips"], data["width"], data["tips"])
        return antenna(path, data["width"], data["feed_at"], data["stop_ghz"], model, widths)
    if "arm" not in data:
        path = [(0.0, 0.0), (data["length"], 0.0)]
        return antenna(path, data["width"], data["feed_at"], data["stop_ghz"], model)
    half = np.deg2rad(data["included_deg"] / 2)
    x, y = data["arm"] * np.sin(half), -data["arm"] * np.cos(half)
    path = [(-x, y), (0.0, 0.0), (x, y)]
    return antenna(path, data["width"], data["arm"], data["stop_ghz"], model)


@cache
def solved(one):
    result = solve_case(one, plan_mesh([one]))
    assert result.status == Status.SOLVED, result.reason
    return result.arrays


def slot_of(arrays, half_waves):
    (slot,) = np.flatnonzero(arrays["mode_half_waves"] == half_waves)
    return slot


def found(row, quantity, model="auto"):
    arrays = solved(described(row.data["antenna"][row["antenna"]], model))
    name, factor = STORED[quantity]
    return arrays[name][slot_of(arrays, row["half_waves"])] * factor


MODELS = ("line", "grid")

MISSED = {
    ("20 mm wide, 3/2", "grid", "peak_ohm"): "85.0 ohm, 2.6 % low",
    ("3 to 30 mm wide, 3/2", "auto", "peak_ohm"): "141.1 ohm, 3.6 % low",
}


@pytest.fixture
def missed(request):
    """Marks what is known to miss its tolerance; strict, so that an improvement is noticed."""
    values = request.node.callspec.params
    key = values["row"]["name"], values.get("model", "auto"), values["quantity"]
    if key in MISSED:
        request.applymarker(pytest.mark.xfail(strict=True, reason=MISSED[key]))


@pytest.mark.usefixtures("missed")
@pytest.mark.parametrize("quantity", QUANTITIES)
@pytest.mark.parametrize("model", MODELS)
@pytest.mark.published("full_wave_strips", "straight")
def test_straight_strips(row, model, quantity):
    row.check(quantity, found(row, quantity, model))


@pytest.mark.usefixtures("missed")
@pytest.mark.parametrize("quantity", QUANTITIES)
@pytest.mark.parametrize("model", MODELS)
@pytest.mark.published("full_wave_strips", "bent")
def test_bent_strips(row, model, quantity):
    bent = row.data["tolerance"].get(f"bent_{quantity}")
    row.check(quantity, found(row, quantity, model), f"bent_{quantity}" if bent else None)


@pytest.mark.usefixtures("missed")
@pytest.mark.parametrize("quantity", QUANTITIES)
@pytest.mark.published("full_wave_strips", "taper")
def test_tapered_strips(row, quantity):
    row.check(quantity, found(row, quantity), f"taper_{quantity}")


@pytest.mark.published("full_wave_strips", "straight")
def test_line_and_grid_agree_on_straight_strips(row):
    agree(row)


@pytest.mark.published("full_wave_strips", "bent")
def test_line_and_grid_agree_on_bent_strips(row):
    agree(row)


def agree(row):
    one, other = (found(row, "mode_mhz", model) for model in MODELS)
    allowed = row.data["tolerance"]["models_mode_mhz"]["relative"]
    assert other == pytest.approx(one, rel=allowed), row["name"]


@pytest.mark.published("full_wave_strips", "straight")
def test_auto_takes_the_line_model_where_it_holds(row):
    for name, one in row.data["antenna"].items():
        wanted = "grid" if "tips" in one else "line"
        assert plan_mesh([described(one)]).kind == wanted, name


@pytest.mark.parametrize("feed_at_mm", FEED_PLACES_MM)
@pytest.mark.published("full_wave_strips", "mode")
def test_modes_do_not_ask_where_the_feed_is(row, feed_at_mm):
    """The even ones too, with the feed in the middle, at their node."""
    arrays = solved(antenna([(0.0, 0.0), (150.0, 0.0)], 6.0, feed_at_mm, 4.0))
    slot = slot_of(arrays, row["half_waves"])
    row.check("mode_mhz", arrays["mode_frequency"][slot] * 1e-6)
    row.check("mode_q", arrays["mode_q"][slot])


def test_modes_agree_among_feed_positions():
    """Within 0.03 %: the meshes differ by a source segment, the fits by less."""
    rows = [
        solved(antenna([(0.0, 0.0), (150.0, 0.0)], 6.0, at, 4.0))["mode_frequency"][:4]
        for at in FEED_PLACES_MM
    ]
    assert np.ptp(rows, axis=0) / np.mean(rows, axis=0) == pytest.approx(0, abs=3e-4)


def test_modes_stand_still_while_the_feed_is_swept():
    """Within 0.03 %, on the mesh that the cases of one study share."""
    swept = [antenna([(0.0, 0.0), (150.0, 0.0)], 6.0, at, 3.0) for at in np.linspace(20, 75, 6)]
    plan = plan_mesh(swept)
    rows = []
    for one in swept:
        result = solve_case(one, plan)
        assert result.status == Status.SOLVED, result.reason
        rows.append(result.arrays["mode_frequency"][:3])
    assert np.ptp(rows, axis=0) / np.mean(rows, axis=0) == pytest.approx(0, abs=3e-4)


@pytest.mark.published("full_wave_strips", "pattern")
def test_directivity_towards_the_side_the_arms_bend_to(row):
    one = described(row.data["antenna"][row["antenna"]])
    grid = build_wires(one, plan_mesh([one]))
    frequency = row["at_mhz"] * 1e6
    current = sweep_currents(one, grid).model(np.array([frequency]))[0, : grid.segments]
    radiators = Radiators.of(grid)
    power = radiated_power_w(radiators, current, frequency)

    def dbi(phi_deg):
        field = far_field(
            radiators, current, frequency, np.array([np.pi / 2]), np.deg2rad([phi_deg])
        )
        return 10 * np.log10(4 * np.pi * intensity_w_per_sr(*field)[0] / power)

    row.check("directivity_dbi", dbi(-90.0))
    assert dbi(90.0) < dbi(-90.0) - 1


@pytest.mark.published("strip_radius")
def test_equivalent_radius(row):
    width = 0.008
    radius = equivalent_radius_m(width, row["thickness"] * width)
    row.check("radius", radius / width)


def test_square_bar_reference_agrees_with_its_formula():
    """Gamma(1/4)^2 / (4 pi^1.5), in the digits printed."""
    assert gamma(0.25) ** 2 / (4 * np.pi**1.5) == pytest.approx(0.59017, abs=5e-6)
