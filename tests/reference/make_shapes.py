"""Compute natural modes of flat strips and keep them in shapes.toml; run as a script.

    python tests/reference/make_shapes.py [--levels 2,3] [--only NAME ...]

Each shape is written as soon as it is done; levels already in the file are not computed again.
Frequencies and decay rates of two or three meshes of one family are extrapolated with the square of
the level; the error is what the last extrapolation changed, or half of it for two meshes.
"""

from __future__ import annotations

import argparse
import sys
import time
import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from shapes_wanted import WANTED
from sheet_meshes import Mesh, arc, path, profile, rectangles, slanted_tee
from sheet_moments import Sheet

from simkit.response.rational import adaptive_sweep

FILE = Path(__file__).parent / "shapes.toml"
Box = tuple[float, float, float, float]

LEAST_Q = 2.0
"""Below this a mode is a broad background, mostly of currents across wide strips: not numbered."""

HEAD = """\
# Natural modes of zero-thickness, perfectly conducting flat strips in free space, by the surface
# method of moments of sheet_moments.py (see make_shapes.py for how this file is made).
#
# Geometry in millimetres. strip.path is the centre line, strip.width its width (one number, or one
# per point, linear in between; a repeated point is a step). Corners are mitred: outer edges run
# on until they meet. A path that ends where it began is a closed loop. A path that starts on
# another strip's centre line is a branch; its length counts from that centre line. Arcs are true
# arcs; path then holds points on them. Frequencies in GHz (real part of the pole), Q = Re/(2 Im).
# half_waves: of current along the first strip, tip to tip (round a loop: sign changes), -1 if not
# told (Q below 2: no resonance of a strip's length). by_level: mesh level, unknowns, frequency, Q
# before extrapolation.
"""


@dataclass(frozen=True)
class Found:
    """A mode on one mesh."""

    pole_hz: complex
    half_waves: int


def mesh_of(shape: dict[str, Any], level: int) -> Mesh:
    """Mesh of one level for an entry of WANTED (millimetres)."""
    strips = shape["strip"]
    first = strips[0]
    line = np.array(first["path"]) * 1e-3
    width = first["width"]
    widths = [w * 1e-3 for w in (width if isinstance(width, list) else [width] * len(line))]
    if "radius" in first:
        return arc(first["radius"] * 1e-3, first["length"] * 1e-3, widths[0], level)
    if shape["mesh"] == "boxes":
        boxes = boxes_of(first)
        for strip in strips[1:]:
            boxes += _through(boxes_of(strip), np.array(strip["path"][0]) * 1e-3, boxes)
        return rectangles(boxes, level)
    if shape["mesh"] == "profile":
        return profile(list(line[:, 0]), widths, level)
    if shape["mesh"] == "slant":
        branch = np.array(strips[1]["path"]) * 1e-3
        leg = branch[1] - branch[0]
        angle = float(np.arctan2(leg[1], leg[0]))
        away = (branch[0, 0], float(np.hypot(*leg)), strips[1]["width"] * 1e-3, angle)
        return slanted_tee((line[0, 0], line[-1, 0], widths[0]), away, level)
    return path([tuple(p) for p in line], widths, level)


def boxes_of(strip: dict[str, Any]) -> list[Box]:
    """Upright rectangles of a strip whose legs run along the axes; full squares at its corners."""
    line = np.array(strip["path"]) * 1e-3
    closed = bool(np.allclose(line[0], line[-1]))
    width = strip["width"]
    widths = width if isinstance(width, list) else [width] * len(line)
    result = []
    for k in range(len(line) - 1):
        a, b, half = line[k], line[k + 1], widths[k] * 1e-3 / 2
        length = float(np.linalg.norm(b - a))
        if length == 0:
            continue
        along = (b - a) / length
        if k > 0 or closed:
            a = a - along * half * _turns(line, k, closed)
        if k < len(line) - 2 or closed:
            b = b + along * half * _turns(line, (k + 1) % (len(line) - 1), closed)
        side = half * np.array([abs(along[1]), abs(along[0])])
        low, high = np.minimum(a, b) - side, np.maximum(a, b) + side
        result.append((low[0], low[1], high[0], high[1]))
    return result


def _through(boxes: list[Box], start: np.ndarray, others: list[Box]) -> list[Box]:
    """Let a branch that starts inside another box run to its far side: no mesh line within."""
    result = list(boxes)
    for x0, y0, x1, y1 in others:
        if x0 < start[0] < x1 and y0 < start[1] < y1:
            a, b, c, d = result[0]
            if min(abs(b - start[1]), abs(d - start[1])) < 1e-9:
                result[0] = (a, min(b, y0), c, d) if abs(b - start[1]) < 1e-9 else (a, b, c, y1)
            else:
                result[0] = (min(a, x0), b, c, d) if abs(a - start[0]) < 1e-9 else (a, b, x1, d)
    return result


def _turns(line: np.ndarray, k: int, closed: bool) -> bool:
    """Whether the path turns at point k."""
    before = line[k] - line[k - 1 if k > 0 or not closed else -2]
    after = line[k + 1] - line[k]
    return bool(abs(before[0] * after[1] - before[1] * after[0]) > 1e-12)


def first_guesses(sheet: Sheet, start_hz: float, stop_hz: float) -> np.ndarray:
    """Poles of a rational fit to what three smooth fields excite, Hz."""
    rng = np.random.default_rng(11)
    size = np.ptp(sheet.points, axis=0).max()
    probes = []
    for _ in range(8):
        wave = rng.standard_normal((2, 2)) * 6 / size
        field = np.cos(sheet.centres @ wave.T + rng.uniform(0, 6, 2)) * sheet.area[:, None]
        vector = sheet.unit @ (field * sheet.centres).sum(axis=1)
        probes.append(vector - sheet.unit_x @ field[:, 0] - sheet.unit_y @ field[:, 1])
    probe = np.array(probes).T

    def response(frequency_hz: float) -> np.ndarray:
        current = np.linalg.solve(sheet.matrix(frequency_hz), probe[:, :3])
        value = probe.T @ current * frequency_hz
        return value.ravel() / 1e9

    first = np.median(abs(response((start_hz + stop_hz) / 2)))
    sweep = adaptive_sweep(
        lambda f: response(f) / first, start_hz, stop_hz, tolerance=1e-3, most_samples=34
    )
    poles = sweep.model.poles_hz()
    keep = (poles.imag > 0) & (poles.real > 1.5 * poles.imag)
    keep &= (poles.real > start_hz) & (poles.real < stop_hz)
    return np.sort_complex(poles[keep])


def distinct_modes(sheet: Sheet, guesses: np.ndarray, stop_hz: float) -> list[complex]:
    """Guesses refined on the same mesh, without those that fail or meet."""
    poles: list[complex] = []
    for guess in guesses:
        try:
            pole = sheet.mode(complex(guess)).pole_hz
        except ValueError:
            continue
        new = all(abs(pole - other) > 1e-4 * abs(pole) for other in poles)
        if new and 0 < 2 * pole.imag < pole.real < stop_hz:
            poles.append(pole)
    return sorted(poles, key=lambda p: p.real)


def half_waves(sheet: Sheet, current: np.ndarray, strip: dict[str, Any]) -> int:
    """Half waves of current along a strip from the phase reversals of its centre-line current."""
    line = np.array(strip["path"]) * 1e-3
    if "radius" in strip:
        radius, length = strip["radius"] * 1e-3, strip["length"] * 1e-3
        angle = np.linspace(-length / 2, length / 2, 400) / radius + np.pi / 2
        line = radius * np.stack([np.cos(angle), np.sin(angle)], axis=1)
    legs = np.diff(line, axis=0)
    lengths = np.linalg.norm(legs, axis=1)
    legs, starts, lengths = legs[lengths > 0], line[:-1][lengths > 0], lengths[lengths > 0]
    ends = np.cumsum(lengths)
    place = (np.arange(240) + 0.5) / 240 * ends[-1]
    leg = np.searchsorted(ends, place)
    unit = (legs / lengths[:, None])[leg]
    points = starts[leg] + unit * (place - ends[leg] + lengths[leg])[:, None]
    flow = np.sum(sheet.current_density(points, current) * unit, axis=1)
    turn = np.sqrt(np.sum(flow**2))
    real = (flow / turn).real if turn else flow.real
    loud = real[abs(real) > 0.05 * abs(real).max()]
    closed = bool(np.allclose(line[0], line[-1]))
    if closed:
        loud = np.append(loud, loud[0])
    return int(np.sum(loud[1:] * loud[:-1] < 0)) + (0 if closed else 1)


def extrapolate(rows: list[tuple[int, complex]]) -> tuple[complex, float, float]:
    """Pole at infinite level and relative errors of frequency and Q."""
    (a, x), (b, y) = rows[-2:]
    best = y + (y - x) * a**2 / (b**2 - a**2)
    other, share = y, 0.5
    if len(rows) > 2:
        (c, z), (d, w) = rows[-3:-1]
        other, share = w + (w - z) * c**2 / (d**2 - c**2), 1.0
    quality = best.real / best.imag
    error = abs(best.real - other.real) / best.real
    return best, share * error + 2e-5, share * abs(quality / (other.real / other.imag) - 1) + 5e-4


def compute(shape: dict[str, Any], levels: list[int], known: dict[str, Any]) -> dict[str, Any]:
    """Entry for shapes.toml; `known` is what it already holds for this shape."""
    tracks: list[list[list[float]]] = [m["by_level"] for m in known.get("mode", [])]
    numbers = [m["half_waves"] for m in known.get("mode", [])]
    if not tracks:
        sheet = Sheet(mesh_of(shape, 1))
        stop_hz = shape.get("stop", 4.0) * 1e9
        guesses = first_guesses(sheet, 0.1 * stop_hz, 1.08 * stop_hz)
        poles = distinct_modes(sheet, guesses, 1.03 * stop_hz)
        tracks = [[[1, sheet.unknowns, *_told(pole)]] for pole in poles]
        numbers = [-1] * len(tracks)
    for level in levels:
        if tracks and any(row[0] == level for row in tracks[0]):
            continue
        sheet = Sheet(mesh_of(shape, level))
        for k, track in enumerate(tracks):
            mode = sheet.mode(_guess(track, level))
            track.append([level, sheet.unknowns, *_told(mode.pole_hz)])
            track.sort()
            numbers[k] = half_waves(sheet, mode.current, shape["strip"][0])
    return {**shape, "mode": [_row(t, n) for t, n in zip(tracks, numbers, strict=True)]}


def _told(pole: complex) -> list[float]:
    return [round(pole.real / 1e9, 7), round(pole.real / (2 * pole.imag), 6)]


def _pole(row: list[float]) -> complex:
    return complex(row[2], row[2] / (2 * row[3])) * 1e9


def _guess(track: list[list[float]], level: int) -> complex:
    below = [r for r in track if r[0] < level]
    if len(below) < 2:
        return _pole((below or track)[-1])
    a, b = below[-2:]
    change = (_pole(b) - _pole(a)) / (a[0] ** -2 - b[0] ** -2)
    return _pole(b) + change * (b[0] ** -2 - level**-2)


def _row(track: list[list[float]], half_wave_count: int) -> dict[str, Any]:
    fine = [(int(r[0]), _pole(r)) for r in track if r[0] > 1]
    best, error, q_error = extrapolate(fine)
    if best.real < 2 * LEAST_Q * best.imag:
        half_wave_count = -1
    return {
        "half_waves": half_wave_count,
        "frequency_ghz": round(best.real / 1e9, 5),
        "q": round(best.real / (2 * best.imag), 4),
        "frequency_error_percent": round(100 * error, 3),
        "q_error_percent": round(100 * q_error, 2),
        "by_level": track,
    }


# The file ---------------------------------------------------------------------------------------


def read() -> dict[str, dict[str, Any]]:
    """Entries by name; empty where there is no file yet."""
    if not FILE.exists():
        return {}
    return {s["name"]: s for s in tomllib.loads(FILE.read_text())["shape"]}


def write(entries: dict[str, dict[str, Any]]) -> None:
    """Write all entries in the order of WANTED."""
    ordered = [entries[s["name"]] for s in WANTED if s["name"] in entries]
    write_table(FILE, HEAD, "shape", ordered)


def write_table(file: Path, head: str, name: str, entries: list[dict[str, Any]]) -> None:
    """Write an array of tables; values that are lists of tables become arrays of sub-tables."""
    lines = [head]
    for entry in entries:
        parts = {k: v for k, v in entry.items() if isinstance(v, list) and _are_tables(v)}
        lines.append(f"[[{name}]]")
        lines += [f"{k} = {_text(v)}" for k, v in entry.items() if k not in parts]
        for part, rows in parts.items():
            for row in rows:
                lines.append(f"[[{name}.{part}]]")
                lines += [f"{k} = {_text(v)}" for k, v in row.items()]
        lines.append("")
    part_file = file.with_suffix(".part")
    part_file.write_text("\n".join(lines))
    part_file.replace(file)


def _are_tables(rows: list[Any]) -> bool:
    return bool(rows) and all(isinstance(row, dict) for row in rows)


def _text(value: object) -> str:
    if isinstance(value, str):
        return f'"{value}"'
    if isinstance(value, (list, tuple)):
        return "[" + ", ".join(_text(v) for v in value) + "]"
    return repr(round(value, 7) if isinstance(value, float) else value)


def main() -> None:
    """Compute what is missing."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--levels", default="2,3")
    parser.add_argument("--only", nargs="*")
    options = parser.parse_args()
    levels = [int(t) for t in options.levels.split(",")]
    for shape in WANTED:
        if options.only and shape["name"] not in options.only:
            continue
        started = time.perf_counter()
        known = read().get(shape["name"], {})
        try:
            entry = compute(shape, levels, known)
        except ValueError as problem:
            print(f"{shape['name']}: {problem}", file=sys.stderr, flush=True)
            continue
        write({**read(), shape["name"]: entry})
        told = "; ".join(
            f"{m['half_waves']}: {m['frequency_ghz']} ({m['frequency_error_percent']} %) Q {m['q']}"
            for m in entry["mode"]
        )
        print(f"{shape['name']} [{time.perf_counter() - started:.0f} s] {told}", flush=True)


if __name__ == "__main__":
    main()
