"""Pictures of networks: what they show is what the chain does."""

from __future__ import annotations

import numpy as np
import pytest
from matplotlib.patches import Rectangle

from simkit.feedline import (
    Chain,
    FeedlineError,
    LineSection,
    Lumped,
    OnePort,
    PortExtension,
    Stub,
    TappedLine,
    Transformer,
    TwoStrips,
    UniformLine,
)
from simkit.plot.matching import folded, plot_match, plot_match_path
from simkit.plot.schematic import plot_schematic
from simkit.plot.style import QUIET

F = np.linspace(800e6, 940e6, 29)
LOAD = OnePort.from_impedance(F, 30 + 1j * np.linspace(-60, 90, 29))
CABLE = UniformLine(75.0, 0.8)
STRIPS = TwoStrips(5e-3, 3e-3)
CHAIN = Chain(
    (
        LineSection(STRIPS, 30e-3),
        Lumped("C", 2.2e-12, "shunt", 200),
        Lumped("L", 6.8e-9, "series", 40),
        Transformer(1.5, 0.3),
        Stub(STRIPS, 12e-3, "open", "series"),
        TappedLine(CABLE, 40e-3, 25e-3),
        PortExtension.of_length(20e-3, 2.1),
    )
)


def lines_by_label(ax):
    return {line.get_label().split("  ")[0].split(",")[0]: line for line in ax.get_lines()}


def test_path_runs_from_terminals_to_connector():
    ax = plot_match_path(CHAIN, LOAD, 868e6, (855e6, 880e6))
    shown = lines_by_label(ax)
    at = LOAD.at([868e6])
    assert shown["1"].get_xdata()[0] == pytest.approx(at.reflection[0].real)
    last = CHAIN.reflection(at)[0]
    assert shown["8"].get_xdata()[-1] == pytest.approx(last.real)
    assert shown["8"].get_ydata()[-1] == pytest.approx(last.imag)
    words = [text.get_text() for text in ax.get_legend().get_texts()]
    assert any("shunt 2.2\u00a0pF" in text for text in words)
    assert ax.get_title(loc="left") == "from terminals to connector at 868 MHz"
    ax.figure.canvas.draw()


@pytest.mark.parametrize(
    ("load_ohm", "sizes"),
    [
        (58 + 8j, (24, 5.9, 80)),  # half way along, a number would cover the 50
        (48 + 14j, (66, 6.4, 29)),
        (102 - 46j, (64, 13.0, 25)),  # VSWR 2
        (82 + 81j, (20, 6.7, 76)),  # the 1
        (148 - 20j, (45, 12.9, 23)),  # 25
    ],
)
def test_numbers_of_a_path_cover_no_mark_of_the_chart(load_ohm, sizes):
    load = OnePort.from_impedance(F, np.full(len(F), load_ohm))
    line, (section, coil, stub) = UniformLine(50.0), sizes
    chain = Chain(
        (
            LineSection(line, section * 1e-3),
            Lumped("L", coil * 1e-9, "series"),
            Stub(line, stub * 1e-3),
        )
    )
    ax = plot_match_path(chain, load, 868e6)
    ax.figure.draw_without_rendering()
    texts = [text for text in ax.texts if text.get_text().strip()]
    numbers = [text for text in texts if text.get_color() != QUIET and len(text.get_text()) == 1]
    assert [text.get_text() for text in numbers] == ["1", "2", "3"]
    for number in numbers:
        box = number.get_window_extent()
        for other in texts:
            if other is not number:
                assert not box.overlaps(other.get_window_extent()), other.get_text()


def test_numbers_of_a_path_cover_neither_curves_nor_marks():
    """A short way that ends in the middle of the chart, among the curves over the band."""
    band = np.linspace(845e6, 890e6, 29)
    load = OnePort.from_impedance(band, np.linspace(58 - 32.5j, 70.2 - 6.8j, 29))
    first, second = TwoStrips(5e-3, 2e-3), TwoStrips(10.6e-3, 2e-3)
    chain = Chain((LineSection(first, 17.68e-3), LineSection(second, 79.77e-3)))
    ax = plot_match_path(chain, load, 867.5e6, (845e6, 890e6))
    ax.figure.draw_without_rendering()
    numbers = [text for text in ax.texts if text.get_text() in ("1", "2")]
    assert len(numbers) == 2
    for number in numbers:
        for drawn in ax.lines:
            away = np.hypot(*(np.column_stack(drawn.get_data()) - number.get_position()).T)
            # Half the height of a digit is 0.03 of the chart's radius.
            assert away.min() > 0.03, (number.get_text(), drawn.get_label())
    (middle,) = (text for text in ax.texts if text.get_text() == "50")
    # A match ends in the middle of the chart: half of a mark of 7 points, and its edge.
    mark = ax.transData.transform((0.0, 0.0))[0] + 4 * ax.figure.dpi / 72
    assert middle.get_window_extent().x0 > mark


def test_path_of_an_empty_chain_and_of_a_matched_load():
    ax = plot_match_path(Chain(), LOAD, 868e6)
    assert {"terminals", "connector"} <= set(lines_by_label(ax))
    matched = OnePort.from_impedance(F, np.full(29, 50.0))
    plot_match_path(Chain((LineSection(UniformLine(50.0), 0.1),)), matched, 868e6)


def test_reflection_before_and_after():
    ax = plot_match(CHAIN, LOAD, 855.3e6, 880.1e6)
    before, after = (line for line in ax.get_lines() if len(line.get_xdata()) > 2)
    band = LOAD.at(np.linspace(855.3e6, 880.1e6, 201))
    worst = 20 * np.log10(np.abs(CHAIN.reflection(band)).max())
    assert f"−{-worst:.1f} dB" in after.get_label()
    assert after.get_ydata()[0] == pytest.approx(
        20 * np.log10(abs(CHAIN.reflection(LOAD)[0])), rel=1e-6
    )
    assert before.get_ydata()[0] == pytest.approx(20 * np.log10(abs(LOAD.reflection[0])))
    (shaded,) = (p for p in ax.patches if p.get_label() == "band")
    assert shaded.get_x() == pytest.approx(855.3)
    assert shaded.get_width() == pytest.approx(24.8)
    assert ax.get_xlabel() == "frequency (MHz)"


def test_exact_match_is_cut_off():
    matched = OnePort.from_impedance(F, np.full(29, 50.0))
    ax = plot_match(Chain(), matched, 850e6, 880e6)
    assert ax.get_ylim()[0] == -40


def test_band_without_width_is_refused():
    with pytest.raises(FeedlineError, match="has no width"):
        plot_match(CHAIN, LOAD, 860e6, 860e6)


def test_schematic_is_to_scale():
    ax = plot_schematic(CHAIN)
    assert ax.get_aspect() == 1
    boxes = [p for p in ax.patches if isinstance(p, Rectangle)]
    wide = [round(box.get_width(), 6) for box in boxes]
    high = [round(box.get_height(), 6) for box in boxes]
    section = wide.index(30.0)
    assert high[section] == pytest.approx(5.0)  # the strip's own width
    assert 40.0 in wide
    assert {12.0, 25.0} <= set(high)
    texts = [text.get_text() for text in ax.texts]
    assert {"30.0", "12.0", "40.0", "25.0", "2.2 pF", "6.8 nH", "antenna"} <= set(texts)
    assert {str(n) for n in range(1, 9)} <= set(texts)
    assert "transformer 1 : 1.5" in texts[-1]


def test_elements_of_a_schematic_do_not_overlap():
    wide = TwoStrips(20e-3, 3e-3)
    chain = Chain((LineSection(wide, 30e-3), Stub(wide, 25e-3), LineSection(wide, 30e-3)))
    ax = plot_schematic(chain)
    boxes = [p.get_bbox() for p in ax.patches if isinstance(p, Rectangle)]
    assert len(boxes) == 3
    for n, one in enumerate(boxes):
        assert not any(one.overlaps(two) for two in boxes[n + 1 :])


def test_schematic_without_lines_has_no_scale():
    ax = plot_schematic(Chain((Lumped("L", 6.8e-9, "series"),)))
    assert "nothing is to scale" in ax.get_xlabel()
    assert plot_schematic(Chain()).texts[-1].get_text() == "the connector sits at the antenna"


def test_folding_keeps_number_and_unit_together():
    assert folded("two strips 5 mm wide", 12) == "two strips\n5\u00a0mm wide"


def test_a_long_line_is_a_low_picture():
    short = plot_schematic(Chain((Stub(STRIPS, 30e-3), LineSection(STRIPS, 30e-3))))
    long = plot_schematic(Chain((Stub(STRIPS, 30e-3), LineSection(CABLE, 900e-3))))
    heights = [ax.figure.get_size_inches()[1] for ax in (short, long)]
    assert heights[1] < 0.7 * heights[0]
    assert heights[1] >= 3.0
