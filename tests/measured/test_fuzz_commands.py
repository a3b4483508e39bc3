"""Damaged files through `simkit compare`, `fit` and `trim`: a clear sentence, never a traceback.

The stored results and the model of the fit are formulas, so that only what files can do is tried.
"""

import os
import re

import numpy as np
import pytest
from click.testing import CliRunner

import simkit.store
from simkit.cli import main
from simkit.measured import fit_files
from simkit.measured.trim_model import TrimModel
from simkit.response.features import reflection

from . import synthetic
from .test_comparison import bench, results
from .test_touchstone import PIECES

AIM = (
    "--mode", "1/2", "--target", "920 MHz", "--by", "arm=71 mm..77 mm", "--free", "eps=2.1..3.3",
)  # fmt: skip
FITTED_EACH, TRIMMED_EACH = 4, 20
"""All three read files alike; what fits and trims do besides sees fewer in the long test."""

FREE = ("--free", "eps=2.1..3.3", "--known", "arm = 74 mm +- 0.5 mm")


class FormulaEngine:
    """Stands for the field engine where a fit asks for one more solution."""

    solves = 0

    def node(self, values):
        return synthetic.node(values["arm"], values["eps"])


@pytest.fixture(scope="module")
def formulas():
    """Stored results and the model of a fit."""
    return results(), synthetic.surrogate()


@pytest.fixture
def folder(tmp_path, monkeypatch, formulas):
    (tmp_path / "gauge.toml").write_text(synthetic.STUDY)
    (tmp_path / "results").mkdir()
    stored, model = formulas
    monkeypatch.setattr(simkit.store, "open_results", lambda path: stored)
    monkeypatch.setattr(
        fit_files, "build_surrogate", lambda *args, **kwargs: (model, FormulaEngine())
    )
    monkeypatch.setattr(TrimModel, "gains_dbi", lambda self, modes, _: [(2.0, 2.1)] * len(modes))
    return tmp_path


@pytest.fixture
def undrawn(monkeypatch):
    """Pictures are drawn for a part of the files only; they cost most of the time."""
    counted = {"files": 0}

    def write(figure, path):
        counted["files"] += 1
        if counted["files"] % 40 == 1:
            figure.canvas.draw()
        return path

    monkeypatch.setattr("simkit.plot.save.write", write)
    return counted


def text_of(measurement, form="ri", unit=1.0, word="Hz"):
    gamma = measurement.reflection
    pairs = {
        "ri": (gamma.real, gamma.imag),
        "ma": (abs(gamma), np.degrees(np.angle(gamma))),
        "db": (20 * np.log10(abs(gamma)), np.degrees(np.angle(gamma))),
    }[form]
    rows = zip(measurement.frequency_hz / unit, *pairs, strict=True)
    lines = [f"{f:.9g} {a:.6f} {b:.6f}" for f, a, b in rows]
    return "\n".join(["! invented", f"# {word} S {form} R 50", *lines, ""])


def seeds():
    """Files as analysers write them: formats, units, two ports, version 2."""
    sweep = synthetic.measured(74.4e-3, 3.0, points=161)
    one = text_of(sweep)
    two = "\n".join(
        line if line[:1] in "!#" else f"{line} 0.01 0 0.01 0 0.9 0.1"
        for line in one.split("\n")[:-1]
    )
    head = "[Version] 2.0\n# Hz S RI R 50\n[Number of Ports] 1\n[Network Data]\n"
    return [
        (one, "a.s1p"),
        (text_of(bench(0.92e9, 2.75e9, second=1.7e9, points=151), "db", 1e9, "GHz"), "b.s1p"),
        (text_of(sweep, "ma", 1e6, "MHz"), "c.s1p"),
        (two, "d.s2p"),
        (head + "\n".join(one.split("\n")[2:]) + "[End]\n", "e.ts"),
    ]


def repeat_line(rng, lines, k):
    lines.insert(k, lines[k])


def drop_lines(rng, lines, k):
    del lines[k : k + int(rng.integers(1, 60))]


def turn_round(rng, lines, k):
    lines[k : k + 20] = lines[k : k + 20][::-1]


def scale_frequencies(rng, lines, k):
    factor = float(rng.choice([-1, 1e-3, 1e3, 0.3, 1.2, 30]))
    lines[:] = [_scaled(line, factor) for line in lines]


def push_column(rng, lines, k):
    lines[k:] = [re.sub(r"(\d) ", r"\g<1> 0.0", line, count=1) for line in lines[k:]]


def put_piece(rng, lines, k):
    place = int(rng.integers(0, len(lines[k]) + 1))
    piece = PIECES[int(rng.integers(0, len(PIECES)))].decode("latin-1")
    lines[k] = lines[k][:place] + piece + lines[k][place:]


def cut_off(rng, lines, k):
    del lines[k + 1 :]
    lines[k] = lines[k][: int(rng.integers(0, len(lines[k]) + 1))]


def flatten(rng, lines, k):
    lines[:] = [
        " ".join([*line.split()[:1], "0.7", "0.1"]) if line[:1].isdigit() else line
        for line in lines
    ]


def change_byte(rng, lines, k):
    data = bytearray("\n".join(lines).encode("latin-1", "replace"))
    data[int(rng.integers(0, len(data)))] = int(rng.integers(0, 256))
    lines[:] = data.decode("latin-1").split("\n")


DAMAGES = (
    repeat_line, drop_lines, turn_round, scale_frequencies, push_column, put_piece, cut_off,
    flatten, change_byte,
)  # fmt: skip


def damaged(rng, text):
    """The text with bytes, lines or whole columns gone wrong."""
    lines = text.split("\n")
    for _ in range(int(rng.integers(1, 4))):
        DAMAGES[int(rng.integers(0, len(DAMAGES)))](rng, lines, int(rng.integers(0, len(lines))))
        if not "".join(lines):
            break
    return "\n".join(lines).encode("latin-1", "replace")


def _scaled(line, factor):
    words = line.split()
    try:
        return " ".join([f"{float(words[0]) * factor:.9g}", *words[1:]])
    except (ValueError, IndexError):
        return line


def run(words):
    """Run a command; a bug shows as an exception other than the exit."""
    done = CliRunner().invoke(main, [str(word) for word in words])
    assert done.exception is None or isinstance(done.exception, SystemExit), repr(done.exception)
    assert "Traceback" not in done.output
    assert not re.search(r"\b(nan|inf)\b", done.stdout), done.stdout
    if done.exit_code:
        (said,) = [line for line in done.stderr.splitlines() if line.strip()]
        assert said.startswith("simkit: "), said
        assert len(said) < 700, said
    return done


def fuzz(folder, count, seed, each=(1, 1)):
    """Share of the damaged files that each command could still use."""
    rng = np.random.default_rng(seed)
    kinds = seeds()
    used = {"compare": 0, "fit": 0, "trim": 0}
    for number in range(count):
        text, name = kinds[int(rng.integers(0, len(kinds)))]
        file = folder / name
        file.write_bytes(damaged(rng, text))
        port = ("--port", "1") if name.endswith("s2p") else ()
        extra = ("--nearest",) if number % 7 == 0 else ()
        used["compare"] += not run(["compare", folder / "results", file, *port, *extra]).exit_code
        to = ("complex", "magnitude", "features")[number % 3]
        if number % each[0] == 0:
            words = ["fit", folder / "gauge.toml", file, *FREE, "--to", to, *port]
            used["fit"] += not run(words).exit_code
        if number % each[1] == 0:
            words = ["trim", folder / "gauge.toml", file, *AIM, "--to", to, *port]
            used["trim"] += not run(words).exit_code
    return used


def test_damaged_files_through_compare_fit_and_trim(folder, undrawn):
    used = fuzz(folder, 15, seed=868)
    assert used.pop("trim") > 0  # it needs a dip besides
    assert all(2 < count < 14 for count in used.values()), used


@pytest.mark.long
def test_two_thousand_damaged_files_through_compare_fit_and_trim(folder, undrawn):
    count = int(os.environ.get("SIMKIT_FUZZ", "2000"))
    used = fuzz(folder, count, seed=6, each=(FITTED_EACH, TRIMMED_EACH))
    print(used)
    assert all(number > count / 200 for number in used.values()), used


def lines_of(points=161, **changes):
    sweep = synthetic.measured(74.4e-3, 3.0, points=points, **changes)
    return text_of(sweep).split("\n")


def with_line(place, line):
    lines = lines_of()
    lines.insert(place, line)
    return "\n".join(lines)


def more_dips_than_modes():
    """A comb of narrow resonances over the antenna's two."""
    frequency = np.linspace(0.4e9, 3.0e9, 1301)
    total = 1 / synthetic.impedance(frequency, 74e-3, 2.7)
    for place in np.arange(0.6e9, 2.9e9, 0.17e9):
        total = total + 1 / (300 + 2j * np.pi * 1.2e-6 * (frequency - place**2 / frequency))
    gamma = reflection(1 / total, 50.0)
    data = synthetic.measured(74e-3, 2.7)
    return text_of(type(data)(data.path, frequency, gamma, 50.0))


def flat():
    data = synthetic.measured(74e-3, 2.7)
    return text_of(type(data)(data.path, data.frequency_hz, 0.9 + 0 * data.reflection, 50.0))


REFUSED = {
    "empty": ("", "the file is empty"),
    "binary": ("\0\x01\x02" * 400, "the file is binary"),
    "truncated": ("\n".join(lines_of())[:-15], "the file is truncated"),
    "NaN": (with_line(2, "3e8 nan 0.1"), "'nan' is no measured value"),
    "unsorted": (with_line(2, "9e8 0.1 0.1"), "not sorted"),
    "duplicated": (with_line(3, lines_of()[2]), "is repeated"),
    "negative frequency": (with_line(2, "-3e8 0.1 0.1"), "is negative"),
    "outside the band": (
        "\n".join(lines_of(band=(5e9, 6e9))),
        "no frequency in common",
    ),
}


@pytest.mark.parametrize("kind", REFUSED)
@pytest.mark.parametrize("command", ["compare", "fit"])
def test_what_cannot_be_used_is_refused_in_one_sentence(folder, undrawn, command, kind):
    text, said = REFUSED[kind]
    file = folder / "bad.s1p"
    file.write_text(text, encoding="latin-1")
    words = [folder / "results", file] if command == "compare" else [folder / "gauge.toml", file]
    done = run([command, *words, *(FREE if command == "fit" else ())])
    assert done.exit_code == 2
    assert said in done.stderr
    assert "bad.s1p" in done.stderr
    assert undrawn["files"] == 0
    assert not (folder / "gauge_fitted.toml").exists()


@pytest.mark.parametrize("command", ["compare", "fit"])
def test_ten_million_points_are_refused_unread(folder, undrawn, command):
    """The size alone decides; the file is a hole on the disk."""
    file = folder / "huge.s1p"
    with file.open("wb") as stream:
        stream.write(b"# Hz S RI R 50\n")
        stream.truncate(10_000_000 * 35)
    words = [folder / "results", file] if command == "compare" else [folder / "gauge.toml", file]
    done = run([command, *words, *(FREE if command == "fit" else ())])
    assert done.exit_code == 2
    assert "the file is 350 MB, the limit is 32 MB; export fewer points" in done.stderr


@pytest.mark.parametrize(
    ("text", "said"),
    [(flat(), "no dip stands out"), (more_dips_than_modes(), "belongs to no mode")],
    ids=["no dip", "more dips than modes"],
)
def test_odd_sweeps_are_compared_and_fitted_with_a_word(folder, undrawn, text, said):
    file = folder / "odd.s1p"
    file.write_text(text)
    done = run(["compare", folder / "results", file])
    assert done.exit_code == 0
    assert said in done.stdout
    done = run(["fit", folder / "gauge.toml", file, *FREE])
    assert done.exit_code == 0
    assert "still differs visibly" in done.stdout
