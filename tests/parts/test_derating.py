"""Derating profiles, and a resistor's rating over temperature."""

from __future__ import annotations

from dataclasses import fields

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from biasband.errors import UsageError
from biasband.parts.derating import FIGURES, NO_ORIGIN, PROFILES, derated_rating, in_words
from biasband.stage import Derating

ZERO_CELSIUS = 273.15
FILM = {"derate_from": 70 + ZERO_CELSIUS, "derate_to": 155 + ZERO_CELSIUS}
"""Film resistors: full to 70 °C, zero at 155 °C (common practice; the project's check values)."""

FACTORS = ("resistor_power", "supply_voltage", "transistor_power", "current", "emitter_base_voltage")


# The project's physics, section 8 "Cautions" (memory of published practice): full 100 %; half-power 50 %
# resistor power, 80 % voltage; stringent 50 % resistor power, transistor voltage and current 75 %, power
# 65 %.
@pytest.mark.parametrize(
    ("name", "factors"),
    [
        ("full", (1.0, 1.0, 1.0, 1.0, 1.0)),
        ("half-power", (0.5, 0.8, 1.0, 1.0, 0.8)),
        ("stringent", (0.5, 0.75, 0.65, 0.75, 0.75)),
    ],
)
def test_profile_has_the_figures_of_the_physics(name: str, factors: tuple[float, ...]) -> None:
    assert tuple(getattr(PROFILES[name], factor) for factor in FACTORS) == factors


# Same section: T_j ≤ min(110 °C, T_j max − 40 K) for stringent, the data sheet's own limit else.
@pytest.mark.parametrize(
    ("name", "max_celsius", "limit_celsius"),
    [("full", 150, 150), ("half-power", 150, 150), ("stringent", 200, 110), ("stringent", 125, 85)],
)
def test_junction_limit_follows_the_data_sheets(name: str, max_celsius: float, limit_celsius: float) -> None:
    limit = PROFILES[name].junction_limit(max_celsius + ZERO_CELSIUS)
    assert limit == pytest.approx(limit_celsius + ZERO_CELSIUS, abs=1e-9)  # rounding of °C + 273.15


def test_full_profile_says_that_nothing_is_derated() -> None:
    assert in_words(PROFILES["full"]) == "Derating profile full: no derating applied."


def test_sentence_names_every_figure_and_its_origin() -> None:
    sentence = in_words(PROFILES["stringent"])
    for said in ("stringent", "50 %", "75 %", "65 %", "110 °C", "40 K", "(memory", "standard that applies"):
        assert said in sentence
    assert "not derated" not in sentence


def test_what_a_profile_leaves_alone_is_said() -> None:
    sentence = in_words(PROFILES["half-power"])
    assert sentence.endswith("; not derated: transistor power, collector current, junction temperature.")
    assert "transistor power at most" not in sentence
    ceiling = in_words(Derating(name="own", junction_ceiling=373.15))
    assert "junction temperature" not in ceiling


def test_each_limit_stands_before_its_own_origin() -> None:
    own = Derating(
        name="own",
        resistor_power=0.6,
        supply_voltage=0.8,
        current=0.9,
        junction_margin=30.0,
        origins={"resistor_power": "rule 4", "supply_voltage": "memory", "junction_margin": "rule 4"},
    )
    assert in_words(own) == (
        "Derating profile own: resistor power at most 60 % of its limit, "
        "junction at least 30 K below its limit (rule 4); "
        "supply at most 80 % of its limit (memory); "
        "collector current at most 90 % of its limit (origin not stated); "
        "not derated: transistor power, emitter-base voltage."
    )


def test_profiles_are_named_by_their_key_and_state_an_origin_for_every_figure() -> None:
    for name, profile in PROFILES.items():
        assert profile.name == name
        assert NO_ORIGIN not in in_words(profile)


def test_profile_of_a_stage_that_names_none_is_full() -> None:
    assert Derating() == PROFILES["full"]


def test_this_file_knows_every_figure_of_a_profile() -> None:
    assert {field.name for field in fields(Derating)} == {*FIGURES, "name", "origins", "file"}
    assert set(FIGURES) == {*FACTORS, "junction_margin", "junction_ceiling"}


def test_rating_falls_linearly_and_never_below_zero() -> None:
    # By hand, 0.25 W from 70 to 155 °C: at 104 °C (155 − 104)/85 = 0.6 is left, at 112.5 °C half.
    celsius = np.array([-55.0, 25.0, 70.0, 104.0, 112.5, 155.0, 200.0])
    left = derated_rating(0.25, celsius + ZERO_CELSIUS, **FILM)
    expected = [0.25, 0.25, 0.25, 0.15, 0.125, 0.0, 0.0]
    np.testing.assert_allclose(left, expected, rtol=0, atol=1e-12)  # rounding of °C + 273.15, over 85 K


def test_ratings_and_ambients_broadcast() -> None:
    left = derated_rating([[0.25], [0.5]], np.array([300.0, 500.0, np.nan]), **FILM)
    np.testing.assert_array_equal(left, [[0.25, 0.0, np.nan], [0.5, 0.0, np.nan]])


@pytest.mark.parametrize("derate_to", [343.15, 300.0, float("nan")])
def test_derating_range_that_is_none_is_refused(derate_to: float) -> None:
    with pytest.raises(UsageError, match="must be above derate_from"):
        derated_rating(0.25, 300.0, derate_from=343.15, derate_to=derate_to)


@given(st.lists(st.floats(150.0, 600.0), min_size=1), st.floats(0.0, 10.0))
def test_hotter_is_never_more_and_always_within_the_rating(ambients: list[float], rating: float) -> None:
    left = derated_rating(rating, sorted(ambients), **FILM)
    assert np.all((left >= 0) & (left <= rating))
    assert np.all(np.diff(left) <= 0)
    one_by_one = [float(derated_rating(rating, ambient, **FILM)) for ambient in sorted(ambients)]
    assert one_by_one == left.tolist()
