"""Ends of strips on carriers: solution in space, its table, and the correction drawn from it."""

from __future__ import annotations

from importlib.resources import files

import numpy as np
import pytest

from simkit.crosssection import CrossSection, FlatConductor, Layer, kappa, single_strip
from simkit.crosssection import end_charge as space
from simkit.crosssection.end_charge import Block, end_shortening
from simkit.crosssection.ends import (
    ENGINE_EXCESS,
    TABLE_ERROR,
    _table_value,
    end_correction,
)

pytestmark = pytest.mark.long

SQUARE_PLATE = 0.366789
CUBE = 0.660678
"""Capacitances over 4 pi eps0 and the edge, from memory of Read, J. Comput. Phys. 133, 1997, and
Hwang & Mascagni, J. Appl. Phys. 95, 2004."""

PLASTIC = [Layer(3e-3, 2.7)]


class TestSolutionInSpace:
    @pytest.mark.parametrize(
        ("permittivity", "published"), [(1.0, SQUARE_PLATE), (1e7, CUBE)], ids=["plate", "cube"]
    )
    def test_plate_and_cube(
        self, monkeypatch: pytest.MonkeyPatch, permittivity: float, published: float
    ) -> None:
        """A strip as long as wide is a plate; on a cube of endless permittivity it is a cube."""
        monkeypatch.setattr(space, "HALF_LENGTH", 0.5)
        block = Block(1.0, 0.0, 0.0)
        coarse, fine = (
            space._strip_charges(block, [permittivity], counts)[0]
            for counts in ((6, 4, 4, 6, 4), (9, 6, 6, 9, 6))
        )
        # A few rectangles across an edge, extrapolated: 2e-4 is what is left.
        assert fine + (fine - coarse) / 1.25 == pytest.approx(published, rel=4e-4)

    def test_tube_of_rings(self) -> None:
        """The kernel is the mean of 1/distance around a ring."""
        angle = 2 * np.pi * np.arange(4000) / 4000
        away = np.sqrt(0.3**2 + (2 * 0.7 * np.sin(angle / 2)) ** 2)
        assert space._ring(np.array([0.3]), 0.7)[0] == pytest.approx(np.mean(1 / away), rel=1e-12)
        # Twice the rings.
        assert space.tube_charge(0.25, 6.0) == pytest.approx(
            space.tube_charge(0.25, 6.0, 160), rel=3e-6
        )

    @pytest.mark.parametrize("half_length", [4.0, 9.0])
    def test_a_bare_end_is_the_same_at_any_length(
        self, monkeypatch: pytest.MonkeyPatch, half_length: float
    ) -> None:
        monkeypatch.setattr(space, "HALF_LENGTH", half_length)
        # The rectangles along the strip grow with it: 1e-3 between the two lengths.
        assert end_shortening(Block(1.0, 0.0, 0.0), [1.0])[0] == pytest.approx(0.049, abs=1e-3)

    def test_plastic_like_air_changes_nothing(self) -> None:
        bare, nearly = end_shortening(Block(0.3, 0.0, 0.0), [1.0, 1.0001])
        assert nearly == pytest.approx(bare, abs=1e-4)

    def test_a_row_of_the_table_comes_out_again(self) -> None:
        block = Block(0.5, 0.0, 0.0)
        found = end_shortening(block, [1.0, *space.PERMITTIVITIES])
        # Printed digits, and the root's tolerance.
        np.testing.assert_allclose(found[1:] - found[0], _row(block), atol=5e-5)

    @pytest.mark.long
    @pytest.mark.parametrize(
        "block", [Block(0.5, 0.5, 0.0), Block(0.25, 1.0, 0.5), Block(2.0, 0.0, 2.0)], ids=str
    )
    def test_more_rows_of_the_table(self, block: Block) -> None:
        found = end_shortening(block, [1.0, *space.PERMITTIVITIES])
        np.testing.assert_allclose(found[1:] - found[0], _row(block), atol=5e-5)

    @pytest.mark.long
    def test_between_the_rows(self) -> None:
        block, permittivities = Block(0.9, 0.7, 0.35), [1.2, 2.0, 3.4]
        found = end_shortening(block, [1.0, *permittivities])
        sizes = (block.thickness, block.overhang, block.end_overhang)
        table = [_table_value(*sizes, permittivity) for permittivity in permittivities]
        # The largest of 42 such differences was 0.0012.
        np.testing.assert_allclose(found[1:] - found[0], table, atol=2e-3)

    @pytest.mark.long
    def test_on_plastic_too_the_end_is_the_same_at_any_length(
        self, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        block = Block(0.5, 0.5, 0.0)
        monkeypatch.setattr(space, "HALF_LENGTH", 10.0)
        found = end_shortening(block, [1.0, 2.7])
        # Longer rectangles for the longer strip; 0.0006 came out between 5 and 8 widths.
        assert found[1] - found[0] == pytest.approx(_row(block)[1], abs=3e-3)


def _row(block: Block) -> np.ndarray:
    text = files("simkit.crosssection").joinpath("end_table.txt").read_text("utf-8")
    rows = np.loadtxt(text.splitlines())
    sizes = (block.thickness, block.overhang, block.end_overhang)
    (chosen,) = rows[np.all(rows[:, :3] == sizes, axis=1)]
    return np.asarray(chosen[3:])


class TestCorrection:
    def test_bare_strip_needs_none(self) -> None:
        """Permittivity 1 everywhere."""
        bare = end_correction(single_strip(6e-3, [Layer(3e-3, 1.0)], 2e-3), 0.0)
        assert bare.shortening_m == pytest.approx(0.0, abs=1e-9)
        assert bare.doubts == ()

    def test_flush_and_wide_carriers_of_the_field_solution(self) -> None:
        """Natural modes of 150 x 6 mm on 3 mm of permittivity 2.7, ends flush.

        The uncorrected model was 0.15 to 0.25 % low with flush sides and 0.4 to 0.45 % with an
        overhang of 3 mm; a length dl off both ends raises a mode by 2 dl/L.
        """
        flush = end_correction(single_strip(6e-3, PLASTIC, 0.0), 0.0)
        wide = end_correction(single_strip(6e-3, PLASTIC, 3e-3), 0.0)
        # The field solution is good to 0.2 %, its own bare strip to 0.02 %.
        assert 2 * flush.shortening_m / 0.15 == pytest.approx(0.0020, abs=0.0015)
        assert 2 * wide.shortening_m / 0.15 == pytest.approx(0.0043, abs=0.0015)
        assert flush.error_m == wide.error_m == pytest.approx(TABLE_ERROR * 6e-3)

    def test_plastic_beyond_the_end_lengthens(self) -> None:
        section = single_strip(6e-3, PLASTIC, 3e-3)
        lengths = [end_correction(section, beyond).shortening_m for beyond in (0, 1e-3, 3e-3, 9e-3)]
        assert np.all(np.diff(lengths) < 0), lengths
        assert lengths[0] > 0 > lengths[-1]

    def test_table_and_share_of_the_engine(self) -> None:
        section = single_strip(6e-3, PLASTIC, 3e-3)
        grown = ENGINE_EXCESS * (np.exp(kappa(section).real) - 1)
        expected = 6e-3 * (_row(Block(0.5, 0.5, 0.0))[1] + grown)
        assert end_correction(section, 0.0).shortening_m == pytest.approx(expected, rel=1e-3)

    def test_layers_count_as_the_uniform_carrier_of_equal_kappa(self) -> None:
        uniform = end_correction(single_strip(6e-3, PLASTIC, 2e-3), 1e-3)
        split = end_correction(single_strip(6e-3, [Layer(1e-3, 2.7), Layer(2e-3, 2.7)], 2e-3), 1e-3)
        # The permittivity of layers is searched to 1e-4.
        assert split.shortening_m == pytest.approx(uniform.shortening_m, rel=1e-4)
        airy = end_correction(single_strip(6e-3, [Layer(1e-3, 1.0), Layer(2e-3, 2.7)], 2e-3), 1e-3)
        assert 0 < airy.shortening_m / uniform.shortening_m < 1

    def test_strip_underneath_is_the_same(self) -> None:
        on_top = end_correction(single_strip(6e-3, PLASTIC, 2e-3), 0.0)
        underneath = end_correction(single_strip(6e-3, PLASTIC, 2e-3, depth_m=3e-3), 0.0)
        assert underneath.shortening_m == pytest.approx(on_top.shortening_m, rel=1e-6)
        assert underneath.doubts == ()

    def test_thin_carriers_fade_out(self) -> None:
        thin, thinner = (
            end_correction(single_strip(6e-3, [Layer(t, 2.7)], 2e-3), 2e-3).shortening_m
            for t in (0.2e-3, 0.02e-3)
        )
        assert thin < thinner < 0
        assert abs(thinner) < 0.15 * abs(thin)

    @pytest.mark.parametrize(
        ("section", "beyond", "match"),
        [
            (single_strip(1e-3, PLASTIC, 0.0), 0.0, "carrier thickness of 3 strip widths"),
            (single_strip(1e-3, [Layer(1e-3, 2.7)], 4e-3), 0.0, "overhang of 4 strip widths"),
            (single_strip(6e-3, PLASTIC, 0.0), 0.03, "end overhang of 5 strip widths, beyond 2"),
            (single_strip(6e-3, [Layer(3e-3, 9.8)], 1e-3), 0.0, "permittivity of 9.8, beyond 4.4"),
            (single_strip(6e-3, PLASTIC, 0.0, depth_m=1e-3), 0.0, "plastic on both sides"),
        ],
    )
    def test_beyond_the_limits_it_says_so(
        self, section: CrossSection, beyond: float, match: str
    ) -> None:
        correction = end_correction(section, beyond)
        assert any(match in doubt for doubt in correction.doubts), correction.doubts
        inside = TABLE_ERROR * section.strips[0].width_m
        assert correction.error_m >= inside + abs(correction.shortening_m) / 2 - 1e-12

    def test_impossible_questions(self) -> None:
        with pytest.raises(ValueError, match="end overhang is -1 mm: it must be 0 or more"):
            end_correction(single_strip(6e-3, PLASTIC, 0.0), -1e-3)
        pair = (FlatConductor(-4e-3, 2e-3), FlatConductor(4e-3, 2e-3))
        with pytest.raises(ValueError, match="2 strips on one carrier"):
            end_correction(CrossSection(pair, -6e-3, 6e-3, (Layer(1e-3, 2.7),)), 0.0)
