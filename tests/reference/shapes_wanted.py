"""The shapes whose natural modes are kept in shapes.toml. Millimetres.

`mesh` names the mesher: "profile" for straight strips, "path" for mitred polylines, "boxes" for
shapes whose edges all run along x or y, "arc".
"""

from __future__ import annotations

from math import cos, radians, sin
from typing import Any

Point = tuple[float, float]


def _shape(name: str, mesh: str, strips: list[dict[str, Any]], **more: Any) -> dict[str, Any]:
    return {"name": name, "mesh": mesh, **more, "strip": strips}


def _straight(length: float, width: float, **more: Any) -> dict[str, Any]:
    half = length / 2
    name = f"straight-{length:g}x{width:g}"
    line = [[-half, 0.0], [0.0, 0.0], [half, 0.0]]
    return _shape(name, "profile", [{"path": line, "width": width}], **more)


def _profile(name: str, places: list[float], widths: list[float], **more: Any) -> dict[str, Any]:
    line = [[x, 0.0] for x in places]
    return _shape(name, "profile", [{"path": line, "width": widths}], **more)


def _turned(legs: list[float], turns: list[float]) -> list[list[float]]:
    """Polyline from leg lengths and turn angles in degrees, the first leg along x."""
    x, y, heading = 0.0, 0.0, 0.0
    line = [[0.0, 0.0]]
    for leg, turn in zip(legs, [*turns, 0.0], strict=True):
        x += leg * cos(radians(heading))
        y += leg * sin(radians(heading))
        line.append([round(x, 6), round(y, 6)])
        heading += turn
    return line


def _path(
    name: str, legs: list[float], turns: list[float], width: float, **more: Any
) -> dict[str, Any]:
    strip = {"path": _turned(legs, turns), "width": width}
    return _shape(name, "path", [strip], **more)


def _boxes(name: str, *strips: tuple[list[Point], Any], **more: Any) -> dict[str, Any]:
    rows = [{"path": [list(map(float, p)) for p in line], "width": w} for line, w in strips]
    return _shape(name, "boxes", rows, **more)


def _step(name: str, places: list[float], widths: list[float]) -> dict[str, Any]:
    """Abrupt steps: the point of each is repeated, with the width before and after it."""
    pairs = zip(places, places[1:], widths, strict=False)
    rows = [([x, 0.0], w) for x0, x1, w in pairs for x in (float(x0), float(x1))]
    strip = {"path": [p for p, _ in rows], "width": [w for _, w in rows]}
    return _shape(name, "boxes", [strip])


def _arc(radius: float, length: float, width: float) -> dict[str, Any]:
    half = length / radius / 2
    line = []
    for k in range(13):
        angle = half * (1 - k / 6)
        line.append([round(radius * sin(-angle), 6), round(radius * cos(angle), 6)])
    strip = {"path": line, "width": width, "radius": radius, "length": length}
    return _shape(f"arc-r{radius:g}-w{width:g}", "arc", [strip])


def _bend(width: float, long: float, short: float) -> dict[str, Any]:
    name = f"bend-90-{long:g}-{short:g}-w{width:g}"
    return _boxes(name, ([(0, 0), (long, 0), (long, short)], width))


TABLE = [
    _straight(150, 6, published=[[0.8921, 4.76], [1.8542, 6.53], [2.8266, 7.95], [3.8042, 9.16]]),
    _straight(150, 1.5, published=[[0.9279, 6.44], [2.8911, 11.40]]),
    _straight(150, 20, published=[[0.8378, 3.37], [2.7334, 5.17]]),
    _path("vee-120-w8", [75, 75], [60], 8, published=[[0.9121, 5.18], [2.8935, 6.61]]),
    _profile(
        "taper-3-30",
        [-75, 0, 75],
        [30, 3, 30],
        published=[[0.7254, 4.82], [2.6619, 5.07]],
    ),
]

BENDS = [
    *(_bend(width, 75, 75) for width in (8, 4, 12)),
    *(_bend(width, 100, 50) for width in (8, 4, 12)),
    _path("vee-90-w8", [75, 75], [90], 8),
    _path("vee-60-w8", [75, 75], [120], 8),
    _path("vee-60-w4", [75, 75], [120], 4),
    _path("zigzag-70-w6", [50, 50, 50], [70, -70], 6),
    _path("zigzag-90-w6", [50, 50, 50], [90, -90], 6),
    _path("zigzag-60-w8", [40, 70, 40], [60, -60], 8),
    _boxes("u-50-50-50-w6", ([(0, 50), (0, 0), (50, 0), (50, 50)], 6)),
    _boxes("u-60-30-60-w4", ([(0, 60), (0, 0), (30, 0), (30, 60)], 4)),
    _path("zigzag-30-w6", [30] * 5, [30, -30, 30, -30], 6),
    _path("zigzag-45-w8", [40] * 4, [45, -45, 45], 8),
    _arc(50, 150, 6),
    _arc(25, 130, 6),
    _arc(50, 150, 12),
]

TAPERS = [
    _profile("taper-3-9", [-75, 0, 75], [9, 3, 9]),
    _profile("taper-3-18", [-75, 0, 75], [18, 3, 18]),
    _profile("taper-5-25", [-75, 0, 75], [25, 5, 25]),
    _profile("taper-5-25-short", [-50, 0, 50], [25, 5, 25]),
    _profile("taper-12-4", [-75, 0, 75], [4, 12, 4]),
    _profile("taper-18-3", [-75, 0, 75], [3, 18, 3]),
    _profile("taper-one-side-4-16", [-75, 75], [4, 16]),
    _step("step-6-9", [-75, 0, 75], [6, 9]),
    _step("step-6-12", [-75, 0, 75], [6, 12]),
    _step("step-6-9-ends", [-75, -35, 35, 75], [9, 6, 9]),
]

STRAIGHT = [
    _straight(100, 3),
    _straight(120, 10),
    _straight(150, 30),
    _straight(130, 4),
    _straight(60, 5, stop=5.5),
]

LOOPS = [
    _boxes("loop-60x40-w4", ([(0, 0), (60, 0), (60, 40), (0, 40), (0, 0)], 4)),
    _boxes("loop-50x50-w6", ([(0, 0), (50, 0), (50, 50), (0, 50), (0, 0)], 6)),
    _boxes("loop-80x25-w5", ([(0, 0), (80, 0), (80, 25), (0, 25), (0, 0)], 5)),
]

BAR: list[Point] = [(-60, 0), (60, 0)]
JUNCTIONS = [
    _boxes("tee-middle-w6", (BAR, 6), ([(0, 0), (0, 40)], 6)),
    _boxes("tee-off-w6", (BAR, 6), ([(25, 0), (25, 40)], 6)),
    _boxes("stub-15-w6", (BAR, 6), ([(-30, 0), (-30, 15)], 6)),
    _boxes("tee-off-w6-branch-3", (BAR, 6), ([(25, 0), (25, 40)], 3)),
    _boxes("tee-off-w8", (BAR, 8), ([(20, 0), (20, 35)], 8)),
    _boxes("cross-off-w6", (BAR, 6), ([(20, -25), (20, 35)], 6)),
]


def _slant(angle: float, meets: float, width: float, branch_width: float) -> dict[str, Any]:
    end = [round(meets + 40 * cos(radians(angle)), 6), round(40 * sin(radians(angle)), 6)]
    bar = {"path": [[-60.0, 0.0], [60.0, 0.0]], "width": width}
    branch = {"path": [[meets, 0.0], end], "width": branch_width}
    more = "" if branch_width == width else f"-branch-{branch_width:g}"
    return _shape(f"slant-{angle:g}-w{width:g}{more}", "slant", [bar, branch])


OPEN = [
    _slant(60, 15.0, 6, 6),
    _slant(45, 10.0, 6, 6),
    _slant(60, 15.0, 6, 3),
    _shape("vee-120-taper-4-12", "path", [{"path": _turned([75, 75], [60]), "width": [12, 4, 12]}]),
    _shape("vee-90-taper-10-4", "path", [{"path": _turned([75, 75], [90]), "width": [4, 10, 4]}]),
]

WANTED: list[dict[str, Any]] = [*TABLE, *BENDS, *TAPERS, *STRAIGHT, *LOOPS, *JUNCTIONS, *OPEN]
