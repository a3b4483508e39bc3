"""Lines and networks by the words of the study file, there and back."""

from __future__ import annotations

import math
import tomllib

import numpy as np
import pytest

from simkit.feedline import (
    Chain,
    Coaxial,
    CoplanarStrips,
    FeedlineError,
    LineSection,
    Lumped,
    OnePort,
    PartSupply,
    StripOverPlate,
    Stub,
    TappedLine,
    Transformer,
    TwoStrips,
    UniformLine,
    find_matches,
)
from simkit.feedline.items import items_of, rounded, toml_text
from simkit.feedline.line_text import line_keys, read_line
from simkit.feedline.written import without_measured
from simkit.study.model import Metal

BRASS = Metal("brass", 1.5e7, 0.15e-3)

LINES = [
    ("75 ohm", UniformLine(75.0)),
    ("75 ohm, 0.66", UniformLine(75.0, 0.66)),
    (
        "uniform, impedance=60 ohm, velocity_factor=0.7, attenuation=0.4 dB/m, at=900 MHz",
        UniformLine(60.0, 0.7, 0.4, 900e6),
    ),
    ("two-strips, width=6 mm, separation=3 mm", TwoStrips(6e-3, 3e-3)),
    (
        "two-strips,width = 0.6 cm,separation=3 mm,other_width=9 mm,permittivity=2.7,"
        "loss_tangent=0.01,overhang=2 mm,thickness=0.1 mm,conductivity=1.5e7 S/m",
        TwoStrips(6e-3, 3e-3, 1e-4, 2.7, 0.01, 2e-3, 1.5e7, 9e-3),
    ),
    ("strip-over-plate, width=4 mm, height=2 mm", StripOverPlate(4e-3, 2e-3)),
    (
        "coplanar-strips, width=4 mm, gap=1 mm, sheet=1.6 mm, permittivity=4.3",
        CoplanarStrips(4e-3, 1e-3, 1.6e-3, permittivity=4.3),
    ),
    ("coaxial, inner=1 mm, outer=3.35 mm, permittivity=2.1", Coaxial(1e-3, 3.35e-3, 2.1)),
]


@pytest.mark.parametrize(("text", "line"), LINES, ids=[text[:25] for text, _ in LINES])
def test_a_line_by_its_text_and_back(text, line):
    found = read_line(text)
    assert found == line
    keys = line_keys(line)
    words = [keys.pop("line"), *(f"{key}={value}" for key, value in keys.items())]
    assert read_line(", ".join(map(str, words))) == line


def test_strips_are_of_the_studys_metal_unless_they_say_otherwise():
    text = "two-strips, width=6 mm, separation=3 mm"
    ours = read_line(text, metal=BRASS)
    assert (ours.conductivity_s_per_m, ours.thickness_m) == (1.5e7, 0.15e-3)
    assert line_keys(ours, BRASS) == {
        "line": "two-strips",
        "width": "6 mm",
        "separation": "3 mm",
    }
    copper = read_line(f"{text}, material=copper, thickness=0.2 mm", metal=BRASS)
    assert line_keys(copper, BRASS)["thickness"] == "0.2 mm"
    assert "conductivity" in line_keys(copper, BRASS)
    with pytest.raises(FeedlineError, match=r"the study's metal has loss, but 'two strips"):
        line_keys(TwoStrips(6e-3, 3e-3), BRASS)
    assert line_keys(UniformLine(50.0), BRASS) == {"line": "uniform", "impedance": "50 ohm"}


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("pair", "give an impedance and perhaps a velocity factor"),
        ("75 ohm, 0.66, 3", "give an impedance and perhaps a velocity factor"),
        ("two-strips, width", "'width' is not KEY=VALUE"),
        ("two-strips, width=6 mm", "separation is missing"),
        ("two-strips, width=6, separation=3 mm", "a length is needed"),
        ("two-strips, width=6 mm, separation=3 mm, material=bras", "do you mean"),
        ("coaxial, inner=3 mm, outer=1 mm", "does not fit in an outer one of 1 mm"),
    ],
)
def test_texts_that_are_no_line(text, said):
    with pytest.raises(FeedlineError, match=said) as caught:
        read_line(text, "--line")
    assert f"--line '{text}'" in str(caught.value)


def test_sizes_are_rounded_to_what_a_workshop_keeps():
    own, made = TwoStrips(5.04e-3, 2.02e-3), TwoStrips(10.5966e-3, 2.02e-3)
    chain = Chain(
        (
            LineSection(own, 17.6749e-3),
            Stub(made, 79.7831e-3),
            TappedLine(UniformLine(61.2345), 11.04e-3, 7.06e-3),
            Lumped("C", 1.23456e-12, "shunt", 200.0),
        )
    )
    section, stub, tapped, part = rounded(chain, keep=[own]).elements
    assert section.length_m == 17.7e-3
    assert section.line == own
    assert (stub.line.width_m, stub.line.separation_m, stub.length_m) == (10.6e-3, 2.02e-3, 79.8e-3)
    assert (tapped.antenna_side_m, tapped.end_side_m) == (11e-3, 7.1e-3)
    assert tapped.line.impedance_ohm == 61.2
    assert part.value == 1.23e-12


def test_items_of_a_chain():
    pair = TwoStrips(5e-3, 2e-3)
    chain = Chain(
        (
            LineSection(pair, 20e-3),
            Stub(pair, 12.5e-3, "open", "series"),
            Lumped("L", 3.3e-9, "shunt", 40.0),
            Lumped("R", 10.0, "series"),
            TappedLine(UniformLine(75.0), 11e-3, 7e-3, "short"),
        )
    )
    found = tomllib.loads(toml_text(items_of(chain, taken={"match_line"}), ["why"]))["feedline"]
    assert [item["name"] for item in found] == [
        "match_line2", "match_stub", "match_part", "match_part2", "match_tap",
    ]  # fmt: skip
    assert found[0] == {
        "kind": "line",
        "name": "match_line2",
        "length": "20 mm",
        "line": "two-strips",
        "width": "5 mm",
        "separation": "2 mm",
    }
    assert found[1]["like"] == "match_line2"
    assert (found[1]["end"], found[1]["connection"]) == ("open", "series")
    assert (found[2]["value"], found[2]["q"]) == ("3.3 nH", 40)
    assert "q" not in found[3]
    assert (found[4]["from_antenna"], found[4]["beyond"]) == ("11 mm", "7 mm")
    behind = items_of(chain, known={pair: "drop"})
    assert behind[0]["like"] == behind[1]["like"] == "drop"
    with pytest.raises(FeedlineError, match="is not written into studies"):
        items_of(Chain((Transformer(4.0),)))


def test_measured_builds_become_comments():
    text = 'a = 1\n[[measured]]  # first\nfile = "x.s1p"\n\n# note\narm = "7 mm"\n[b]\nc = 2\n'
    found = without_measured(text + '[[measured]]\nfile = "y.s1p"\n')
    assert tomllib.loads(found) == {"a": 1, "b": {"c": 2}}
    assert '# [[measured]]  # first\n# file = "x.s1p"\n\n# note\n# arm = "7 mm"\n[b]' in found
    assert found.count("measured without the network below") == 2


def test_any_values_of_parts_are_refined_and_e24_are_not():
    f = np.linspace(780e6, 960e6, 91)
    w = 2 * np.pi * f
    load = OnePort.from_impedance(f, 68 + 1j * w * 55e-9 - 1j / (w * 0.52e-12))
    ideal = PartSupply(math.inf, math.inf, 0.0)
    worst = [
        find_matches(load, 853e6, 883e6, kinds=("L-section",), supply=supply).best.worst_db
        for supply in (ideal, PartSupply(math.inf, math.inf, 0.0, series="any"))
    ]
    assert worst[1] > worst[0] + 0.1
    with pytest.raises(FeedlineError, match=r"tolerance of parts is 1\.2: it must be below 1"):
        PartSupply(tolerance=1.2)


def test_networks_that_leave_less_than_none_are_not_listed():
    f = np.linspace(780e6, 960e6, 91)
    w = 2 * np.pi * f
    load = OnePort.from_impedance(f, 68 + 1j * w * 55e-9 - 1j / (w * 0.52e-12))
    line = UniformLine(1.0)
    report = find_matches(load, 853e6, 883e6, line=line, kinds=("shunt stub", "single part"))
    assert {design.kind for design in report.designs} == {"single part"}
    assert all(design.worst_db > report.before_db for design in report.designs)
    assert report.notes[0].startswith("shunt stub: over the band ")
    assert report.notes[0].endswith("dB at best, worse than no network")
