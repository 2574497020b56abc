"""The keys that say how figures are drawn: what they are read to, and every fault with its place."""

from __future__ import annotations

from pathlib import Path

import pytest

from biasband.errors import BadlyWritten, Fault
from biasband.files.stage_file import read_stage
from biasband.stage import Distribution, Stage, Transistor

HEAD = """
[stage]
title = "invented"
topology = "divider"
polarity = "npn"
{stage}
[supply]
voltage = "9 V ± 10 %"
{supply}
[ambient]
min = "-10 degC"
max = "50 degC"
[transistor]
{transistor}
test_current = "1 mA"
[target]
collector_current = "1 mA"
[resistors]
tolerance = "1 %"
tempco = "100 ppm/K"
life_drift = "0.5 %"
{resistors}
"""

GAIN = "gain = {{ min = 100, typ = 200, max = 400{gain} }}"
VOLTS = 'base_emitter_voltage = {{ min = "0.6 V", typ = "0.64 V", max = "0.72 V"{volts} }}'

BATCHES = "boards_per_batch = 200"


def text(*, stage="", supply="", gain="", volts="", transistor="", resistors="") -> str:
    """A stage file with these keys in their sections."""
    figures = "\n".join((GAIN.format(gain=gain), VOLTS.format(volts=volts), transistor))
    return HEAD.format(stage=stage, supply=supply, transistor=figures, resistors=resistors)


@pytest.fixture
def read(tmp_path: Path):
    """Reads a text as a stage file."""

    def read_text(written: str) -> Stage:
        path = tmp_path / "stage.toml"
        path.write_text(written, encoding="utf-8")
        return read_stage(path)

    return read_text


@pytest.fixture
def faults(read):
    """Reads a text that must be refused, and returns its faults."""

    def faults_of(written: str) -> tuple[Fault, ...]:
        with pytest.raises(BadlyWritten, match="badly written") as caught:
            read(written)
        return caught.value.faults

    return faults_of


def line_of(written: str, start: str) -> int:
    """The line that starts so."""
    return next(n for n, line in enumerate(written.split("\n"), start=1) if line.startswith(start))


def batch(within: float) -> Distribution:
    """A distribution by batch."""
    return Distribution(name="batch", within_batch=within)


def test_nothing_said_is_uniform(read):
    of = read(text())
    assert of.boards_per_batch is None and not of.drawn_by_batch
    for resistor in of.resistors:
        assert resistor.distribution == resistor.life_drift_distribution == Distribution()
        assert resistor.tempco_distribution == Distribution()
    assert of.transistor.gain.distribution == of.supply.voltage.distribution == Distribution()


def test_every_key_is_read_where_it_belongs(read):
    of = read(
        text(
            stage=BATCHES,
            supply='varies = "by board"\ndistribution = "triangular"',
            gain=', distribution = "batch", within_batch = "10 %"',
            volts=', distribution = "batch", within_batch = "10 mV"',
            transistor='leakage = "10 nA"\nleakage_distribution = "sine"',
            resistors='distribution = "normal"\nlife_drift_distribution = "sine"\n'
            'tempco_distribution = "triangular"\n[resistors.RC]\ndistribution = "hollow"\n'
            'hollow_within = "0.2 %"\n[resistors.RE]\ndistribution = "batch"\nwithin_batch = "0.3 %"',
        )
    )
    assert of.boards_per_batch == 200 and of.drawn_by_batch
    assert of.supply.voltage.distribution == Distribution(name="triangular")
    assert of.transistor.gain.distribution == batch(0.1)
    assert of.transistor.base_emitter_voltage.distribution == batch(0.01)
    assert of.transistor.leakage_distribution == Distribution(name="sine")
    assert of.resistor("R1").distribution == Distribution(name="normal")
    assert of.resistor("R1").life_drift_distribution == Distribution(name="sine")
    assert of.resistor("RC").tempco_distribution == Distribution(name="triangular")
    assert of.resistor("RC").distribution == Distribution(name="hollow", hollow_within=0.002)
    assert of.resistor("RE").distribution == batch(0.003)


def test_companion_of_all_resistors_serves_those_that_are_drawn_so(read):
    rest = 'distribution = "batch"\nwithin_batch = "0.3 %"\n[resistors.RC]\ndistribution = "uniform"\n'
    of = read(text(stage=BATCHES, resistors=rest + '[resistors.RE]\nwithin_batch = "0.1 %"'))
    assert of.resistor("R1").distribution == batch(0.003)
    assert of.resistor("RC").distribution == Distribution()
    assert of.resistor("RE").distribution == batch(0.001)


def test_part_file_takes_the_keys_too(tmp_path):
    figures = text(
        gain=', distribution = "batch", within_batch = "5 %"',
        transistor='leakage = "1 nA"\nleakage_distribution = "normal"',
    )
    part = figures.split("[transistor]\n")[1].split("[target]")[0]
    (tmp_path / "part.toml").write_text(part, encoding="utf-8")
    written = text(stage=BATCHES)
    written = written.replace(written.split("[transistor]\n")[1].split("[target]")[0], 'file = "part.toml"\n')
    (tmp_path / "stage.toml").write_text(written, encoding="utf-8")
    transistor = read_stage(tmp_path / "stage.toml").transistor
    assert isinstance(transistor, Transistor)
    assert transistor.gain.distribution == batch(0.05)
    assert transistor.leakage_distribution == Distribution(name="normal")
    (tmp_path / "part.toml").write_text(part.replace('"5 %"', '"150 %"'), encoding="utf-8")
    with pytest.raises(BadlyWritten, match=r"part\.toml:1: gain\.within_batch: not at least 0 % and below"):
        read_stage(tmp_path / "stage.toml")


RESISTORS = [
    ('distribution = "lumpy"', "resistors.distribution", "unknown"),
    ('distribution = "hollow"', "resistors.hollow_within", "missing"),
    ('distribution = "batch"', "resistors.within_batch", "missing"),
    ('hollow_within = "0.2 %"', "resistors.hollow_within", 'goes with distribution = "hollow" only'),
    ('distribution = "normal"\nwithin_batch = "0.2 %"', "resistors.within_batch", '"batch" only'),
    ('distribution = "hollow"\nhollow_within = "1 %"', "resistors.hollow_within", "not below the tolerance"),
    ('distribution = "hollow"\nhollow_within = "-1 %"', "resistors.hollow_within", "not at least 0 %"),
    ('distribution = "batch"\nwithin_batch = "1.1 %"', "resistors.within_batch", "above the tolerance of R"),
    ('life_drift_distribution = "hollow"', "resistors.life_drift_distribution", "only a resistor's"),
    ('tempco_distribution = "batch"', "resistors.tempco_distribution", "h_FE and V_BE are drawn by batch"),
    ('[resistors.RC]\ntolerance = "0 %"\ndistribution = "sine"', "resistors.RC.distribution", "nothing to"),
    ('[resistors.RC]\nlife_drift = "0 %"\nlife_drift_distribution = "sine"',
     "resistors.RC.life_drift_distribution", "RC has no life_drift"),
    ('[resistors.RC]\ntempco = "0 ppm/K"\ntempco_distribution = "sine"',
     "resistors.RC.tempco_distribution", "RC has no tempco"),
]  # fmt: skip


@pytest.mark.parametrize(("written", "key", "message"), RESISTORS)
def test_fault_of_a_resistor_is_told_with_its_line(faults, written, key, message):
    page = text(stage=BATCHES if "batch" in written else "", resistors=written)
    found = {fault.key: fault for fault in faults(page) if fault.key != "stage.boards_per_batch"}
    assert set(found) == {key}
    assert message in str(found[key])
    wanted = key.split(".")[-1] if "missing" not in message else "[resistors]"
    assert found[key].line == line_of(page, wanted)


OTHERS = [
    ({"gain": ', distribution = "hollow"'}, "transistor.gain.distribution", "only a resistor's tolerance"),
    ({"gain": ', distribution = "batch"'}, "transistor.gain.within_batch", "missing"),
    ({"gain": ', within_batch = "5 %"'}, "transistor.gain.within_batch", 'distribution = "batch" only'),
    ({"gain": ', distribution = "batch", within_batch = "10 mV"'}, "transistor.gain.within_batch", "ratio"),
    ({"volts": ', distribution = "batch", within_batch = "41 mV"'},
     "transistor.base_emitter_voltage.within_batch", "read 41 mV; allowed: 40 mV at most"),
    ({"volts": ', distribution = "batch", within_batch = "5 %"'},
     "transistor.base_emitter_voltage.within_batch", "voltage"),
    ({"transistor": 'leakage_distribution = "sine"'}, "transistor.leakage_distribution", "no leakage"),
    ({"transistor": 'leakage = "0 A"\nleakage_distribution = "sine"'},
     "transistor.leakage_distribution", "no leakage to draw"),
    ({"transistor": 'leakage = "1 nA"\nleakage_distribution = "batch"'},
     "transistor.leakage_distribution", "h_FE and V_BE are drawn by batch"),
    ({"supply": 'distribution = "normal"'}, "supply.distribution", "never drawn"),
    ({"supply": 'varies = "by board"\ndistribution = "batch"'}, "supply.distribution", "drawn by batch"),
    ({"stage": BATCHES}, "stage.boards_per_batch", 'nothing has distribution = "batch"'),
    ({"stage": "boards_per_batch = 0"}, "stage.boards_per_batch", "not at least 1"),
    ({"stage": "boards_per_batch = 2.5"}, "stage.boards_per_batch", "not a whole number"),
    ({"stage": 'boards_per_batch = "many"'}, "stage.boards_per_batch", "number"),
]  # fmt: skip


@pytest.mark.parametrize(("keys", "key", "message"), OTHERS)
def test_fault_elsewhere_is_told_where_it_stands(faults, keys, key, message):
    batched = any('"batch"' in written for written in keys.values())
    found = {fault.key: fault for fault in faults(text(**{"stage": BATCHES if batched else "", **keys}))}
    found = {k: fault for k, fault in found.items() if k == key or k != "stage.boards_per_batch"}
    assert set(found) == {key}
    assert message in str(found[key])


@pytest.mark.parametrize(
    ("old", "new", "key"),
    [
        ("min = 100, typ = 200, max = 400", 'min = 90, max = 90, distribution = "sine"', "transistor.gain"),
        ('"9 V ± 10 %"', '"9 V ± 0 %"\nvaries = "by board"\ndistribution = "sine"', "supply"),
        ('"9 V ± 10 %"', '"9 V"\nvaries = "by board"\ndistribution = "sine"', "supply"),
    ],
)
def test_distribution_between_limits_that_coincide_is_a_fault(faults, old, new, key):
    (found,) = faults(text().replace(old, new))
    assert found.key == f"{key}.distribution"
    assert "the limits coincide: there is nothing to draw" in found.problem


def test_batch_without_the_number_of_boards_is_a_fault(faults):
    page = text(resistors='distribution = "batch"\nwithin_batch = "0.3 %"')
    (found,) = faults(page)
    assert (found.key, found.problem) == ("stage.boards_per_batch", "missing")
    assert found.line == line_of(page, "[stage]")


GROUP = 'group = "A"\ntracking = "20 ppm/K"\ndistribution = "batch"\nwithin_batch = "0.2 %"\n'


@pytest.mark.parametrize(
    ("own", "key"),
    [
        ('tolerance = "0.5 %"', "tolerance"),
        ('within_batch = "0.3 %"', "within_batch"),
        ('distribution = "normal"', "distribution"),
        ('tempco_distribution = "normal"', "tempco_distribution"),
    ],
)
def test_members_of_a_group_that_differ_in_what_they_share_are_a_fault(faults, own, key):
    page = text(stage=BATCHES, resistors=f"{GROUP}[resistors.RC]\n{own}")
    (found,) = faults(page)
    assert found.key == f"resistors.RC.{key}"
    assert found.problem.startswith("RC and R1 differ, and share a ")
    assert found.line == line_of(page, "[resistors.RC]") + 1


def test_group_that_shares_a_batch_needs_no_tracking(read, faults):
    of = read(text(stage=BATCHES, resistors=GROUP.replace('tracking = "20 ppm/K"\n', "")))
    assert {resistor.group for resistor in of.resistors} == {"A"}
    assert {resistor.tracking for resistor in of.resistors} == {None}
    (found,) = faults(text(resistors='group = "A"'))
    assert found.problem == "a group without tracking"


def test_tracking_wider_than_the_tempco_is_a_fault_by_batch_too(faults):
    found = faults(text(stage=BATCHES, resistors=GROUP.replace("20 ppm/K", "200 ppm/K")))
    assert {fault.key for fault in found} == {"resistors.tracking"}
    assert all("above the tempco of" in fault.problem for fault in found)


def test_group_of_one_is_read(read):
    own = '[resistors.RC]\ngroup = "A"\ntracking = "20 ppm/K"'
    assert read(text(resistors=own)).resistor("RC").group == "A"


def test_every_fault_of_distributions_is_told_at_once(faults):
    found = faults(
        text(
            supply='distribution = "sine"',
            gain=', distribution = "batch"',
            resistors='distribution = "hollow"\nhollow_within = "2 %"\n'
            '[resistors.RC]\ndistribution = "batch"',
        )
    )
    assert {fault.key for fault in found} == {
        "stage.boards_per_batch", "supply.distribution", "transistor.gain.within_batch",
        "resistors.hollow_within", "resistors.RC.within_batch",
    }  # fmt: skip
