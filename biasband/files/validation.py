"""Checks a section against its model, and turns what pydantic finds into faults."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from typing import TypeVar

from pydantic import ValidationError
from pydantic_core import ErrorDetails

from biasband.errors import QuantityError
from biasband.files.figures import Refusal
from biasband.files.ledger import Ledger, nearest, shown
from biasband.files.stage_models import ONE_FIGURE, RANGE, GainRange, Section
from biasband.files.toml_lines import KeyPath

AnySection = TypeVar("AnySection", bound=Section)

_WRONG_TYPES = {
    "model_type": ("not a table", 'a table, as in "[name]"'),
    "string_type": ("not a text", 'a text in quotes, as in "B"'),
    "bool_type": ("neither true nor false", "true, false"),
}

_APART: Mapping[str, tuple[tuple[str, str], ...]] = {
    "derating": (("file", "profile"),),
    "supply": (
        ("min", "voltage"),
        ("nominal", "voltage"),
        ("max", "voltage"),
        ("ripple_peak_to_peak", "ripple_peak"),
    ),
}
"""Keys that may not stand beside each other."""

_TOGETHER: Mapping[str, tuple[tuple[str, str], ...]] = {
    "supply": (("min", "max"), ("max", "min"), ("nominal", "min"), ("tolerance", "voltage")),
    "ambient": (("min", "max"), ("max", "min")),
    "transistor": (("early_voltage", "test_voltage"),),
}
"""Keys that need another beside them."""


def check_section(
    model: type[AnySection],
    table: object,
    path: KeyPath,
    ledger: Ledger,
    *,
    words: Mapping[str, Collection[str]] | None = None,
) -> AnySection | None:
    """Read a section; None where it has faults, all of which are then in the ledger.

    `words` holds, by name, the choices that the model leaves to its caller.
    """
    try:
        return model.model_validate(table, context=words)
    except ValidationError as error:
        for details in error.errors(include_url=False):
            _note(details, model, path, ledger)
    return None


def check_companions(name: str, table: object, path: KeyPath, ledger: Ledger) -> None:
    """Note keys of a table that exclude each other, or else those that lack their companion."""
    if not isinstance(table, dict):
        return
    apart = [pair for pair in _APART.get(name, ()) if all(key in table for key in pair)]
    for key, other in apart:
        ledger.add((*path, key), f'given beside "{other}"', allowed="one of the two")
    for key, other in () if apart else _TOGETHER.get(name, ()):
        if key in table and other not in table:
            ledger.add((*path, other), "missing", hint=f'"{key}" needs it')


def _note(details: ErrorDetails, model: type[Section], path: KeyPath, ledger: Ledger) -> None:
    place = tuple(key for key in details["loc"] if key not in (ONE_FIGURE, RANGE))
    where, read = (*path, *place), shown(details["input"])
    cause = details.get("ctx", {}).get("error")
    if details["type"] == "missing":
        ledger.add(where, "missing")
    elif details["type"] == "extra_forbidden":
        known = tuple((model if len(place) == 1 else GainRange).model_fields)
        note_unknown(where, known, ledger)
    elif isinstance(cause, Refusal):
        ledger.add(where, cause.problem, read=read, allowed=cause.allowed, hint=cause.hint)
    elif isinstance(cause, QuantityError):
        ledger.add(where, cause.problem, read=read, allowed=cause.allowed)
    else:
        problem, allowed = _WRONG_TYPES.get(details["type"], (details["msg"], ""))
        ledger.add(where, problem, read=read, allowed=allowed)


def note_unknown(path: KeyPath, known: tuple[str, ...], ledger: Ledger) -> None:
    """Note a key that the format does not have, with the nearest one that it has."""
    word = str(path[-1])
    ledger.add(path, "unknown key", allowed=", ".join(known), hint=nearest(word, known))
