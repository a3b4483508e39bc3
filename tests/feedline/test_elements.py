"""Elements and chains: against scikit-rf, reciprocity, power, and the limits of open and short."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
import skrf
from scipy.constants import c
from skrf.media import DefinedGammaZ0

from simkit.feedline import (
    Chain,
    Coaxial,
    FeedlineError,
    LineSection,
    Lumped,
    OnePort,
    PortExtension,
    Stub,
    TappedLine,
    Transformer,
    TwoStrips,
    UniformLine,
)
from simkit.feedline.waves import cascade, series, shunt, terminated

F = np.linspace(0.6e9, 1.1e9, 7)
LOSSY = UniformLine(72.0, 0.7, 3.0, 0.9e9, 0.02)
CLEAN = UniformLine(72.0, 0.7)
LOAD = OnePort.from_impedance(F, 30 + 1j * np.linspace(-90, 120, 7))

ELEMENTS = [
    LineSection(LOSSY, 37e-3),
    LineSection(TwoStrips(3e-3, 1e-3, 0.05e-3, 2.7, 0.02, 0.0, 1e6), 21e-3),
    Stub(LOSSY, 23e-3, "short"),
    Stub(LOSSY, 11e-3, "open", "series"),
    TappedLine(LOSSY, 31e-3, 17e-3),
    Lumped("C", 2.2e-12, "shunt", 120),
    Lumped("L", 8.2e-9, "series", 35),
    Lumped("R", 18.0, "series"),
    Transformer(2.3, 0.4, 60.0),
    PortExtension.of_length(13e-3, 2.1),
]
IDS = [f"{type(e).__name__} {n}" for n, e in enumerate(ELEMENTS)]


@pytest.mark.parametrize("element", ELEMENTS, ids=IDS)
@pytest.mark.parametrize("reference", [50.0, 130.0])
def test_reciprocal_and_passive(element, reference):
    matrix = element.scattering(F, reference)
    assert matrix.shape == (7, 2, 2)
    assert matrix[:, 0, 1] == pytest.approx(matrix[:, 1, 0])
    gain = np.linalg.svd(matrix, compute_uv=False).max()
    assert gain <= 1 + 1e-12


@pytest.mark.parametrize("element", ELEMENTS[:-1], ids=IDS[:-1])  # an extension has the reference
def test_reference_is_a_matter_of_writing(element):
    """Renormalised by scikit-rf, the same network comes out."""
    one = skrf.Network(f=F, s=element.scattering(F, 50.0), z0=50.0, f_unit="hz")
    one.renormalize(130.0, s_def="power")
    # That library goes through impedances, which a series part has none of: it nudges them by 1e-7.
    assert one.s == pytest.approx(element.scattering(F, 130.0), abs=1e-6)


@pytest.mark.parametrize("element", ELEMENTS, ids=IDS)
def test_part_of_an_element_grows_from_nothing(element):
    nothing = element.scattering(F, 50.0, 0.0)
    assert nothing == pytest.approx(np.tile([[0, 1], [1, 0]], (7, 1, 1)), abs=1e-12)
    assert element.scattering(F, 50.0, 1.0) == pytest.approx(element.scattering(F, 50.0))


def test_chain_against_scikit_rf():
    """A network put together from that library's own lines, stubs and parts."""
    band = skrf.Frequency.from_f(F, unit="hz")
    values = LOSSY.values(F)
    line = DefinedGammaZ0(band, gamma=values.propagation_per_m, z0=values.impedance_ohm)
    plain = DefinedGammaZ0(band, gamma=1j * F, z0=50.0)

    def section(length):
        made = line.line(length, "m")
        made.renormalize(50.0, s_def="power")
        return made

    def at_50(one_port):
        one_port.renormalize(50.0, s_def="power")
        return one_port

    def coil(inductance, q):
        w = 2 * np.pi * F
        network = plain.resistor(w * inductance / q)
        return network ** plain.inductor(inductance)

    theirs = (
        coil(6.8e-9, 40.0)
        ** plain.shunt(at_50(line.delay_open(23e-3, "m")))
        ** plain.shunt_capacitor(1.5e-12)
        ** section(37e-3)
    )
    ours = Chain(
        (
            LineSection(LOSSY, 37e-3),
            Lumped("C", 1.5e-12, "shunt"),
            Stub(LOSSY, 23e-3, "open"),
            Lumped("L", 6.8e-9, "series", 40.0),
        )
    )
    assert ours.network(F).s == pytest.approx(theirs.s, abs=1e-10)
    load = skrf.Network(f=F, s=LOAD.reflection, z0=50.0, f_unit="hz")
    seen = (theirs**load).s[:, 0, 0]
    assert ours.terminate(LOAD).reflection[-1] == pytest.approx(seen, abs=1e-10)
    assert ours.reflection(LOAD) == pytest.approx(seen, abs=1e-10)


def test_chain_parameters_of_a_line():
    """A, B, C, D of a line with loss are cosh and sinh, whatever the reference."""
    values = LOSSY.values(F)
    angle = values.propagation_per_m * 37e-3
    z = values.impedance_ohm
    a = skrf.network.s2a(LineSection(LOSSY, 37e-3).scattering(F, 50.0), 50.0)
    assert a[:, 0, 0] == pytest.approx(np.cosh(angle))
    assert a[:, 0, 1] == pytest.approx(z * np.sinh(angle))
    assert a[:, 1, 0] == pytest.approx(np.sinh(angle) / z)


def test_empty_chain_shows_the_load():
    result = Chain((), 50.0).terminate(LOAD)
    assert result.reflection[-1] == pytest.approx(LOAD.reflection)
    assert result.efficiency == pytest.approx(np.ones(7))
    assert Chain().network(F).s[3] == pytest.approx(np.array([[0, 1], [1, 0]]))


def test_power_is_conserved():
    chain = Chain(tuple(ELEMENTS), 50.0)
    result = chain.terminate(LOAD)
    assert np.all(result.lost > -1e-12)
    whole = result.passed[0] + result.lost.sum(axis=0) + np.abs(result.reflection[-1]) ** 2
    assert whole == pytest.approx(np.ones(7))
    # What reaches the load, from the two-port of the whole chain.
    s = chain.network(F).s
    gain = np.abs(s[:, 1, 0]) ** 2 * (1 - np.abs(LOAD.reflection) ** 2)
    gain /= np.abs(1 - s[:, 1, 1] * LOAD.reflection) ** 2
    assert result.realised_factor == pytest.approx(gain)
    assert result.efficiency * result.mismatch_factor == pytest.approx(gain)


def test_a_resistor_takes_its_share():
    """25 ohm in line with 75 ohm: a quarter of what enters."""
    load = OnePort.from_impedance(F, np.full(7, 75.0))
    result = Chain((Lumped("R", 25.0, "series"),), 100.0).terminate(load)
    assert result.lost[0] == pytest.approx(np.full(7, 0.25))
    assert result.efficiency == pytest.approx(np.full(7, 0.75))
    assert result.impedance_ohm[-1] == pytest.approx(np.full(7, 100.0))
    assert np.isinf(result.return_loss_db).all() or np.all(result.return_loss_db > 250)


def test_no_loss_without_lossy_parts():
    clean = (LineSection(CLEAN, 37e-3), Stub(CLEAN, 21e-3), Lumped("L", 8e-9, "series"))
    assert Chain(clean).terminate(LOAD).efficiency == pytest.approx(np.ones(7))


@pytest.mark.parametrize("gamma", [-1.0, 1.0, 1j, np.exp(0.3j)])
@pytest.mark.parametrize("element", ELEMENTS, ids=IDS)
def test_reactive_loads_are_finite_and_take_nothing(element, gamma):
    load = OnePort(F, np.full(7, gamma))
    result = Chain((element,)).terminate(load)
    for values in (result.reflection, result.passed, result.lost, result.efficiency):
        assert np.isfinite(values).all()
    assert result.realised_factor == pytest.approx(np.zeros(7), abs=1e-12)
    assert result.efficiency == pytest.approx(np.zeros(7), abs=1e-9)
    assert "efficiency" in result.as_text(F[2])


def test_a_half_wave_stub_shorts_the_line_and_hides_the_load():
    f = np.array([1e9])
    line = UniformLine(50.0)
    half = Stub(line, line.wavelength_at(1e9) / 2, "short")
    result = Chain((half, half, LineSection(line, 0.02))).terminate(OnePort(f, np.array([0.3])))
    assert result.impedance_ohm[1:3] == pytest.approx(np.zeros((2, 1)), abs=1e-12)
    assert result.realised_factor == pytest.approx([0.0], abs=1e-12)


def test_exact_short_and_open_circuits():
    gone = np.array([-1.0 + 0j])
    short = shunt(gone)
    assert short == pytest.approx(np.array([[[-1, 0], [0, -1]]]))
    seen, wave = terminated(short, gone)
    assert (seen[0], wave[0]) == (-1, 0)
    assert cascade(short, short) == pytest.approx(short)
    opened = series(-gone)
    assert opened == pytest.approx(np.array([[[1, 0], [0, 1]]]))
    assert shunt(gone, 0.0) == pytest.approx(np.array([[[0, 1], [1, 0]]]))


def test_tapped_line_is_section_and_stub():
    whole = Chain((TappedLine(LOSSY, 31e-3, 17e-3, "open"),)).terminate(LOAD)
    parts = Chain((LineSection(LOSSY, 31e-3), Stub(LOSSY, 17e-3, "open"))).terminate(LOAD)
    assert whole.reflection[-1] == pytest.approx(parts.reflection[-1])
    assert whole.passed[0] == pytest.approx(parts.passed[0])


def test_transformer_divides_the_impedance():
    load = OnePort.from_impedance(F, np.full(7, 200 + 40j))
    result = Chain((Transformer(4.0),)).terminate(load)
    assert result.impedance_ohm[-1] == pytest.approx(np.full(7, 50 + 10j))
    lossy = Chain((Transformer(4.0, 0.5),)).terminate(OnePort.from_impedance(F, np.full(7, 200.0)))
    assert lossy.efficiency == pytest.approx(np.full(7, 10**-0.05))


def test_port_extension_turns_the_phase_and_can_be_taken_back():
    away = PortExtension.of_length(30e-3, 2.25)
    result = Chain((away,)).terminate(LOAD)
    turn = np.exp(-4j * np.pi * F * away.delay_s)
    assert result.reflection[-1] == pytest.approx(LOAD.reflection * turn)
    back = Chain((away, PortExtension(-away.delay_s))).terminate(LOAD)
    assert back.reflection[-1] == pytest.approx(LOAD.reflection)


def test_path_goes_from_terminals_to_connector():
    chain = Chain((TappedLine(LOSSY, 31e-3, 17e-3), Transformer(1.6)), 75.0)
    way = chain.path(LOAD, F[3], 9)
    assert [type(element).__name__ for element, _ in way] == ["LineSection", "Stub", "Transformer"]
    assert way[0][1][0] == pytest.approx(LOAD.referred_to(75.0).reflection[3])
    for (_, one), (_, two) in pairwise(way):
        assert one[-1] == pytest.approx(two[0])
    assert way[-1][1][-1] == pytest.approx(chain.terminate(LOAD).reflection[-1, 3])


def test_rows_and_text():
    result = Chain((Lumped("R", 25.0, "series"),), 50.0).terminate(
        OnePort(F, np.array([1, 0, 0, 0, 0, 0, 0.0]))
    )
    rows = result.as_rows(F[3])
    assert [row["plane"] for row in rows] == ["terminals", "series 25 ohm"]
    assert rows[1]["resistance_ohm"] == pytest.approx(75.0)
    assert "75.00 +0.00j ohm   14.0 dB" in result.as_text(F[3])
    assert "open" in result.as_text(F[0])


def test_doubts_of_lines_are_passed_on_once():
    wide = TwoStrips(30e-3, 10e-3)
    chain = Chain((LineSection(wide, 20e-3), Stub(wide, 10e-3)))
    assert len(chain.terminate(LOAD).doubts) == len(wide.doubts(F)) > 0


@pytest.mark.parametrize(
    ("make", "match"),
    [
        (lambda: LineSection(CLEAN, -1e-3), "length of a line section is -1 mm"),
        (lambda: Stub(CLEAN, -2e-3), "length of a stub is -2 mm"),
        (lambda: Stub(CLEAN, 1e-3, "closed"), "end of a stub is 'closed': choose from short"),
        (lambda: TappedLine(CLEAN, 1e-3, -1e-3), "from the tap to the end is -1 mm"),
        (lambda: Lumped("C", -1e-12, "shunt"), r"value of a part \(C\) is -1 pF"),
        (lambda: Lumped("L", 1e-9, "shunt", 0.0), "Q of a part is 0"),
        (lambda: Transformer(0.0), "impedance ratio is 0"),
        (lambda: Transformer(1.0, -0.1), "loss of a transformer is -0.1 dB"),
        (lambda: PortExtension(float("nan")), "delay of a port extension is nan"),
        (lambda: PortExtension.of_length(-1e-3), "length of a port extension is -1 mm"),
        (lambda: Chain((), -50.0), "reference resistance of the connector is -50 ohm"),
    ],
)
def test_elements_that_cannot_be(make, match):
    with pytest.raises(FeedlineError, match=match):
        make()


@pytest.mark.parametrize("line", [Coaxial(1e-3, 3.5e-3, 2.1), UniformLine(50.0)])
def test_every_line_says_what_it_is(line):
    assert line.about in LineSection(line, 0.01).about


def test_delay_of_a_chain_is_that_of_its_lines():
    lengths_m = (31e-3, 17e-3)
    chain = Chain((LineSection(UniformLine(50.0, 0.7), lengths_m[0]), PortExtension(-4e-11)))
    expected = lengths_m[0] / (0.7 * c) + 4e-11
    assert chain.delay_s(0.9e9) == pytest.approx(expected, rel=1e-6)
    assert Chain().delay_s(0.9e9) == 0
    # a mismatched line is counted within the ripple of its reflections
    mismatched = Chain((LineSection(UniformLine(75.0, 0.7), 1.0),))
    assert mismatched.delay_s(0.9e9) == pytest.approx(1.0 / (0.7 * c), rel=0.3)
