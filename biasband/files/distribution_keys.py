"""Turns the keys that say how a figure is drawn into distributions, and notes what does not fit."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import partial
from typing import Any

from biasband.files.ledger import Ledger
from biasband.files.stage_models import (
    GainRange,
    ResistorDefaults,
    SupplySection,
    TransistorSection,
    VoltageRange,
)
from biasband.files.toml_lines import KeyPath
from biasband.quantity import Kind, format_quantity
from biasband.stage import COMPANIONS, Distribution, DistributionName, Limits, Resistor, Stage
from biasband.variation.contributors import tempcos
from biasband.variation.distributions import ROUNDING, room_for_batch

RESISTOR_KEYS = ("distribution", "life_drift_distribution", "tempco_distribution", *COMPANIONS.values())
"""The keys of [resistors] and [resistors.NAME] that are read here."""

_WHY_DRAWN = {
    "distribution": "tolerance",
    "life_drift_distribution": "life_drift",
    "tempco_distribution": "tempco",
}
"""The figure that each of these says the distribution of."""

_percent = partial(format_quantity, kind=Kind.RATIO, digits=6)
_volts = partial(format_quantity, kind=Kind.VOLTAGE, digits=6)


@dataclass(frozen=True)
class Said:
    """What one resistor's own table says, and [resistors] of all; None where a table has faults."""

    name: str
    own: ResistorDefaults | None
    defaults: ResistorDefaults | None

    def own_value(self, key: str) -> Any:
        """What the resistor's own table says."""
        return None if self.own is None else getattr(self.own, key)

    def value(self, key: str) -> Any:
        """What is said; None where neither table says anything."""
        own = self.own_value(key)
        return getattr(self.defaults, key) if own is None and self.defaults is not None else own

    def companion(self, name: DistributionName, key: str) -> float | None:
        """A companion's figure; one of [resistors] counts unless the resistor chose another distribution."""
        chosen = self.own_value("distribution")
        found: float | None = self.value(key) if chosen in (None, name) else self.own_value(key)
        return found

    def place(self, key: str) -> KeyPath:
        """Where a key stands."""
        own = self.own_value(key) is not None
        return ("resistors", self.name, key) if own else ("resistors", key)


def resistor_distributions(
    said: Said, given: Mapping[str, Any], ledger: Ledger
) -> dict[str, Distribution]:
    """Read how a resistor's tolerance, life drift and tempco are drawn; `given` holds those figures."""
    for key, figure in _WHY_DRAWN.items():
        if said.own_value(key) is not None and not given.get(figure):
            problem = f"{said.name} has no {figure}: there is nothing to draw"
            ledger.add(said.place(key), problem, hint=f"give a {figure}, or leave this out")
    return {
        "distribution": _tolerance_distribution(said, given.get("tolerance", 0.0), ledger),
        **{key: Distribution(name=said.value(key) or "uniform") for key in list(_WHY_DRAWN)[1:]},
    }


def _tolerance_distribution(said: Said, tolerance: float, ledger: Ledger) -> Distribution:
    chosen: DistributionName = said.value("distribution") or "uniform"
    figures = {key: said.companion(name, key) for name, key in COMPANIONS.items()}
    table = said.place("distribution")[:-1]
    _check_companions(chosen, figures, {key: said.place(key) for key in figures}, table, ledger)
    distribution = _distribution(chosen, figures)
    hollow, within = (figures[key] if COMPANIONS.get(chosen) == key else None for key in COMPANIONS.values())
    if hollow is not None and hollow >= tolerance:
        problem = f"not below the tolerance of {said.name}: it leaves nothing of it"
        allowed = f"below {_percent(tolerance)}"
        ledger.add(said.place("hollow_within"), problem, read=_percent(hollow), allowed=allowed)
    if within is not None and within > tolerance:
        problem = f"above the tolerance of {said.name}, of which it is a part"
        allowed = f"{_percent(tolerance)} at most"
        ledger.add(said.place("within_batch"), problem, read=_percent(within), allowed=allowed)
    return distribution


def _check_companions(
    chosen: DistributionName,
    figures: Mapping[str, float | None],
    places: Mapping[str, KeyPath],
    table: KeyPath,
    ledger: Ledger,
) -> None:
    """Note a companion without its distribution, and a distribution without its companion."""
    for name, key in COMPANIONS.items():
        if key not in figures:
            continue
        if name == chosen and figures[key] is None:
            ledger.add((*table, key), "missing", hint=f'distribution = "{name}" needs it')
        if name != chosen and figures[key] is not None:
            ledger.add(places[key], f'goes with distribution = "{name}" only', hint=f"this one is {chosen}")


def _distribution(name: DistributionName, figures: Mapping[str, float | None]) -> Distribution:
    """The distribution; where its companion is missing, which is noted by then, it is taken as zero."""
    key = COMPANIONS.get(name)
    return Distribution(name=name) if key is None else Distribution(name=name, **{key: figures[key] or 0.0})


def check_groups(said: Sequence[Said], resistors: Sequence[Resistor], ledger: Ledger) -> None:
    """Note members of a group that differ in what the group shares.

    If one member is drawn by batch all must be, with the same tolerance and part within the batch;
    what shares a tempco must draw it alike.
    """
    for group in dict.fromkeys(r.group for r in resistors if r.group is not None):
        members = [(s, r) for s, r in zip(said, resistors, strict=True) if r.group == group]
        by_batch = [r for _, r in members if r.distribution.name == "batch"]
        tracking = [r for _, r in members if tempcos(r).common > 0.0]
        for one, member in members:
            if by_batch:
                _alike(one, member, by_batch[0], _BATCH, "a batch", ledger)
            if member in tracking:
                _alike(one, member, tracking[0], _TEMPCO, "a tempco", ledger)


_BATCH: Mapping[str, Callable[[Resistor], object]] = {
    "distribution": lambda resistor: resistor.distribution.name,
    "within_batch": lambda resistor: resistor.distribution.within_batch,
    "tolerance": lambda resistor: resistor.tolerance,
}
_TEMPCO: Mapping[str, Callable[[Resistor], object]] = {
    "tempco_distribution": lambda resistor: resistor.tempco_distribution,
}
"""What members that share a batch, or a tempco, must have alike."""


def _alike(
    said: Said,
    member: Resistor,
    first: Resistor,
    figures: Mapping[str, Callable[[Resistor], object]],
    shared: str,
    ledger: Ledger,
) -> None:
    for key, figure in figures.items():
        if figure(member) != figure(first):
            problem = f"{member.name} and {first.name} differ, and share {shared}: group {member.group}"
            ledger.add(said.place(key), problem, allowed="the same for every member")
            return


def figure_distribution(
    figure: GainRange | VoltageRange, limits: Limits, path: KeyPath, ledger: Ledger
) -> Distribution:
    """Read how h_FE or V_BE is drawn between its limits."""
    chosen, figures = figure.distribution or "uniform", {"within_batch": figure.within_batch}
    _check_companions(chosen, figures, {"within_batch": (*path, "within_batch")}, path, ledger)
    if figure.distribution is not None:
        _check_spread(limits, (*path, "distribution"), ledger)
    is_gain = isinstance(figure, GainRange)
    within, ordered = figure.within_batch, limits.low <= limits.nominal <= limits.high
    if chosen == "batch" and within is not None and ordered:
        room, shown = room_for_batch(limits, logarithmic=is_gain), _percent if is_gain else _volts
        if within > room * (1.0 + ROUNDING):
            problem = "a nominal batch would have boards beyond the nearer limit"
            allowed = f"{shown(room)} at most"
            ledger.add((*path, "within_batch"), problem, read=shown(within), allowed=allowed)
    return _distribution(chosen, figures)


def supply_distribution(
    section: SupplySection, limits: Limits, path: KeyPath, ledger: Ledger
) -> Distribution:
    """Read how a supply is drawn: only one that differs from board to board is."""
    place = (*path, "distribution")
    if section.distribution is not None and section.varies != "by board":
        problem = "never drawn: every board meets the supply's whole range in use"
        ledger.add(place, problem, allowed='beside varies = "by board" only')
    elif section.distribution is not None:
        _check_spread(limits, place, ledger)
    return Distribution(name=section.distribution or "uniform")


def leakage_distribution(section: TransistorSection, ledger: Ledger) -> Distribution:
    """Read how the leakage is drawn between nothing and its maximum."""
    chosen = section.leakage_distribution
    if chosen is not None and not section.leakage:
        problem = "there is no leakage to draw"
        ledger.add(("transistor", "leakage_distribution"), problem, hint="give a leakage, or leave this out")
    return Distribution(name=chosen or "uniform")


def _check_spread(limits: Limits, path: KeyPath, ledger: Ledger) -> None:
    if limits.low == limits.high:
        ledger.add(path, "the limits coincide: there is nothing to draw", hint="leave this out")


def check_batches(stage: Stage, ledger: Ledger) -> None:
    """Note where boards per batch are needed and not given, or given and not needed."""
    path = ("stage", "boards_per_batch")
    if stage.drawn_by_batch and stage.boards_per_batch is None:
        hint = 'boards of one batch are dependent: distribution = "batch" needs it'
        ledger.add(path, "missing", allowed="how many boards are built from one batch", hint=hint)
    if not stage.drawn_by_batch and stage.boards_per_batch is not None:
        ledger.add(path, 'nothing has distribution = "batch"', hint="leave this out")
