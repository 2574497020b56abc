"""Turns [[require]] into requirements: each limit in the SI unit of its quantity."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping

from biasband.circuit.quantities import LOW_CORNER, Quantity, vocabulary
from biasband.errors import QuantityError
from biasband.files.ledger import Ledger, nearest, shown
from biasband.files.stage_models import RequireSection
from biasband.files.toml_lines import KeyPath
from biasband.files.validation import check_section
from biasband.quantity import parse
from biasband.stage import Requirement

LIMITS = ("at_least", "at_most")

_NEEDS_CAPACITORS = 'it needs capacitors: lowest_frequency = "50 Hz" in [signal], or [capacitors]'


def read_requirements(
    tables: object, resistor_names: tuple[str, ...], ledger: Ledger, *, with_capacitors: bool = False
) -> tuple[Requirement, ...]:
    """Read every [[require]]; their faults are in the ledger."""
    if not isinstance(tables, list):
        ledger.add(("require",), "not a list of tables", read=shown(tables), allowed='"[[require]]"')
        return ()
    known = vocabulary(resistor_names, with_capacitors=with_capacitors)
    read = [_requirement(table, position, known, ledger) for position, table in enumerate(tables)]
    requirements = tuple(requirement for requirement in read if requirement is not None)
    counts = Counter(requirement.id for requirement in requirements)
    for position, requirement in enumerate(read):
        if requirement is not None and counts[requirement.id] > 1:
            hint = 'one without an id is called by its position, "R-1" and so on'
            ledger.add(("require", position, "id"), "given more than once", read=requirement.id, hint=hint)
    return requirements


def _requirement(
    table: object, position: int, known: Mapping[str, Quantity], ledger: Ledger
) -> Requirement | None:
    path: KeyPath = ("require", position)
    if isinstance(table, dict) and not any(key in table for key in LIMITS):
        ledger.add(path, "a requirement without a limit", allowed=" or ".join(LIMITS))
    section = check_section(RequireSection, table, path, ledger)
    if section is None:
        return None
    _check_yield(section, path, ledger)
    quantity = known.get(section.quantity)
    if quantity is None:
        hint = _NEEDS_CAPACITORS if section.quantity == LOW_CORNER else nearest(section.quantity, known)
        read, allowed = shown(section.quantity), ", ".join(known)
        ledger.add((*path, "quantity"), "unknown quantity", read=read, allowed=allowed, hint=hint)
    return Requirement(
        id=section.id or f"R-{position + 1}",
        quantity=section.quantity,
        judged_by=section.judged_by,
        reason=section.reason,
        at_least=_limit(section, "at_least", quantity, path, ledger),
        at_most=_limit(section, "at_most", quantity, path, ledger),
        **({} if section.yield_at_least is None else {"yield_at_least": section.yield_at_least}),
    )


def _check_yield(section: RequireSection, path: KeyPath, ledger: Ledger) -> None:
    if section.yield_at_least is not None and section.judged_by != "yield":
        hint = 'it goes with judged_by = "yield"'
        ledger.add((*path, "yield_at_least"), f"given, but judged by {section.judged_by}", hint=hint)


def _limit(
    section: RequireSection, key: str, quantity: Quantity | None, path: KeyPath, ledger: Ledger
) -> float | None:
    value = getattr(section, key)
    if value is None or quantity is None:
        return None
    try:
        limit = parse(value, quantity.kind)
    except QuantityError as error:
        ledger.add((*path, key), error.problem, read=shown(value), allowed=error.allowed)
        return None
    if limit < 0 and quantity.by_magnitude:
        # It would hold always, or never.
        problem = f"{section.quantity} is judged by magnitude"
        ledger.add((*path, key), problem, read=shown(value), allowed="a limit without a sign")
    return limit
