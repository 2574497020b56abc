"""Snapping to preferred series: exact, by ratio, and the worst that it can do.

"check values" is the project's shared document of outside figures, "Preferred values (IEC
60063:2015)" and "Worked examples", each figure there with its own source.
"""

from __future__ import annotations

from decimal import Decimal
from itertools import pairwise
from math import inf, log, nan, sqrt

import pytest
from hypothesis import given
from hypothesis import strategies as st

from biasband.errors import UsageError
from biasband.files.series_files import load_all, load_series
from biasband.parts.series import Series, nearest, nearest_among, neighbours, worst_error

ALL_SERIES = st.sampled_from(list(load_all().values()))
# Resistances as they are written, six figures, in decades wider than any part's.
DECIMAL_VALUES = st.builds(
    lambda figures, exponent: Decimal(figures).scaleb(exponent),
    st.integers(1, 999_999),
    st.integers(-12, 12),
)
ROUNDING = 1e-12
"""Room for a few roundings of a double (each 1.1e-16) in a ratio or a logarithm of it."""


# Nearest by ratio: check values, computed there by an independent program; printed to 0.01 %.
@pytest.mark.parametrize(
    ("name", "percent"),
    [
        ("E3", 48.32),
        ("E6", 22.47),
        ("E12", 11.80),
        ("E24", 7.42),
        ("E48", 2.63),
        ("E96", 1.49),
        ("E192", 0.98),
    ],
)
def test_worst_error_by_ratio_is_the_published_one(name: str, percent: float) -> None:
    assert 100 * worst_error(load_series(name)) == pytest.approx(percent, abs=0.005)


@pytest.mark.parametrize("name", list(load_all()))
def test_worst_error_is_reached_just_above_the_widest_gaps_geometric_mean(name: str) -> None:
    series = load_series(name)
    values = [series.value_at(place) for place in range(len(series.mantissas) + 1)]
    errors = [
        abs(nearest(series, sqrt(low * high) * (1 + side * 1e-9)).error)
        for low, high in pairwise(values)
        for side in (-1, 1)
    ]
    assert max(errors) == pytest.approx(worst_error(series), abs=1e-8)  # the probe stands 1e-9 off


# Bell, Electronic Devices and Circuits (check values). Ex. 5-14 (12 V, V_E 5 V, 1 mA): RE 5 k → 4.7 k;
# R2 → 56 k, its ideal 54 k by hand: 4.7 V + 0.7 V over a tenth of 1 mA; R1 68.4 k → 68 k. Ex. 5-16
# (±9 V, V_C 5 V, 1 mA): RE 8.3 k → 8.2 k, RC 4 k → 3.9 k. In E24, 5 k would be 5.1 k: the book uses E12.
@pytest.mark.parametrize(
    ("ideal", "published"),
    [(5e3, 4.7e3), (54e3, 56e3), (68.4e3, 68e3), (8.3e3, 8.2e3), (4e3, 3.9e3)],
)
def test_e12_snaps_as_bell_does(ideal: float, published: float) -> None:
    assert nearest(load_series("E12"), ideal).chosen == published


# The literals are the doubles that Python itself reads from the decimal text.
@pytest.mark.parametrize("exact", [0.22, 0.47, 1.1, 8.2, 470.0, 4700.0, 3.3e5, 9.1e6, 1e-5, 1e22, 1e23])
def test_preferred_values_are_exact_doubles(exact: float) -> None:
    snap = nearest(load_series("E24"), exact * (1 + 1e-6))
    assert snap.chosen == exact
    assert snap.below == exact


def test_preferred_value_encloses_itself() -> None:
    snap = nearest(load_series("E24"), 4700.0)
    assert (snap.below, snap.chosen, snap.above, snap.error) == (4700.0, 4700.0, 4700.0, 0.0)


def test_snap_says_what_lies_on_both_sides_across_a_decade() -> None:
    # E24 ends its decade with 9.1 (check values); √(9.1 · 10) = 9.539.
    snap = nearest(load_series("E24"), 9500.0)
    assert (snap.series, snap.value) == ("E24", 9500.0)
    assert (snap.below, snap.above, snap.chosen) == (9100.0, 1e4, 9100.0)
    assert snap.error == pytest.approx(-400 / 9500, abs=ROUNDING)


def test_nearest_by_ratio_differs_from_nearest_by_difference_between_the_two_means() -> None:
    # 1.0 and 2.2: geometric mean 1.483, arithmetic 1.6; at 1.55 the ratio chooses 2.2, the difference 1.0.
    assert nearest(load_series("E3"), 1.55).chosen == 2.2


def test_value_on_the_border_goes_down_in_every_decade() -> None:
    # 1.2² = 1.44 · 1.0: 1.2 is the geometric mean of this invented series exactly.
    series = Series(name="invented", mantissas=(Decimal("1.00"), Decimal("1.44")))
    for border, lower in ((0.012, 0.01), (1.2, 1.0), (1.2e9, 1e9)):
        assert nearest(series, border).chosen == lower


def test_series_that_does_not_begin_at_one_snaps_below_its_first_mantissa() -> None:
    series = Series(name="invented", mantissas=(Decimal("2.0"), Decimal("5.0")))
    snap = nearest(series, 1.1)
    assert (snap.below, snap.above, snap.chosen) == (0.5, 2.0, 2.0)  # √(0.5 · 2) = 1.0


def test_neighbours_are_the_steps_of_the_series_across_decades() -> None:
    # E6 by hand: 1.0 1.5 2.2 3.3 4.7 6.8 (check values: every 4th of E24).
    assert neighbours(load_series("E6"), 1.1e3, steps=2) == (470.0, 680.0, 1000.0, 1500.0, 2200.0)
    assert neighbours(load_series("E6"), 1.1e3, steps=0) == (1000.0,)


@pytest.mark.parametrize("value", [0.0, -4700.0, inf, -inf, nan, 1e300, 5e-324])
def test_value_that_is_no_part_is_refused(value: float) -> None:
    with pytest.raises(UsageError, match="above 0 and finite"):
        nearest(load_series("E24"), value)
    with pytest.raises(UsageError, match="above 0 and finite"):
        neighbours(load_series("E24"), value, steps=1)


@pytest.mark.parametrize("steps", [-1, 101])
def test_steps_out_of_range_are_refused(steps: int) -> None:
    with pytest.raises(UsageError, match=f"steps must be from 0 to 100, not {steps}"):
        neighbours(load_series("E24"), 1e3, steps=steps)


@given(ALL_SERIES, DECIMAL_VALUES)
def test_snapping_is_idempotent(series: Series, value: Decimal) -> None:
    chosen = nearest(series, float(value)).chosen
    assert nearest(series, chosen).chosen == chosen
    assert nearest(series, chosen).error == 0.0


@given(ALL_SERIES, DECIMAL_VALUES)
def test_snapping_commutes_with_ten(series: Series, value: Decimal) -> None:
    here, there = nearest(series, float(value)), nearest(series, float(value * 10))
    for name in ("below", "above", "chosen"):
        assert float(Decimal(repr(getattr(here, name))) * 10) == getattr(there, name)


@given(ALL_SERIES, DECIMAL_VALUES)
def test_snapping_stays_within_half_a_step(series: Series, value: Decimal) -> None:
    snap = nearest(series, float(value))
    assert snap.below <= snap.value <= snap.above
    assert snap.chosen in (snap.below, snap.above)
    assert abs(log(snap.chosen / snap.value)) <= log(snap.above / snap.below) / 2 + ROUNDING
    assert abs(snap.error) <= worst_error(series) + ROUNDING


@given(ALL_SERIES, DECIMAL_VALUES, st.integers(0, 12))
def test_neighbours_ascend_around_the_chosen_value(series: Series, value: Decimal, steps: int) -> None:
    around = neighbours(series, float(value), steps=steps)
    assert len(around) == 2 * steps + 1
    assert list(around) == sorted(set(around))
    assert around[steps] == nearest(series, float(value)).chosen
    assert all(nearest(series, each).error == 0.0 for each in around)


# --- among values that end ---------------------------------------------------------------------------

LISTED = [1e3, 2.2e3, 4.7e3]


# By hand: √(1.0 · 2.2) = 1.483, √(2.2 · 4.7) = 3.216.
@pytest.mark.parametrize(
    ("value", "below", "above", "chosen"),
    [
        (1.48e3, 1e3, 2.2e3, 1e3),
        (1.49e3, 1e3, 2.2e3, 2.2e3),
        (3.21e3, 2.2e3, 4.7e3, 2.2e3),
        (3.3e3, 2.2e3, 4.7e3, 4.7e3),
        (2.2e3, 2.2e3, 2.2e3, 2.2e3),
        (1e3, 1e3, 1e3, 1e3),
        (4.7e3, 4.7e3, 4.7e3, 4.7e3),
        (1.0, nan, 1e3, 1e3),
        (999.9, nan, 1e3, 1e3),
        (4700.1, 4.7e3, nan, 4.7e3),
        (1e9, 4.7e3, nan, 4.7e3),
    ],
)
def test_nearest_of_a_list_is_by_ratio_and_the_list_ends(
    value: float, below: float, above: float, chosen: float
) -> None:
    snap = nearest_among(LISTED, value, name="stock")
    assert (snap.series, snap.value, snap.chosen) == ("stock", value, chosen)
    assert [snap.below, snap.above] == pytest.approx([below, above], rel=0.0, nan_ok=True)
    assert snap.error == pytest.approx(chosen / value - 1.0, abs=ROUNDING)


def test_lower_of_two_equally_near_of_a_list_is_taken() -> None:
    # 1.2 is the geometric mean of 1.0 and 1.44 exactly, as decimals; as doubles 1.44 is a little less.
    for border, lower, upper in ((0.012, 0.01, 0.0144), (1.2, 1.0, 1.44), (12e3, 10e3, 14.4e3)):
        assert nearest_among([lower, upper], border, name="stock").chosen == lower
        assert nearest_among([lower, upper], border * (1 + 1e-12), name="stock").chosen == upper


def test_list_without_values_is_refused() -> None:
    with pytest.raises(UsageError, match="drawer: there are no values to choose from"):
        nearest_among([], 1e3, name="drawer")


@pytest.mark.parametrize("value", [0.0, -4700.0, inf, nan, 1e300])
def test_value_that_is_no_part_is_refused_of_a_list_too(value: float) -> None:
    with pytest.raises(UsageError, match="above 0 and finite"):
        nearest_among(LISTED, value, name="stock")


@given(ALL_SERIES, DECIMAL_VALUES)
def test_list_of_a_series_snaps_as_the_series_does(series: Series, value: Decimal) -> None:
    around = neighbours(series, float(value), steps=2)
    assert nearest_among(around, float(value), name=series.name) == nearest(series, float(value))


@given(st.lists(st.floats(1e-3, 1e9), min_size=1, unique=True), st.floats(1e-4, 1e10))
def test_no_value_of_a_list_is_nearer_than_the_nearest(values: list[float], value: float) -> None:
    chosen = nearest_among(sorted(values), value, name="stock").chosen
    assert chosen in values
    assert abs(log(chosen / value)) <= min(abs(log(each / value)) for each in values) + ROUNDING
