"""The tables of a review: nominal point, margins; and one line per stage of several."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

from biasband.circuit.quantities import Quantity, judged_swing
from biasband.margins.records import Margin
from biasband.quantity import Kind
from biasband.show.prose import worst
from biasband.show.summary import Attempt
from biasband.show.table import (
    NOT_KNOWN,
    OUTCOME_TONES,
    REGION_WORDS,
    Column,
    Row,
    Table,
    Tone,
    computed,
    difference,
    figure,
    whole_percent,
    yield_percent,
)
from biasband.signoff.study import Review
from biasband.stage import Stage

MARGIN_COLUMNS = (
    Column("limit on", "left"),
    Column("limit"),
    Column("nominal", spare=3),
    Column("corners"),
    Column("RSS", spare=2),
    Column("yield", spare=1),
    Column("margin"),
    Column("share"),
    Column("verdict", "left", toned=True),
)

SUMMARY_COLUMNS = (
    Column("verdict", "left", toned=True),
    Column("stage file", "left"),
    Column("smallest margin", "left"),
)

STANDING_NOTE = (
    "Rows without an id are standing checks, held to the derating profile in every corner: saturation "
    "is V_CE, cut_off is I_C, supply_voltage is rail to rail against V_CEO."
)

_SIGNS = {"at_least": "≥", "at_most": "≤"}


def nominal_table(review: Review) -> Table:
    """Every quantity at the nominal point."""
    rows = [
        _nominal_row(review.stage, name, review.nominal.values[name], quantity)
        for name, quantity in review.quantities.items()
    ]
    title = f"Nominal point: {REGION_WORDS[review.nominal.region]}"
    return Table(title, (Column("quantity", "left"), Column("value")), tuple(rows), flows=True)


def _nominal_row(stage: Stage, name: str, value: float, quantity: Quantity) -> Row:
    swing = judged_swing(stage)
    more = "(inverting)" if quantity.by_magnitude and value < 0.0 else ""
    if name == "distortion":
        more = "(clipping)" if swing is None else f"({figure(swing, Kind.VOLTAGE)})"
    return Row((f"{name} {more}".strip(), computed(value, quantity.kind)))


def margin_table(review: Review) -> Table:
    """Requirements and standing checks, the smallest margin first."""
    notes = ["share: the margin over the way from nominal to the limit."]
    if any(not row.standing for row in review.rows):
        notes.append("yield: boards that hold the limit at every point of use (≥ its lower 95 % bound).")
    if any(row.standing for row in review.rows):
        notes.append(STANDING_NOTE)
    rows = tuple(_margin_row(row) for row in review.rows)
    return Table("Margins, smallest first", MARGIN_COLUMNS, rows, tuple(notes))


def _margin_row(row: Margin) -> Row:
    failing = row.verdict == "fail"
    cells = (
        label(row),
        f"{_SIGNS[row.side]} {figure(row.limit, row.kind)}",
        computed(row.nominal, row.kind),
        computed(row.corners, row.kind),
        "" if row.standing else computed(row.rss, row.kind),
        "" if row.standing else f"{yield_percent(row.yield_held)} (≥ {yield_percent(row.yield_low)})",
        difference(row.margin, row.kind),
        share_left(row),
        "FAIL" if failing else "pass",
    )
    tone: Tone = "fail" if failing else "doubt" if row.only_by_method else "pass"
    return Row(cells, tuple(_below(row)) if failing or not row.standing else (), tone)


def label(row: Margin) -> str:
    """What a row is a limit on: its id and quantity, or the check's name."""
    return row.quantity if row.standing else f"{row.id} {row.quantity}"


def share_left(row: Margin) -> str:
    """The margin as a share of the way nominal → limit."""
    if row.margin_share is None:
        return NOT_KNOWN if math.isnan(row.nominal) else "none"
    return whole_percent(row.margin_share)


def _below(row: Margin) -> Iterator[str]:
    if row.judged_by != "corners":
        yield f"judged by {row.judged_by}{_required(row)}: {computed(row.judged, row.kind)}"
    if row.only_by_method:
        yield f"pass by {row.judged_by}, FAILS AT CORNERS"
    yield worst(row)
    if row.margin_share is None and not math.isnan(row.nominal):
        yield "the nominal value is itself on or beyond the limit"
    if row.notes:
        yield "; ".join(row.notes)
    if row.reason:
        yield f"reason: {row.reason}"


def _required(row: Margin) -> str:
    return f", at least {yield_percent(row.yield_at_least)}" if row.judged_by == "yield" else ""


def summary_table(attempts: Sequence[Attempt]) -> Table:
    """One line per stage file: verdict, file, smallest margin."""
    return Table("", SUMMARY_COLUMNS, tuple(_summary_row(attempt) for attempt in attempts))


def _summary_row(attempt: Attempt) -> Row:
    review = attempt.review
    if review is None:
        return Row(("bad input", attempt.path, ""), tone="fail")
    outcome = review.verdict.outcome
    shown = outcome if outcome == "pass" else outcome.upper()
    return Row((shown, attempt.path, _smallest(review)), tone=OUTCOME_TONES[outcome])


def _smallest(review: Review) -> str:
    if not review.rows:
        return "no limits"
    row = review.rows[0]
    return f"{share_left(row)}, {label(row)}"
