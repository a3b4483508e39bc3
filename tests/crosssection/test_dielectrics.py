"""Mixtures, skins and the table of plastics."""

from __future__ import annotations

import pytest

from simkit.crosssection import (
    PLASTICS,
    DielectricError,
    Layer,
    complex_permittivity,
    mixed_permittivity,
    plastic,
    printed_layers,
)
from simkit.crosssection.dielectrics import MixingRule

RULES: tuple[MixingRule, ...] = ("series", "air-host", "bruggeman", "plastic-host", "parallel")


@pytest.mark.parametrize("rule", RULES)
@pytest.mark.parametrize("solid", [2.7, 4.4 - 0.1j, 1.0])
def test_ends_of_the_scale(rule: MixingRule, solid: complex) -> None:
    assert mixed_permittivity(solid, 1.0, rule) == pytest.approx(solid, rel=1e-12)
    assert mixed_permittivity(solid, 0.0, rule) == pytest.approx(1.0, rel=1e-12)


@pytest.mark.parametrize("fraction", [0.05, 0.3, 0.65, 0.95])
def test_order_of_the_rules(fraction: float) -> None:
    """Wiener outside, both Maxwell Garnett rules inside, Bruggeman between those."""
    values = [mixed_permittivity(3.3, fraction, rule).real for rule in RULES]
    assert values == sorted(values)


@pytest.mark.parametrize("rule", RULES)
def test_loss_stays_loss(rule: MixingRule) -> None:
    solid = complex_permittivity(2.7, 0.02)
    mixed = mixed_permittivity(solid, 0.4, rule)
    assert solid.imag < mixed.imag < 0


def test_bruggeman_solves_its_equation() -> None:
    solid, part = 5.0 - 0.7j, 0.37
    mixed = mixed_permittivity(solid, part, "bruggeman")
    rest = part * (solid - mixed) / (solid + 2 * mixed) + (1 - part) * (1 - mixed) / (1 + 2 * mixed)
    assert abs(rest) < 1e-14


def test_skins_are_layers_and_keep_the_weight() -> None:
    layers = printed_layers(2.7, 3e-3, 0.5, skins_m=(0.4e-3, 0.6e-3))
    assert [layer.thickness_m for layer in layers] == pytest.approx([0.4e-3, 2e-3, 0.6e-3])
    assert layers[0].permittivity == layers[2].permittivity == 2.7
    # Of 1.5 mm of plastic the skins take 1 mm, which leaves a quarter of the core.
    assert layers[1].permittivity == mixed_permittivity(2.7, 0.25)


def test_one_skin_or_none() -> None:
    assert len(printed_layers(2.7, 3e-3, 0.5, skins_m=(0.0, 0.6e-3))) == 2
    assert printed_layers(2.7, 3e-3, 0.5) == (Layer(3e-3, mixed_permittivity(2.7, 0.5)),)


@pytest.mark.parametrize(
    ("fraction", "skins"), [(1.0, (0.4e-3, 0.4e-3)), (1.0, (1.5e-3, 1.5e-3)), (1.0, (0.0, 0.0))]
)
def test_solid_all_through(fraction: float, skins: tuple[float, float]) -> None:
    assert printed_layers(2.7, 3e-3, fraction, skins_m=skins) == (Layer(3e-3, 2.7),)


@pytest.mark.parametrize(
    ("fraction", "skins", "match"),
    [
        (0.5, (-1e-3, 0.0), "skins of -1 and 0 mm do not fit a carrier 3 mm thick"),
        (0.5, (2e-3, 2e-3), "leave 0 or more between"),
        (0.3, (0.6e-3, 0.6e-3), r"fill 0\.4 of the carrier, more than its solid fraction of 0\.3"),
        (1.2, (0.0, 0.0), r"solid fraction is 1\.2"),
    ],
)
def test_impossible_prints(fraction: float, skins: tuple[float, float], match: str) -> None:
    with pytest.raises(DielectricError, match=match):
        printed_layers(2.7, 3e-3, fraction, skins_m=skins)


def test_impossible_values() -> None:
    with pytest.raises(DielectricError, match=r"relative permittivity is 0\.9"):
        complex_permittivity(0.9)
    with pytest.raises(DielectricError, match=r"loss tangent is -0\.1"):
        complex_permittivity(2.0, -0.1)
    with pytest.raises(DielectricError, match=r"solid fraction is 40: it must lie between 0 and 1"):
        mixed_permittivity(2.7, 40)
    with pytest.raises(DielectricError, match="mixing rule 'guess' is unknown: use one of plastic"):
        mixed_permittivity(2.7, 0.4, "guess")  # type: ignore[arg-type]


@pytest.mark.parametrize("name", PLASTICS)
def test_every_plastic_lies_within_its_range(name: str) -> None:
    entry = plastic(name.swapcase())
    low, high = entry.permittivity_range
    assert low <= entry.permittivity <= high
    low, high = entry.loss_tangent_range
    assert low <= entry.loss_tangent <= high
    assert entry.from_hz < entry.to_hz
    assert entry.source
    assert entry.complex_permittivity.real == entry.permittivity


def test_unknown_plastic_names_the_nearest() -> None:
    with pytest.raises(DielectricError, match=r"'PLA2' is unknown; did you mean PLA\? Known are"):
        plastic("PLA2")
    with pytest.raises(DielectricError, match=r"'wood' is unknown\. Known are PLA"):
        plastic("wood")
