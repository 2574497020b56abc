"""Shares of variance of stages whose quantities are known functions of what differs from board to board."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace

import numpy as np
import pytest
from variation.stages import ROOM, coupled, ideal, limits, real, running_away, some, stage, with_resistors

from biasband.boards.draws import coordinates
from biasband.boards.in_use import PLACES, in_use
from biasband.boards.pick_freeze import Share
from biasband.boards.variance import BOARDS, VarianceCauses, variance_causes
from biasband.errors import UsageError
from biasband.stage import Distribution, Stage, Supply
from biasband.variation.evaluation import cut_off_current
from biasband.variation.points_of_use import points_of_use

ERRORS = 5.0
"""Standard errors allowed. They come from 16 scramblings: |t| of 15 degrees exceeds 5 once in 6000 times."""

FIRST_ORDER = 1e-3
"""Where the expected shares leave second orders of a 1 % tolerance out."""


def found_in(of: Stage, quantity: str, *, boards: int = BOARDS, seed: int = 1) -> VarianceCauses:
    """The shares of one quantity's variance."""
    measures, points = some(of, quantity), points_of_use(of)
    found = variance_causes(of, measures, points, seed=seed, cut_off=cut_off_current(of), boards=boards)
    return found[quantity]


def assert_shares(found: Mapping[str, Share], expected: Mapping[str, float], *, room: float = 1e-9) -> None:
    """Every share within its standard errors, and none so wide that this says nothing."""
    assert set(found) == set(expected)
    for name, share in expected.items():
        assert abs(found[name].value - share) <= ERRORS * found[name].standard_error + room
        assert found[name].standard_error < 0.015


GAIN, TOLERANCE, HALF_VOLT = (90.0, 100.0, 1000.0 / 9.0), 0.05, 0.2


def amplifier(**more) -> Stage:
    """An ideal stage: 12 V, RB alone, so that V_C = V_CC − h_FE·RC·(V_CC − V_BE)/RB."""
    transistor = ideal(limits(*GAIN), limits(0.7 - HALF_VOLT, 0.7, 0.7 + HALF_VOLT))
    values = {"RB": 240e3, "RC": 1e3}
    return stage("base-resistor", values, transistor, 12.0, resistor={"tolerance": TOLERANCE}, **more)


def relative_variances() -> dict[str, float]:
    """The squared coefficient of variation of each factor of h_FE·RC·(V_CC − V_BE)·(1/RB), by integration.

    Uniform in its logarithm, h_FE has E[g] = sinh(L)/L and E[g²] = sinh(2L)/2L.
    """
    ratio = math.log(GAIN[2] / GAIN[1])
    gain = (math.sinh(2.0 * ratio) / (2.0 * ratio)) / (math.sinh(ratio) / ratio) ** 2 - 1.0
    inverse = (1.0 / (1.0 - TOLERANCE**2)) / (math.atanh(TOLERANCE) / TOLERANCE) ** 2 - 1.0
    volt = HALF_VOLT**2 / 3.0 / 11.3**2
    return {"gain": gain, "RB": inverse, "RC": TOLERANCE**2 / 3.0, "base_emitter_voltage": volt}


def test_product_has_the_indices_of_a_product_of_independent_factors():
    # Y/E[Y] = Π f_i: V = Π(1 + v_i) − 1, first v_i/V, total v_i·Π_{j≠i}(1 + v_j)/V.
    of, parts = amplifier(), relative_variances()
    whole = math.prod(1.0 + part for part in parts.values()) - 1.0
    found = found_in(of, "collector_voltage").nominal_use
    assert_shares(found.first, {name: part / whole for name, part in parts.items()})
    total = {name: part / whole * (1.0 + whole) / (1.0 + part) for name, part in parts.items()}
    assert_shares(found.total, total)
    middle = {name: (part / whole + total[name]) / 2.0 for name, part in parts.items()}
    # Half of what two do together goes to each; what three do is 1e-5 of the whole.
    assert_shares(found.shapley, middle, room=1e-5)
    # The drop at the mean: E[h_FE]·RC·11.3 V·E[1/RB], squared, times V.
    ratio = math.log(GAIN[2] / GAIN[1])
    drop = 100.0 * math.sinh(ratio) / ratio * 1e3 * 11.3 / 240e3 * math.atanh(TOLERANCE) / TOLERANCE
    # 8192 quasi-random draws of a smooth function: measured within 0.2 %.
    assert found.variance == pytest.approx(drop**2 * whole, rel=0.01)


def test_gain_dominates_a_stage_without_feedback():
    of = replace(amplifier(), transistor=ideal(limits(50.0, 100.0, 200.0)))
    found = found_in(of, "collector_current").nominal_use
    # Uniform in ln h_FE, ±0.693, against two of ±0.05: all but 1 %.
    for kind in (found.first, found.total, found.shapley):
        assert next(iter(kind)) == "gain"
        assert kind["gain"].value > 0.98
        assert [share.value for share in kind.values()] == sorted(
            (share.value for share in kind.values()), reverse=True
        )


def reel(within: float) -> Stage:
    """RB and RC of 1 %, from one batch, each within so much of its mean."""
    batch = Distribution(name="batch", within_batch=within)
    return stage(
        "base-resistor", {"RB": 240e3, "RC": 1e3}, ideal(100.0), 12.0, boards_per_batch=10,
        resistor={"tolerance": 0.01, "distribution": batch, "group": "reel"},
    )  # fmt: skip


def totals_and_shared(own: float, common: float) -> tuple[np.ndarray, np.ndarray]:
    """X = own·x + common·c on a grid of x and c, both uniform in ±1, and E[c|X].

    Given X, c is uniform in [max(−1, (X − own)/common), min(1, (X + own)/common)].
    """
    middles = np.linspace(-1.0, 1.0, 2000, endpoint=False) + 1.0 / 2000.0
    x, c = np.meshgrid(middles, middles)
    total = own * x + common * c
    return total, 0.5 * (np.maximum(-1.0, (total - own) / common) + np.minimum(1.0, (total + own) / common))


@pytest.mark.parametrize("within", [0.001, 0.004, 0.009])
def test_two_resistors_of_a_batch_share_what_their_ratio_does(within):
    # ln(drop) = X_RC − X_RB + constants, X_i from one batch mean and an own part each.
    found = found_in(reel(within), "collector_voltage").nominal_use
    # E[X_RC − X_RB|X_RC] = X_RC − common·E[c|X_RC], of a variance of two own parts.
    common = 0.01 - within
    total, shared = totals_and_shared(within, common)
    first = float(np.mean((total - common * shared) ** 2) / (2.0 * within**2 / 3.0))
    assert_shares(found.shapley, {"RB": 0.5, "RC": 0.5}, room=FIRST_ORDER)
    assert_shares(found.first, {"RB": first, "RC": first}, room=FIRST_ORDER)
    # Of two, the total share of one is what the other leaves. The less is their own, the less one says alone.
    assert_shares(found.total, {"RB": 1.0 - first, "RC": 1.0 - first}, room=FIRST_ORDER)
    assert found.interaction["RB"] == pytest.approx(1.0 - 2.0 * first, abs=0.05)


def test_resistor_without_effect_has_a_share_of_what_it_tells_of_another():
    # RB's current alone: I_B = (V_CC − V_BE)/RB. RC does nothing to it, but is of RB's batch.
    found = found_in(reel(0.002), "base_current").nominal_use
    # What RC tells of RB is what it tells of their batch: V(E[X_RB|X_RC]) = common²·V(E[c|X_RC]).
    _, shared = totals_and_shared(0.2, 0.8)
    told = float(0.64 * np.mean(shared**2) / ((0.64 + 0.04) / 3.0))
    assert_shares(found.first, {"RB": 1.0, "RC": told}, room=FIRST_ORDER)
    assert_shares(found.total, {"RB": 1.0 - told, "RC": 0.0}, room=FIRST_ORDER)
    assert_shares(found.shapley, {"RB": 1.0 - told / 2.0, "RC": told / 2.0}, room=FIRST_ORDER)


def test_shared_tempco_makes_members_correlated_hot_and_cold_only():
    of = stage(
        "base-resistor", {"RB": 240e3, "RC": 1e3}, ideal(100.0), 12.0, ambient=limits(263.15, ROOM, 323.15),
        resistor={"tolerance": 0.001, "tempco": 4e-4, "group": "array", "tracking": 4e-5},
    )  # fmt: skip
    found = found_in(of, "collector_voltage")
    # At 25 °C tolerances alone: independent and alike.
    assert_shares(found.nominal_use.first, {"RB": 0.5, "RC": 0.5}, room=FIRST_ORDER)
    assert_shares(found.lowest_in_use.shapley, {"RB": 0.5, "RC": 0.5}, room=FIRST_ORDER)
    for name in ("RB", "RC"):
        # One of them alone seems to be off by the common tempco, and says little of their ratio.
        assert found.lowest_in_use.first[name].value < 0.45


def test_what_every_board_meets_in_use_has_no_share():
    of = coupled()
    found = found_in(of, "collector_voltage")
    for place in PLACES:
        shares = getattr(found, place)
        names = {"R1", "R2", "RC", "RE", "gain", "base_emitter_voltage", "leakage"}
        assert set(shares.first) == set(shares.total) == set(shares.shapley) == names
        assert sum(share.value for share in shares.shapley.values()) == pytest.approx(1.0, abs=1e-12)


def test_supply_by_board_has_a_share():
    supply = Supply(voltage=limits(11.4, 12.0, 12.6), varies="by board")
    of = with_resistors(replace(amplifier(), supply=supply), tolerance=0.0)
    found = found_in(of, "base_current").nominal_use
    # I_B = (V_CC − V_BE)/RB: ±0.6 V against ±0.2 V, both uniform.
    expected = {"supply": 0.9, "base_emitter_voltage": 0.1, "gain": 0.0}
    for kind in (found.first, found.total, found.shapley):
        assert_shares(kind, expected)


def test_variance_is_that_of_plain_draws():
    of = coupled()
    found = found_in(of, "collector_current")
    drawn = coordinates(of, slice(0, 20000), seed=9)
    plain = in_use(of, drawn, some(of, "collector_current"), points_of_use(of), cut_off=0.0)
    # A variance of 20000 draws strays by about 0.8 %, of 8192 quasi-random ones by less; four of them.
    for place, row in zip(PLACES, plain.values["collector_current"], strict=True):
        assert getattr(found, place).variance == pytest.approx(float(np.var(row)), rel=0.04)


def test_quantity_that_is_the_same_on_every_board_has_no_shares():
    found = found_in(amplifier(), "emitter_voltage").nominal_use
    assert (found.variance, found.first, found.total, found.shapley) == (0.0, {}, {}, {})


def test_stage_in_which_nothing_differs_has_no_shares():
    of = with_resistors(replace(amplifier(), transistor=ideal(100.0)), tolerance=0.0)
    found = found_in(of, "collector_voltage").nominal_use
    assert (found.variance, found.first, found.total, found.shapley) == (0.0, {}, {}, {})


def test_boards_that_run_away_are_left_out_and_counted():
    of = replace(running_away(), transistor=real(leakage=0.2e-6, thermal_resistance=500.0))
    found = found_in(of, "collector_current").nominal_use
    assert 0 < found.unsolved < found.boards
    assert sum(share.value for share in found.shapley.values()) == pytest.approx(1.0, abs=1e-12)


def test_boards_are_rounded_up_to_a_power_of_two_in_each_scrambling():
    # 3K + 1 evaluations of 16·2^m, K = 4.
    assert found_in(amplifier(), "collector_voltage", boards=1000).nominal_use.boards == 13 * 1024
    assert found_in(amplifier(), "collector_voltage", boards=1025).nominal_use.boards == 13 * 2048
    assert found_in(amplifier(), "collector_voltage", boards=1).nominal_use.boards == 13 * 32


def test_no_boards_are_refused():
    with pytest.raises(UsageError, match="boards: from 1; read 0"):
        found_in(amplifier(), "collector_voltage", boards=0)


def test_same_seed_gives_the_same_and_another_does_not():
    of, seeds = coupled(), (1, 1, 2)
    one, again, other = (found_in(of, "collector_voltage", boards=256, seed=seed) for seed in seeds)
    assert one == again
    # The boards themselves are others, not the orders of arrival alone.
    assert one.nominal_use.variance != other.nominal_use.variance


def test_quantities_together_have_the_shares_of_each_alone():
    of, names = coupled(), ("collector_voltage", "base_voltage", "collector_current")
    points, cut_off = points_of_use(of), cut_off_current(of)
    together = variance_causes(of, some(of, *names), points, seed=1, cut_off=cut_off, boards=256)
    assert list(together) == list(names)
    for name in names:
        assert together[name] == found_in(of, name, boards=256)
