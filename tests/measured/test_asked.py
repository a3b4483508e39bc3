"""Texts of the command line about measured files."""

import pytest

from simkit.errors import MeasurementError
from simkit.measured import asked


@pytest.mark.parametrize(
    ("text", "on_plane", "count"),
    [("1/2", False, 1), ("3/2 wave", False, 3), ("1", False, 2), ("2 waves", False, 4),
     ("1/4", True, 1), ("3/4 wave", True, 3)],
)  # fmt: skip
def test_modes_by_their_labels(text, on_plane, count):
    assert asked.half_waves_of(text, on_plane=on_plane) == count


@pytest.mark.parametrize("text", ["", "first", "1/4", "-1/2", "1/0", "0"])
def test_what_is_no_mode(text):
    with pytest.raises(MeasurementError, match="is no mode"):
        asked.half_waves_of(text, on_plane=False)


def test_frequencies_bands_and_pins():
    assert asked.band_hz("--target", "868 MHz") == (868e6, 868e6)
    assert asked.band_hz("--target", "863 MHz..870MHz") == (863e6, 870e6)
    assert asked.pins_of(["3/2=2.81 GHz"], on_plane=False) == {3: pytest.approx(2.81e9)}
    for text, match in (
        ("868", "a frequency is needed"),
        ("870 MHz..860 MHz", "must ascend"),
        ("0 MHz", "must be positive"),
        ("x MHz", "--target x MHz"),
    ):
        with pytest.raises(MeasurementError, match=match):
            asked.band_hz("--target", text)
    with pytest.raises(MeasurementError, match="write MODE=FREQUENCY"):
        asked.pins_of(["2.81 GHz"], on_plane=False)


def test_extensions():
    assert asked.extension_s("120 ps") == pytest.approx(120e-12)
    assert asked.extension_s("35 mm") == pytest.approx(116.7e-12, rel=1e-3)
    assert asked.extension_s("35 mm in 2.1") == pytest.approx(169.2e-12, rel=1e-3)
    for text, match in (
        ("3 MHz", "a time or a length"),
        ("3 ps in 2", "needs no dielectric"),
        ("35 mm in PTFE", "is a number"),
    ):
        with pytest.raises(MeasurementError, match=match):
            asked.extension_s(text)
