"""From a resolved study to a chain: every item to its element, lines shared and solved once."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from simkit.feedline import (
    Coaxial,
    CoplanarStrips,
    FeedlineError,
    LineSection,
    Lumped,
    PortExtension,
    StripOverPlate,
    Stub,
    TappedLine,
    Transformer,
    TwoStrips,
    UniformLine,
    build_chain,
    pair,
)
from simkit.study.model import (
    CoaxialLine,
    DataSheetLine,
    ExtensionItem,
    LineItem,
    PartItem,
    StripLine,
    StubItem,
    TappedItem,
    TransformerItem,
)

SHEET = (2.7, 0.01, 1e-3, 0.1e-3, 1.5e7)  # permittivity, loss tangent, overhang, metal


@pytest.mark.parametrize(
    ("made", "line"),
    [
        (
            StripLine("two-strips", 6e-3, 3e-3, 5e-3, 0.0, *SHEET),
            TwoStrips(6e-3, 3e-3, 0.1e-3, 2.7, 0.01, 1e-3, 1.5e7, 5e-3),
        ),
        (
            StripLine("strip-over-plate", 6e-3, 3e-3, None, 0.0, *SHEET),
            StripOverPlate(6e-3, 3e-3, 0.1e-3, 2.7, 0.01, 1e-3, 1.5e7),
        ),
        (
            StripLine("coplanar-strips", 6e-3, 3e-3, 5e-3, 0.5e-3, *SHEET),
            CoplanarStrips(6e-3, 3e-3, 0.5e-3, 0.1e-3, 2.7, 0.01, 1e-3, 1.5e7, 5e-3),
        ),
        (
            CoaxialLine(0.5e-3, 1.7e-3, 2.1, 1e-4, 5.8e7),
            Coaxial(0.5e-3, 1.7e-3, 2.1, 1e-4, 5.8e7),
        ),
        (DataSheetLine(75.0, 0.66, 0.2, 0.9e9, 1e-3), UniformLine(75.0, 0.66, 0.2, 0.9e9, 1e-3)),
    ],
)
def test_each_make_of_line(make, made, line):
    items = (
        LineItem("a", made, 11e-3),
        StubItem("b", made, 13e-3, "open", "series"),
        TappedItem("c", made, 17e-3, 19e-3, "open"),
    )
    antenna = replace(make.straight(150, 6, 50), feedline=items, reference_ohm=75.0)
    chain = build_chain(antenna)
    assert chain.reference_ohm == 75.0
    assert chain.elements == (
        LineSection(line, 11e-3),
        Stub(line, 13e-3, "open", "series"),
        TappedLine(line, 17e-3, 19e-3, "open"),
    )


def test_items_without_a_line(make):
    items = (
        PartItem("a", "inductor", 3e-9, "series", 40.0),
        PartItem("b", "capacitor", 2e-12, "shunt", math.inf),
        PartItem("c", "resistor", 5.0, "shunt", math.inf),
        TransformerItem("d", 4.0, 0.3, 75.0),
        ExtensionItem("e", -2e-11),
    )
    assert build_chain(replace(make.straight(150, 6, 50), feedline=items)).elements == (
        Lumped("L", 3e-9, "series", 40.0),
        Lumped("C", 2e-12, "shunt"),
        Lumped("R", 5.0, "shunt"),
        Transformer(4.0, 0.3, 75.0),
        PortExtension(-2e-11),
    )


def test_no_items_make_an_empty_chain(make):
    assert build_chain(make.straight(150, 6, 50)).elements == ()


def test_a_line_is_solved_once_for_all_cases_with_it(make, monkeypatch):
    asked = []
    solve = pair.solve_dense
    monkeypatch.setattr(pair, "solve_dense", lambda *a, **k: (asked.append(1), solve(*a, **k))[1])
    made = StripLine("two-strips", 4.321e-3, 2.1e-3)  # a shape no other test has solved
    frequency_hz = np.array([0.9e9])
    for length_m in (10e-3, 20e-3):
        items = (LineItem("a", made, length_m), StubItem("b", made, 7e-3, "short", "shunt"))
        chain = build_chain(replace(make.straight(150, 6, 50), feedline=items))
        chain.elements[0].scattering(frequency_hz, 50.0)
    assert (solved := len(asked)) > 0
    items = (LineItem("a", replace(made, width_m=4.322e-3), 10e-3),)
    build_chain(replace(make.straight(150, 6, 50), feedline=items)).elements[0].scattering(
        frequency_hz, 50.0
    )
    assert len(asked) == 2 * solved


def test_what_cannot_be_is_refused(make):
    items = (LineItem("a", StripLine("two-strips", 6e-3, 3e-3, conductivity_s_per_m=1e7), 1e-2),)
    with pytest.raises(FeedlineError, match="thickness of metal with loss is 0 mm"):
        build_chain(replace(make.straight(150, 6, 50), feedline=items))
