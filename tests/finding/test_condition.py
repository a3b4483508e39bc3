"""What conditions select, held against plain numpy on the numbers the store was made of."""

from __future__ import annotations

import shutil

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

import simkit
from simkit.errors import ConditionError
from simkit.finding.condition import compared
from simkit.finding.parser import parse_condition
from simkit.finding.quantities import QUANTITIES, quantity_rows
from simkit.finding.reading import known_in
from simkit.store import open_results
from simkit.store.schema import VARIABLES

WITHOUT = {3, 12, 13}
"""Cases without a solution."""


def centre_hz(case):
    return 0.84e9 + 10e6 * case


@pytest.fixture(scope="module")
def dataset(creek_results):
    return open_results(creek_results)


@pytest.fixture
def cases(dataset):
    return lambda condition: simkit.query(dataset, condition)["case"].values.tolist()


SOLVED = [case for case in range(14) if case not in WITHOUT]
DIPS = {case: centre_hz(case) for case in SOLVED if case not in (5, 6)}
"""Case 6 stands on a plane: its modes are quarter waves."""


@pytest.mark.parametrize(
    ("condition", "expected"),
    [
        ("dip of 1/2 wave < 900 MHz", [c for c, hz in DIPS.items() if hz < 900e6]),
        ("dip of 1/2 wave <= 0.9 GHz", [c for c, hz in DIPS.items() if hz <= 900e6]),
        ("dip of 1/2 wave > 900 MHz", [c for c, hz in DIPS.items() if hz > 900e6]),
        ("dip of 1/2 wave = 880 MHz", [4]),
        ("dip of 1/2 wave != 880 MHz", [c for c in DIPS if c != 4]),
        (
            "dip of 1/2 wave within 860 MHz .. 910 MHz",
            [c for c, hz in DIPS.items() if 860e6 <= hz <= 910e6],
        ),
        (
            "dip of 1/2 wave within 880 MHz +- 2.5 %",
            [c for c, hz in DIPS.items() if abs(hz / 880e6 - 1) <= 0.025],
        ),
        ("dip of 1/2 wave within 880 MHz ± 10 MHz", [4]),  # 870 is the refused one, 890 has no dip
        ("dip of 1/4 wave < 2 GHz", [6]),
        ("q of 1 wave > 7.5", [c for c in SOLVED if c > 7.5]),  # 6 is on a plane, and below
        ("q of 3/4 wave > 7", [6]),
        ("gain of 1/2 wave >= 2.18 dBi", [6, 8, 9, 10, 11]),  # the second mode of case 6
        ("efficiency of 1/2 wave > 93 %", [c for c in SOLVED if c > 6]),
        ("efficiency of 1/2 wave > 0.93 and q of 3/2 waves <= 8.7", [7, 8, 9]),
        ("arm = 76 mm", [6, 7]),  # computed by linspace, not written
        ("arm <= 0.072 m and width < 5 mm", [0, 2]),
        ("arm < 72 mm or width = 8 mm and arm > 81 mm", [0, 1, 13]),
        ("(arm < 72 mm or width = 8 mm) and arm > 81 mm", [13]),
        ("carrier.infill > 80 %", [11, 12, 13]),
        ('"carrier.infill" within 0.3 .. 0.36', [0, 1]),
        ("status = refused", [3]),
        ("status != solved", [3, 9, 12, 13]),
        ("status = waiting AND case > 12", [13]),
        ("not status = solved", [3, 9, 12, 13]),
        ("case within 2 .. 4", [2, 3, 4]),
        ("seconds >= 5 s", [10, 11]),
        ("solves < 12", [0, 1, 3, 12, 13]),  # nothing for the refused and the waiting
        ("frequency of uniform current is known", []),
        ("frequency of 2 waves is known", []),
    ],
)
def test_what_is_selected(cases, condition, expected):
    assert cases(condition) == expected


def test_what_is_missing_satisfies_neither_a_test_nor_its_negation(cases):
    assert cases("dip of 1/2 wave < 5 GHz") == list(DIPS)
    assert cases("not dip of 1/2 wave < 5 GHz") == []
    assert cases("not (dip of 1/2 wave > 5 GHz or dip of 1/2 wave != 1 Hz)") == []
    missing = [case for case in range(14) if case not in DIPS]
    assert cases("dip of 1/2 wave is missing") == missing
    assert cases("not dip of 1/2 wave is known") == missing
    # One part that is true, or false, settles it all the same.
    assert cases("dip of 1/2 wave < 1 Hz or case = 5") == [5]
    assert cases("not (dip of 1/2 wave < 1 Hz and case > 20)") == list(range(14))


@pytest.mark.parametrize(
    ("sign", "expected"),
    [("<", False), ("<=", True), (">", False), (">=", True), ("=", True), ("!=", False)],
)
def test_rounding_alone_makes_no_difference(sign, expected):
    for number in (0.1 + 0.2, 0.3 - 1e-16):  # a last digit above 0.3, and one below
        assert bool(compared(np.array([number]), sign, 0.3)[0]) is expected


@pytest.mark.parametrize(("low", "high"), [(863e6, 870e6), (905e6, 905e6), (0.7e9, 1.1e9)])
def test_return_loss_and_vswr_in_a_band(dataset, low, high):
    """Held against the closed form of the made-up circuit at ten thousand frequencies.

    The stored frequencies are 10 MHz apart, so the first two bands hold none or one of them.
    """
    frequency = np.linspace(low, high, 10_000 if high > low else 1)
    for case in (0, 4, 8):
        ratio = frequency / centre_hz(case)
        impedance = 40.0 * (1 + 6j * (ratio - 1 / ratio))
        size = np.abs((impedance - 50) / (impedance + 50))
        band = f"{low / 1e6} MHz .. {high / 1e6} MHz"
        one = dataset.isel(case=[case])
        exact = {
            "worst_return_loss": -20 * np.log10(size.max()),
            "best_return_loss": -20 * np.log10(size.min()),
            "worst_vswr": (1 + size.max()) / (1 - size.max()),
            "best_vswr": (1 + size.min()) / (1 - size.min()),
        }
        for name, value in exact.items():
            unit = "dB" if "loss" in name else ""
            # Of a wide band the dip itself falls between two of the frequencies looked at, at most
            # 5 MHz away, where the return loss of 19 dB changes by 0.4 dB.
            wide = high - low > 50e6 and name.startswith("best")
            tolerance = f"{0.4 if wide else 0.02} {'dB' if unit else ''}"
            kept = simkit.query(one, f"{name} in {band} within {value} {unit} +- {tolerance}")
            assert kept.sizes["case"] == 1, (case, name, value)


def test_selecting_from_a_selection_keeps_case_numbers(dataset):
    some = simkit.query(dataset, "width = 8 mm")
    assert simkit.query(some, "case > 8")["case"].values.tolist() == [9, 11, 13]


def test_a_selection_is_read_when_it_is_used(dataset):
    some = simkit.query(dataset, "arm < 75 mm")
    assert not some["gain"].variable._in_memory
    assert some["gain"].sel(case=4).values[0, 0, 0] == 1.5


def test_the_folder_will_do(creek_results):
    assert simkit.query(creek_results, "case = 2").sizes["case"] == 1


def test_a_single_case_is_refused(dataset):
    with pytest.raises(simkit.StoreError, match="no dimension 'case'"):
        simkit.query(dataset.isel(case=0), "case = 0")


def test_only_what_is_named_is_read(creek_results, tmp_path):
    """With every other array damaged the answer is the same."""
    folder = shutil.copytree(creek_results, tmp_path / "creek_gauge")
    needed = {"status", "mode_q", "mode_half_waves", "path_on_plane"}
    for path in folder.glob("store.zarr/*/c.*"):
        if path.parent.name in VARIABLES and path.parent.name not in needed:
            path.write_bytes(b"torn")
    chosen = simkit.query(folder, "q of 1/2 wave > 6.55 and arm < 78 mm")
    assert chosen["case"].values.tolist() == [6, 7]
    with pytest.raises(simkit.StoreError, match=r"cases 0 to 3: damaged.*--retry"):
        simkit.query(folder, "worst_vswr in 863 MHz .. 870 MHz < 3")


@pytest.mark.parametrize(
    ("condition", "place", "message"),
    [
        ("dp of 1/2 wave < 1 GHz", "dp", "sweeps arm, width, carrier.infill.*do you mean `dip`"),
        ("ram < 1 mm", "ram", "do you mean `arm`"),
        ("dip < 880 MHz", "dip", "say of which, as in dip of 1/2 wave"),
        ("arm of 1/2 wave < 3 mm", "of", "belongs to no mode"),
        ("dip of 1/2 wave < 880 mm", "880 mm", "is a frequency, but 880 mm is a length"),
        ("dip of 1/2 wave < 880", "880", "is a pure number; write it as in 868 MHz"),
        ("gain of 1/2 wave > 3 dB", "3 dB", "is in dBi, but 3 dB is in dB"),
        ("q of 1/2 wave > 3 dB", "3 dB", "is a pure number, but 3 dB is in dB"),
        ("arm within 1 mm .. 2 MHz", "2 MHz", "is a length, but 2 MHz is a frequency"),
        ("arm within 70 mm +- 2 MHz", "2 MHz", "this tolerance is a length"),
        ("arm within 70 mm +- -2 mm", "-2 mm", "must not be negative"),
        ("arm within 74 mm .. 70 mm", "74 mm .. 70 mm", "the lower end comes first"),
        ("arm < 3 Mm", "Mm", "`Mm` is not a unit; do you mean mm"),
        ("arm within 70 mm", "", "the upper end, or `\\+-` and a tolerance"),
        ("dip of 1/3 wave < 1 GHz", "1/3", "modes are counted in half waves"),
        ("dip of wave < 1 GHz", "wave", "where a mode"),
        ("dip of 1/0 wave < 1 GHz", "0", "other than 0"),
        ("dip of 1/2 wav < 1 GHz", "wav", "write wave"),
        ("worst_vswr < 3", "worst_vswr", "say which, as in worst_vswr in 863 MHz"),
        ("worst_vswr in 1 mm .. 2 mm < 3", "1 mm", "the end of a band is a frequency"),
        ("worst_vswr in 1 GHz .. 2 GHz < 3", "1 GHz .. 2 GHz", "reach from 500 MHz to 1500 MHz"),
        ("status = solvd", "solvd", "do you mean solved"),
        ("status = 3", "3", "there are waiting, solved"),
        ("status > solved", ">", "compare it by = or !="),
        ("status within 1 .. 2", "within", "compare it by = or !="),
        ("arm == 3 mm", "==", "equality is written = once"),
        ("arm < 3 mm && width < 3 mm", "&&", "joined by the word and"),
        ("arm < 3,5 mm", ",", "the decimal sign is a point"),
        ("arm < 3 mm; width < 2 mm", ";", "';' has no meaning here"),
        ("'arm < 3 mm", "'", "not closed"),
        ("(arm < 3 mm", "", "a closing parenthesis"),
        ("arm < 3 mm)", ")", "where and, or, or the end is needed"),
        ("arm < 3 mm width > 2 mm", "width", "where and, or, or the end is needed"),
        ("3 mm < arm", "3", "where a quantity"),
        ("arm < width", "width", "where a number with its unit is needed"),
        ("arm <", "", "the condition ends where a number"),
        ("arm is", "", "where missing or known is needed"),
        ("", "", "the condition ends where a quantity"),
        ("not " * 60 + "case = 1", "not", "deeper than 40"),
        ("case = 1 or " * 300 + "case = 1", "", "characters, more than 2000"),
        ("arm < 1e99 mm", "1e99 mm", "outside"),
    ],
)
def test_errors_point_at_the_place(dataset, condition, place, message):
    with pytest.raises(ConditionError, match=message) as caught:
        simkit.query(dataset, condition)
    error = caught.value
    assert condition[error.start : error.stop] == place
    line, mark = str(error).splitlines()[-2:]
    assert mark.strip("^ ") == ""
    if place:
        assert line[mark.index("^") : mark.rindex("^") + 1] == place


def test_the_excerpt_of_a_long_condition_holds_the_place(dataset):
    condition = "case = 1 or " * 40 + "nonsense = 3"
    with pytest.raises(ConditionError, match="nonsense") as caught:
        simkit.query(dataset, condition)
    *_, line, mark = str(caught.value).splitlines()
    assert len(line) <= 92
    assert line[mark.index("^") : mark.rindex("^") + 1] == "nonsense"


def test_a_swept_value_may_be_called_like_a_quantity(dataset):
    named = dataset.rename(arm="dip").assign_attrs(swept={"dip": "dip", "width": "width"})
    assert simkit.query(named, "dip < 71 mm")["case"].values.tolist() == [0, 1]
    assert simkit.query(named, "dip of 1/2 wave < 845 MHz")["case"].values.tolist() == [0]


def test_every_quantity_can_be_asked_for(dataset):
    ends = {"mode": " of 1/2 wave", "band": " in 863 MHz .. 870 MHz", "case": "", "swept": ""}
    for quantity in QUANTITIES.values():
        if quantity.unit:
            simkit.query(dataset, f"{quantity.name}{ends[quantity.kind]} is known")


def test_sources_and_units_are_those_of_the_store():
    for quantity in QUANTITIES.values():
        if quantity.kind == "band" or quantity.name == "case":
            continue
        assert VARIABLES[quantity.source].units == quantity.unit
    assert len(quantity_rows()) == len(QUANTITIES) + 1


WORDS = """
    dip of q arm width status solved case 1/2 3 868 0.5 .. . +- ± MHz mm dB dBi % wave uniform
    current in within is missing known and or not ( ) < <= > >= = != == - + * / , ' " ü
    carrier.infill worst_vswr best_return_loss 1e9 1e400 5e-400
"""


@settings(
    max_examples=300,
    deadline=None,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
@given(words=st.lists(st.sampled_from(WORDS.split()), max_size=14), glue=st.sampled_from([" ", ""]))
def test_whatever_is_typed_is_understood_or_refused_in_words(dataset, words, glue):
    condition = glue.join(words)
    refused = None
    try:
        parse_condition(condition, known_in(dataset))
    except ConditionError as error:
        refused = error
    assert refused is None or 0 <= refused.start <= refused.stop <= len(condition) + 1


def test_a_band_is_looked_at_at_the_connector_if_there_is_one(dataset):
    # 40 ohm at the feed, 50 ohm at the connector: 19 dB become more than 100 dB.
    behind = dataset.isel(case=[4]).load()
    behind["impedance_at_connector"] = behind["impedance"] * 1.25
    test = "best_return_loss in 879 MHz .. 881 MHz > 100 dB"
    assert simkit.query(behind, test).sizes["case"] == 1
    assert simkit.query(dataset, test).sizes["case"] == 0


def test_what_the_connector_gets_is_asked_for_like_any_quantity(dataset):
    behind = dataset.isel(case=[4, 6]).load()
    behind["realised_gain"][:, 0] = [1.2, -3.0]
    behind["network_efficiency"][:, 0] = [0.95, 0.5]
    chosen = simkit.query(behind, "realised_gain of 1/2 wave > 0 dBi")
    assert chosen["case"].values.tolist() == [4]
    chosen = simkit.query(behind, "network_efficiency of 1/2 wave > 90 %")
    assert chosen["case"].values.tolist() == [4]


def test_results_of_an_earlier_simkit_lack_it(dataset):
    old = dataset.drop_vars(["realised_gain", "total_efficiency"])
    assert simkit.query(old, "realised_gain of 1/2 wave > -99 dBi").sizes["case"] == 0
    everyone = simkit.query(old, "total_efficiency of 1/2 wave is missing").sizes["case"]
    assert everyone == dataset.sizes["case"]
