"""What `simkit check` says of a feed line."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

from click.testing import CliRunner

from simkit.cli import main
from simkit.cli.feedline_text import feedline_parts
from simkit.study import load_study
from simkit.study.model import DataSheetLine, LineItem, PartItem, StripLine, StubItem
from simkit.study.starter import starter_text

CABLE = LineItem("cable", DataSheetLine(75.0, 0.66, 0.2, 0.9e9), 0.3)


def test_each_item_with_its_line_and_what_it_is_worth(make):
    stub = StubItem("tune", StripLine("two-strips", 30e-3, 10e-3), 18e-3, "open", "series")
    coil = PartItem("coil", "inductor", 3.3e-9, "shunt", 40.0)
    antenna = replace(make.straight(150, 6, 50), feedline=(CABLE, stub, coil))
    head, _, cable, tune, last, under, *doubts = "\n".join(feedline_parts(antenna)).splitlines()
    assert head.startswith("Feed line     item ")
    assert cable.split()[:5] == ["cable", "line,", "300", "mm", "of"]
    # 0.2 dB/m at 900 MHz are 0.2 sqrt(1650 / 900) in the middle of the band
    assert cable.split()[-6:] == ["75.00", "ohm", "0.6600", "0.271", "dB/m", "any"]
    assert "open series stub, 18 mm of two strips 30 mm wide, 10 mm apart in air" in tune
    assert tune.split()[-1] == "MHz"
    assert last.split()[1:] == ["shunt", "3.3", "nH,", "Q", "40"]
    assert "lines at 1.650 GHz" in under
    assert "reflections refer to 50 ohm" in under
    assert doubts[0].startswith("Limit         two strips 30 mm wide")


def test_nothing_is_said_without_a_feed_line(make):
    assert feedline_parts(make.straight(150, 6, 50)) == []


def test_a_line_that_cannot_be_says_why(make):
    bad = LineItem("pair", StripLine("two-strips", 6e-3, 3e-3, conductivity_s_per_m=1e7), 3e-2)
    (text,) = feedline_parts(replace(make.straight(150, 6, 50), feedline=(bad,)))
    assert text.startswith("Feed line     cannot be: thickness of metal with loss is 0 mm")


def test_the_feed_line_of_the_starter_is_a_study_once_uncommented(tmp_path: Path):
    lines = starter_text("Weir").splitlines()
    first, last = lines.index("# [[feedline]]"), lines.index('# like   = "pair"')
    lines[first : last + 1] = [line.removeprefix("# ") for line in lines[first : last + 1]]
    path = tmp_path / "weir.toml"
    path.write_text("\n".join(lines), encoding="utf-8")
    items = load_study(path).nominal().feedline
    assert [item.name for item in items] == ["pair", "stub"]
    assert items[0].line == items[1].line  # type: ignore[union-attr]
    result = CliRunner().invoke(main, ["check", str(path), "-o", str(tmp_path / "weir.png")])
    assert result.exit_code == 0, result.output
    assert "line, 30 mm of two strips 6 mm wide, 3 mm apart in air" in result.stdout
    assert "shorted shunt stub, 15 mm of two strips" in result.stdout
