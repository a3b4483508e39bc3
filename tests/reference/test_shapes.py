"""The kept references: complete, covering what they say, and true to the published rows."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import shapely
from make_shapes import mesh_of
from shapes_wanted import WANTED

HERE = Path(__file__).parent
SHAPES = tomllib.loads((HERE / "shapes.toml").read_text())["shape"]
FEEDS = tomllib.loads((HERE / "feeds.toml").read_text())["feed"]


def named(rows: list[dict[str, Any]]) -> list[Any]:
    return [pytest.param(row, id=row["name"]) for row in rows]


def outline(strip: dict[str, Any]) -> shapely.Geometry:
    """Outline with mitred corners, by buffering: independent of the meshes."""
    line = np.array(strip["path"], dtype=float)
    half = strip["width"] / 2
    if np.array_equal(line[0], line[-1]):
        ring = shapely.Polygon(line)
        return ring.buffer(half, join_style="mitre") - ring.buffer(-half, join_style="mitre")
    return shapely.LineString(line).buffer(
        half, cap_style="flat", join_style="mitre", mitre_limit=9
    )


@pytest.mark.parametrize(
    "shape",
    named(
        [
            s
            for s in WANTED
            if all(not isinstance(p["width"], list) and "radius" not in p for p in s["strip"])
        ]
    ),
)
def test_meshes_cover_the_outline(shape: dict[str, Any]) -> None:
    mesh = mesh_of(shape, 1)
    covered = shapely.union_all(shapely.polygons(mesh.points[mesh.triangles] * 1e3))
    wanted = shapely.union_all([outline(strip) for strip in shape["strip"]])
    assert covered.symmetric_difference(wanted).area < 1e-3 * wanted.area / 100
    areas = shapely.area(shapely.polygons(mesh.points[mesh.triangles] * 1e3))
    assert areas.sum() == pytest.approx(wanted.area, rel=1e-6)  # nothing is covered twice


@pytest.mark.parametrize("shape", named([s for s in SHAPES if "published" in s]))
def test_published_modes(shape: dict[str, Any]) -> None:
    """Two surface solutions, each good to 0.02 % (sharp points 0.05 %) and Q to 0.3 %."""
    modes = [m for m in shape["mode"] if m["half_waves"] > 0]
    for frequency_ghz, q in shape["published"]:
        nearest = min(modes, key=lambda m: abs(m["frequency_ghz"] - frequency_ghz))
        assert nearest["frequency_ghz"] == pytest.approx(frequency_ghz, rel=5e-4)
        assert nearest["q"] == pytest.approx(q, rel=5e-3)


@pytest.mark.parametrize("shape", named(SHAPES))
def test_every_kept_mode_is_good_enough_to_check_against(shape: dict[str, Any]) -> None:
    told = [m for m in shape["mode"] if m["half_waves"] >= 0]
    assert told
    for mode in told:
        assert mode["frequency_error_percent"] < 0.15
        assert mode["q_error_percent"] < 1.0
        assert mode["by_level"][-1][2] == pytest.approx(mode["frequency_ghz"], rel=5e-3)


def test_what_is_kept_is_what_is_wanted() -> None:
    wanted = {s["name"]: s["strip"] for s in WANTED}
    assert all(wanted[s["name"]] == s["strip"] for s in SHAPES)
    assert {f["shape"] for f in FEEDS} <= set(wanted)


PEAKS = {
    ("straight-150x6", 75): [[0.9073, 69.6], [2.8531, 98.0]],
    ("straight-150x6", 37.5): [[0.9063, 122.7], [1.8773, 86.3], [2.8675, 186.8]],
    ("straight-150x1.5", 75): [[0.9364, 70.6], [2.9042, 102.5]],
    ("straight-150x20", 75): [[0.8672, 67.8], [2.7943, 87.3]],
    ("taper-3-30", 75): [[0.7376, 54.3], [2.6827, 146.4]],
}


@pytest.mark.parametrize("key", PEAKS, ids=[f"{name} at {at:g}" for name, at in PEAKS])
def test_published_conductance_peaks(key: tuple[str, float]) -> None:
    feed = next(f for f in FEEDS if (f["shape"], f["at_mm"]) == key)
    # 0.03 % in frequency for the published ones, as much here, the taper twice that.
    np.testing.assert_allclose(np.array(feed["peaks"])[:, 0], np.array(PEAKS[key])[:, 0], rtol=6e-4)
    np.testing.assert_allclose(np.array(feed["peaks"])[:, 1], np.array(PEAKS[key])[:, 1], rtol=3e-3)
