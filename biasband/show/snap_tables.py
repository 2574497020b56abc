"""The tables of snapping: preferred values around a resistance, the part's marks, and pairs."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

from biasband.parts.marking import Markings
from biasband.parts.pairs import Pair
from biasband.quantity import Kind
from biasband.show.table import NOT_KNOWN, Column, Row, Table, code, figure, percent
from biasband.signoff.snapping import Snapped, SnapStudy
from biasband.values.pairing import Offer

SNAP_COLUMNS = (
    Column("wanted"),
    Column("below"),
    Column("off", spare=1),
    Column("above"),
    Column("off", spare=1),
    Column("nearest", toned=True),
    Column("off"),
    Column("code", "left"),
)

PAIR_COLUMNS = (
    Column("pair", "left"),
    Column("total"),
    Column("off"),
    Column("tol."),
    Column("tol. RSS", spare=1),
    Column("tempco", spare=2),
    Column("larger share", spare=1),
)

PAIR_NOTE = "The larger share is what one part decides of the total, and its share of the power."
_SIGNS = {"series": "+", "parallel": "∥"}


def snap_tables(study: SnapStudy) -> tuple[Table, ...]:
    """Values and the preferred ones around them; then the pairs, where they were asked for."""
    return (_snap_table(study), *(_pairs_of(row) for row in study.rows if row.pairs))


def _snap_table(study: SnapStudy) -> Table:
    title = f"Nearest in {study.series} by ratio"
    if study.worst_error is not None:
        title += f", at worst {percent(study.worst_error, digits=3)} off"
    return Table(title, SNAP_COLUMNS, tuple(_snap_row(row) for row in study.rows))


def _snap_row(row: Snapped) -> Row:
    snap = row.snap
    cells = (
        _ohms(snap.value),
        _ohms(snap.below),
        _off(snap.below, snap.value),
        _ohms(snap.above),
        _off(snap.above, snap.value),
        _ohms(snap.chosen),
        percent(snap.error),
        code(snap.chosen),
    )
    doubtful = any(note.startswith("WARNING") for note in row.notes)
    return Row(cells, (*row.notes, *marks(row.markings)), "doubt" if doubtful else "")


def marks(found: Markings) -> Iterator[str]:
    """How a part is marked: letter code, bands in words, chip marks, as far as they exist.

    Where a tolerance is stated and there are no bands, why; no line where there is nothing to say.
    """
    bands = found.six_bands if found.six_bands.colours is not None else found.bands
    known = (found.letter_code, None if bands.colours is None else bands.text, chip_marks(found))
    marked = ", ".join(text for text in known if text)
    if marked:
        yield f"marked {marked}"
    if found.bands.colours is None and found.bands.figures:
        yield f"no colour bands at {found.bands.figures}: {found.bands.reason}"


def chip_marks(found: Markings) -> str:
    """The chip marks that exist: "chip 472, 4701"."""
    return f"chip {', '.join(chips(found))}" if chips(found) else ""


def chips(found: Markings) -> tuple[str, ...]:
    """The chip marks that exist, each once."""
    marks = (found.chip_three, found.chip_four, found.chip_e96)
    return tuple(dict.fromkeys(mark for mark in marks if mark is not None))


def _pairs_of(row: Snapped) -> Table:
    return pairs_table(f"Pairs for {_ohms(row.snap.value)}", row.pairs, row.against)


def offer_table(offer: Offer) -> Table:
    """Pairs for a resistor of a stage."""
    title = f"Pairs for {offer.name}, wanted {figure(offer.wanted, Kind.RESISTANCE)}"
    return pairs_table(title, offer.pairs, offer.against)


def pairs_table(title: str, pairs: Sequence[Pair], against: Sequence[str]) -> Table:
    """Pairs that come near a value, the best first, and what speaks against them."""
    return Table(title, PAIR_COLUMNS, tuple(_pair_row(pair) for pair in pairs), (*against, PAIR_NOTE))


def _pair_row(pair: Pair) -> Row:
    return Row(
        (
            f"{_ohms(pair.first)} {_SIGNS[pair.connection]} {_ohms(pair.second)}",
            figure(pair.total, Kind.RESISTANCE, digits=5),
            percent(pair.error),
            _stated(max(-pair.tolerance_low, pair.tolerance_high), Kind.RATIO),
            _stated(max(-pair.rss_low, pair.rss_high), Kind.RATIO),
            _stated(pair.tempco, Kind.RELATIVE_SLOPE, digits=4),
            percent(max(pair.first_share, pair.second_share)),
        )
    )


def _stated(value: float, kind: Kind, *, digits: int = 2) -> str:
    return "not stated" if math.isnan(value) else figure(value, kind, digits=digits)


def _ohms(ohms: float) -> str:
    return NOT_KNOWN if math.isnan(ohms) else figure(ohms, Kind.RESISTANCE, digits=6)


def _off(preferred: float, wanted: float) -> str:
    return NOT_KNOWN if math.isnan(preferred) else percent(preferred / wanted - 1.0)
