"""The one module that talks to the field engine."""

import subprocess
import sys
from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest

from simkit.engine import pynec
from simkit.engine.pynec import LumpedLoad, SeriesLoad, engine_version, solve_wires
from simkit.errors import EngineError
from simkit.geometry import build_wires, plan_mesh
from simkit.geometry.wires import Wire

RADIUS = 1.5e-3
STRAIGHT = (Wire((0.0, 0.0, 0.0), (0.15, 0.0, 0.0), 45),)


def solve(sources, frequency=0.95e9, wires=STRAIGHT, **options):
    return solve_wires(wires, RADIUS, frequency, sources, **options)


def test_one_row_of_currents_for_each_excitation():
    currents = solve([((22, 1.0),), ((5, 1.0),), ((40, 0.5), (41, 0.5))])
    assert currents.shape == (3, 45)
    assert currents.dtype == np.complex128


@pytest.mark.parametrize("frequency", [0.4e9, 0.95e9, 1.9e9, 2.8e9])
def test_reciprocity(frequency):
    """Equal segments of a straight wire: the matrix is symmetric up to its kernel's 1e-5."""
    currents = solve([((22, 1.0),), ((5, 1.0),)], frequency)
    assert currents[1][22] == pytest.approx(currents[0][5], rel=1e-3)


def test_excitations_do_not_leak_into_each_other():
    both = solve([((22, 1.0),), ((5, 1.0),)])
    assert solve([((5, 1.0),)])[0] == pytest.approx(both[1], rel=1e-12)


def test_superposition_of_split_sources():
    both = solve([((22, 1.0),), ((5, 1.0),), ((22, 0.5), (5, 0.5))])
    assert both[2] == pytest.approx((both[0] + both[1]) / 2, rel=1e-9)


def test_repeated_solves_are_bit_identical():
    first = solve([((22, 1.0),), ((5, 1.0),)])
    solve([((3, 1.0),)], 2.2e9)
    assert np.array_equal(first, solve([((22, 1.0),), ((5, 1.0),)]))


def test_results_outlive_the_engine_context():
    """Many contexts made and dropped afterwards must not touch what was returned."""
    kept = solve([((22, 1.0),)])
    copy = kept.copy()
    for k in range(5):
        solve([((k, 1.0),)], 1e9 + k * 1e8)
    assert np.array_equal(kept, copy)


def test_current_is_positive_from_the_start_of_its_wire():
    turned = (Wire(STRAIGHT[0].end_m, STRAIGHT[0].start_m, 45),)
    forward, backward = solve([((22, 1.0),)]), solve([((22, 1.0),)], wires=turned)
    assert backward[0] == pytest.approx(forward[0][::-1], rel=1e-9)


def test_segments_are_numbered_through_all_wires():
    parts = (
        Wire((0.0, 0.0, 0.0), (0.05, 0.0, 0.0), 15),
        Wire((0.05, 0.0, 0.0), (0.15, 0.0, 0.0), 30),
    )
    whole = solve([((22, 1.0),)], extended_kernel=False)
    assert solve([((22, 1.0),)], wires=parts, extended_kernel=False) == pytest.approx(
        whole, rel=1e-9
    )


def test_lumped_load_on_the_source_adds_to_the_impedance():
    frequency = 0.95e9
    omega = 2 * np.pi * frequency
    plain = 1 / solve([((22, 1.0),)], frequency)[0][22]
    load = LumpedLoad(22, 10.0, 3e-9, 5e-12)
    loaded = 1 / solve([((22, 1.0),)], frequency, lumped=[load])[0][22]
    expected = 10 + 1j * omega * 3e-9 + 1 / (1j * omega * 5e-12)
    # The engine takes the angular frequency from rounded constants, 5e-5 off.
    assert loaded - plain == pytest.approx(expected, rel=1e-4)


def test_series_load_damps_and_slows():
    peak = [
        abs(solve([((22, 1.0),)], series=series)[0][22])
        for series in ((), [SeriesLoad(0.0)], [SeriesLoad(200.0)], [SeriesLoad(0.0, 50e-9)])
    ]
    assert peak[1] == peak[0]
    assert peak[2] < peak[0]
    assert peak[3] != pytest.approx(peak[0], rel=1e-2)


def test_series_resistance_takes_its_part_of_the_power():
    """Input power minus that with the same currents lost in the wire stays positive."""
    ohm_per_m = 50.0
    current = solve([((22, 1.0),)], series=[SeriesLoad(ohm_per_m)])[0]
    lost = 0.5 * ohm_per_m * np.sum(abs(current) ** 2) * 0.15 / 45
    assert 0.02 < lost / (0.5 * current[22].real) < 0.5


def test_each_wire_has_its_own_series_load():
    """On one wire of three, then on all: the same as lumped loads on its segments, on every one."""
    parts = (
        Wire((0.0, 0.0, 0.0), (0.05, 0.0, 0.0), 15),
        Wire((0.05, 0.0, 0.0), (0.10, 0.0, 0.0), 15),
        Wire((0.10, 0.0, 0.0), (0.15, 0.0, 0.0), 15),
    )
    ohm, henry, frequency = 300.0, 2e-7, 0.95e9
    length = 0.05 / 15
    for loaded in ((False, True, False), (False, False, True), (True, True, True)):
        series = [SeriesLoad(ohm, henry) if on else SeriesLoad() for on in loaded]
        lumped = [
            LumpedLoad(15 * number + k, ohm * length, henry * length)
            for number, on in enumerate(loaded)
            if on
            for k in range(15)
        ]
        spread = solve([((22, 1.0),)], frequency, parts, series=series)
        # The engine takes the angular frequency of lumped loads from rounded constants, 5e-5 off.
        assert spread == pytest.approx(
            solve([((22, 1.0),)], frequency, parts, lumped=lumped), rel=2e-4
        )
    assert abs(spread[0][22] / solve([((22, 1.0),)], frequency, parts)[0][22] - 1) > 0.1


@pytest.mark.parametrize("frequency", [0.0, -1e9, float("nan"), float("inf")])
def test_frequencies_that_would_hang_the_engine(frequency):
    with pytest.raises(EngineError, match="the frequency must be positive, else the engine hangs"):
        solve([((22, 1.0),)], frequency)


def test_error_names_the_step_and_what_went_in():
    crossing = (*STRAIGHT, Wire((0.0717, -0.03, 0.0), (0.0717, 0.04, 0.0), 21))
    with pytest.raises(
        EngineError,
        match=r"2 wires of radius 1.5 mm at 950 MHz: the engine failed while building the wires",
    ):
        solve([((22, 1.0),)], wires=crossing)


def test_a_failure_while_solving_is_told_apart(monkeypatch):
    def fail(*_):
        raise RuntimeError("Unknown exception")

    monkeypatch.setattr(pynec, "_execute", fail)
    with pytest.raises(EngineError, match=r"failed while solving \(Unknown exception\)"):
        solve([((22, 1.0),)])


def test_an_error_of_ours_is_not_dressed_up_as_one_of_the_engine():
    with pytest.raises(IndexError, match="list index out of range"):
        solve([((99, 1.0),)])


def test_a_wire_without_length_gives_currents_that_are_not_finite():
    with pytest.raises(EngineError, match="currents that are not finite"):
        solve([((0, 1.0),)], wires=(*STRAIGHT, Wire((0.0, 0.1, 0.0), (0.0, 0.1, 0.0), 1)))


def test_a_source_that_gives_power_back_is_refused(monkeypatch):
    monkeypatch.setattr(pynec, "_execute", lambda *_: np.full(45, -1e-3 + 0j))
    with pytest.raises(EngineError, match=r"the source would take -0.0005 W; a passive antenna"):
        solve([((22, 1.0),)])


def test_currents_of_another_number_are_refused(monkeypatch):
    monkeypatch.setattr(pynec, "_execute", lambda *_: np.ones(44, dtype=complex))
    with pytest.raises(EngineError, match=r"currents of shape \(1, 44\), expected \(1, 45\)"):
        solve([((22, 1.0),)])


def test_engine_version_names_the_engine():
    name, number = engine_version().split()
    assert name == "PyNEC"
    assert number[0].isdigit()


def test_a_strip_of_changing_width_has_wires_of_one_radius(make, monkeypatch):
    """Where wires of two radii meet, the engine errs by per cents and says nothing."""
    seen = []

    class Recorder:
        def get_geometry(self):
            return self

        def wire(self, tag, segments, *numbers):
            seen.append(numbers[6:])

        def geometry_complete(self, *_):
            raise RuntimeError("enough seen")

    antenna = make.strip([(-75, 0), (0, 0), (75, 30)], 30, 75)
    (one,) = antenna.strips
    antenna = replace(antenna, strips=(replace(one, widths_m=(0.03, 0.006, 0.03)),))
    grid = build_wires(antenna, plan_mesh([antenna]))
    monkeypatch.setitem(sys.modules, "PyNEC", SimpleNamespace(nec_context=Recorder))
    with pytest.raises(EngineError, match="enough seen"):
        solve_wires(grid.wires, grid.radius_m, 1e9, [grid.source])
    assert len(seen) == len(grid.wires)
    # Radius, and the two factors by which radius and length of segments may grow along a wire.
    assert set(seen) == {(grid.radius_m, 1.0, 1.0)}


def test_importing_the_module_does_not_load_the_engine():
    code = "import sys, simkit.engine.pynec; print('PyNEC' in sys.modules)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "False"


def test_currents_of_a_mirrored_antenna_are_mirrored(make):
    path = [(0, 0), (60, 0), (80, 40)]
    rows = []
    for sign in (1, -1):
        antenna = make.strip([(sign * x, y) for x, y in path], 4, 22)
        grid = build_wires(antenna, plan_mesh([antenna]))
        rows.append(solve_wires(grid.wires, grid.radius_m, 1.4e9, [grid.source])[0])
    assert rows[1] == pytest.approx(rows[0], rel=1e-9)
