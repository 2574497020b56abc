"""The report of a drift: what a reader finds, at 80 and 120 columns, in any encoding."""

from __future__ import annotations

import math
import re
from dataclasses import replace
from functools import cache

import pytest
from rich.cells import cell_len

from biasband.circuit.operating_point import Region
from biasband.margins.over_temperature import Failure
from biasband.show.cautions import CAUTIONS
from biasband.show.drift_tables import drift_table, failure_table, first_to_fail, swept
from biasband.show.export import as_text, drift_json
from biasband.show.layout import lines_of
from biasband.show.report import drift_report
from biasband.show.spelling import Spelling
from biasband.show.stability_table import stability_table
from biasband.signoff.drifting import DriftStudy, drift
from biasband.stage import Requirement
from tests.variation.stages import ROOM, coupled, limits, running_away

WANTED = (
    Requirement(id="R-1", quantity="collector_voltage", at_least=4.0, at_most=12.0),
    Requirement(id="R-2", quantity="voltage_gain", at_least=50.0),
)


@cache
def study() -> DriftStudy:
    """A bypassed divider whose collector voltage falls to 4 V as it warms, and whose gain holds."""
    of = replace(coupled(), requirements=WANTED, ambient=limits(233.15, ROOM, 358.15))
    return drift(of, points=6)


@cache
def runaway() -> DriftStudy:
    """A stage that some corners drive into runaway."""
    return drift(running_away(limits(273.15, ROOM, 358.15)), points=4)


def shown(of: DriftStudy, width: int = 80, encoding: str = "utf-8") -> list[str]:
    """The report as lines."""
    report = drift_report(of)
    return [line.plain for line in lines_of(report, width=width, spelling=Spelling(encoding))]


@pytest.mark.parametrize("width", [20, 40, 60, 80, 120])
@pytest.mark.parametrize("encoding", ["utf-8", "ascii"])
def test_report_keeps_the_width_and_the_encoding(width: int, encoding: str) -> None:
    for of in (study(), runaway()):
        lines = shown(of, width, encoding)
        assert all(cell_len(line) <= width for line in lines)
        assert encoding == "utf-8" or ("".join(lines).isascii() and "?" not in "".join(lines))


@pytest.mark.parametrize("width", [80, 120])
def test_every_temperature_has_its_figures_and_its_strip_on_one_line(width: int) -> None:
    lines = shown(study(), width)
    start = next(k for k, line in enumerate(lines) if line.startswith("collector_voltage: "))
    table = lines[start:]
    rows = [line for line in table if re.match(r" *-?[0-9.]+ °C +[0-9.]+ V", line)][:7]
    assert len(rows) == study().temperatures.size == 7
    for row, low, middle, high in zip(
        rows,
        *(getattr(study().drifts["collector_voltage"], n) for n in ("low", "nominal", "high")),
        strict=True,
    ):
        figures = [float(text) for text in re.findall(r"([0-9.]+) V", row)]
        assert figures == pytest.approx([low, middle, high], abs=6e-4)  # four figures of volts
        assert row.count("●") == 1 and cell_len(row) <= width
    assert max(map(cell_len, rows)) > width - 15  # the picture takes the room there is


def test_reader_finds_everything_in_order() -> None:
    text = "\n".join(shown(study()))
    order = [
        "values: 4 frozen", "Swept", "ambient -40 °C to 85 °C in steps of 25.0 K; nominal ambient 25 °C",
        "searched inside", "pictures: ", "collector_voltage: ", "voltage_gain: ", "symmetric_peak_swing: ",
        "Where the worst case first fails, from 25 °C outwards", "Stability of the collector current",
        "First to fail", "Cautions",
    ]  # fmt: skip
    positions = [text.index(part) for part in order]
    assert positions == sorted(positions)
    assert all(caution in " ".join(text.split()) for caution in CAUTIONS)


def test_title_states_slopes_in_volts_and_in_percent_per_kelvin() -> None:
    found = study().drifts["collector_voltage"]
    title = drift_table(study(), "collector_voltage").title
    figures = [float(text) for text in re.findall(r"(-?[0-9.]+) mV/K", title)]
    shares = [float(text) for text in re.findall(r"([-+][0-9.]+) %/K", title)]
    assert figures == pytest.approx([1e3 * found.slope, 1e3 * found.mean_slope], rel=5e-3)  # three digits
    wanted = [100 * found.relative_slope, 100 * found.relative_mean_slope]
    assert shares == pytest.approx(wanted, rel=5e-3)
    assert "at 25 °C" in title and "from end to end" in title


def test_slope_that_is_not_known_is_not_available() -> None:
    found = replace(study().drifts["collector_voltage"], slope=math.nan)
    of = replace(study(), drifts={"collector_voltage": found})
    assert drift_table(of, "collector_voltage").title.startswith("collector_voltage: n/a at 25 °C")


def test_row_beyond_a_limit_is_marked_and_the_others_are_not() -> None:
    table, found = drift_table(study(), "collector_voltage"), study().drifts["collector_voltage"]
    broken = [bool(low < 4.0) for low in found.low]
    assert [row.tone == "fail" for row in table.rows] == broken
    assert any(broken) and not all(broken)
    strips = [line for line in shown(study()) if re.match(r" *-?[0-9.]+ °C +[0-9.]+ V +", line)][:7]
    assert ["×" in strip for strip in strips] == broken


def test_limit_far_beyond_the_band_is_named_below_the_table() -> None:
    assert drift_table(study(), "collector_voltage").notes == ("limits beyond the picture: 12 V",)
    assert drift_table(study(), "symmetric_peak_swing").notes == ()


def test_inverting_gain_has_its_limit_on_its_own_side() -> None:
    picture = drift_table(study(), "voltage_gain").picture
    assert picture is not None
    assert [(bound.value, bound.lower) for bound in picture.bounds] == [(-50.0, False)]


def test_failures_stand_first_and_holding_checks_are_named_below() -> None:
    table = failure_table(study())
    found = next(each for each in study().limits if each.limit.quantity == "collector_voltage")
    hot = f"{found.hotter.temperature - 273.15:.4g} °C"
    assert table.rows[0].cells == ("R-1 collector_voltage", "≥ 4 V", "holds", hot)
    assert table.rows[0].tone == "fail"
    assert [row.cells[0] for row in table.rows if not row.tone] == [
        "R-1 collector_voltage",
        "R-2 voltage_gain",
    ]
    assert any("hold over the whole sweep" in note and "cut_off" in note for note in table.notes)
    assert any("a step of 25.0 K is not seen" in note for note in table.notes)
    assert any("Not checked, no limit given: transistor.max_power" in note for note in table.notes)


def test_runaway_is_named_in_place_of_a_figure() -> None:
    lines = shown(runaway())
    text = " ".join(" ".join(lines).split())
    assert re.search(r"corners in thermal runaway at [^;]*, 85 °C \(1 of 2\)", text)
    row = next(k for k, line in enumerate(lines) if re.match(r" *85 °C +n/a", line))
    assert lines[row].count("n/a") == 2  # lowest and highest; the nominal point is cold
    assert lines[row + 1].strip() == "no worst case: in thermal runaway in some corners"
    assert re.search(r"going hotter: check saturation, [0-9.]+ °C: runaway", text)
    assert "one end is no active point: runaway" in text


def test_nominal_point_that_runs_away_is_named() -> None:
    regions = (*runaway().regions[:-1], Region.RUNAWAY)
    of = replace(runaway(), regions=regions)
    assert "nominal point in thermal runaway at 85 °C" in swept(of).sentences
    assert drift_table(of, "collector_current").rows[-1].below[0] == "nominal point: in thermal runaway"


@pytest.mark.parametrize(
    ("failure", "words"),
    [
        (Failure("holds"), "holds"),
        (Failure("fails", 300.0), "26.85 °C"),
        (Failure("fails at start", ROOM), "fails at 25 °C already"),
        (Failure("runaway", 300.0), "26.85 °C: runaway"),
        (Failure("unsolved", 300.0), "26.85 °C: unsolved"),
        (Failure("not known"), "n/a"),
        (Failure("not swept"), "not swept"),
    ],
)
def test_every_ending_has_its_words(failure: Failure, words: str) -> None:
    of = replace(study(), limits=tuple(replace(each, hotter=failure) for each in study().limits))
    assert {row.cells[3] for row in failure_table(of).rows} == {words}


def test_first_to_fail_is_the_nearest_to_the_start() -> None:
    limit = study().limits
    near = replace(limit[0], colder=Failure("fails", 290.0), hotter=Failure("fails", 340.0))
    far = replace(limit[1], colder=Failure("fails", 250.0), hotter=Failure("fails", 320.0))
    passage = first_to_fail(replace(study(), limits=(near, far)))
    assert passage.sentences == (
        "going colder: R-1 collector_voltage ≥ 4 V, 16.85 °C",
        "going hotter: R-1 collector_voltage ≤ 12 V, 46.85 °C",
    )
    assert passage.tone == "fail"


def test_rows_stand_in_the_order_of_their_nearest_failure() -> None:
    limit = study().limits
    ways = [
        (Failure("fails", 290.0), Failure("fails", 360.0)),
        (Failure("fails", 280.0), Failure("fails", 310.0)),
    ]
    some = tuple(replace(e, colder=c, hotter=h) for e, (c, h) in zip(limit, ways, strict=False))
    unknown = replace(limit[2], hotter=Failure("not known"))
    # From 25 °C: 8.15 K and 61.85 K; 18.15 K and 11.85 K; what is not known comes before all.
    table = failure_table(replace(study(), limits=(some[1], some[0], unknown)))
    names = [row.cells[:2] for row in table.rows]
    assert names == [
        ("R-2 voltage_gain", "≥ 50"),
        ("R-1 collector_voltage", "≥ 4 V"),
        ("R-1 collector_voltage", "≤ 12 V"),
    ]


def test_nothing_that_fails_is_said_with_the_sweeps_ends() -> None:
    holding = tuple(replace(e, colder=Failure("holds"), hotter=Failure("holds")) for e in study().limits)
    passage = first_to_fail(replace(study(), limits=holding))
    assert passage.sentences == (
        "going colder: nothing, down to -40 °C",
        "going hotter: nothing, up to 85 °C",
    )
    assert passage.tone == "pass"
    outside = tuple(replace(each, colder=Failure("not swept")) for each in holding)
    assert first_to_fail(replace(study(), limits=outside)).sentences[0] == "going colder: not swept"


def test_checks_that_all_hold_are_listed_where_there_is_no_requirement() -> None:
    holding = tuple(
        replace(e, colder=Failure("holds"), hotter=Failure("holds"))
        for e in study().limits
        if e.limit.standing
    )
    table = failure_table(replace(study(), limits=holding))
    assert [row.cells[0] for row in table.rows] == [f"check {each.limit.quantity}" for each in holding]


def test_nominal_ambient_outside_the_sweep_is_said() -> None:
    of = drift(coupled(), coldest=310.0, hottest=330.0, points=3)
    text = " ".join(swept(of).sentences)
    assert "nominal ambient 25 °C, which lies outside" in text
    assert "from 36.85 °C outwards" in failure_table(of).title


def test_stability_stands_beside_what_was_measured() -> None:
    table, found = stability_table(study().stability), study().stability
    rows = {row.cells[0]: row for row in table.rows}
    assert list(rows) == ["leakage", "V_BE", "h_FE", "temperature"]
    factors = [change.factor for change in found.changes]
    # Four digits: the leakage's is a ratio, V_BE's in mA/V, the gain's in nA.
    assert float(rows["leakage"].cells[3].removeprefix("S(I_CO) ")) == pytest.approx(factors[0], rel=1e-3)
    assert float(rows["V_BE"].cells[3].split()[1]) == pytest.approx(1e3 * factors[1], rel=1e-3)
    assert rows["V_BE"].cells[3].endswith(" mA/V")
    assert float(rows["h_FE"].cells[3].split()[1]) == pytest.approx(1e9 * factors[2], rel=1e-3)
    assert rows["temperature"].cells[1:4] == ("-40 °C", "85 °C", "")
    assert rows["leakage"].below[0] == "I_CBO at 85 °C, the hottest ambient"
    assert any("exact (β+1) form" in note for note in table.notes)


def test_factors_that_are_not_known_are_not_available() -> None:
    found = study().stability
    lost = replace(found, beta=math.nan, changes=tuple(replace(c, factor=math.nan) for c in found.changes))
    cells = [row.cells[3] for row in stability_table(lost).rows]
    assert cells == ["S(I_CO) n/a", "S(V_BE) n/a", "S(β) n/a", ""]


def test_json_holds_the_sweep_and_null_where_nothing_is_known() -> None:
    data = drift_json(runaway())
    as_text(data)
    current = data["drift"]["collector_current"]
    assert len(current["nominal"]) == len(data["temperatures"]) == runaway().temperatures.size
    assert current["high"][-1] is None and current["nominal"][-1] is not None
    assert data["regions"]["corners"][-1]["runaway"] == 1
    assert data["regions"]["nominal"][0] == "active"
    hotter = {each["quantity"]: each["hotter"] for each in data["limits"]}["cut_off"]
    assert hotter["ending"] == "runaway" and 273.15 < hotter["temperature"] < 358.15
    assert {each["quantity"]: each["colder"] for each in data["limits"]}["cut_off"]["temperature"] is None
    changes = data["stability"]["changes"]
    assert changes["leakage"]["measured"] is None and changes["leakage"]["region"] == "runaway"
    assert changes["leakage"]["factor"] == runaway().stability.changes[0].factor


def test_json_of_limits_names_what_was_required() -> None:
    data = drift_json(study())
    first = data["limits"][0]
    assert (first["id"], first["quantity"], first["limit"], first["side"]) == (
        "R-1", "collector_voltage", 4.0, "at_least",
    )  # fmt: skip
    checks = [each for each in data["limits"] if each["standing"]]
    assert checks and all(each["id"] is None and each["limit"] is None for each in checks)
    for key in ("slope", "relative_slope", "mean_slope", "relative_mean_slope"):
        assert data["drift"]["collector_voltage"][key] == getattr(study().drifts["collector_voltage"], key)
