"""Pick and freeze against functions whose indices are known, and against scipy's and SALib's."""

from __future__ import annotations

import math
from collections.abc import Callable
from itertools import combinations

import numpy as np
import pytest

from biasband.boards import pick_freeze
from biasband.boards.pick_freeze import Board, Frozen, VarianceShares, divide, independent
from biasband.errors import UsageError

PARTS = 16

ERRORS = 5.0
"""Standard errors allowed. They come from 16 parts, so |t| of 15 degrees exceeds 5 once in 6000 times."""

ROUNDING = 1e-9
"""Of sums of thousands of terms, with plenty of room."""


def numbers(names: tuple[str, ...], *, seed: int = 1, power: int = 8) -> tuple[Board, Board]:
    """Two independent sets of uniform numbers, in 16 scramblings of 2^power Sobol' points."""
    from scipy.stats import qmc

    rngs = np.random.default_rng(seed).spawn(PARTS)
    points = [qmc.Sobol(2 * len(names), seed=rng).random_base2(power) for rng in rngs]
    columns = np.concatenate(points).T
    first, second = np.split(columns, 2)
    return dict(zip(names, first, strict=True)), dict(zip(names, second, strict=True))


def divided(function: Callable[..., np.ndarray], count: int, **more: int) -> VarianceShares:
    """Divide the variance of a function of `count` uniform numbers, x0, x1, …, one for each contributor."""
    names = tuple(f"x{i}" for i in range(count))
    pair = numbers(names, **more)
    owners = {name: name for name in names}
    (found,) = divide(
        lambda board: function(*(board[name] for name in names))[None],
        independent(owners), names, pair, parts=PARTS, seed=more.get("seed", 1),
    )  # fmt: skip
    return found


def assert_shares(found: dict, expected: list[float]) -> None:
    """Every share within its standard errors, and none so wide that this says nothing."""
    assert set(found) == {f"x{i}" for i in range(len(expected))}
    for i, share in enumerate(expected):  # what is exact has a standard error of rounding
        estimate = found[f"x{i}"]
        assert abs(estimate.value - share) <= ERRORS * estimate.standard_error + ROUNDING
        assert estimate.standard_error < 0.02


def ishigami(x0: np.ndarray, x1: np.ndarray, x2: np.ndarray) -> np.ndarray:
    """The function of Ishigami & Homma (1990) with a = 7, b = 0.1, its arguments between ±π."""
    a, b, c = (math.pi * (2.0 * x - 1.0) for x in (x0, x1, x2))
    return np.sin(a) + 7.0 * np.sin(b) ** 2 + 0.1 * c**4 * np.sin(a)


ISHIGAMI = {
    "first": 0.5 * (1.0 + 0.1 * math.pi**4 / 5.0) ** 2,
    "second": 49.0 / 8.0,
    "first and third": 0.01 * math.pi**8 * 8.0 / 225.0,
}
"""The parts of its variance (Saltelli et al., "Global sensitivity analysis", 2008, memory)."""


def test_ishigami_has_its_closed_form_indices():
    one, two, both = ISHIGAMI.values()
    whole = one + two + both
    found = divided(ishigami, 3)
    # 2.4 % is three times the relative error of a variance of 4096 draws, most of which are quasi-random.
    assert found.variance == pytest.approx(whole, rel=0.024)
    assert_shares(found.first, [one / whole, two / whole, 0.0])
    assert_shares(found.total, [(one + both) / whole, two / whole, both / whole])
    # What two contributors do together goes half to each.
    assert_shares(found.shapley, [(one + both / 2) / whole, two / whole, both / 2 / whole])
    assert list(found.total) == ["x0", "x1", "x2"]  # largest first: 0.56, 0.44, 0.24
    assert found.interaction["x2"] == found.total["x2"].value - found.first["x2"].value


def test_g_function_has_its_closed_form_indices():
    # Sobol' (1993, memory): Π (|4x − 2| + a)/(1 + a), with V_i = 1/(3(1 + a_i)²) and V = Π(1 + V_i) − 1.
    weights = (0.0, 1.0, 4.5, 9.0)
    parts = [1.0 / (3.0 * (1.0 + a) ** 2) for a in weights]
    whole = math.prod(1.0 + part for part in parts) - 1.0

    def function(*x: np.ndarray) -> np.ndarray:
        factors = [(np.abs(4.0 * u - 2.0) + a) / (1.0 + a) for u, a in zip(x, weights, strict=True)]
        return np.prod(factors, axis=0)

    found = divided(function, 4)
    others = [math.prod(1.0 + part for part in parts if part is not own) for own in parts]
    sets = [each for size in range(1, 5) for each in combinations(range(4), size)]
    together = {each: math.prod(parts[i] for i in each) / whole for each in sets}
    assert_shares(found.first, [part / whole for part in parts])
    assert_shares(found.total, [part * rest / whole for part, rest in zip(parts, others, strict=True)])
    fair = [sum(share / len(each) for each, share in together.items() if i in each) for i in range(4)]
    assert_shares(found.shapley, fair)


def test_linear_function_has_three_times_the_same_shares():
    found = divided(lambda x0, x1, x2: 3.0 * x0 - 2.0 * x1 + x2, 3)
    for kind in (found.first, found.total, found.shapley):
        assert_shares(kind, [9.0 / 14.0, 4.0 / 14.0, 1.0 / 14.0])


def test_product_of_two_is_all_interaction():
    found = divided(lambda x0, x1: (x0 - 0.5) * (x1 - 0.5), 2)
    assert_shares(found.first, [0.0, 0.0])
    assert_shares(found.total, [1.0, 1.0])
    assert_shares(found.shapley, [0.5, 0.5])


def test_shapley_shares_add_up_to_one():
    # Each part's arrivals are one walk from the second board to the first: exact but for rounding.
    shapley = divided(ishigami, 3).shapley
    assert sum(share.value for share in shapley.values()) == pytest.approx(1.0, abs=1e-12)


def test_agrees_with_scipy():
    from scipy.stats import sobol_indices, uniform

    theirs = sobol_indices(
        func=lambda x: ishigami(*x), n=4096, dists=[uniform()] * 3, rng=np.random.default_rng(1)
    )  # fmt: skip
    found = divided(ishigami, 3)
    for i in range(3):
        # scipy's own error with 4096 quasi-random points is about 0.01 (it moves so far from seed to seed).
        assert found.first[f"x{i}"].value == pytest.approx(theirs.first_order[i], abs=0.03)
        assert found.total[f"x{i}"].value == pytest.approx(theirs.total_order[i], abs=0.03)


def test_agrees_with_salib():
    pytest.importorskip("SALib")
    from SALib.analyze import sobol as analysis
    from SALib.sample import sobol as sampling

    problem = {"num_vars": 3, "names": ["x0", "x1", "x2"], "bounds": [[0.0, 1.0]] * 3}
    points = sampling.sample(problem, 4096, calc_second_order=False, seed=1)
    theirs = analysis.analyze(problem, ishigami(*points.T), calc_second_order=False, seed=1)
    found = divided(ishigami, 3)
    for i in range(3):
        # Their 95 % interval is ±1.96 standard errors; five of theirs and of ours.
        for kind, name in (("S1", "first"), ("ST", "total")):
            estimate = getattr(found, name)[f"x{i}"]
            room = ERRORS * math.hypot(theirs[f"{kind}_conf"][i] / 1.96, estimate.standard_error)
            assert abs(estimate.value - theirs[kind][i]) <= room


def test_standard_errors_are_those_that_seeds_show():
    one, two, both = ISHIGAMI.values()
    whole = one + two + both
    expected = {"first": one / whole, "total": (one + both) / whole, "shapley": (one + both / 2) / whole}
    off = {kind: [] for kind in expected}
    for seed in range(30):
        found = divided(ishigami, 3, seed=seed, power=5)
        for kind, share in expected.items():
            estimate = getattr(found, kind)["x0"]
            off[kind].append((estimate.value - share) / estimate.standard_error)
    for scores in off.values():
        # The root mean square of 30 t-scores of 15 degrees is 1.07 ± 0.15; four of those.
        assert 0.5 < math.sqrt(np.mean(np.square(scores))) < 1.7


def test_contributor_may_own_several_figures():
    pair = numbers(("a", "b", "c"))
    (found,) = divide(
        lambda board: (board["a"] + board["b"] + 2.0 * board["c"])[None],
        independent({"a": "x0", "b": "x0", "c": "x1"}), ("x0", "x1"), pair, parts=PARTS, seed=1,
    )  # fmt: skip
    assert_shares(found.shapley, [2.0 / 6.0, 4.0 / 6.0])


@pytest.mark.parametrize("correlation", [0.0, 0.8, -0.5])
def test_correlated_normals_have_their_closed_form_shares(correlation):
    # Owen & Prieur (2017, theorem 2, memory), Y = 2·X1 + X2: c({1}) = (2 + ρ)², c({2}) = (1 + 2ρ)².
    rng, count = np.random.default_rng(1), 1024 * PARTS
    rest = math.sqrt(1.0 - correlation**2)

    def boards() -> Board:
        first, second = rng.standard_normal((2, count))
        return {"x0": first, "x1": correlation * first + rest * second}

    def redraw(frozen: Frozen, board: Board, other: Board) -> Board:
        one, two = frozen["x0"], frozen["x1"]
        own = {"x0": other["x0"] - correlation * other["x1"], "x1": other["x1"] - correlation * other["x0"]}
        x0 = np.where(one, board["x0"], np.where(two, correlation * board["x1"] + own["x0"], other["x0"]))
        x1 = np.where(two, board["x1"], np.where(one, correlation * board["x0"] + own["x1"], other["x1"]))
        return {"x0": x0, "x1": x1}

    (found,) = divide(
        lambda board: (2.0 * board["x0"] + board["x1"])[None],
        redraw, ("x0", "x1"), (boards(), boards()), parts=PARTS, seed=1,
    )  # fmt: skip
    whole = 5.0 + 4.0 * correlation
    alone = [(2.0 + correlation) ** 2 / whole, (1.0 + 2.0 * correlation) ** 2 / whole]
    assert_shares(found.first, alone)
    assert_shares(found.total, [1.0 - alone[1], 1.0 - alone[0]])
    assert_shares(found.shapley, [(1.0 + alone[0] - alone[1]) / 2, (1.0 + alone[1] - alone[0]) / 2])


def test_unsolved_boards_are_left_out_and_counted():
    # Y = X1 + X2 that solves for X1 > 0.2 only: there X1 is uniform in 0.8 and X2 in 1.
    found = divided(lambda x0, x1: np.where(x0 < 0.2, np.nan, x0 + x1), 2)
    for kind in (found.first, found.total, found.shapley):
        assert_shares(kind, [0.64 / 1.64, 1.0 / 1.64])
    # Three sigma of a share of 28672 boards would be 0.007, were they random and independent.
    assert found.unsolved / found.boards == pytest.approx(0.2, abs=0.007)
    assert found.boards == 4096 * (3 * 2 + 1)
    assert sum(share.value for share in found.shapley.values()) == pytest.approx(1.0, abs=1e-12)


def test_infinite_output_counts_as_unsolved():
    found = divided(lambda x0: np.where(x0 < 0.5, np.inf, x0), 1)
    assert found.unsolved > 0
    assert_shares(found.total, [1.0])


@pytest.mark.parametrize(
    "function", [lambda x0: np.full_like(x0, 5.0), lambda x0: 5.0 + 1e-13 * x0], ids=["none", "rounding"]
)  # fmt: skip
def test_output_without_variance_has_no_shares(function):
    found = divided(function, 1)
    assert found.variance < 1e-25
    assert found.first == found.total == found.shapley == found.interaction == {}


def test_output_that_never_solves_has_no_shares():
    found = divided(lambda x0: np.full_like(x0, np.nan), 1)
    assert math.isnan(found.variance)
    assert found.first == found.total == found.shapley == {}
    assert found.unsolved == found.boards


def test_outputs_do_not_see_one_another():
    pair, names = numbers(("x0", "x1")), ("x0", "x1")
    redraw = independent({name: name for name in names})
    outputs = [
        lambda b: b["x0"] + b["x1"],
        lambda b: np.full_like(b["x0"], np.nan),
        lambda b: b["x0"] * b["x1"],
    ]
    together = divide(lambda b: np.stack([f(b) for f in outputs]), redraw, names, pair, parts=PARTS, seed=1)
    for row in (0, 2):
        (alone,) = divide(lambda b, f=outputs[row]: f(b)[None], redraw, names, pair, parts=PARTS, seed=1)
        assert together[row] == alone
    assert together[1].first == {}


def test_chunks_do_not_change_the_result(monkeypatch):
    whole = divided(ishigami, 3)
    monkeypatch.setattr(pick_freeze, "_CHUNK", 600)
    assert divided(ishigami, 3) == whole


@pytest.mark.parametrize("parts", [1, 3, 4096])
def test_parts_that_boards_do_not_fill_are_refused(parts):
    pair = numbers(("x0",))
    with pytest.raises(UsageError, match=f"parts: 2 or more, in halves of 4096 boards; read {parts}"):
        divide(lambda b: b["x0"][None], independent({"x0": "x0"}), ("x0",), pair, parts=parts, seed=1)
