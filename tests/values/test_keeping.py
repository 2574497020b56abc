"""Values kept for one run: taken where the drawer has them, or all that is wrong is told at once."""

from __future__ import annotations

from dataclasses import replace

import pytest
from variation.stages import with_resistor

from biasband.errors import UsageError
from biasband.files.series_files import load_all
from biasband.stage import Stage
from biasband.values.choosing import choose
from biasband.values.keeping import keep
from values.test_shelf import drawer, free_divider

SERIES = load_all()


def stage_with_fixed_emitter_resistor() -> Stage:
    """A divider whose RE the file gives."""
    return free_divider(fixed={"RE": 1e3})


def told(of: Stage, values: dict[str, float]) -> list[str]:
    """Everything that is wrong with keeping these values."""
    with pytest.raises(UsageError, match=r".") as caught:
        keep(of, values, SERIES)
    return str(caught.value).splitlines()


def test_kept_value_holds_and_the_others_stay_free() -> None:
    of = stage_with_fixed_emitter_resistor()
    kept = keep(of, {"RC": 3.3e3}, SERIES)
    assert kept == with_resistor(of, "RC", value=3.3e3, kept=True)
    assert keep(of, {}, SERIES) == of


def test_kept_values_are_counted_apart_from_those_of_the_file() -> None:
    design = choose(keep(stage_with_fixed_emitter_resistor(), {"RC": 3.3e3}, SERIES), SERIES)
    assert (design.frozen, design.kept, design.chosen) == (1, 1, 2)
    assert design.stage.resistor("RC").value == 3.3e3
    assert {part.name: part.chosen for part in design.parts} == {
        "R1": True, "R2": True, "RC": False, "RE": False
    }  # fmt: skip
    every = keep(stage_with_fixed_emitter_resistor(), {"R1": 68e3, "R2": 15e3, "RC": 3.3e3}, SERIES)
    design = choose(every, SERIES)
    assert (design.frozen, design.kept, design.chosen) == (1, 3, 0)


def test_contest_does_not_move_a_kept_value() -> None:
    contest = choose(keep(stage_with_fixed_emitter_resistor(), {"RC": 3.3e3}, SERIES), SERIES).contest
    assert contest.names == ("R1", "R2")
    assert all(len(each.values) == 2 for each in contest.contenders)


def test_value_that_is_not_in_the_series_is_told_with_the_nearest() -> None:
    (line,) = told(stage_with_fixed_emitter_resistor(), {"RC": 6.65e3})
    assert line.startswith("RC: 6.65 kΩ is not in E24, the nearest there is 6.8 kΩ")
    of = with_resistor(stage_with_fixed_emitter_resistor(), "RC", series="E96")
    assert keep(of, {"RC": 6.65e3}, SERIES).resistor("RC").value == 6.65e3


def test_value_that_is_nearly_preferred_is_not() -> None:
    assert len(told(stage_with_fixed_emitter_resistor(), {"RC": 3300.0000001})) == 1


def test_value_must_be_in_stock_where_there_is_a_list() -> None:
    of = replace(stage_with_fixed_emitter_resistor(), stock=drawer(3.3e3, 3.01e3, 68e3, 12e3))
    assert keep(of, {"RC": 3.01e3}, SERIES).resistor("RC").value == 3.01e3  # though not in E24
    (line,) = told(of, {"RC": 3.6e3})  # though in E24
    assert line.startswith("RC: 3.6 kΩ is not in stock, the nearest there is 3.3 kΩ")


def test_unknown_resistor_is_told_with_those_that_can_be_kept() -> None:
    (line,) = told(stage_with_fixed_emitter_resistor(), {"R9": 1e3})
    assert line == "R9: no such resistor in this stage; allowed: R1, R2, RC"
    every = free_divider(fixed={"R1": 68e3, "R2": 13e3, "RC": 3.9e3, "RE": 1e3})
    assert told(every, {"R9": 1e3}) == ["R9: no such resistor in this stage; allowed: none"]


def test_value_of_the_file_is_not_overruled() -> None:
    (line,) = told(stage_with_fixed_emitter_resistor(), {"RE": 1e3})
    assert line == "RE: the stage file gives it a value: change it there"


def test_all_that_is_wrong_is_told_at_once_in_the_order_asked() -> None:
    wrong = {"R9": 1e3, "RC": 3.4e3, "R2": 13e3, "RE": 2e3, "R1": 67e3}
    assert [line.split(":")[0] for line in told(stage_with_fixed_emitter_resistor(), wrong)] == [
        "R9", "RC", "RE", "R1"
    ]  # fmt: skip


@pytest.mark.parametrize("value", [0.0, -3.3e3, 1e300, float("nan"), float("inf")])
def test_value_that_is_no_part_is_told_with_its_resistor_beside_the_others(value: float) -> None:
    lines = told(stage_with_fixed_emitter_resistor(), {"RC": value, "R9": 1e3})
    assert [line.split(":")[0] for line in lines] == ["RC", "R9"]
