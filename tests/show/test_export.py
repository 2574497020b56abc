"""JSON holds the review in full precision, under the keys that formats.md promises."""

import json
import math
from dataclasses import replace

import pytest

from biasband.show.export import (
    as_text,
    corners_json,
    design_json,
    review_json,
    snap_json,
    summary_json,
)
from biasband.show.summary import Attempt
from biasband.signoff.snapping import snap_texts
from tests.show.reviews import BOARDS, EVERY, FAILING, HIVE, SPLIT, reviewed

NAN = float("nan")

# formats.md, "JSON of `review --json`", and what issue 2 adds to it.
TOP = {
    "stage", "files", "biasband", "seed", "boards", "boards_per_batch", "parts", "capacitors", "choice",
    "nominal", "corners", "rss", "spread", "causes", "margins", "checks", "beyond", "outside", "warnings",
    "verdict", "because",
}  # fmt: skip
PART = {
    "hand", "ideal", "value", "chosen", "kept", "series", "tolerance", "tempco", "code", "markings", "stock",
    "pairs", "power_worst", "power_rating",
}  # fmt: skip
MARGIN = {
    "id", "quantity", "limit", "side", "judged_by", "nominal", "corners", "rss", "yield", "yield_low",
    "margin", "margin_share", "verdict", "worst_at", "main_cause", "standing",
}  # fmt: skip
CONTRIBUTORS = {
    "gain", "base_emitter_voltage", "leakage", "supply", "ripple", "negative_supply", "temperature",
}  # fmt: skip


def data(review):
    """What a program reads: the JSON text, parsed, with NaN and Infinity refused."""
    return json.loads(as_text(review_json(review)), parse_constant=pytest.fail)


@pytest.mark.parametrize("name", EVERY)
def test_keys_are_those_of_the_formats(name):
    review = reviewed(name)
    found, words = data(review), set(review.quantities)
    assert set(found) == TOP
    assert set(found["stage"]) == {"title", "document", "revision", "topology", "polarity"}
    assert all(set(file) == {"path", "sha256"} for file in found["files"])
    assert all(set(part) == PART for part in found["parts"].values())
    assert all(set(margin) == MARGIN for margin in found["margins"])
    assert set(found["nominal"]) == words | {"region"}
    looked_into = set(review.looked_into)
    assert set(found["spread"]) == looked_into | {"regions"}
    for section in ("corners", "rss", "causes"):
        assert set(found[section]) == looked_into  # no "check …" measure of our own
    assert set(found["checks"]) == {"made", "not_made"}


@pytest.mark.parametrize("name", [HIVE, SPLIT])
def test_extremes_are_told_with_every_contributor(name):
    review = reviewed(name)
    resistors = {resistor.name for resistor in review.stage.resistors}
    for quantity, found in data(review)["corners"].items():
        assert set(found) == {"low", "high", "low_at", "high_at", "extreme_at"}
        absent = {"negative_supply"} if review.stage.negative_supply is None else set()
        assert set(found["low_at"]) == set(found["high_at"]) == (resistors | CONTRIBUTORS) - absent
        assert found["extreme_at"] == (
            "interior" if review.evidence.corners.ranges[quantity].interior else "corner"
        )


@pytest.mark.parametrize("name", EVERY)
def test_figures_are_the_reviews_own_to_the_bit(name):
    review = reviewed(name)
    found = data(review)
    for quantity, value in review.nominal.values.items():
        assert found["nominal"][quantity] == value
    for quantity, range_ in ((name, review.evidence.corners.ranges[name]) for name in review.looked_into):
        assert (found["corners"][quantity]["low"], found["corners"][quantity]["high"]) == (
            range_.low.value, range_.high.value,
        )  # fmt: skip
    for margin, row in zip(found["margins"], review.rows, strict=True):
        assert (margin["limit"], margin["margin"], margin["margin_share"]) == (
            row.limit,
            row.margin,
            row.margin_share,
        )
        assert margin["worst_at"] == dict(row.worst.at)
        assert (margin["id"] is None) is margin["standing"] is row.standing
    for part in review.design.parts:
        assert found["parts"][part.name]["value"] == part.value
        power = review.evidence.corners.ranges[f"resistor_power.{part.name}"].high.value
        assert found["parts"][part.name]["power_worst"] == power


def test_spread_has_the_promised_figures():
    review = reviewed(HIVE)
    found = data(review)["spread"]
    for name in review.looked_into:
        for place in ("nominal_use", "lowest_in_use", "highest_in_use"):
            sample = getattr(review.spread[name], place)
            assert found[name][place] == {
                "mean": sample.mean, "sd": sample.sd, "p0.135": sample.quantile(0.00135),
                "p50": sample.quantile(0.5), "p99.865": sample.quantile(0.99865),
            }  # fmt: skip
    assert found["regions"] == {"active": BOARDS * review.evidence.boards.points}


def test_what_is_not_known_is_null():
    review = reviewed(HIVE)
    row = replace(review.rows[0], rss=NAN, margin=NAN, corners=math.inf, margin_share=None)
    nominal = replace(review.nominal, values={**review.nominal.values, "voltage_gain": NAN})
    found = data(replace(review, rows=(row,), nominal=nominal))
    assert found["nominal"]["voltage_gain"] is None
    assert [found["margins"][0][key] for key in ("rss", "margin", "corners", "margin_share")] == [None] * 4


def test_standing_check_has_neither_rss_nor_yield():
    checks = [margin for margin in data(reviewed(FAILING))["margins"] if margin["standing"]]
    assert checks
    assert all(check[key] is None for check in checks for key in ("id", "rss", "yield", "yield_low"))


def test_given_part_has_neither_hand_nor_ideal_value():
    for part in data(reviewed("organ_vibrato_repair"))["parts"].values():
        assert (part["hand"], part["ideal"], part["chosen"], part["series"]) == (None, None, False, None)


def test_checks_that_were_not_made_name_what_is_missing():
    review = reviewed(FAILING)
    found = data(review)["checks"]
    assert found["made"] == [check.name for check in review.standing.made]
    assert found["not_made"] == [
        {"check": each.check, "missing": each.missing} for each in review.standing.not_made
    ]


def test_analyses_use_the_keys_of_the_review():
    review = reviewed(HIVE)
    whole, evidence = data(review), review.evidence
    design = design_json(review.design)
    corners = corners_json(review.design, evidence.corners, review.looked_into)
    assert corners["corners"] == whole["corners"]
    for found in (design, corners):
        assert found["stage"] == whole["stage"] and found["files"] == whole["files"]
        for name, part in found["parts"].items():
            assert part == {**whole["parts"][name], "power_worst": None}


def test_snap_is_told_in_ohms():
    # IEC 60063, E24: 4.7 and 5.1 enclose 4.8; 4.7/4.8 - 1 = -2.0833 %.
    (found,) = snap_json(snap_texts(["4k8"]))
    error = found["error"]
    told = ("asked", "series", "value", "below", "above", "chosen", "code")
    assert [found[key] for key in told] == ["4k8", "E24", 4800.0, 4700.0, 5100.0, 4700.0, "4K7"]
    assert error == pytest.approx(-0.0208333333, rel=1e-8)  # as many digits as are written here


def test_several_stages_are_a_list_with_problems_in_place():
    attempts = [
        Attempt("a.toml", reviewed(HIVE)),
        Attempt("b.toml", None, "badly written:\n  b.toml: no such file"),
    ]
    good, bad = json.loads(as_text(summary_json(attempts)))
    assert good == data(reviewed(HIVE))
    assert bad["files"] == [{"path": "b.toml", "sha256": None}]
    assert bad["error"] == ["badly written:", "  b.toml: no such file"]


def test_text_is_ascii_whatever_the_title():
    review = reviewed(HIVE)
    text = as_text(review_json(replace(review, stage=replace(review.stage, title='蜂 "\x1b'))))
    assert text.isascii() and text.endswith("}\n")
    assert json.loads(text)["stage"]["title"] == '蜂 "\x1b'
