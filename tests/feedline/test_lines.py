"""Lines: limits, loss, doubts and refusals."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.constants import c, mu_0

from simkit.crosssection.potential import solve
from simkit.feedline import FeedlineError
from simkit.feedline.closed_forms import (
    coplanar_strips_air_ohm,
    strip_over_plate_air_ohm,
    strip_over_plate_permittivity,
    two_strips_wheeler_ohm,
)
from simkit.feedline.line import metal_impedance_ohm
from simkit.feedline.lines import CoplanarStrips, StripOverPlate, TwoStrips, width_for
from simkit.feedline.pair import Crowding, _facing, face_to_face, solve_mirrored
from simkit.feedline.round_lines import Coaxial, UniformLine

F = np.array([0.3e9, 0.868e9, 2.4e9])
COPPER = 5.8e7


@pytest.mark.parametrize("ratio", [0.05, 0.4, 3.0, 20.0])
def test_plane_solution_against_closed_forms_in_air(ratio):
    line = TwoStrips(ratio * 2e-3, 2e-3)
    # Stated accuracy of the formula for a strip over a plate.
    exact = 2 * float(strip_over_plate_air_ohm(2 * ratio))
    assert line.impedance_ohm == pytest.approx(exact, rel=4e-4)
    assert float(two_strips_wheeler_ohm(ratio)) == pytest.approx(exact, rel=6e-3)


@pytest.mark.parametrize("permittivity", [2.2, 4.5, 10.0])
@pytest.mark.parametrize("ratio", [0.5, 4.0])
def test_plane_solution_against_hammerstad_and_jensen(ratio, permittivity):
    line = StripOverPlate(ratio * 1.6e-3, 1.6e-3, permittivity=permittivity)
    effective = float(strip_over_plate_permittivity(ratio, permittivity))
    # 0.2 % is what the authors state.
    assert line.static.permittivity.real == pytest.approx(effective, rel=2e-3)


@pytest.mark.parametrize("ratio", [0.1, 0.7, 8.0])
def test_coplanar_strips_against_conformal_mapping(ratio):
    line = CoplanarStrips(3e-3, ratio * 3e-3)
    assert line.impedance_ohm == pytest.approx(float(coplanar_strips_air_ohm(ratio)), rel=3e-4)


def test_coplanar_strips_deep_in_a_thick_sheet_see_half_of_it():
    line = CoplanarStrips(1e-3, 1e-3, sheet_m=40e-3, permittivity=4.0, overhang_m=40e-3)
    # Half space of 4 and of 1; what the far side of the sheet takes away is below 0.5 %.
    assert line.static.permittivity.real == pytest.approx(2.5, rel=5e-3)


def test_wide_strips_approach_parallel_plates():
    line = TwoStrips(0.5, 5e-3, permittivity=3.0, overhang_m=0.0)
    plates = mu_0 * c / np.sqrt(3.0) * 5e-3 / 0.5
    # The fringe adds some 4 % to a strip a hundred separations wide.
    assert 0.95 * plates < line.impedance_ohm < plates


def test_a_wider_second_strip_and_a_thicker_one_lower_the_impedance():
    bare = TwoStrips(4e-3, 2e-3).impedance_ohm
    assert TwoStrips(4e-3, 2e-3, other_width_m=6e-3).impedance_ohm < bare
    assert TwoStrips(4e-3, 2e-3, thickness_m=0.2e-3).impedance_ohm < bare
    wide = TwoStrips(4e-3, 2e-3, other_width_m=200e-3).impedance_ohm
    plate = StripOverPlate(4e-3, 2e-3).impedance_ohm
    assert wide == pytest.approx(plate, rel=2e-3)  # the plate ends at 50 heights


def test_which_strip_is_the_wider_one_does_not_matter():
    one = TwoStrips(3e-3, 1e-3, 0.1e-3, 2.7, 0.01, 1e-3, COPPER, 5e-3)
    two = TwoStrips(5e-3, 1e-3, 0.1e-3, 2.7, 0.01, 1e-3, COPPER, 3e-3)
    assert one.values(F).impedance_ohm == pytest.approx(two.values(F).impedance_ohm, rel=1e-4)
    assert one.values(F).attenuation_db_per_m == pytest.approx(
        two.values(F).attenuation_db_per_m, rel=1e-3
    )


@pytest.mark.parametrize("thickness", [0.0, 0.05])
@pytest.mark.parametrize("permittivity", [1 + 0j, 2.7 - 0.05j])
def test_half_of_a_mirrored_section_is_enough(thickness, permittivity):
    for count in (7, 8):  # with and without a panel across the middle
        panels = _facing(1.0, 1.6, 0.4, thickness, 0.3, permittivity, count)
        whole, half = solve(panels), solve_mirrored(panels)
        assert half.capacitance == pytest.approx(whole.capacitance, rel=1e-9)
        assert half.charge == pytest.approx(whole.charge, rel=1e-6, abs=1e-12)


def test_loss_of_metal_follows_wheelers_rule():
    """The inductance grows when all metal recedes, and so much is the resistance."""
    thick, step = 0.1, 1e-4
    pair = face_to_face(1.0, 1.0, 0.4, thick, 0.0, 1 + 0j)
    inward, outward = (
        1 / face_to_face(1 - d, 1 - d, 0.4 + d, thick - d, 0.0, 1 + 0j).air for d in (step, -step)
    )
    # `d` moves every face by d / 2.
    rule = (inward - outward) / step
    shares = [part.faces + part.sides for part in pair.crowding]
    # Crowding at the corners is not extrapolated: 0.1 %.
    assert sum(shares) == pytest.approx(rule, rel=2e-3)


def test_loss_of_a_plate():
    """The plate without end, by the recession of its face, against a wide one, by its charge."""
    sizes = {"thickness_m": 0.1e-3, "conductivity_s_per_m": COPPER}
    endless = StripOverPlate(4e-3, 1e-3, **sizes).values(F)
    wide = TwoStrips(4e-3, 1e-3, other_width_m=60e-3, **sizes).values(F)
    # The wide plate ends at 30 heights and carries a little on its far side.
    assert endless.resistance_ohm == pytest.approx(wide.resistance_ohm, rel=5e-3)
    image = TwoStrips(4e-3, 2e-3, **sizes).values(F)
    # The plate adds to the strip's loss, half of the pair's: less than the strip, for it is wider.
    added = endless.resistance_ohm / (image.resistance_ohm / 2)
    assert np.all((added > 1.3) & (added < 2))


def test_thin_metal_has_the_resistance_of_its_sheet():
    shares = Crowding(2 * 0.5**2, 2 * 0.5**2, 0.0)  # 1 A evenly on both faces of unit width
    found = metal_impedance_ohm(shares, 1e-7, COPPER, np.array([1e6]))
    assert found.real == pytest.approx(1 / (COPPER * 1e-7), rel=1e-6)
    solid = metal_impedance_ohm(shares, np.inf, COPPER, np.array([1e9]))
    assert solid.real == pytest.approx(np.sqrt(np.pi * 1e9 * mu_0 / COPPER) / 2, rel=1e-12)


def test_loss_of_a_dielectric_that_fills_all():
    """Between wide plates the field is all in the sheet."""
    line = TwoStrips(0.2, 1e-3, permittivity=2.7, loss_tangent=0.01)
    k = 2 * np.pi * F / c
    expected = 20 / np.log(10) * k * np.sqrt(2.7) * 0.01 / 2
    assert line.values(F).dielectric_db_per_m == pytest.approx(expected, rel=0.01)  # fringe
    assert line.values(F).conductor_db_per_m == pytest.approx(np.zeros(3))


def test_coaxial_line_is_exact():
    line = Coaxial(0.51e-3, 1.68e-3, 2.08, 2e-4, COPPER)
    values = line.values(F)
    lossless = mu_0 * c / (2 * np.pi * np.sqrt(2.08)) * np.log(1.68 / 0.51)
    assert values.impedance_ohm.real == pytest.approx(np.full(3, lossless), rel=7e-3)  # skin
    surface = np.sqrt(np.pi * F * mu_0 / COPPER)
    around = (1 / 0.51e-3 + 1 / 1.68e-3) / np.pi
    assert values.resistance_ohm == pytest.approx(surface * around)
    assert line.frequency_limit_hz == pytest.approx(60.4e9, rel=1e-3)
    (doubt,) = line.doubts([1e9, 70e9])
    assert "second mode; this is used up to 7e+04 MHz" in doubt


def test_cable_has_the_attenuation_of_its_data_sheet():
    line = UniformLine(50.0, 0.66, 0.5, 868e6)
    values = line.values([868e6, 4 * 868e6])
    assert values.conductor_db_per_m == pytest.approx([0.5, 1.0], rel=1e-4)
    assert values.attenuation_db_per_m == pytest.approx([0.5, 1.0], rel=1e-4)
    assert values.permittivity == pytest.approx(np.full(2, 1 / 0.66**2), rel=1e-4)
    assert line.doubts([1e12]) == ()


def test_doubts_name_what_is_exceeded():
    line = TwoStrips(8e-3, 3e-3, 20e-6, 2.7, conductivity_s_per_m=1.5e7)
    assert line.doubts([0.868e9]) == ()
    assert line.frequency_limit_hz < 2.5e9
    found = "\n".join(line.doubts([1e6, 6e9]))
    assert "radiates more than 5%" in found
    assert "wavelengths wide" in found
    assert "effective permittivity has risen" in found
    assert "thinner than 2 skin depths" in found
    narrow = TwoStrips(1e-5, 3e-3)
    assert "checked from 0.01 to 100" in narrow.doubts([1e8])[0]


@pytest.mark.parametrize("wanted", [40.0, 90.0])
def test_width_for_an_impedance(wanted):
    line = width_for(TwoStrips(5e-3, 1.6e-3, 0.1e-3, 2.7, overhang_m=0.0), wanted)
    assert line.impedance_ohm == pytest.approx(wanted, rel=1e-5)
    assert line.separation_m == 1.6e-3


def test_no_width_for_an_impedance():
    with pytest.raises(FeedlineError, match=r"no width from 0.02 to 50 .* gives 900 ohm"):
        width_for(StripOverPlate(2e-3, 1e-3), 900.0)


@pytest.mark.parametrize(
    ("make", "match"),
    [
        (lambda: TwoStrips(-1e-3, 1e-3), "strip width is -1 mm: it must be finite and more than 0"),
        (lambda: TwoStrips(1e-3, 0.0), "strip separation is 0 mm"),
        (lambda: TwoStrips(1e-3, 1e-3, permittivity=0.5), "relative permittivity is 0.5"),
        (lambda: TwoStrips(1e-3, 1e-3, overhang_m=-1e-3), "overhang of the sheet is -1 mm"),
        (
            lambda: StripOverPlate(1e-3, 1e-3, conductivity_s_per_m=5e7),
            "thickness of metal with loss is 0 mm",
        ),
        (lambda: CoplanarStrips(1e-3, 1e-3, permittivity=2.0), "thickness of a sheet with"),
        (lambda: Coaxial(2e-3, 1e-3), "inner conductor of 2 mm does not fit"),
        (lambda: UniformLine(50.0, 1.2), "velocity factor is 1.2"),
        (lambda: UniformLine(float("nan")), "line impedance is nan ohm"),
        (lambda: UniformLine(50.0).values([0.0]), "all must be finite and more than 0"),
    ],
)
def test_lines_that_cannot_be(make, match):
    with pytest.raises(FeedlineError, match=match):
        make()
