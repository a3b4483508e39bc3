"""Words for natural modes."""

import pytest

from simkit.response.labels import UNIFORM, UNNUMBERED, half_wave_label


@pytest.mark.parametrize(
    ("half_waves", "label"),
    [
        (1, "1/2 wave"),
        (2, "1 wave"),
        (3, "3/2 wave"),
        (4, "2 waves"),
        (5, "5/2 wave"),
        (0, UNIFORM),
        (-1, UNNUMBERED),
    ],
)
def test_label_counts_waves(half_waves: int, label: str) -> None:
    assert half_wave_label(half_waves) == label


@pytest.mark.parametrize(
    ("half_waves", "label"),
    [
        (1, "1/4 wave"),
        (2, "1/2 wave"),
        (3, "3/4 wave"),
        (4, "1 wave"),
        (5, "5/4 wave"),
        (8, "2 waves"),
        (0, UNIFORM),
        (-1, UNNUMBERED),
    ],
)
def test_label_on_a_plane_counts_the_metal_without_its_image(half_waves: int, label: str) -> None:
    assert half_wave_label(half_waves, on_plane=True) == label
