"""A stage file is read to the right stage, or every fault in it is told at once, with its place."""

import hashlib
import math
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from biasband.errors import BadlyWritten, BiasbandError, PhysicallyImpossible
from biasband.files.stage_file import read_stage
from biasband.parts.derating import PROFILES
from biasband.stage import (
    Distribution,
    FileRecord,
    Limits,
    Requirement,
    Resistor,
    Signal,
    Stage,
    Supply,
    Target,
    Transistor,
)

SAMPLE = Path(__file__).with_name("hive_microphone.toml").read_text(encoding="utf-8")
"""The example of the format's description, word for word."""

LINES = SAMPLE.split("\n")


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

    def faults_of(text: str, error: type[BadlyWritten] | type[PhysicallyImpossible] = BadlyWritten):
        with pytest.raises(error, match=error.heading) as caught:
            read(text)
        return {fault.key: fault for fault in caught.value.faults}

    return faults_of


def changed(*pairs: tuple[str, str]) -> str:
    """The sample with each old text, which must be there, replaced."""
    text = SAMPLE
    for old, new in pairs:
        assert old in text, old
        text = text.replace(old, new)
    return text


def without(section: str) -> str:
    """The sample without a section."""
    start = SAMPLE.index(f"[{section}]")
    end = SAMPLE.find("\n[", start)
    return SAMPLE[:start] + (SAMPLE[end + 1 :] if end > 0 else "")


def line_of(start: str) -> int:
    return next(number for number, line in enumerate(LINES, start=1) if line.startswith(start))


VALUES = "".join(f'[resistors.{name}]\nvalue = "10k"\n' for name in ("R1", "R2", "RE"))

SPLIT = changed(
    ('topology = "divider"', 'topology = "split-supply"'),
    ('emitter_voltage = "supply / 9"', ""),
    ("[ambient]", '[negative_supply]\nvoltage = "-9 V ± 5 %"\n[ambient]'),
)


# --- what is read ------------------------------------------------------------------------------


def test_sample_of_the_format_is_read_to_the_stage_it_describes(read, tmp_path):
    common = {"series": "E24", "tempco": 100e-6, "life_drift": 0.005, "power_rating": 0.25}
    # Every figure is the one written in the sample, turned into SI by hand.
    assert read(SAMPLE) == Stage(
        title="Hive-monitor microphone amplifier",
        topology="divider",
        polarity="npn",
        document="HM-014",
        revision="B",
        supply=Supply(voltage=Limits(low=8.1, nominal=9.0, high=9.9), ripple_peak=0.05),
        ambient=Limits(low=263.15, nominal=298.15, high=323.15),
        transistor=Transistor(
            label="invented small-signal NPN",
            gain=Limits(low=165.0, nominal=260.0, high=410.0),
            test_current=1.5e-3,
            test_voltage=6.0,
            base_emitter_voltage=Limits(low=0.57, nominal=0.64, high=0.72),
            base_emitter_drift=-2e-3,
            gain_drift=5e-3,
            leakage=40e-9,
            saturation_voltage=0.3,
            early_voltage=70.0,
            thermal_resistance=280.0,
            max_collector_emitter=36.0,
            max_current=0.12,
            max_power=0.44,
            max_junction=423.15,
            source="invented for this sample",
        ),
        target=Target(collector_current=1e-3, supply_over=9.0),
        signal=Signal(load=47e3, source_resistance=600.0, bypassed=True),
        resistors=(
            Resistor(name="R1", tolerance=0.01, **common),
            Resistor(name="R2", tolerance=0.01, **common),
            Resistor(name="RC", value=3300.0, tolerance=0.005, **common),
            Resistor(name="RE", tolerance=0.01, **common),
        ),
        requirements=(
            Requirement(
                id="R-1",
                quantity="collector_voltage",
                at_least=3.0,
                at_most=7.0,
                reason="next stage's input range",
            ),
            Requirement(
                id="R-2",
                quantity="symmetric_peak_swing",
                at_least=1.5,
                judged_by="yield",
                yield_at_least=0.9973,
            ),
        ),
        derating=PROFILES["half-power"],
        files=(
            FileRecord(
                path=str(tmp_path / "stage.toml"),
                sha256=hashlib.sha256((tmp_path / "stage.toml").read_bytes()).hexdigest(),
            ),
        ),
    )


def test_byte_order_mark_and_windows_line_ends_are_read(tmp_path):
    path = tmp_path / "stage.toml"
    path.write_bytes(b"\xef\xbb\xbf" + SAMPLE.replace("\n", "\r\n").encode())
    assert read_stage(path).title == "Hive-monitor microphone amplifier"


def test_path_is_taken_as_text_too(tmp_path):
    path = tmp_path / "stage.toml"
    path.write_text(SAMPLE, encoding="utf-8")
    assert read_stage(str(path)) == read_stage(path)


@pytest.mark.parametrize(
    ("written", "limits"),
    [
        ('voltage = "9 V"', Limits.exactly(9.0, stated=False)),
        ("voltage = 9", Limits.exactly(9.0, stated=False)),
        ('voltage = "9 V"\ntolerance = "0 %"', Limits.exactly(9.0)),
        ('voltage = "8 V"\ntolerance = "25 %"', Limits(low=6.0, nominal=8.0, high=10.0)),
        ('voltage = "8 V +/- 2 V"', Limits(low=6.0, nominal=8.0, high=10.0)),
        ('min = "8 V"\nmax = "10 V"', Limits(low=8.0, nominal=9.0, high=10.0)),
        ('min = 8\nnominal = 8.5\nmax = "10 V"', Limits(low=8.0, nominal=8.5, high=10.0)),
    ],
)
def test_supply_is_stated_only_where_its_variation_is_given(read, written, limits):
    assert read(changed(('voltage = "9 V ± 10 %"', written))).supply.voltage == limits


def test_ripple_peak_to_peak_counts_half_and_supply_may_vary_by_board(read):
    text = changed(('ripple_peak = "50 mV"', 'ripple_peak_to_peak = "50 mV"\nvaries = "by board"'))
    supply = read(text).supply
    assert (supply.ripple_peak, supply.varies) == (0.025, "by board")


def test_low_limit_of_a_negative_supply_is_the_more_negative(read):
    voltage = read(SPLIT).negative_supply.voltage
    # -9 V times 1.05 and 0.95; one rounding of a double each.
    assert (voltage.low, voltage.high) == pytest.approx((-9.45, -8.55), rel=1e-15)
    assert voltage.stated


@pytest.mark.parametrize(
    ("written", "limits"),
    [
        ("", Limits.exactly(298.15, stated=False)),
        ('[ambient]\nnominal = "40 degC"\n', Limits.exactly(313.15, stated=False)),
        ('[ambient]\nmin = "0 °C"\nmax = "50 °C"\n', Limits(low=273.15, nominal=298.15, high=323.15)),
    ],
)
def test_ambient_is_stated_only_where_it_has_limits(read, written, limits):
    assert read(without("ambient").replace("[transistor]", written + "[transistor]")).ambient == limits


@pytest.mark.parametrize(
    ("written", "limits"),
    [
        ("gain = 200", Limits.exactly(200.0, stated=False)),
        ("gain = { min = 100, max = 400 }", Limits(low=100.0, nominal=200.0, high=400.0)),
    ],
)
def test_gain_without_typical_value_has_the_geometric_mean(read, written, limits):
    text = changed(("gain = { min = 165, typ = 260, max = 410 }", written))
    assert read(text).transistor.gain == limits


def test_base_emitter_voltage_without_typical_value_has_the_arithmetic_mean(read):
    voltage = read(changed((', typ = "0.64 V"', ""))).transistor.base_emitter_voltage
    assert voltage.nominal == (0.57 + 0.72) / 2


def test_bandgap_drift_is_none(read):
    text = changed(('base_emitter_drift = "-2 mV/K"', 'base_emitter_drift = "bandgap"'))
    assert read(text).transistor.base_emitter_drift is None


@pytest.mark.parametrize(
    ("written", "target"),
    [
        ('emitter_voltage = "1 V"', Target(collector_current=1e-3, emitter_voltage=1.0)),
        ('emitter_voltage = "supply/9"', Target(collector_current=1e-3, supply_over=9.0)),
        ("", Target(collector_current=1e-3)),
    ],
)
def test_emitter_voltage_is_a_voltage_or_a_share_or_left_to_the_rule(read, written, target):
    assert read(changed(('emitter_voltage = "supply / 9"', written))).target == target


def test_collector_may_be_a_voltage_or_the_largest_swing(read):
    assert read(changed(('collector = "mid-swing"', 'collector = "5 V"'))).target.collector == 5.0
    assert read(changed(('"mid-swing"', '"max-swing"'))).target.collector == "max-swing"


def test_compulsory_resistors_are_there_unmentioned_and_in_order(read):
    stage = read(without("resistors").replace('[resistors.RC]\nvalue = "3k3"', "[resistors.RC]"))
    assert [resistor.name for resistor in stage.resistors] == ["R1", "R2", "RC", "RE"]
    assert [resistor.tolerance_stated for resistor in stage.resistors] == [False, False, True, False]


@pytest.mark.parametrize(
    ("emitter_voltage", "table", "names"),
    [
        ("", "", ["RB", "RC"]),
        ("", "[resistors.R2]", ["RB", "R2", "RC"]),
        ("", "[resistors.RE]", ["RB", "RC", "RE"]),
        ('emitter_voltage = "1 V"', "", ["RB", "RC", "RE"]),
        ("", '[resistors.RE1]\nvalue = "47R"\n[resistors.RE2]', ["RB", "RC", "RE1", "RE2"]),
    ],
)
def test_optional_resistor_is_there_only_if_asked_for(read, emitter_voltage, table, names):
    text = changed(
        ('topology = "divider"', 'topology = "collector-feedback"'),
        ('emitter_voltage = "supply / 9"', emitter_voltage),
        ("bypassed = true", ""),
        ("[[require]]\nid", table + "\n[[require]]\nid"),
    )
    assert [resistor.name for resistor in read(text).resistors] == names


def test_resistor_value_may_carry_its_tolerance_over_the_default(read):
    text = changed(('value = "3k3"', 'value = "3k3 ± 2 %"'), ('tolerance = "0.5 %"', ""))
    assert read(text).resistor("RC").tolerance == 0.02


def test_group_and_derating_of_a_resistor_are_read(read):
    own = 'value = "3k3"\ngroup = "reel"\ntracking = "30 ppm/K"\nderate_from = "80 degC"'
    own += '\ndistribution = "normal"'
    resistor = read(changed(('value = "3k3"', own))).resistor("RC")
    assert (resistor.group, resistor.tracking, resistor.derate_from) == ("reel", 30e-6, 353.15)
    assert resistor.distribution == Distribution(name="normal")


def test_stage_without_target_is_read_where_every_resistor_has_a_value(read):
    stage = read(without("target") + VALUES)
    assert stage.target is None
    assert [resistor.value for resistor in stage.resistors] == [10e3, 10e3, 3300.0, 10e3]


def test_limit_is_read_in_the_unit_of_its_quantity(read):
    more = '[[require]]\nquantity = "junction_temperature"\nat_most = "85 degC"\n'
    more += '[[require]]\nquantity = "resistor_power.RC"\nat_most = "50 mW"\n'
    requirements = read(SAMPLE + more).requirements
    assert [need.at_most for need in requirements[2:]] == [358.15, 0.05]
    assert [need.id for need in requirements] == ["R-1", "R-2", "R-3", "R-4"]


# --- the transistor's own file -----------------------------------------------------------------

START, END = SAMPLE.index("type = "), SAMPLE.index("[target]")
PART = SAMPLE[START:END]
NAMED = SAMPLE[:START] + 'file = "parts/invented.toml"\n' + SAMPLE[END:]


@pytest.fixture
def part(tmp_path):
    """Writes the transistor's own file beside the stage file."""

    def write(text: str) -> Path:
        path = tmp_path / "parts" / "invented.toml"
        path.parent.mkdir(exist_ok=True)
        path.write_text(text, encoding="utf-8")
        return path

    return write


def test_transistor_file_is_read_relative_to_the_stage_file_and_recorded(read, part):
    path = part(PART)
    stage = read(NAMED)
    assert stage.transistor == read(SAMPLE).transistor
    assert [Path(record.path).name for record in stage.files] == ["stage.toml", "invented.toml"]
    assert stage.files[1].sha256 == hashlib.sha256(path.read_bytes()).hexdigest()


def test_fault_in_the_transistor_file_names_that_file_and_its_line(faults, part):
    path = part(PART.replace('"-2 mV/K"', '"-2 mv/K"'))
    fault = faults(NAMED)["base_emitter_drift"]
    assert fault.file == str(path)
    assert PART.split("\n")[fault.line - 1].startswith("base_emitter_drift")


def test_key_in_both_files_is_a_fault_of_the_stage_file(faults, part):
    part(PART)
    fault = faults(NAMED.replace("[target]", "gain = 200\n[target]"))["transistor.gain"]
    assert fault.file.endswith("stage.toml")
    assert "given here and in" in fault.problem


def test_key_missing_in_both_files_is_a_fault_of_the_stage_files_table(faults, part):
    part(PART.replace("test_current", "# test_current"))
    fault = faults(NAMED)["transistor.test_current"]
    assert fault.problem == "missing"
    assert NAMED.split("\n")[fault.line - 1].startswith("[transistor]")


def test_transistor_file_may_not_name_another(faults, part):
    part('file = "third.toml"\n' + PART)
    assert faults(NAMED)["file"].problem == "a transistor's file cannot name another"


def test_missing_transistor_file_is_told_with_the_other_faults(faults):
    found = faults(NAMED.replace('"E24"', '"E25"'))
    assert found["transistor.file"].problem == "no such file"
    assert "invented.toml" in found["transistor.file"].read
    assert "resistors.series" in found


def test_syntax_error_in_the_transistor_file_names_that_file(faults, part):
    path = part("gain = \n")
    fault = faults(NAMED)[""]
    assert (fault.file, fault.line) == (str(path), 1)


def test_transistor_file_that_is_no_path_is_refused(faults):
    assert faults(NAMED.replace('file = "parts/invented.toml"', "file = 3"))["transistor.file"].read == "3"


# --- what cannot be read at all ----------------------------------------------------------------


@pytest.mark.parametrize(
    ("content", "problem", "line"),
    [
        (b"\0\1\2", "a binary file", None),
        (b"# fine\n# \xb5\n", "not UTF-8 text", 2),
        (b"#\n" * 5_000_000, "too large", None),  # 10 MB
        (b"a" * 20_000, "a line too long", 1),
        (b"[stage]\ntitle = \n", "not TOML: ", 2),
        (b'[stage]\ntitle = """', "not TOML: ", 2),
        (b"a = 1\na = 2\n", "not TOML: ", 2),
        (b"a = " + b"[" * 9000, "nested too deeply", None),
        (b"a = " + b"9" * 9000, "not TOML: ", None),
        (b"just some prose, not TOML\n", "not TOML: ", 1),
    ],
    ids=lambda value: str(value[:12]) if isinstance(value, bytes) else None,
)
def test_unreadable_file_is_one_clear_fault(tmp_path, content, problem, line):
    path = tmp_path / "stage.toml"
    path.write_bytes(content)
    with pytest.raises(BadlyWritten, match=problem) as caught:
        read_stage(path)
    (fault,) = caught.value.faults
    assert (fault.file, fault.line) == (str(path), line)


@pytest.mark.parametrize(
    ("name", "problem"),
    [("missing.toml", "no such file"), (".", "a directory"), ("a\0b", "cannot be read")],
)
def test_path_to_no_file_is_one_clear_fault(tmp_path, name, problem):
    with pytest.raises(BadlyWritten, match=problem):
        read_stage(f"{tmp_path}/{name}")


def test_empty_file_names_every_missing_section(faults):
    assert set(faults("")) == {"stage", "supply", "transistor"}


# --- what is badly written ---------------------------------------------------------------------

BADLY_WRITTEN = [
    ('topology = "divider"', 'topology = "dividr"', "stage.topology", 'unknown.*did you mean "divider"'),
    ('topology = "divider"', "topology = 3", "stage.topology", "unknown"),
    ('polarity = "npn"', 'polarity = "NPN"', "stage.polarity", 'did you mean "npn"'),
    ('title = "Hive', 'titel = "Hive', "stage.titel", 'unknown key.*did you mean "title"'),
    ('title = "Hive', 'titel = "Hive', "stage.title", "missing"),
    ('revision = "B"', "revision = 2", "stage.revision", "not a text; read 2"),
    ('revision = "B"', 'revision = "\\u001b[31m"', "stage.revision", "control characters"),
    ("[signal]", "[signl]", "signl", 'unknown section.*did you mean "signal"'),
    ('voltage = "9 V ± 10 %"', 'voltage = "9 v"', "supply.voltage", 'did you mean "V"'),
    ('voltage = "9 V ± 10 %"', 'voltage = "9,0 V"', "supply.voltage", "write a decimal point"),
    ('voltage = "9 V ± 10 %"', 'voltage = "9 V ± 100 %"', "supply.voltage", "below 100 %"),
    ('voltage = "9 V ± 10 %"', 'voltage = "9 V"\ntolerance = "100 %"', "supply.tolerance", "below 100 %"),
    ('voltage = "9 V ± 10 %"', 'voltage = "9 V"\ntolerance = "-1 %"', "supply.tolerance", "at least 0 %"),
    ('voltage = "9 V ± 10 %"', "", "supply.voltage", "missing"),
    ('voltage = "9 V ± 10 %"', 'tolerance = "1 %"', "supply.voltage", '"tolerance" needs it'),
    ('voltage = "9 V ± 10 %"', "min = 8", "supply.max", '"min" needs it'),
    ('voltage = "9 V ± 10 %"', "max = 8", "supply.min", '"max" needs it'),
    ('ripple_peak = "50 mV"', 'tolerance = "1 %"', "supply.tolerance", "given twice"),
    ('ripple_peak = "50 mV"', "min = 8", "supply.min", 'given beside "voltage"'),
    ('ripple_peak = "50 mV"', 'ripple_peak = "-50 mV"', "supply.ripple_peak", "not at least 0 V"),
    (
        'ripple_peak = "50 mV"',
        "ripple_peak = 0\nripple_peak_to_peak = 0",
        "supply.ripple_peak_to_peak",
        'given beside "ripple_peak"',
    ),
    ("# varies", "varies = 'by bord' # ", "supply.varies", 'did you mean "by board"'),
    ("[ambient]", '[negative_supply]\nvoltage = "-9 V"\n[ambient]', "negative_supply", "has one supply"),
    ('min = "-10 degC"', 'min = "-300 degC"', "ambient.min", "below 0 K"),
    ('min = "-10 degC"', "", "ambient.min", '"max" needs it'),
    ("gain = { min = 165", "gain = { min = 0", "transistor.gain.min", "not above 0"),
    ("gain = { min = 165", "gain = { mn = 165", "transistor.gain.mn", 'did you mean "min"'),
    ("gain = { min = 165, typ = 260, max = 410 }", "gain = 0", "transistor.gain", "not above 0"),
    ("gain = { min = 165, typ = 260, max = 410 }", "gain = [1, 2]", "transistor.gain", "neither a number"),
    ("gain = { min = 165, typ = 260, max = 410 }", "", "transistor.gain", "missing"),
    ('"1.5 mA"', '"1.5 ma"', "transistor.test_current", 'did you mean "mA"'),
    ('test_current = "1.5 mA"', "", "transistor.test_current", "missing"),
    ('test_voltage = "6 V"', "", "transistor.test_voltage", '"early_voltage" needs it'),
    ('early_voltage = "70 V"', "early_voltage = 0", "transistor.early_voltage", "not above 0 V"),
    ('"-2 mV/K"', '"band-gap"', "transistor.base_emitter_drift", "bandgap"),
    ('"280 K/W"', '"-280 K/W"', "transistor.thermal_resistance", "not at least 0 K/W"),
    ('"1 mA"', "true", "target.collector_current", "neither a number"),
    ('"1 mA"', "nan", "target.collector_current", "not a finite"),
    ('"supply / 9"', '"supply / 0"', "target.emitter_voltage", "not above 0"),
    ('"supply / 9"', '"suply / 9"', "target.emitter_voltage", "supply / 9"),
    ('collector = "mid-swing"', 'collector = "midswing"', "target.collector", 'did you mean "mid-swing"'),
    ('load = "47k"', 'load = "5 m"', "signal.load", "milli or as mega"),
    ('"600 ohm"', '"-600 ohm"', "signal.source_resistance", "not at least 0"),
    ("bypassed = true", 'bypassed = "yes"', "signal.bypassed", "neither true nor false"),
    ('series = "E24"', 'series = "E25"', "resistors.series", "E3, E6, E12"),
    ('tolerance = "1 %"', 'tolerance = "100 %"', "resistors.tolerance", "below 100 %"),
    ('life_drift = "0.5 %"', 'life_drift = "-1 %"', "resistors.life_drift", "at least 0 %"),
    ('tempco = "100 ppm/K"', 'tempco = "100 ppm"', "resistors.tempco", "no unit of a relative slope"),
    ("[resistors.RC]", "[resistors.Rc]", "resistors.Rc", 'no such resistor.*did you mean "RC"'),
    ('value = "3k3"', "value = -3300", "resistors.RC.value", "not above 0"),
    ('value = "3k3"', 'value = "3k3 ± 1 %"', "resistors.RC.tolerance", "given twice"),
    ('value = "3k3"', 'tracking = "30 ppm/K"', "resistors.RC.tracking", "without a group"),
    (
        'value = "3k3"',
        'group = "A"\ntracking = "130 ppm/K"',
        "resistors.RC.tracking",
        "above the tempco of RC.*read 130 ppm/K; allowed: 100 ppm/K at most",
    ),
    ("[resistors.RC]", '[resistors.RE1]\nvalue = "47R"\n[resistors.RC]', "resistors.RE1", "without RE2"),
    ("[resistors.RC]", "[resistors.RE1]\n[resistors.RE2]\n[resistors.RC]", "resistors.RE1.value", "missing"),
    ("[resistors.RC]", "[resistors.RE]\n[resistors.RE1]\n[resistors.RC]", "resistors.RE1", "without RE2"),
    ('"collector_voltage"', '"colector_voltage"', "require[1].quantity", 'did you mean "collector_voltage"'),
    ('"collector_voltage"', '"resistor_power.RB"', "require[1].quantity", "unknown quantity"),
    ('at_least = "3 V"', 'at_least = "3 mA"', "require[1].at_least", "no unit of a voltage"),
    ('at_least = "1.5 V"', "", "require[2]", "without a limit"),
    ('judged_by = "corners"', 'judged_by = "corner"', "require[1].judged_by", 'did you mean "corners"'),
    ('judged_by = "yield"', 'judged_by = "rss"', "require[2].yield_at_least", "judged by rss"),
    ('yield_at_least = "99.73 %"', "yield_at_least = 1", "require[2].yield_at_least", "below 100 %"),
    ('id = "R-1"', 'id = "R-2"', "require[2].id", "given more than once"),
    ('"half-power"', '"halfpower"', "derating.profile", 'did you mean "half-power"'),
]


@pytest.mark.parametrize(
    ("old", "new", "key", "message"), BADLY_WRITTEN, ids=[row[2] for row in BADLY_WRITTEN]
)
def test_badly_written_key_is_told_with_what_is_wrong(read, old, new, key, message):
    with pytest.raises(BadlyWritten, match=message) as caught:
        read(changed((old, new)))
    assert key in [fault.key for fault in caught.value.faults]


@pytest.mark.parametrize(
    ("old", "new", "key", "message"),
    [
        ('voltage = "-9 V ± 5 %"', 'voltage = "-9 V"\nripple_peak = 0', "ripple_peak", "widen its limits"),
        ('[negative_supply]\nvoltage = "-9 V ± 5 %"\n', "", "negative_supply", "has two supplies"),
    ],
)
def test_negative_supply_goes_without_ripple_and_with_two_supplies(read, old, new, key, message):
    assert old in SPLIT
    with pytest.raises(BadlyWritten, match=message) as caught:
        read(SPLIT.replace(old, new))
    assert key in caught.value.faults[0].key


def test_emitter_resistor_is_one_or_two_never_three(faults):
    three = "[resistors.RE]\n[resistors.RE1]\n[resistors.RE2]\n[resistors.RC]"
    found = faults(changed(("[resistors.RC]", three)))
    assert "given beside RE" in found["resistors.RE2"].problem


def test_resistor_written_as_a_default_is_shown_the_right_way(faults):
    fault = faults(changed(('series = "E24"', 'R1 = "3k3"')))["resistors.R1"]
    assert fault.hint == 'write [resistors.R1] with value = "3k3"'


def test_largest_swing_without_a_load_is_refused(faults):
    text = without("signal").replace('"mid-swing"', '"max-swing"')
    assert '"max-swing" needs a [signal] section' in faults(text)["target.collector"].problem


def test_bypass_is_refused_where_the_emitter_is_the_output_or_has_no_resistor(faults):
    follower = changed(('"divider"', '"follower"'), ("[resistors.RC]", "[resistors.RE]"))
    assert "output is its emitter" in faults(follower)["signal.bypassed"].problem
    grounded = changed(('"divider"', '"base-resistor"'), ('emitter_voltage = "supply / 9"', ""))
    assert "no emitter resistor" in faults(grounded)["signal.bypassed"].problem


def test_without_target_each_resistor_without_a_value_is_a_fault(faults):
    found = faults(without("target"))
    assert set(found) == {f"resistors.{name}.value" for name in ("R1", "R2", "RE")}


def test_gain_limit_with_a_sign_is_refused_because_it_is_judged_by_magnitude(faults):
    found = faults(SAMPLE + '[[require]]\nquantity = "voltage_gain"\nat_least = -100\n')
    assert "judged by magnitude" in found["require[3].at_least"].problem


@pytest.mark.parametrize("section", ["stage", "supply", "ambient", "transistor", "resistors", "require"])
def test_section_of_the_wrong_type_is_a_fault(faults, section):
    assert faults(f"{section} = 3\n")[section].read == "3"


def test_every_fault_is_told_at_once_with_its_line(faults):
    found = faults(
        changed(
            ('topology = "divider"', 'topology = "dividr"'),
            ('ripple_peak = "50 mV"', 'ripple_peek = "50 mV"'),
            ('test_current = "1.5 mA"', 'test_current = "1.5 ma"'),
            ('value = "3k3"', 'value = "0R"'),
            ('at_least = "1.5 V"', 'at_least = "1.5 A"'),
        )
    )
    expected = {
        "stage.topology": "topology",
        "supply.ripple_peek": "ripple_peak",
        "transistor.test_current": "test_current",
        "resistors.RC.value": "value",
        "require[2].at_least": 'at_least = "1.5 V"',
    }
    assert {key: fault.line for key, fault in found.items()} == {
        key: line_of(start) for key, start in expected.items()
    }


def test_missing_key_is_placed_at_its_table(faults):
    assert faults(changed(('collector_current = "1 mA"', "")))["target.collector_current"].line == line_of(
        "[target]"
    )


def test_fault_carries_what_was_read_and_what_is_allowed(faults):
    fault = faults(changed(('series = "E24"', 'series = "E23"')))["resistors.series"]
    assert fault.read == "'E23'"
    assert fault.allowed == "E3, E6, E12, E24, E48, E96, E192"


# --- what is impossible ------------------------------------------------------------------------

IMPOSSIBLE = [
    ("min = 165", "min = 500", "transistor.gain.min", "the lowest value, 500, is above the highest, 410"),
    ("typ = 260", "typ = 500", "transistor.gain", "the nominal value, 500, is outside its own limits"),
    ('min = "0.57 V"', 'min = "0.8 V"', "transistor.base_emitter_voltage.min", "800 mV, is above"),
    ('voltage = "9 V ± 10 %"', "min = 10\nmax = 8", "supply.min", "10 V, is above the highest, 8 V"),
    ('voltage = "9 V ± 10 %"', "min = 8\nnominal = 12\nmax = 9", "supply", "12 V, is outside"),
    ('voltage = "9 V ± 10 %"', "voltage = 0", "supply.voltage", "no transistor runs from 0 V"),
    ('voltage = "9 V ± 10 %"', "voltage = -9", "supply.voltage", "no transistor runs from -9 V"),
    ('voltage = "9 V ± 10 %"', 'voltage = "0.6 V"', "supply.voltage", "600 mV cannot turn on"),
    ('ripple_peak = "50 mV"', 'ripple_peak = "9 V"', "supply.ripple_peak", "reaches through"),
    ('min = "-10 degC"', 'min = "30 degC"', "ambient", "25 °C, is outside its own limits, 30 °C … 50 °C"),
    ('min = "-10 degC"', 'min = "60 degC"', "ambient.min", "60 °C, is above the highest, 50 °C"),
    ('"supply / 9"', '"12 V"', "target.emitter_voltage", "leave no swing of the 9 V"),
    ('"supply / 9"', '"8.7 V"', "target.emitter_voltage", "leave no swing of the 9 V"),
    ('"supply / 9"', '"8.5 V"', "target.emitter_voltage", "put the base beyond the 9 V"),
    ('"supply / 9"', '"supply / 0.5"', "target.emitter_voltage", "18 V at the emitter"),
    ('collector = "mid-swing"', "collector = 9.5", "target.collector", "9.5 V is not between the rails"),
    ('collector = "mid-swing"', "collector = -1", "target.collector", "-1 V is not between the rails"),
    ('collector = "mid-swing"', "collector = 1.2", "target.collector", "no more than V_CE"),
    ('at_most = "7 V"', 'at_most = "2 V"', "require[1].at_least", "nothing is at least 3 V and at most 2 V"),
    ('value = "3k3"', 'derate_from = "160 degC"', "resistors.RC.derate_from", "cannot fall from 160 °C"),
]


@pytest.mark.parametrize(("old", "new", "key", "message"), IMPOSSIBLE, ids=[row[3] for row in IMPOSSIBLE])
def test_impossible_stage_is_told_with_the_physical_reason(faults, old, new, key, message):
    found = faults(changed((old, new)), PhysicallyImpossible)
    assert list(found) == [key]
    assert message in found[key].problem


def test_every_impossibility_is_told_at_once_with_its_line(faults):
    found = faults(
        changed(("min = 165", "min = 500"), ('"supply / 9"', '"12 V"'), ('"7 V"', '"2 V"')),
        PhysicallyImpossible,
    )
    assert {key: fault.line for key, fault in found.items()} == {
        "transistor.gain.min": line_of("gain"),
        "target.emitter_voltage": line_of("emitter_voltage"),
        "require[1].at_least": line_of("at_least"),
    }


def test_badly_written_is_told_before_impossible(faults):
    assert set(faults(changed(("min = 165", "min = 500"), ('"600 ohm"', '"600 Ohm"')))) == {
        "signal.source_resistance"
    }


def test_negative_supply_above_zero_is_impossible(faults):
    found = faults(SPLIT.replace("-9 V ± 5 %", "9 V ± 5 %"), PhysicallyImpossible)
    assert "no negative supply" in found["negative_supply.voltage"].problem


def test_negative_supply_must_turn_the_transistor_on(faults):
    found = faults(SPLIT.replace("-9 V ± 5 %", "-0.5 V"), PhysicallyImpossible)
    assert "500 mV cannot turn on" in found["negative_supply.voltage"].problem


def test_collector_of_a_pnp_is_measured_from_the_positive_rail(read, faults):
    pnp = changed(('polarity = "npn"', 'polarity = "pnp"'))
    assert read(pnp.replace('"mid-swing"', '"1.2 V"')).target.collector == 1.2
    # 9 V less 1 V across RE less V_CE(sat) 0.3 V: from 7.7 V up the PNP is saturated.
    found = faults(pnp.replace('"mid-swing"', '"7.8 V"'), PhysicallyImpossible)
    assert "no more than V_CE(sat)" in found["target.collector"].problem


def test_collector_of_a_follower_is_no_target(faults):
    text = changed(
        ('"divider"', '"follower"'),
        ("[resistors.RC]", "[resistors.RE]"),
        ("bypassed = true", ""),
        ('"mid-swing"', '"5 V"'),
    )
    assert "tied to its rail" in faults(text, PhysicallyImpossible)["target.collector"].problem


def test_two_megohm_collector_resistor_is_read_since_the_verdict_is_not_ours(read):
    assert read(changed(('value = "3k3"', 'value = "2 M"'))).resistor("RC").value == 2e6


# --- whatever else comes -----------------------------------------------------------------------

ODD = st.sampled_from(
    [*"\"'[]{}=#\n\\,.±−9", "1e999", "nan", "true", "[[", '"""']
) | st.text(max_size=3)
# The file is written anew for each example, so that a fixture of the function's scope does no harm.
slow_is_fine = settings(
    max_examples=300, suppress_health_check=[HealthCheck.function_scoped_fixture], deadline=None
)
ODD_VALUES = ["", "true", "0", "-1", "nan", "inf", '""', '"x"', "[]", "{}", "{a = 1}", "1979-05-27", "[[1]]"]


def _is_stage_or_error(read, text):
    try:
        stage = read(text)
    except BiasbandError as error:
        assert str(error)
    else:
        assert isinstance(stage, Stage)
        assert math.isfinite(stage.supply.voltage.nominal)


@slow_is_fine
@given(st.text())
def test_any_text_is_a_stage_or_an_error_of_ours(read, text):
    _is_stage_or_error(read, text.encode(errors="replace").decode())


@slow_is_fine
@given(st.lists(st.tuples(st.integers(0, len(SAMPLE)), st.integers(0, 8), ODD), min_size=1, max_size=3))
def test_sample_with_letters_changed_is_a_stage_or_an_error_of_ours(read, edits):
    text = SAMPLE
    for start, length, new in edits:
        text = text[:start] + new + text[start + length :]
    _is_stage_or_error(read, text.encode(errors="replace").decode())


@slow_is_fine
@given(
    st.lists(st.integers(0, len(LINES) - 1), min_size=1, max_size=4),
    st.sampled_from(ODD_VALUES),
)
def test_sample_with_values_changed_is_a_stage_or_an_error_of_ours(read, numbers, value):
    lines = [
        f"{line.split(' = ')[0]} = {value}" if number in numbers and " = " in line and value else line
        for number, line in enumerate(LINES)
        if value or number not in numbers
    ]
    _is_stage_or_error(read, "\n".join(lines))


# --- figures at the end of what floating point holds, and a stage without an emitter resistor -----


@pytest.mark.parametrize("absurd", ["1e200", "1e-200"])
def test_figure_that_no_stage_can_have_is_refused(faults, absurd):
    text = changed(("gain = { min = 165, typ = 260, max = 410 }", f"gain = {{ min = {absurd}, max = 410 }}"))
    assert faults(text)["transistor.gain.min"].problem == "no number that a stage can have"


@pytest.mark.parametrize("topology", ["base-resistor", "collector-feedback"])
def test_one_volt_rule_takes_no_room_where_there_is_no_emitter_resistor(read, faults, topology):
    text = changed(
        ('topology = "divider"', f'topology = "{topology}"'),
        ('emitter_voltage = "supply / 9"', ""),
        ("bypassed = true", ""),
        ('value = "3k3"', ""),
        ('voltage = "9 V ± 10 %"', 'voltage = "1.2 V ± 10 %"'),
    )
    # The emitter is grounded: 1.2 V turn the transistor on (0.64 V) and leave it 0.9 V above V_CE(sat).
    assert [r.name for r in read(text).resistors] == ["RB", "RC"]
    # With the resistor the rule holds, and 1 V + 0.3 V are more than there is.
    with_emitter = text.replace("[[require]]\nid", "[resistors.RE]\n[[require]]\nid", 1)
    found = faults(with_emitter, PhysicallyImpossible)
    assert "the 1 V rule holds" in found["target.emitter_voltage"].problem
