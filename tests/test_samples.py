"""The samples as a designer meets them: each reads, comes to its verdict and says that it is invented."""

from __future__ import annotations

import tomllib
from functools import cache
from pathlib import Path

import numpy as np
import pytest

from biasband.circuit.topology import TOPOLOGIES
from biasband.files.stage_file import read_stage
from biasband.signoff.study import Review, review
from biasband.stage import Stage, Transistor

SAMPLES = Path(__file__).parents[1] / "samples"

OUTCOMES = {
    "beacon_receiver": "pass",
    "hive_microphone": "pass",
    "ice_warner": "pass",
    "metal_detector": "pass",
    "organ_vibrato_repair": "pass",
    "river_gauge": "pass",
    "soil_probe": "pass",
    "wind_mast": "pass",
    "workshop_intercom_fails": "fail",
}
"""What each sample's own comments promise."""

PASSING = [name for name, outcome in OUTCOMES.items() if outcome == "pass"]
PAGES = sorted(SAMPLES.rglob("*.toml"))

BOARDS = 4096
"""Enough to show 99.9 % (a one-sided 95 % bound of 99.927 % with no failure); the samples ask for 99.73 %."""

ROUNDING = 1e-9
"""Relative: the corner search lets go of improvements below this share."""


@cache
def stage_of(name: str) -> Stage:
    return read_stage(SAMPLES / f"{name}.toml")


@cache
def review_of(name: str) -> Review:
    return review(stage_of(name), boards=BOARDS)


def test_every_sample_is_in_the_table() -> None:
    assert sorted(path.stem for path in SAMPLES.glob("*.toml")) == sorted(OUTCOMES)


def test_every_file_is_in_the_readme() -> None:
    readme = (SAMPLES / "README.md").read_text("utf-8")
    for page in PAGES:
        assert f"| `{page.relative_to(SAMPLES).as_posix()}` |" in readme


@pytest.mark.parametrize("name", OUTCOMES)
def test_verdict_is_the_promised_one(name: str) -> None:
    verdict = review_of(name).verdict
    assert verdict.outcome == OUTCOMES[name], verdict.because


@pytest.mark.parametrize("name", PASSING)
def test_passing_sample_warns_of_nothing(name: str) -> None:
    assert review_of(name).warnings == ()


@pytest.mark.parametrize("name", PASSING)
def test_passing_sample_leaves_no_check_unmade(name: str) -> None:
    assert review_of(name).standing.not_made == ()


@pytest.mark.parametrize("name", OUTCOMES)
def test_no_sampled_board_lies_outside_the_corners(name: str) -> None:
    found = review_of(name)
    for quantity, spread in found.spread.items():
        limits = found.evidence.corners.ranges[quantity]
        slack = ROUNDING * max(abs(limits.low.value), abs(limits.high.value))
        assert np.min(spread.lowest_in_use.values) >= limits.low.value - slack, quantity
        assert np.max(spread.highest_in_use.values) <= limits.high.value + slack, quantity


@pytest.mark.parametrize("name", OUTCOMES)
def test_every_scenario_is_solved(name: str) -> None:
    found = review_of(name)
    for quantity, spread in found.spread.items():
        assert np.all(np.isfinite(spread.lowest_in_use.values)), quantity
        assert np.all(np.isfinite(spread.highest_in_use.values)), quantity


@pytest.mark.parametrize("name", OUTCOMES)
def test_requirements_carry_an_id_and_a_reason(name: str) -> None:
    tables = tomllib.loads((SAMPLES / f"{name}.toml").read_text("utf-8"))["require"]
    assert all(table.get("id") and table.get("reason") for table in tables)


@pytest.mark.parametrize("page", PAGES, ids=lambda page: page.stem)
def test_file_says_in_its_opening_comment_that_it_is_invented(page: Path) -> None:
    text = page.read_text("utf-8")
    comment = text.split("\n\n[", 1)[0] if "\n\n[" in text else text.split("\n\ntype", 1)[0]
    assert "# All data in this file are invented" in comment


@pytest.mark.parametrize("name", OUTCOMES)
def test_transistor_says_in_its_source_that_it_is_invented(name: str) -> None:
    transistor = stage_of(name).transistor
    assert isinstance(transistor, Transistor)
    assert "invented" in transistor.source
    assert "invented" in transistor.label


def test_failing_sample_shows_what_its_comments_say() -> None:
    found = review_of("workshop_intercom_fails")
    failed = {row.quantity: row for row in found.rows if row.verdict == "fail"}
    assert {"collector_voltage", "symmetric_peak_swing"} == set(failed)
    assert {row.main_cause for row in failed.values()} == {"gain"}
    assert {row.side for row in found.rows if row.quantity == "collector_voltage"} == {"at_least", "at_most"}
    assert found.design.contest is not None
    assert all(contender.failing for contender in found.design.contest.contenders)


def test_samples_cover_every_topology_and_both_polarities() -> None:
    stages = [stage_of(name) for name in OUTCOMES]
    assert {stage.topology for stage in stages} == set(TOPOLOGIES)
    assert {stage.polarity for stage in stages} == {"npn", "pnp"}


def test_samples_cover_every_way_of_judging() -> None:
    needs = [need for name in OUTCOMES for need in stage_of(name).requirements]
    assert {need.judged_by for need in needs} == {"corners", "rss", "yield"}


def test_organ_stage_has_every_value_frozen_and_a_gain_spread_of_four() -> None:
    found = review_of("organ_vibrato_repair")
    assert (found.design.frozen, found.design.chosen) == (3, 0)
    assert found.stage.transistor.gain.high == 4.0 * found.stage.transistor.gain.low


def test_transistor_of_its_own_file_is_on_record_beside_the_stage() -> None:
    names = [Path(record.path).name for record in stage_of("river_gauge").files]
    assert names == ["river_gauge.toml", "invented_small_pnp.toml"]
