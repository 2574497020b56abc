"""[capacitors] and lowest_frequency become what the signal couples, or every fault is told."""

from pathlib import Path

import pytest

from biasband.errors import BadlyWritten, UsageError
from biasband.files.stage_file import read_stage
from biasband.files.stage_writer import frozen_text
from biasband.stage import Capacitor, Stage

SAMPLE = Path(__file__).with_name("hive_microphone.toml").read_text(encoding="utf-8")
SIGNAL = '[signal]\nload = "47k"\nsource_resistance = "600 ohm"\nbypassed = true'
assert SIGNAL in SAMPLE
AMBIENT_DISTANCE = 35.0
"""[K] The sample goes from −10 to 50 °C: 35 K below 25 °C is further than 25 K above."""


def text_of(signal: str = "", capacitors: str = "", *, require: str = "", without: str = "") -> str:
    """The sample with more in [signal], a [capacitors] section, one more requirement."""
    text = SAMPLE.replace(SIGNAL, f"{SIGNAL}\n{signal}")
    text = text.replace(without, "") if without else text
    more = f'\n[[require]]\nid = "F"\nquantity = "low_corner_frequency"\n{require}\n' if require else ""
    return f"{text}\n{capacitors}\n{more}"


@pytest.fixture
def read(tmp_path):
    """Reads a text as a stage file."""

    def read_text(text: str) -> Stage:
        path = tmp_path / "stage.toml"
        path.write_text(text, encoding="utf-8")
        return read_stage(path)

    return read_text


@pytest.fixture
def faults(read):
    """Reads a text that must be refused, and returns its faults by key."""

    def faults_of(text: str):
        with pytest.raises(BadlyWritten, match="badly written") as caught:
            read(text)
        return {fault.key: fault for fault in caught.value.faults}

    return faults_of


FREQUENCY = 'lowest_frequency = "50 Hz"'
ALL_GIVEN = """
[capacitors.input]
value = "2.2 µF"
[capacitors.output]
value = "1uF ± 5 %"
[capacitors.bypass]
value = "100 µF"
"""


def test_stage_without_either_has_no_capacitors(read):
    stage = read(SAMPLE)
    assert stage.capacitors == () and stage.signal.lowest_frequency is None


def test_lowest_frequency_alone_makes_every_capacitor_that_couples(read):
    stage = read(text_of(FREQUENCY))
    assert stage.signal.lowest_frequency == 50.0
    free = {"tolerance_stated": False, "temperature_distance": AMBIENT_DISTANCE}
    assert stage.capacitors == tuple(Capacitor(name=name, **free) for name in ("C_in", "C_out", "C_bypass"))
    assert {capacitor.series for capacitor in stage.capacitors} == {"E6"}


@pytest.mark.parametrize(
    ("without", "names"),
    [
        ('load = "47k"', ("C_in", "C_bypass")),
        ("bypassed = true", ("C_in", "C_out")),
        ('source_resistance = "600 ohm"', ("C_in", "C_out", "C_bypass")),
    ],
)
def test_capacitors_are_there_where_something_is_to_couple(read, without, names):
    stage = read(text_of(FREQUENCY, without=without))
    assert tuple(capacitor.name for capacitor in stage.capacitors) == names


def test_defaults_hold_for_all_and_own_keys_before_them(read):
    section = """
[capacitors]
series = "E3"
tolerance = "20 %"
temperature_change = "15 %"
[capacitors.bypass]
series = "E12"
temperature_change = "0 %"
"""
    found = {capacitor.name: capacitor for capacitor in read(text_of(FREQUENCY, section)).capacitors}
    common = {"tolerance": 0.2, "temperature_distance": AMBIENT_DISTANCE}
    assert found["C_in"] == Capacitor(name="C_in", series="E3", temperature_change=0.15, **common)
    assert found["C_bypass"] == Capacitor(name="C_bypass", series="E12", temperature_change=0.0, **common)


def test_given_values_need_no_frequency_and_may_bring_their_tolerance(read):
    stage = read(text_of(capacitors=ALL_GIVEN))
    assert [capacitor.value for capacitor in stage.capacitors] == [2.2e-6, 1e-6, 1e-4]
    assert [capacitor.tolerance for capacitor in stage.capacitors] == [0.0, 0.05, 0.0]
    assert [capacitor.tolerance_stated for capacitor in stage.capacitors] == [False, True, False]


def test_without_an_ambient_range_nothing_changes_with_temperature(read):
    section = '[capacitors]\ntemperature_change = "15 %"'
    text = text_of(FREQUENCY, section).replace('min = "-10 degC"', "").replace('max = "50 degC"', "")
    assert {capacitor.temperature_distance for capacitor in read(text).capacitors} == {0.0}


def test_low_corner_can_be_required_with_capacitors(read):
    stage = read(text_of(FREQUENCY, require='at_most = "60 Hz"'))
    need = stage.requirements[-1]
    assert (need.quantity, need.at_most) == ("low_corner_frequency", 60.0)


def test_low_corner_without_capacitors_is_told_what_it_needs(faults):
    fault = faults(text_of(require='at_most = "60 Hz"'))["require[3].quantity"]
    assert fault.problem == "unknown quantity" and "lowest_frequency" in fault.hint


@pytest.mark.parametrize(
    ("figure", "problem"),
    [
        ('"0 Hz"', "not above 0 Hz"),
        ('"-50 Hz"', "not above 0 Hz"),
        ('"50"', "no unit"),
        ('"50 V"', "no unit of a frequency"),
        ("true", "neither a number nor a text"),
        ('"1e99 Hz"', "no frequency that a stage can have"),
    ],
)
def test_lowest_frequency_that_is_none_is_refused_once(faults, figure, problem):
    found = faults(text_of(f"lowest_frequency = {figure}", require='at_most = "60 Hz"'))
    assert list(found) == ["signal.lowest_frequency"]
    assert problem in found["signal.lowest_frequency"].problem


def test_capacitors_without_a_signal_have_nothing_to_couple(faults):
    text = SAMPLE.replace(SIGNAL, "").replace('collector = "mid-swing"', "") + ALL_GIVEN
    assert "no [signal] section" in faults(text)["capacitors"].problem


@pytest.mark.parametrize(
    ("without", "key", "problem"),
    [
        ('load = "47k"', "capacitors.output", "no load to couple"),
        ("bypassed = true", "capacitors.bypass", "nothing is bypassed"),
    ],
)
def test_capacitor_with_nothing_to_couple_is_refused(faults, without, key, problem):
    found = faults(text_of(FREQUENCY, ALL_GIVEN, without=without))
    assert list(found) == [key] and problem in found[key].problem


def test_unknown_capacitor_is_refused_with_the_nearest(faults):
    fault = faults(text_of(FREQUENCY, '[capacitors.outptu]\nvalue = "1 µF"'))["capacitors.outptu"]
    assert fault.problem == "no such capacitor"
    assert fault.allowed == "input, output, bypass" and "output" in fault.hint


@pytest.mark.parametrize("value", ["0.9 pF", "1.1 F", "0 F", "-1 µF"])
def test_value_outside_what_capacitors_have_is_refused(faults, value):
    fault = faults(text_of(FREQUENCY, f'[capacitors.input]\nvalue = "{value}"'))["capacitors.input.value"]
    assert fault.allowed == "a capacitance at least 1 pF and at most 1 F"


@pytest.mark.parametrize("value", [1e-12, 1.0])
def test_value_at_the_end_of_what_capacitors_have_is_read(read, value):
    assert read(text_of(FREQUENCY, f"[capacitors.input]\nvalue = {value}")).capacitors[0].value == value


def test_capacitor_without_a_value_or_a_frequency_is_refused(faults):
    found = faults(text_of(capacitors='[capacitors.input]\nvalue = "1 µF"'))
    assert set(found) == {"capacitors.output.value", "capacitors.bypass.value"}
    assert "no lowest_frequency" in found["capacitors.bypass.value"].problem


BAD_KEYS = [
    ("[capacitors]\ntolerance = '100 %'", "capacitors.tolerance"),
    ("[capacitors]\ntemperature_change = '-1 %'", "capacitors.temperature_change"),
    ("[capacitors]\nseries = 'E7'", "capacitors.series"),
    ("[capacitors]\nsereis = 'E6'", "capacitors.sereis"),
    ("[capacitors.input]\ntempco = '5 ppm/K'", "capacitors.input.tempco"),
    ("[capacitors]\ninput = '1 µF'", "capacitors.input"),
    ("[capacitors.input]\nvalue = '1 µF ± 5 %'\ntolerance = '5 %'", "capacitors.input.tolerance"),
]


@pytest.mark.parametrize(("section", "key"), BAD_KEYS)
def test_faulty_key_is_told_with_its_place(faults, section, key):
    found = faults(text_of(FREQUENCY, section))
    assert list(found) == [key]
    assert found[key].line is not None


def test_section_that_is_no_table_is_refused(faults):
    found = faults(f'capacitors = "10 µF"\n{text_of(FREQUENCY)}')
    assert found["capacitors"].problem == "not a table"


def test_frozen_values_are_written_to_the_capacitors_tables(tmp_path):
    path = tmp_path / "stage.toml"
    path.write_text(text_of(FREQUENCY, '[capacitors.input]\nvalue = "1 µF ± 5 %" # old'), encoding="utf-8")
    written = frozen_text(path, {"RC": "3.6 kΩ", "C_in": "22 µF", "C_bypass": "330 µF", "C_out": "6.8 µF"})
    path.write_text(written, encoding="utf-8")
    stage = read_stage(path)
    assert [capacitor.value for capacitor in stage.capacitors] == [2.2e-05, 6.8e-06, 3.3e-4]
    assert stage.capacitors[0].tolerance == 0.05 and "# old" in written
    assert stage.resistor("RC").value == 3600.0


def test_capacitor_that_the_stage_has_not_is_not_written(tmp_path):
    path = tmp_path / "stage.toml"
    path.write_text(SAMPLE, encoding="utf-8")
    with pytest.raises(UsageError, match="has no part C_in; allowed: R1, R2, RC, RE"):
        frozen_text(path, {"C_in": "22 µF"})
