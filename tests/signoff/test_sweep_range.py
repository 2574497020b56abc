"""The range of a sweep: the stage's own unless given, and every fault of it at once."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from biasband.errors import UsageError
from biasband.signoff.sweep_range import SweepRange, Temperature, sweep_range
from biasband.stage import Limits, Stage
from tests.variation.stages import ROOM, coupled, limits

WIDE = replace(coupled(), ambient=limits(263.15, ROOM, 323.15))
STILL = replace(coupled(), ambient=Limits.exactly(ROOM, stated=False))


def asked(
    stage: Stage = WIDE,
    coldest: Temperature = None,
    hottest: Temperature = None,
    points: int | None = None,
) -> SweepRange:
    """The range that these arguments make."""
    return sweep_range(stage, coldest=coldest, hottest=hottest, points=points)


def test_range_of_the_stage_in_eleven_points_unless_given() -> None:
    assert asked() == SweepRange(263.15, 323.15, 11)
    assert asked().step == pytest.approx(6.0, rel=1e-12)


def test_ends_are_texts_or_kelvin() -> None:
    assert asked(coldest="-40 degC", hottest=358.15, points=2) == SweepRange(233.15, 358.15, 2)


@pytest.mark.parametrize(
    ("hottest", "points"),
    # From −10 °C in steps of at most 10 K: 100 K take 11 points, a kelvin more takes 12; 250 °C 27.
    [("90 degC", 11), ("91 degC", 12), ("250 degC", 27)],
)
def test_step_left_open_is_no_wider_than_ten_kelvin(hottest: str, points: int) -> None:
    found = asked(hottest=hottest)
    assert found.points == points and found.step <= 10.0 + 1e-9


def test_points_that_are_given_are_kept_however_wide_the_step() -> None:
    assert asked(hottest="250 degC", points=3).points == 3


@given(
    low=st.floats(150.0, 300.0),
    span=st.floats(1.0, 200.0),
    points=st.integers(2, 40),
    nominal=st.floats(140.0, 523.0),
)
def test_temperatures_ascend_from_end_to_end_with_nominal_among_them(
    low: float, span: float, points: int, nominal: float
) -> None:
    way = SweepRange(low, low + span, points)
    found = way.temperatures(joined_by=nominal)
    assert (found[0], found[-1]) == (low, low + span)
    assert np.all(np.diff(found) > 0.0)
    inside = low < nominal < low + span
    assert (np.min(np.abs(found - nominal)) <= 1e-6) or not inside
    assert found.size in ((points, points + 1) if inside else (points,))


def test_nominal_that_is_a_point_of_the_sweep_is_there_once() -> None:
    assert SweepRange(288.15, 308.15, 3).temperatures(joined_by=298.15).size == 3


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ({"coldest": "85 degC", "hottest": "-40 degC"}, "85 °C: not below -40 °C"),
        ({"coldest": 300.0, "hottest": 300.0}, "not below"),
        ({"coldest": 149.9}, r"from \(coldest\): outside what can be computed; read -123.25 °C; allowed"),
        ({"hottest": "251 degC"}, r"to \(hottest\): outside .* read 251 °C; allowed: -123.15 °C to 250 °C"),
        ({"coldest": float("nan")}, r"from \(coldest\): not a finite number"),
        ({"hottest": "85"}, r"to \(hottest\): no unit"),
        ({"hottest": True}, r"to \(hottest\): neither a number nor a text"),
        ({"points": 1}, "points: a whole number from 2 to 501; read 1"),
        ({"points": 502}, "points: a whole number from 2 to 501; read 502"),
        ({"points": 3.5}, "points: a whole number from 2 to 501; read 3.5"),
        ({"points": True}, "points: a whole number from 2 to 501; read True"),
        ({"stage": STILL}, "no ambient range to sweep: give both ends"),
        ({"stage": STILL, "hottest": 350.0}, "no ambient range to sweep: give both ends"),
    ],
)
def test_sweep_that_cannot_be_made_is_refused(arguments: dict[str, object], words: str) -> None:
    with pytest.raises(UsageError, match=words):
        asked(**arguments)  # type: ignore[arg-type]


@pytest.mark.parametrize("end", [150.0, 523.15])
def test_ends_of_what_can_be_computed_are_allowed(end: float) -> None:
    found = asked(coldest=150.0, hottest=523.15)
    assert end in (found.coldest, found.hottest)


def test_every_fault_is_named_at_once() -> None:
    with pytest.raises(UsageError) as caught:
        asked(coldest="x", hottest=900.0, points=0)
    lines = str(caught.value).splitlines()
    assert [line.split(":")[0] for line in lines] == ["from (coldest)", "to (hottest)", "points"]


def test_stage_without_a_range_is_swept_where_both_ends_are_given() -> None:
    assert asked(STILL, coldest=250.0, hottest=350.0).coldest == 250.0


def test_ambient_of_the_stage_beyond_the_laws_is_said_to_be_the_stages() -> None:
    frozen = replace(coupled(), ambient=limits(100.0, ROOM, 323.15))
    with pytest.raises(UsageError, match=r"from \(coldest\).*read the stage's ambient, -173.15 °C"):
        asked(frozen)


def test_tempco_that_takes_a_resistor_to_nothing_within_the_sweep_is_refused() -> None:
    of = coupled()
    rough = replace(of, resistors=tuple(replace(r, tempco=0.01) for r in of.resistors[:1]) + of.resistors[1:])
    # 0.01/K · 100 K is all of it, at 125 °C; within the stage's own 50 °C it is a quarter.
    assert asked(rough).hottest == 323.15
    with pytest.raises(UsageError, match=r"R1\.tempco takes R1 to nothing at 125 °C"):
        asked(rough, hottest="125 degC")
