"""Reads what stands behind an option, and says which option it was where it cannot be read."""

from __future__ import annotations

import re
from collections.abc import Sequence
from decimal import Decimal

from biasband.errors import QuantityError, UsageError
from biasband.quantity import Kind, parse

MOST_COUNTED = 10**18
"""Boards are numbered in 63 bits."""


def tolerance_option(text: str | None) -> float | None:
    """Read the text behind --tolerance as a fraction; None where there is none.

    Raises UsageError where it is no tolerance from 0 up to below 100 %.
    """
    if text is None:
        return None
    try:
        share = parse(text, Kind.RATIO)
    except QuantityError as error:
        raise UsageError(f"--tolerance: {error}") from None
    if not 0.0 <= share < 1.0:
        hint = f' (did you mean "{text.strip()} %"?)' if 1.0 <= share < 100.0 and "%" not in text else ""
        raise UsageError(f"--tolerance: not from 0 to below 100 %; read {text!r}{hint}")
    return share


def boards_option(text: str | None) -> int | None:
    """Read the text behind --boards, such as "100000", "1e6", "10^6" or "2^20"; None where there is none.

    Raises UsageError where it is no whole number from 1 to `MOST_COUNTED`.
    """
    if text is None:
        return None
    boards = Decimal(0)
    if found := re.fullmatch(r"([0-9]{1,19})\^([0-9]{1,2})", text.strip()):
        boards = Decimal(int(found[1]) ** int(found[2]))
    elif re.fullmatch(r"[0-9]{1,19}(\.[0-9]{1,19})?([eE]\+?[0-9]{1,2})?", text.strip()):
        boards = Decimal(text.strip())
    if not 1 <= boards <= MOST_COUNTED or boards % 1:
        allowed = "a whole number from 1 to 10^18, as in 100000, 1e6 or 2^20"
        raise UsageError(f"--boards: {allowed}; read {text!r}")
    return int(boards)


def keep_option(texts: Sequence[str] | None) -> dict[str, str]:
    """Read the texts behind --keep, such as "RC=3k3", by name.

    Raises UsageError with every one that is not NAME=VALUE, and every name that comes twice.
    """
    pairs = [text.partition("=") for text in texts or ()]
    wrong = ["".join(pair) for pair in pairs if not (pair[0] and pair[2])]
    if wrong:
        raise UsageError(f"--keep: not NAME=VALUE, as in RC=3k3; read {', '.join(map(repr, wrong))}")
    values: dict[str, list[str]] = {}
    for name, _, value in pairs:
        values.setdefault(name.strip(), []).append(value.strip())
    twice = {name: read for name, read in values.items() if len(read) > 1}
    if twice:
        lines = (f"--keep: {name} is given more than one value: {', '.join(r)}" for name, r in twice.items())
        raise UsageError("\n".join(lines))
    return {name: value for name, (value,) in values.items()}
