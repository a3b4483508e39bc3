"""Reading Touchstone files: every format gives the same numbers, bad files a clear sentence."""

import contextlib
import io
import pickle

import numpy as np
import pytest

from simkit.errors import MeasurementError
from simkit.measured.touchstone import read_touchstone

FREQUENCY = np.linspace(0.8e9, 1.0e9, 13)
GAMMA = 0.6 * np.exp(1j * np.linspace(1.0, -2.0, 13)) + 0.1j


def row(frequency, *values):
    return " ".join(f"{number:.12g}" for number in (frequency, *values))


def one_port_text(option="# Hz S RI R 50", frequency=FREQUENCY, pairs=None):
    pairs = [(g.real, g.imag) for g in GAMMA] if pairs is None else pairs
    lines = [row(f, *pair) for f, pair in zip(frequency, pairs, strict=True)]
    return "\n".join(["! Bench sweep, invented", option, *lines, ""])


def write(folder, text, name="build.s1p"):
    file = folder / name
    file.write_bytes(text if isinstance(text, bytes) else text.encode())
    return file


def as_pairs(values):
    return [(v.real, v.imag) for v in values]


NORMAL_Z = (1 + GAMMA) / (1 - GAMMA)


@pytest.mark.parametrize(
    ("option", "scale", "pairs"),
    [
        ("# Hz S RI R 50", 1.0, as_pairs(GAMMA)),
        ("# GHz S RI R 50", 1e9, as_pairs(GAMMA)),
        ("#MHz S RI", 1e6, as_pairs(GAMMA)),
        ("# RI S kHz R 50.0", 1e3, as_pairs(GAMMA)),
        ("# mhz s ri r50", 1e6, as_pairs(GAMMA)),
        ("# R 50 S RI MHz", 1e6, as_pairs(GAMMA)),
        ("# r50 kHz RI", 1e3, as_pairs(GAMMA)),
        ("#", 1e9, [(abs(g), np.angle(g, deg=True)) for g in GAMMA]),
        ("# GHz DB R 50", 1e9, [(20 * np.log10(abs(g)), np.angle(g, deg=True)) for g in GAMMA]),
        ("# GHz Z RI R 50", 1e9, as_pairs(NORMAL_Z)),
        ("# GHz Y RI R 50", 1e9, as_pairs(1 / NORMAL_Z)),
    ],
)
def test_units_formats_and_parameters_give_the_same_reflection(tmp_path, option, scale, pairs):
    file = write(tmp_path, one_port_text(option, FREQUENCY / scale, pairs))
    data = read_touchstone(file)
    # Twelve digits are written.
    assert data.frequency_hz == pytest.approx(FREQUENCY, rel=1e-10)
    assert data.reflection == pytest.approx(GAMMA, abs=1e-10)
    assert data.reference_ohm == 50.0
    assert data.notes == ()
    assert data.comments == ("Bench sweep, invented",)


@pytest.mark.parametrize(
    ("parameter", "values"),
    [("S", GAMMA), ("Z", 75 * NORMAL_Z), ("Y", 1 / (75 * NORMAL_Z))],
)
def test_version_2_is_not_normalised(tmp_path, parameter, values):
    head = (
        f"[Version] 2.0\n# Hz {parameter} RI R 50\n[Number of Ports] 1\n"
        "[Number of Frequencies] 13\n[Reference]\n75.0\n[Network Data]\n"
    )
    body = "\n".join(row(f, v.real, v.imag) for f, v in zip(FREQUENCY, values, strict=True))
    data = read_touchstone(write(tmp_path, f"{head}{body}\n[End]\n", "build.ts"))
    assert data.reference_ohm == 75.0
    assert data.reflection == pytest.approx(GAMMA, abs=1e-10)


@pytest.mark.parametrize(
    "change",
    [
        lambda text: text.replace("\n", "\r\n"),
        lambda text: text.replace("\n", "\r"),
        lambda text: "\ufeff" + text,
        lambda text: (
            "! 20 \N{DEGREE SIGN}C\n! \N{NEXT LINE}end\n".encode("latin-1") + text.encode()
        ),
        lambda text: text.encode("utf-16"),
        lambda text: text.replace(" ", "\t  ").replace("\n", "   ! marker 1\n\n"),
        lambda text: text + "\x1a",
    ],
    ids=["crlf", "cr", "byte order mark", "latin-1", "utf-16", "blanks", "end mark"],
)
def test_line_ends_encodings_and_comments_do_not_matter(tmp_path, change):
    data = read_touchstone(write(tmp_path, change(one_port_text())))
    assert data.reflection == pytest.approx(GAMMA, abs=1e-10)


def two_port_text(parameter="S", matrices=None):
    if matrices is None:
        matrices = np.zeros((13, 2, 2), complex)
        matrices[:, 0, 0], matrices[:, 1, 1] = 0.2, GAMMA
        matrices[:, 1, 0], matrices[:, 0, 1] = 0.3j, 0.4j
    lines = [f"# Hz {parameter} RI R 50"]
    for f, m in zip(FREQUENCY, matrices, strict=True):
        order = (m[0, 0], m[1, 0], m[0, 1], m[1, 1])
        lines.append(row(f, *(part for v in order for part in (v.real, v.imag))))
    return "\n".join([*lines, ""])


def test_two_ports_need_a_choice(tmp_path):
    file = write(tmp_path, two_port_text(), "pair.s2p")
    with pytest.raises(MeasurementError, match=r"pair.s2p: .* 2 ports and none was chosen.*port=1"):
        read_touchstone(file)
    assert read_touchstone(file, port=1).reflection == pytest.approx(np.full(13, 0.2))
    assert read_touchstone(file, port=2).reflection == pytest.approx(GAMMA, abs=1e-10)
    with pytest.raises(MeasurementError, match="port 3 does not exist; the file holds 2"):
        read_touchstone(file, port=3)


def test_two_port_impedances_are_those_of_a_series_element(tmp_path):
    """A T of 25, 100, 40 ohm with 50 ohm at the far port: Z in = 25 + 100 // 90."""
    z = np.array([[125.0, 100.0], [100.0, 140.0]])
    text = two_port_text("Z", np.tile(z / 50, (13, 1, 1)).astype(complex))
    data = read_touchstone(write(tmp_path, text, "tee.s2p"), port=1)
    z_in = 25 + 100 * 90 / 190
    assert data.reflection == pytest.approx(np.full(13, (z_in - 50) / (z_in + 50)))


def test_noise_parameters_after_two_port_data_are_left_out(tmp_path):
    text = two_port_text() + "7e8 1.2 0.3 40 0.4\n9e8 1.5 0.3 50 0.4\n"
    assert len(read_touchstone(write(tmp_path, text, "amp.s2p"), port=2).frequency_hz) == 13


def test_three_ports_wrap_their_lines(tmp_path):
    lines = ["# Hz S RI R 50"]
    for f, g in zip(FREQUENCY, GAMMA, strict=True):
        lines += [row(f, 0.1, 0, 0, 0, 0, 0), row(0, 0, g.real, g.imag, 0, 0)]
        lines.append(row(0, 0, 0, 0, 0.3, 0))
    data = read_touchstone(write(tmp_path, "\n".join(lines), "trio.s3p"), port=2)
    assert data.reflection == pytest.approx(GAMMA, abs=1e-10)


def test_active_points_are_a_note(tmp_path):
    pairs = as_pairs(GAMMA)
    pairs[4] = (1.1, 0.0)
    (note,) = read_touchstone(write(tmp_path, one_port_text(pairs=pairs))).notes
    assert note.startswith("|reflection| exceeds 1 at 1 of 13 points (up to 1.100 at 866.7 MHz)")
    pairs[4] = (1.015, 0.0)
    assert read_touchstone(write(tmp_path, one_port_text(pairs=pairs))).notes == ()


def test_second_option_line_and_impedance_comments_are_notes(tmp_path):
    text = "! Port Impedance 75\n" + one_port_text() + "# GHz S MA R 75\n"
    notes = read_touchstone(write(tmp_path, text)).notes
    assert [note.split(";")[0] for note in notes] == [
        "line 17: a second option line is ignored",
        "port impedances given in comments are ignored",
    ]


def test_renormalising(tmp_path):
    data = read_touchstone(write(tmp_path, one_port_text("# Hz S RI R 75")))
    moved = data.renormalised(50.0)
    impedance = 75 * NORMAL_Z
    assert moved.reflection == pytest.approx((impedance - 50) / (impedance + 50))
    assert moved.reference_ohm == 50.0
    assert moved.notes == ("measured with reference 75 ohm, converted to the 50 ohm of the study",)
    assert data.renormalised(75.0) is data
    with pytest.raises(MeasurementError, match="give a positive resistance"):
        data.renormalised(0.0)
    pairs = as_pairs(GAMMA)
    pairs[3] = (-5.0, 0.0)
    active = read_touchstone(write(tmp_path, one_port_text("# Hz S RI R 75", pairs=pairs)))
    with pytest.raises(MeasurementError, match="negative resistance of just that size"):
        active.renormalised(50.0)


HEAD = "# Hz S RI R 50\n"
LINES = one_port_text().split("\n")[2:-1]


def sweep(*lines, head=HEAD):
    return head + "\n".join(lines) + "\n"


def swapped(first, second):
    lines = list(LINES)
    lines[first], lines[second] = lines[second], lines[first]
    return sweep(*lines)


BAD = {
    "empty": (b"", "the file is empty"),
    "blank": (b" \r\n\n ", "the file is empty"),
    "binary": (bytes(range(256)) * 40, "the file is binary, not text"),
    "pickle": (pickle.dumps({"s": list(GAMMA)}), "the file is binary, not text"),
    "prose": ("Dear colleague,\nhere is the sweep.\n", "s1p:1: data come before any option line"),
    "only comments": ("! nothing\n", "there is no option line"),
    "no option line": (sweep(*LINES, head=""), r"s1p:1: .* '# MHz S RI R 50'"),
    "no data": (HEAD, "there are no data after the option line"),
    "cut in a line": (sweep(*LINES)[:-18], "s1p:14: the last line has 2 of 3 numbers.*truncated"),
    "cut in a number": (sweep(*LINES[:-1], LINES[-1] + "e-"), "'.*e-' is not a number"),
    "short line": (
        sweep(LINES[0], "8.1e8 0.1", *LINES[1:]),
        "s1p:3: the line has 2 numbers where 3",
    ),
    "two-port data": (two_port_text(), r"9 numbers where 3 .*rename the file to end in .s2p"),
    "decimal comma": (
        sweep("8e8 0,5 0,1", *LINES),
        r"'0,5' is not a number; write decimals with a",
    ),
    "underscore": (sweep("8e8 0_5 0.1", *LINES), "'0_5' is not a number"),
    "not a number": (sweep("7e8 nan 0.1", *LINES), "s1p:2: 'nan' is no measured value"),
    "infinite": (sweep("7e8 inf 0.1", *LINES), "'inf' is no measured value"),
    "unsorted": (swapped(3, 8), r"not sorted: after point 4 \(933.33333 MHz\) comes 866.66667 MHz"),
    "repeated": (sweep(*LINES, LINES[-1]), r"1000 MHz is repeated \(point 14\)"),
    "negative": (sweep("-1e8 0.1 0.2", *LINES), "-1e[+]08 Hz is negative"),
    "wrong unit": (sweep(*LINES, head="# GHz S RI R 50\n"), "would reach 1e[+]18 Hz; the unit in"),
    "wrong format": (
        sweep(*(row(f, 0.5, 170.0) for f in FREQUENCY)),
        r"reflection\| reaches 170; the format in the option line",
    ),
    "huge dB": (
        sweep("7e8 1e7 0", *LINES, head="# Hz S DB R 50\n"),
        "at 700 MHz is not a fini",
    ),
    "few points": (sweep(*LINES[:10]), r"10 point\(s\), at least 11 are needed"),
    "unknown option": (sweep(*LINES, head="# Hz T RI R 50\n"), "s1p:1: the option 't' is unknown"),
    "zero reference": (
        sweep(*LINES, head="# Hz S RI R 0\n"),
        "the reference resistance '0' is not",
    ),
    "complex reference": (
        sweep(*LINES, head="# Hz S RI R 50+1j\n"),
        r"resistance '50\+1j' is not a",
    ),
    "two references": (
        sweep(*LINES, head="# Hz S RI R 50 75\n"),
        "2 reference resistances for 1 p",
    ),
    "hybrid": (sweep(*LINES, head="# Hz H RI R 50\n"), "H parameters describe no reflection"),
    "short circuit of -R": (
        sweep("7e8 -1 0", *LINES, head="# Hz Z RI R 50\n"),
        "equals minus the reference resistance",
    ),
}


@pytest.mark.parametrize("kind", BAD)
def test_a_bad_file_is_refused_with_file_reason_and_remedy(tmp_path, kind):
    content, message = BAD[kind]
    file = write(tmp_path, content)
    with pytest.raises(MeasurementError, match=message) as caught:
        read_touchstone(file)
    assert str(file) in str(caught.value)


VERSION2 = "[Version] 2.0\n# Hz S RI R 50\n[Number of Ports] {ports}\n{extra}[Network Data]\n"


@pytest.mark.parametrize(
    ("ports", "extra", "message"),
    [
        ("1", "[Number of Frequencies] 99\n", "announces 99 frequencies and holds 13"),
        ("one", "", "s?:3: .number of ports. 'one' is not a positive whole number"),
        ("900000000", "", "900000000 ports are more than the 32"),
        ("1", "[Reference]\n", "0 numbers|there are no data|reference"),
        ("1", "[Reference] 50 50\n", "2 reference resistances for 1 port"),
        ("1", "[Reference] -50\n", "all positive"),
        ("2", "[Two-Port Data Order] 11_22\n", "'11_22' is not one of 12_21, 21_12"),
        ("2", "[Mixed-Mode Order] D1,2 C1,2\n", "mixed-mode data are not understood"),
    ],
)
def test_bad_version_2_files(tmp_path, ports, extra, message):
    text = VERSION2.format(ports=ports, extra=extra) + "\n".join(LINES) + "\n[End]\n"
    file = write(tmp_path, text, "build.ts")
    if extra == "[Reference]\n":  # an empty reference falls back to the option line
        assert read_touchstone(file).reference_ohm == 50.0
        return
    with pytest.raises(MeasurementError, match=message):
        read_touchstone(file)


def test_missing_folder_unnamed_and_oversized_files(tmp_path, monkeypatch):
    with pytest.raises(MeasurementError, match=r"none.s1p: there is no such file"):
        read_touchstone(tmp_path / "none.s1p")
    with pytest.raises(MeasurementError, match=r"cannot be read \(Is a directory\)"):
        read_touchstone(tmp_path)
    with pytest.raises(MeasurementError, match="the name cannot be opened"):
        read_touchstone("bad\0name.s1p")
    file = write(tmp_path, one_port_text(), "build.txt")
    with pytest.raises(MeasurementError, match=r"rename a one-port file to end in .s1p"):
        read_touchstone(file)
    monkeypatch.setattr("simkit.measured.sheet.MAX_BYTES", 100)
    with pytest.raises(MeasurementError, match="export fewer points"):
        read_touchstone(write(tmp_path, one_port_text()))


def test_nothing_is_unpickled(tmp_path):
    class Trap:
        def __reduce__(self):
            return (open, (str(tmp_path / "sprung"), "w"))

    stream = io.BytesIO()
    pickle.dump(Trap(), stream, protocol=0)
    with pytest.raises(MeasurementError, match=r"trap.s1p"):
        read_touchstone(write(tmp_path, stream.getvalue(), "trap.s1p"))
    assert not (tmp_path / "sprung").exists()


SEEDS = (
    one_port_text().encode(),
    two_port_text().encode(),
    (VERSION2.format(ports=1, extra="[Reference] 50\n") + "\n".join(LINES) + "\n[End]\n").encode(),
)
PIECES = (
    b"\n", b" ", b"nan", b"-", b"e9", b"1e400", b"!", b"#", b"[Reference]", b"[Number of Ports] 2",
    b"[Number of Frequencies] 5", b"# GHz Z MA R 75", b"\0", b"\xff\xfe", b"9" * 30,
    b"[Noise Data]", b"[Begin Information]", b"[Matrix Format] lower",
    b"\x80\x04", b"! Port[9] = x", b"0", b"DB",
)  # fmt: skip


def mutated(rng, seed):
    data = bytearray(seed)
    for _ in range(int(rng.integers(1, 4))):
        place = int(rng.integers(0, len(data) + 1))
        span = int(rng.integers(0, 40))
        match int(rng.integers(0, 9)) // 2:
            case 0:
                data[place : place + 1] = bytes([int(rng.integers(0, 256))])
            case 1:
                data[place:place] = PIECES[int(rng.integers(0, len(PIECES)))]
            case 2:
                del data[place : place + span]
            case 3:
                data[place:place] = data[place : place + 3 * span]
            case 4:
                del data[place:]
    return bytes(data)


def fuzz(folder, count, seed):
    rng = np.random.default_rng(seed)
    names = ("a.s1p", "a.s2p", "a.ts")
    read = 0
    for _ in range(count):
        kind = int(rng.integers(0, len(SEEDS)))
        name = names[kind] if rng.random() < 0.9 else names[kind - 1]
        file = write(folder, mutated(rng, SEEDS[kind]), name)
        with contextlib.suppress(MeasurementError):
            data = read_touchstone(file, port=1 if rng.random() < 0.8 else None)
            read += 1
            assert np.isfinite(data.reflection).all()
            assert (np.diff(data.frequency_hz) > 0).all()
    return read


def test_mutated_files_raise_nothing_else(tmp_path):
    assert 5 < fuzz(tmp_path, 400, seed=868) < 380


@pytest.mark.long
def test_many_mutated_files_raise_nothing_else(tmp_path):
    assert 50 < fuzz(tmp_path, 3000, seed=20) < 2900
