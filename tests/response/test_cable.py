"""What flows on the feed cable: physics from outside the models, and the bookkeeping."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import brentq

from simkit.engine.pynec import solve_wires
from simkit.geometry import build_wires, plan_mesh
from simkit.response.cable import (
    cable_level_db,
    mode_errors,
    most_wanted,
    parts_on_cable,
    told_apart,
)
from simkit.response.modes import NaturalMode, find_modes
from simkit.runner.currents import feed_impedance, sweep_currents
from simkit.runner.solve import solve_case
from simkit.store.schema import Status
from simkit.study.model import Cable, CutFeed, FrequencyBand

ETA_OHM = 376.730313668
BAND = FrequencyBand(0.4e9, 2.4e9, 201)


def dipole(make, width_mm=6.0, band=BAND, gap_mm=1.0):
    """Two arms that reach 75 mm from the middle."""
    half = gap_mm / 2
    return make.dipole([(half, 0), (75, 0)], [(-half, 0), (-75, 0)], width_mm, band=band)


def with_cable(antenna, length_mm, way=(0, 0, 1), strip="west", diameter_mm=None):
    start = np.array([*next(s for s in antenna.strips if s.name == strip).path_m[0], 0.0])
    end = start + length_mm * 1e-3 * np.array(way) / np.linalg.norm(way)
    diameter = antenna.strips[0].width_m / 2 if diameter_mm is None else diameter_mm * 1e-3
    return replace(antenna, cable=Cable(strip, "start", (tuple(start), tuple(end)), diameter))


def solved(antenna):
    result = solve_case(antenna, plan_mesh([antenna]))
    assert result.status in (Status.SOLVED, Status.DOUBTFUL), result.reason
    return result.arrays


def at(antenna, frequency_hz):
    """Impedance and level on the cable (NaN without one) at one frequency."""
    grid = build_wires(antenna, plan_mesh([antenna]))
    current = solve_wires(grid.wires, grid.radius_m, frequency_hz, [grid.source])
    impedance = feed_impedance(grid, current, np.array([frequency_hz]))[0]
    return impedance, cable_level_db(current[0], grid, frequency_hz)


# -- theory ----------------------------------------------------------------------------------------


def sinusoidal_resistance(legs):
    """Radiation resistance of thin wires from one point with sinusoidal currents, ohm.

    Parameters
    ----------
    legs : sequence of (direction, amplitude, length)
        Current amplitude * sin(k (l - s))/sin(k l) away from the point, lengths in wavelengths;
        referred to an amplitude of 1.

    Notes
    -----
    Power through the sphere, as for the half-wave dipole in any textbook (Balanis, Antenna Theory,
    73 ohm): the test holds it against that value.
    """
    k = 2 * np.pi
    cosine, weight = np.polynomial.legendre.leggauss(40)
    around = np.linspace(0, 2 * np.pi, 64, endpoint=False)
    sine = np.sqrt(1 - cosine**2)
    towards = np.stack(
        [
            np.outer(sine, np.cos(around)),
            np.outer(sine, np.sin(around)),
            np.outer(cosine, np.ones_like(around)),
        ],
        axis=-1,
    )
    node, part = np.polynomial.legendre.leggauss(30)
    total = np.zeros(towards.shape, dtype=complex)
    for way, amplitude, length in legs:
        place = (node + 1) * length / 2
        current = amplitude * np.sin(k * (length - place)) / np.sin(k * length)
        phase = np.exp(1j * k * (towards @ np.array(way, dtype=float))[..., None] * place)
        moment = phase @ (current * part * length / 2)
        total += moment[..., None] * np.array(way, dtype=float)
    across = total - np.sum(total * towards, axis=-1, keepdims=True) * towards
    power = np.sum(weight[:, None] * np.sum(abs(across) ** 2, axis=-1)) * 2 * np.pi / 64
    return ETA_OHM * k**2 / (32 * np.pi**2) * power * 2


def test_the_theory_gives_the_half_wave_dipole_of_the_textbook():
    legs = [((1, 0, 0), 1, 0.25), ((-1, 0, 0), -1, 0.25)]
    assert sinusoidal_resistance(legs) == pytest.approx(73.08, abs=0.01)


def test_a_quarter_wave_cable_takes_as_much_as_theory_says(make):
    """Even and odd excitation of a dipole with a cable in its plane of symmetry.

    Between the arms a volt drives the dipole; half a volt drives both arms against the cable, a T.
    Hence the admittance is that of the dipole plus a quarter of the T's, and half the T's flows on
    the cable. With all legs a quarter wave, both are resonant and known from sinusoidal currents.
    """
    thin = dipole(make, 0.4, gap_mm=0.2)
    resonance = brentq(lambda f: at(thin, f)[0].imag, 0.9e9, 1.0e9, xtol=1e6)

    def reactance(length_mm):
        return at(with_cable(thin, length_mm), resonance)[0].imag

    length = brentq(reactance, 76, 84, xtol=0.2)
    impedance, level = at(with_cable(thin, length), resonance)
    # At resonance wires are shorter than a quarter wave by their end effect: electrically all legs
    # are one. What finite thickness leaves is 1.5 % of the dipole's 73 ohm, more of the T's 22.
    arms = [((1, 0, 0), -0.5, 0.25), ((-1, 0, 0), -0.5, 0.25)]
    tee = sinusoidal_resistance([((0, 0, 1), 1, 0.25), *arms])
    conductance = 1 / 73.08 + 1 / (4 * tee)
    assert length * resonance / 299.792458e9 == pytest.approx(0.25, rel=0.03)
    assert impedance.real == pytest.approx(1 / conductance, rel=0.05)
    assert level == pytest.approx(20 * np.log10(0.5 / tee / conductance), abs=0.6)
    assert level > -2


def test_a_half_wave_cable_takes_little(make):
    """Bench lore, from memory: a free cable hurts when it is a quarter wave long, not a half."""
    antenna = dipole(make)
    resonance = brentq(lambda f: at(antenna, f)[0].imag, 0.8e9, 1.0e9, xtol=1e6)
    alone, _ = at(antenna, resonance)
    wave_mm = 299.792458e9 / resonance
    impedance, half = at(with_cable(antenna, wave_mm / 2), resonance)
    _, quarter = at(with_cable(antenna, wave_mm / 4), resonance)
    assert half < -20 < -5 < quarter
    assert abs(impedance / alone - 1) < 0.05


@pytest.mark.parametrize("way", [(0, 0, 1), pytest.param((0, 1, 0), marks=pytest.mark.long)])
def test_a_very_short_cable_changes_little(make, way):
    antenna = dipole(make, 3.0)
    alone, cabled = solved(antenna), solved(with_cable(antenna, 3.0, way))
    assert cabled["cable_current"][0] < -30
    assert cabled["mode_on_cable"][0] < 1e-4
    # The half-wave mode has no voltage there; the full-wave one has, and 3 mm of wire there too.
    shift = cabled["mode_frequency"][:2] / alone["mode_frequency"][:2] - 1
    assert abs(shift[0]) < 0.002
    assert -0.03 < shift[1] < 0


def test_a_cable_is_nothing_to_a_mode_without_voltage_at_its_end(make):
    antenna = dipole(make)
    frequencies = [
        solved(with_cable(antenna, length))["mode_frequency"] for length in (130.0, 170.0)
    ]
    bare = solved(antenna)["mode_frequency"][0]
    for found in frequencies:
        assert np.nanmin(abs(found / bare - 1)) < 0.003
    # While those of the cable go with its length.
    assert frequencies[0][0] / frequencies[1][0] > 1.15


# -- consistency -----------------------------------------------------------------------------------


def test_a_mirror_image_has_the_same_modes(make):
    antenna = dipole(make)
    west, east = (solved(with_cable(antenna, 90, strip=side)) for side in ("west", "east"))
    for name in ("mode_frequency", "mode_q", "cable_current", "mode_on_cable"):
        known = np.isfinite(west[name])
        assert known.any()
        # Two sources elsewhere find the same poles to the sweep's tolerance.
        assert east[name][known] == pytest.approx(west[name][known], rel=2e-3, abs=1e-4)


def test_modes_are_the_same_for_a_branch_of_strip_fed_elsewhere(make):
    """The in-plane cable against the junction rules, which were found on flat metal."""
    antenna = dipole(make, 4.0, gap_mm=0.4)
    line = ((-0.075, 0.0), (0.075, 0.0))
    stub = ((-0.0002, 0.0), (-0.0002, 0.09))
    strips = tuple(
        replace(antenna.strips[0], name=name, path_m=path)
        for name, path in (("main", line), ("stub", stub))
    )
    tee = solved(replace(antenna, strips=strips, feed=CutFeed("main", 0.03, 0.0004)))
    # An open end of strip is 0.075 widths shorter as a wire; that of a braid is not.
    cabled = solved(with_cable(antenna, 90 - 0.3, (0, 1, 0)))
    wanted, found = tee["mode_frequency"], cabled["mode_frequency"]
    count = int(np.isfinite(wanted).sum())
    assert count == 3
    # The errors of both: 0.35 % of the cable, 0.2 % of the T.
    assert found[:count] == pytest.approx(wanted[:count], rel=0.008)
    assert cabled["mode_q"][:count] == pytest.approx(tee["mode_q"][:count], rel=0.04)


@pytest.mark.parametrize(
    ("width", "length", "way"),
    [(1.5, 150, (0, 0, 1)), (8, 75, (0, 0, 1)), (8, 210, (0, 1, 1))],
)
def test_power_balances(make, width, length, way):
    arrays = solved(with_cable(dipole(make, width), length, way))
    balance = arrays["power_balance"]
    assert balance[np.isfinite(balance)] == pytest.approx(1.0, abs=0.03)


def test_it_is_reciprocal(make):
    """The feed's current for the second source is the second source's for the feed."""
    antenna = with_cable(dipole(make), 95)
    grid = build_wires(antenna, plan_mesh([antenna]))
    for frequency in (0.6e9, 0.95e9, 1.7e9):
        currents = solve_wires(grid.wires, grid.radius_m, frequency, [grid.source, grid.probe])
        there = sum(volts * currents[0][segment] for segment, volts in grid.probe)
        back = sum(volts * currents[1][segment] for segment, volts in grid.source)
        # Point matching keeps it to a per cent or two.
        assert there == pytest.approx(back, rel=0.03)


# -- errors and names ------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def long_cable(make):
    antenna = with_cable(dipole(make), 150)
    grid = build_wires(antenna, plan_mesh([antenna]))
    return grid, find_modes(sweep_currents(antenna, grid), grid, BAND.start_hz, BAND.stop_hz)


def test_modes_of_the_cable_have_no_number(long_cable):
    grid, modes = long_cable
    parts = np.array([parts_on_cable(mode, grid)[0] for mode in modes])
    numbers = np.array([mode.half_waves for mode in told_apart(modes, grid)])
    assert np.all(numbers[parts > 0.5] == -1)
    own = numbers[numbers >= 0]
    assert 1 in own
    assert len(set(own.tolist())) == len(own)  # each number once


def test_energy_of_a_cable_that_rings_alone_is_half_magnetic(long_cable):
    grid, modes = long_cable
    for mode in modes:
        magnetic, electric = parts_on_cable(mode, grid)
        assert 0 <= magnetic <= 1
        assert 0 <= electric <= 1
        if magnetic > 0.8:
            assert electric > 0.5


def test_the_error_of_thickness_is_borne_by_modes_that_share_the_cable(long_cable):
    grid, modes = long_cable
    plain = mode_errors(modes, grid)
    assert plain == pytest.approx(grid.relative_error, rel=1e-6)
    thick = mode_errors(modes, replace(grid, cable_level_error=0.2))
    numbers = [mode.half_waves for mode in told_apart(modes, grid)]
    assert thick[numbers.index(1)] < 1.1 * grid.relative_error
    assert thick.max() > 2 * grid.relative_error


def test_the_thickness_error_is_what_flat_metal_shows(make):
    """Branches 6 and 2 mm wide beside the feed of a 6 mm strip, by the flat-sheet solver.

    Level 2 of tests/reference/sheet_moments.py, branch of 110 mm at 3.3 mm from the middle:
    745.4, 1743.6 and 2316.0 MHz with 6 mm, 735.9, 1775.2 and 2264.3 MHz with 2 mm.
    """
    shifts = np.array([735.9, 1775.2, 2264.3]) / np.array([745.4, 1743.6, 2316.0]) - 1
    antenna = with_cable(dipole(make, gap_mm=6.6), 110 - 0.45, (0, 1, 0), diameter_mm=1.0)
    grid = build_wires(antenna, plan_mesh([antenna]))
    modes = find_modes(sweep_currents(antenna, grid), grid, BAND.start_hz, BAND.stop_hz)
    found = [m for m in modes if parts_on_cable(m, grid)[0] > 0.2]
    errors = mode_errors(found, grid)
    assert len(found) == 3
    # An estimate of the size of an error: within a factor of two.
    assert np.all(errors > abs(shifts) / 2)
    assert np.all(errors < abs(shifts) * 2.2)


def mode(frequency_ghz, half_waves, strength):
    return NaturalMode(
        complex(frequency_ghz, 0.05) * 1e9, half_waves, np.ones(3, complex), 0j, strength
    )


def test_of_too_many_modes_the_strips_own_are_kept():
    modes = [mode(0.5, -1, 1.0), mode(0.9, 1, 0.1), mode(1.1, -1, 3.0), mode(2.0, 3, 0.01)]
    kept = most_wanted(modes, 3)
    assert [m.frequency_hz / 1e9 for m in kept] == pytest.approx([0.9, 1.1, 2.0])


def test_without_a_cable_nothing_is_said_of_one(make):
    arrays = solved(dipole(make))
    assert np.all(np.isnan(arrays["cable_current"]))
    assert np.all(np.isnan(arrays["mode_on_cable"]))
