"""The table of a contrast: every topology with the same target, and why one would choose it."""

from __future__ import annotations

from collections.abc import Iterator
from math import isfinite

from biasband.constants import VERSION
from biasband.margins.verdict import label
from biasband.quantity import Kind
from biasband.show.prose import contributor
from biasband.show.review_tables import share_left
from biasband.show.table import (
    NOT_KNOWN,
    OUTCOME_TONES,
    REGION_WORDS,
    Column,
    Passage,
    Row,
    Table,
    computed,
    figure,
    whole_percent,
)
from biasband.signoff.contrasting import Contrast, Contrasted, Trial
from biasband.signoff.merits import Strength
from biasband.signoff.steadiness import CURRENT
from biasband.variation.contributors import GAIN

CONTRAST_COLUMNS = (
    Column("topology", "left"),
    Column("verdict", "left", toned=True),
    Column("parts", spare=3),
    Column("supply"),
    Column("gain"),
    Column("swing"),
    Column("share"),
    Column("I_C ratio"),
    Column("I_C", spare=2),
    Column("V_out", spare=1),
)

_SHORT = 3
_PLACES = {2: "second", 3: "third"}
_H_FE = contributor(GAIN)


def contrast_table(contrast: Contrast) -> Table:
    """A row per topology, the stage's own first."""
    rows = tuple(_row(row, contrast) for row in contrast.rows)
    title = f"The same target in {len(rows)} topologies"
    return Table(title, CONTRAST_COLUMNS, rows, tuple(_notes(contrast)))


def _row(row: Contrasted, contrast: Contrast) -> Row:
    trial = row.trial
    if trial is None:
        blank = ("",) * (len(CONTRAST_COLUMNS) - 2)
        return Row((row.topology, "no stage", *blank), (row.problem,), "fail")
    outcome, values = trial.verdict.outcome, trial.figures
    cells = (
        row.topology,
        outcome if outcome == "pass" else outcome.upper(),
        f"{values['parts']:.0f}",
        computed(values["supply_current"], Kind.CURRENT, digits=_SHORT),
        computed(trial.nominal.values["voltage_gain"], Kind.NUMBER, digits=_SHORT),
        computed(values["swing"], Kind.VOLTAGE, digits=_SHORT),
        NOT_KNOWN if trial.smallest is None else share_left(trial.smallest),
        _ratio(trial),
        _range(trial, CURRENT, Kind.CURRENT),
        _range(trial, f"{trial.steadiness.output}_voltage", Kind.VOLTAGE),
    )
    return Row(cells, tuple(_below(row, trial, contrast)), OUTCOME_TONES[outcome])


def _ratio(trial: Trial) -> str:
    return computed(trial.steadiness.current_ratio, Kind.NUMBER, digits=_SHORT)


def _range(trial: Trial, name: str, kind: Kind) -> str:
    """The lowest and highest value over h_FE and ambient."""
    if trial.steadiness.missing is not None:
        return REGION_WORDS[trial.steadiness.missing]
    range_ = trial.steadiness.ranges[name]
    low, high = (computed(each.value, kind, digits=_SHORT) for each in (range_.low, range_.high))
    return f"{low} to {high}"


def _below(row: Contrasted, trial: Trial, contrast: Contrast) -> Iterator[str]:
    resistors = (f"{r.name} {figure(r.value or 0.0, Kind.RESISTANCE)}" for r in trial.design.stage.resistors)
    yield ", ".join(resistors)
    if row.passes and len(contrast.passing) == 1:
        yield "for it: the only one that passes"
    elif row.strengths:
        yield f"for it: {', '.join(map(_strength, row.strengths))}"
    if trial.verdict.because:
        yield f"against it: {'; '.join(trial.verdict.because)}"
    elif trial.smallest is not None:
        yield f"smallest margin: {label(trial.smallest)}"
    for left in row.left_out:
        yield f"left out: {left.id} {left.quantity}, {left.reason}"
    if row.differs:
        yield "; ".join(row.differs)


def _strength(strength: Strength) -> str:
    """What a topology is best at, or comes second in: "largest swing (3.30 V)"."""
    merit, value = strength.merit, strength.value
    if merit.kind is Kind.RATIO:
        shown = whole_percent(value)
    elif merit.figure == "parts":
        shown = f"{value:.0f}"
    else:
        shown = computed(value, merit.kind, digits=_SHORT)
    place = "" if strength.place == 1 else f"{_PLACES.get(strength.place, f'{strength.place}th')} in "
    return f"{place}{merit.name} ({shown})"


def _notes(contrast: Contrast) -> Iterator[str]:
    yield (
        "First the stage's own topology, with the values that it gives; the others are designed anew, in "
        "their plainest form, and snapped by their worst case."
    )
    yield (
        "supply, gain: at the nominal point; swing: the smallest symmetric one at any corner; share: the "
        "smallest margin over the way from nominal to its limit."
    )
    yield (
        f"I_C, V_out (the output): from lowest to highest while {_H_FE} and ambient alone vary, all else "
        "nominal; I_C ratio: highest over lowest."
    )
    if contrast.stage.capacitors:
        yield "Capacitors are left out: they are shorts here, and nothing is said of low frequencies."
    if not contrast.passing:
        yield "None passes: what each is best at is among all."
    elif len(contrast.passing) > 1:
        yield "for it: what it is best at of those that pass."


def lesson(contrast: Contrast) -> tuple[str, ...]:
    """By how much h_FE and ambient alone move the collector current of each, and who follows h_FE."""
    trials = {row.topology: row.trial for row in contrast.rows if row.trial is not None}
    known = {name: t for name, t in trials.items() if isfinite(t.steadiness.current_ratio)}
    order = sorted(known, key=lambda name: known[name].steadiness.current_ratio)
    if not order:
        return ()
    factors = ", ".join(f"{_ratio(known[name])} in {name}" for name in order)
    said = f"{_H_FE} and ambient alone move the collector current by a factor of {factors}."
    ways = [f"{whole_percent(known[name].steadiness.followed)} in {name}" for name in order]
    if any(way.startswith(NOT_KNOWN) for way in ways):
        return (said,)
    moved = computed(known[order[-1]].steadiness.gain_ratio, Kind.NUMBER, digits=_SHORT)
    return (said, f"{_H_FE} itself moves by {moved}: of that I_C moves, in logarithms, {', '.join(ways)}.")


def contrast_warnings(contrast: Contrast) -> tuple[str, ...]:
    """The warnings of all topologies, each once; with the names of those that it is about, if not all."""
    about: dict[str, list[str]] = {}
    trials = [(row.topology, row.trial) for row in contrast.rows if row.trial is not None]
    for name, trial in trials:
        for warning in trial.warnings:
            about.setdefault(warning, []).append(name)
    return tuple(
        text if len(names) == len(trials) else f"{', '.join(names)}: {text}" for text, names in about.items()
    )


def outcome(contrast: Contrast) -> Passage:
    """How many topologies pass, and which."""
    passing, total = contrast.passing, len(contrast.rows)
    if not passing:
        return Passage(f"None of {total} topologies passes", (), "fail")
    names = ", ".join(row.topology for row in passing)
    verb = "passes" if len(passing) == 1 else "pass"
    title = f"{len(passing)} of {total} topologies {verb}: {names}"
    return Passage(title, tuple(_reserved(contrast)), "pass")


def _reserved(contrast: Contrast) -> Iterator[str]:
    """Passes that rest on fewer requirements than the stage has."""
    for row in contrast.passing:
        if row.left_out:
            ids = ", ".join(dict.fromkeys(left.id for left in row.left_out))
            yield f"{row.topology} passes without {ids}, left out there"


def target_text(contrast: Contrast) -> str:
    """What every topology is designed for."""
    target = contrast.target
    place = target.collector if isinstance(target.collector, str) else figure(target.collector, Kind.VOLTAGE)
    lent = ", lent by the nominal point" if contrast.lent else ""
    return f"target: collector current {figure(target.collector_current, Kind.CURRENT)}, output {place}{lent}"


def yields_on(contrast: Contrast) -> str:
    """What yields are judged by, and which program did it."""
    boards = "no yields required"
    if any(each.judged_by == "yield" for each in contrast.stage.requirements):
        boards = f"yields on {contrast.boards} boards of each, seed {contrast.seed}"
    return f"{boards}, biasband {VERSION}"
