"""A derating profile of one's own is read to its figures, or every fault in it is told at once."""

import hashlib
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from biasband.errors import BadlyWritten
from biasband.files.derating_file import read_derating_file
from biasband.files.stage_file import read_stage
from biasband.files.stage_writer import frozen_text, write_new
from biasband.parts.derating import FACTORS, FIGURES, PROFILES, in_words
from biasband.stage import Derating, FileRecord

SAMPLE = Path(__file__).with_name("hive_microphone.toml").read_text(encoding="utf-8")
HOUSE_RULES = Path(__file__).parents[2] / "samples" / "parts" / "invented_house_rules.toml"

FULL = """
name = "our rules"
resistor_power = "60 %"
supply_voltage = 0.8
transistor_power = "100 %"
current = "900000 ppm"
emitter_base_voltage = 1
junction_margin = "30 K"
junction_ceiling = "105 degC"
[origin]
resistor_power = "our handbook, 3.2"
junction_margin = "memory"
"""


@pytest.fixture
def read(tmp_path):
    """Reads a text as a derating profile."""

    def read_text(text: str) -> Derating:
        path = tmp_path / "own.toml"
        path.write_text(text, encoding="utf-8")
        return read_derating_file(path)

    return read_text


@pytest.fixture
def faults(read):
    """Reads a text that must be refused, and returns its faults by key."""

    def faults_of(text: str):
        with pytest.raises(BadlyWritten, match=r"own\.toml:") as caught:
            read(text)
        return {fault.key: fault for fault in caught.value.faults}

    return faults_of


@pytest.fixture
def stage_with(tmp_path):
    """Reads the sample of the format with another [derating] section."""

    def read_text(section: str):
        path = tmp_path / "stage.toml"
        text = SAMPLE.replace('profile = "half-power"', section)
        assert text != SAMPLE
        path.write_text(text, encoding="utf-8")
        return read_stage(path)

    return read_text


# --- what is read ------------------------------------------------------------------------------


def test_every_figure_is_read_in_si_with_its_origin(read, tmp_path):
    found = read(FULL)
    content = (tmp_path / "own.toml").read_bytes()
    # Each figure is the one written above, turned into SI by hand: 105 °C is 378.15 K.
    assert found == Derating(
        name="our rules",
        resistor_power=0.6,
        supply_voltage=0.8,
        transistor_power=1.0,
        current=0.9,
        emitter_base_voltage=1.0,
        junction_margin=30.0,
        junction_ceiling=378.15,
        origins={"resistor_power": "our handbook, 3.2", "junction_margin": "memory"},
        file=FileRecord(path=str(tmp_path / "own.toml"), sha256=hashlib.sha256(content).hexdigest()),
    )


def test_what_is_left_out_is_not_derated_and_said(read):
    found = read('name = "few"\ncurrent = 0.5\n')
    assert all(getattr(found, factor) == 1.0 for factor in FACTORS if factor != "current")
    assert found.junction_limit(400.0) == 400.0
    assert "(origin not stated); not derated: resistor power, supply," in in_words(found)


def test_profile_that_limits_nothing_says_so(read):
    assert in_words(read('name = "empty"')).endswith("no derating applied.")


def test_origin_of_a_figure_may_be_left_empty(read):
    assert read('name = "few"\ncurrent = 0.5\n[origin]\ncurrent = ""\n').origins == {}


@settings(max_examples=50, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.sampled_from(sorted(FACTORS)), st.floats(1e-6, 1.0))
def test_any_share_up_to_one_is_read_as_written(read, factor, share):
    assert getattr(read(f'name = "one"\n{factor} = {share!r}\n'), factor) == share


# --- what is refused ---------------------------------------------------------------------------


@pytest.mark.parametrize("factor", FACTORS)
@pytest.mark.parametrize("written", ["0", "-0.1", '"-5 %"', "1.0000001", "75", '"101 %"', "0.0"])
def test_factor_outside_its_range_is_refused(faults, factor, written):
    fault = faults(f'name = "x"\n{factor} = {written}\n')[factor]
    assert fault.line == 2
    assert fault.problem == "not above 0 % and at most 100 %"


@pytest.mark.parametrize("written", ["nan", "inf", "-inf", '"nan"', "true", "[]", '"half"', '""'])
@pytest.mark.parametrize("key", FIGURES)
def test_figure_that_is_no_number_is_refused(faults, key, written):
    assert faults(f'name = "x"\n{key} = {written}\n')[key].line == 2


@pytest.mark.parametrize(
    ("key", "written"),
    [
        ("junction_ceiling", "110"),  # 110 K: a forgotten unit
        ("junction_ceiling", '"110 K"'),
        ("junction_ceiling", '"251 degC"'),
        ("junction_ceiling", '"40 mV"'),
        ("junction_margin", '"-1 K"'),
        ("junction_margin", '"200 K"'),
        ("junction_margin", '"40 degC"'),
    ],
)
def test_junction_figure_that_makes_no_sense_is_refused(faults, key, written):
    assert faults(f'name = "x"\n{key} = {written}\n').keys() == {key}


@pytest.mark.parametrize("key", ("name", *FIGURES))
def test_key_one_letter_off_is_told_with_the_right_one(faults, key):
    wrong = key[:-2] + key[-1]
    found = faults(f'name = "x"\n{wrong} = 0.5\n')
    assert found[wrong].problem == "unknown key"
    assert found[wrong].hint == f'did you mean "{key}"?'
    assert found[wrong].line == 2


def test_origin_one_letter_off_is_told_with_the_right_one(faults):
    found = faults('name = "x"\ncurrent = 0.5\n[origin]\ncurent = "memory"\n')
    assert found["origin.curent"].hint == 'did you mean "current"?'
    assert "name" not in found["origin.curent"].allowed


def test_origin_of_a_figure_that_is_not_there_is_refused(faults):
    found = faults('name = "x"\n[origin]\ncurrent = "memory"\n')
    assert '"current" is not given' in found["origin.current"].problem
    assert found["origin.current"].line == 3


def test_origins_that_are_no_table_are_refused(faults):
    assert faults('name = "x"\norigin = "memory"\n')["origin"].problem == "not a table"


@pytest.mark.parametrize("name", [*PROFILES, " full "])
def test_name_of_a_profile_of_biasband_is_refused(faults, name):
    assert "is one of biasband's own profiles" in faults(f'name = "{name}"\ncurrent = 0.5\n')["name"].problem


@pytest.mark.parametrize("name", ["", "  "])
def test_empty_name_is_refused(faults, name):
    assert faults(f'name = "{name}"\ncurrent = 0.5\n')["name"].problem == "an empty name"


def test_name_must_be_there(faults):
    fault = faults("current = 0.5\n")["name"]
    assert (fault.problem, fault.line) == ("missing", 1)


@pytest.mark.parametrize("text", ["", "\n\n", "# nothing but a comment\n"])
def test_empty_file_is_refused_and_told_what_belongs_there(faults, text):
    fault = faults(text)[""]
    assert (fault.problem, fault.line) == ("an empty file", 1)
    assert "resistor_power" in fault.allowed


def test_every_fault_is_told_at_once_with_its_line(faults):
    text = 'nam = "x"\ncurrent = 0\nsupply_voltage = nan\n[origin]\ncurrent = 5\n'
    found = faults(text)
    assert {key: fault.line for key, fault in found.items()} == {
        "name": 1, "nam": 1, "current": 2, "supply_voltage": 3, "origin.current": 5,
    }  # fmt: skip


@settings(max_examples=100, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.text(max_size=60))
def test_no_text_gives_a_traceback(tmp_path, text):
    path = tmp_path / "own.toml"
    path.write_bytes(text.encode("utf-8", "surrogatepass"))
    try:
        read_derating_file(path)
    except BadlyWritten as error:
        assert all(fault.problem for fault in error.faults)


# --- in a stage --------------------------------------------------------------------------------


def test_stage_holds_the_profile_that_its_file_names_and_lists_the_file(stage_with, tmp_path):
    (tmp_path / "rules").mkdir()
    (tmp_path / "rules" / "own.toml").write_text(FULL, encoding="utf-8")
    stage = stage_with('file = "rules/own.toml"')
    assert stage.derating.name == "our rules"
    assert stage.derating.current == 0.9
    assert [Path(file.path).name for file in stage.files] == ["stage.toml", "own.toml"]
    assert stage.files[1] == stage.derating.file


def test_profile_of_biasband_adds_no_file(stage_with):
    stage = stage_with('profile = "stringent"')
    assert stage.derating is PROFILES["stringent"]
    assert [Path(file.path).name for file in stage.files] == ["stage.toml"]


@pytest.mark.parametrize(
    ("section", "key", "problem"),
    [
        ('file = "gone.toml"', "derating.file", "no such file"),
        ('file = "."', "derating.file", "a directory, not a file"),
        ("file = 5", "derating.file", "not a text"),
        ('fil = "own.toml"', "derating.fil", "unknown key"),
        ("", "derating.profile", "missing"),
    ],
)
def test_section_that_leads_nowhere_is_told_in_the_stage_file(stage_with, section, key, problem):
    with pytest.raises(BadlyWritten, match="derating") as caught:
        stage_with(section)
    found = {fault.key: fault for fault in caught.value.faults}
    assert found[key].problem == problem
    assert found[key].file.endswith("stage.toml")


def test_profile_and_file_together_are_refused_and_the_file_s_own_faults_told_too(stage_with, tmp_path):
    (tmp_path / "own.toml").write_text('name = "x"\ncurrent = 2\n', encoding="utf-8")
    with pytest.raises(BadlyWritten, match='given beside "profile"; allowed: one of the two') as caught:
        stage_with('file = "own.toml"\nprofile = "full"')
    places = [(Path(fault.file).name, fault.key) for fault in caught.value.faults]
    assert places == [("stage.toml", "derating.file"), ("own.toml", "current")]


@pytest.mark.parametrize("folder", ["elsewhere", "elsewhere/deep", "rules", "."])
def test_profile_is_found_from_another_folder(stage_with, tmp_path, folder):
    (tmp_path / "rules").mkdir()
    (tmp_path / "rules" / "own.toml").write_text(FULL, encoding="utf-8")
    before = stage_with('file = "rules/own.toml"').derating
    new = tmp_path / folder / "new.toml"
    new.parent.mkdir(parents=True, exist_ok=True)
    write_new(new, frozen_text(tmp_path / "stage.toml", {"RC": "3.6 kΩ"}, new_path=new))
    after = read_stage(new).derating
    assert after.file is not None and before.file is not None
    assert after.file.sha256 == before.file.sha256
    assert (after.name, after.current, after.origins) == (before.name, before.current, before.origins)


def test_example_is_read_says_that_it_is_invented_and_gives_every_origin():
    found = read_derating_file(HOUSE_RULES)
    # The figures written in the file; it leaves the collector current alone.
    assert (found.resistor_power, found.supply_voltage, found.transistor_power) == (0.6, 0.8, 0.7)
    assert (found.current, found.emitter_base_voltage, found.junction_margin) == (1.0, 0.75, 30.0)
    assert found.junction_ceiling == pytest.approx(378.15, abs=1e-9)  # rounding of 105 °C + 273.15
    assert "invented" in found.name
    words = in_words(found)
    assert words.endswith("not derated: collector current.")
    assert "emitter-base voltage at most 75 % of its limit (memory)" in words
    assert "origin not stated" not in words
