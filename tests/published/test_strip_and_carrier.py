"""Strips, bars, coated wires, carriers and mixtures against strip_and_carrier.toml."""

from __future__ import annotations

import tomllib
from math import gamma, log, pi
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from simkit.crosssection import (
    PLASTICS,
    Layer,
    kappa,
    mixed_permittivity,
    single_strip,
    strip_radius_m,
)
from simkit.crosssection.carrier_kappa import series_inductance_h_per_m, wire_radius_m
from simkit.crosssection.panels import chain, circle, join
from simkit.crosssection.potential import solve
from simkit.geometry import plan_mesh
from simkit.runner.solve import solve_case
from simkit.store.schema import Status
from simkit.study.model import Antenna, Carrier, CutFeed, FrequencyBand, Metal, Strip

DATA = tomllib.loads((Path(__file__).parent / "strip_and_carrier.toml").read_text("utf-8"))
RULES = ("series", "air-host", "bruggeman", "plastic-host", "parallel")

Row = dict[str, Any]


def test_the_table_agrees_with_its_own_formulas() -> None:
    assert DATA["strip_radius"][-1]["radius"] == round(gamma(0.25) ** 2 / (4 * pi**1.5), 5)
    (coated,) = DATA["coated_wire"]
    exact = (1 - 1 / coated["permittivity"]) * log(coated["ratio"])
    assert coated["radius"] == round(np.exp(exact), 4)
    assert coated["inductance_nh_per_m"] == round(200 * exact, 2)
    for row in DATA["mixture"]:
        air = 1 - row["fraction"]
        assert row["parallel"] == round(row["fraction"] * row["solid"] + air, 4)
        assert row["series"] == round(1 / (row["fraction"] / row["solid"] + air), 4)


@pytest.mark.parametrize("row", DATA["strip_radius"], ids=lambda row: f"t/w={row['ratio']}")
def test_strip_radius(row: Row) -> None:
    # Half of the last digit given.
    assert strip_radius_m(1.0, row["ratio"]) == pytest.approx(row["radius"], abs=0.6e-5)


@pytest.mark.parametrize("row", DATA["kappa"], ids=lambda row: f"kappa={row['kappa']}")
def test_kappa(row: Row) -> None:
    layer = Layer(row["thickness_mm"] * 1e-3, row["permittivity"])
    section = single_strip(row["width_mm"] * 1e-3, [layer], row["overhang_mm"] * 1e-3)
    assert kappa(section).real == pytest.approx(row["kappa"], rel=row["relative_tolerance"])


@pytest.mark.parametrize("row", DATA["coated_wire"], ids=lambda row: row["source"].split(",")[0])
def test_coated_wire(row: Row) -> None:
    eps = row["permittivity"]
    wire = chain(circle(0.0, 1.0, 48), conductor=0, left=eps, right=eps)
    body = join([wire, chain(circle(0.0, row["ratio"], 48), left=eps)])
    found = solve(body.in_air()).common - solve(body).common
    # Rounded to the digits given; polygons of 48 sides are good to 2e-5.
    assert wire_radius_m(1.0, found) == pytest.approx(row["radius"], rel=6e-5)
    inductance = series_inductance_h_per_m(found) * 1e9
    assert inductance == pytest.approx(row["inductance_nh_per_m"], rel=1e-4)


@pytest.mark.parametrize("rule", RULES)
@pytest.mark.parametrize("row", DATA["mixture"], ids=lambda row: f"fill={row['fraction']}")
def test_mixture(row: Row, rule: str) -> None:
    mixed = mixed_permittivity(row["solid"], row["fraction"], rule)  # type: ignore[arg-type]
    # Half of the last digit given.
    assert mixed.real == pytest.approx(row[rule], abs=0.6e-4)
    assert mixed.imag == 0


@pytest.mark.parametrize("row", DATA["solid_plastics"], ids=lambda row: row["source"][:11])
def test_table_of_plastics_allows_for_what_was_measured(row: Row) -> None:
    """Where the frequencies overlap the value itself is inside, else below: eps' falls with f."""
    low, high = row["permittivity"]
    for name in row["names"]:
        entry = PLASTICS[name]
        if entry.from_hz < row["to_mhz"] * 1e6:
            assert low <= entry.permittivity <= high, name
        else:
            assert entry.permittivity <= high, name


def carried(row: Row, model: str, loss_tangent: float = 0.0) -> dict[str, Any]:
    """What is kept of the strip of a row, fed in the middle."""
    length, width = row["length_mm"] * 1e-3, row["width_mm"] * 1e-3
    antenna = Antenna(
        strips=(Strip("strip", ((0.0, 0.0), (length, 0.0)), width),),
        metal=Metal("perfect", None, 0.0),
        feed=CutFeed("strip", length / 2, width / 10),
        reference_ohm=50.0,
        frequency=FrequencyBand(0.4e9, 3e9, 131),
        model=model,  # type: ignore[arg-type]
        carrier=Carrier(
            row["permittivity"],
            loss_tangent,
            row["thickness_mm"] * 1e-3,
            overhang_m=row["overhang_mm"] * 1e-3,
        ),
    )
    result = solve_case(antenna, plan_mesh([antenna]))
    assert result.status == Status.SOLVED, result.reason
    return result.arrays


@pytest.mark.parametrize("model", ["line", "grid"])
@pytest.mark.parametrize("row", DATA["strip_on_carrier"], ids=lambda row: f"w={row['width_mm']}")
def test_modes_of_a_strip_on_a_carrier(row: Row, model: str) -> None:
    found = carried(row, model)
    for number, mhz, q in zip(row["half_waves"], row["frequency_mhz"], row["q"], strict=True):
        (slot,) = np.flatnonzero(found["mode_half_waves"] == number)
        # What is promised of carriers; measured 0.15 and 0.09 % low (grid 0.17, 0.12 %).
        assert found["mode_frequency"][slot] * 1e-6 == pytest.approx(mhz, rel=0.003)
        # Promised; measured 0.3 and 0.4 % high (grid 0.3, 0.8 %).
        assert found["mode_q"][slot] == pytest.approx(q, rel=0.02)
        assert found["efficiency"][slot] == pytest.approx(1.0, abs=1e-9)


@pytest.mark.parametrize("overhang_mm", [0.0, pytest.param(6.0, marks=pytest.mark.long)])
def test_rails_see_the_carrier_the_line_sees(overhang_mm: float) -> None:
    """One wire's load is exact for its own current; three rails need theirs in the right parts."""
    row = DATA["strip_on_carrier"][0] | {"overhang_mm": overhang_mm}
    one, rails = carried(row, "line"), carried(row, "grid")
    for number in (1, 2, 3):
        slots = [int(np.flatnonzero(f["mode_half_waves"] == number)[0]) for f in (one, rails)]
        frequency, q = (
            rails[name][slots[1]] / one[name][slots[0]] for name in ("mode_frequency", "mode_q")
        )
        # 0.03 % of it are the rungs of the ties. With equal loads on all rails and unequal segments
        # at the ties it was 0.19 and 1.3 %.
        assert frequency == pytest.approx(1.0, abs=1e-3)
        assert q == pytest.approx(1.0, abs=0.01)


@pytest.mark.parametrize("model", ["line", "grid"])
@pytest.mark.parametrize("row", DATA["strip_on_carrier"], ids=lambda row: f"w={row['width_mm']}")
def test_plastic_loss_lowers_q_as_it_lowers_the_efficiency(row: Row, model: str) -> None:
    """Radiated over all power is Q with the loss over Q without, to the first order in the loss."""
    lossless, lossy = carried(row, model), carried(row, model, 0.01)
    for number in row["half_waves"]:
        (slot,) = np.flatnonzero(lossless["mode_half_waves"] == number)
        ratio = lossy["mode_q"][slot] / lossless["mode_q"][slot]
        assert 0.98 < lossy["efficiency"][slot] < 0.998
        # Efficiency is taken at the conductance peak, some per cent above the natural frequency.
        assert 1 - lossy["efficiency"][slot] == pytest.approx(1 - ratio, rel=0.15)
