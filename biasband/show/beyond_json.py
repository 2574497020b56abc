"""Failures beyond the boards drawn, as plain data."""

from __future__ import annotations

from dataclasses import asdict
from typing import Any

from biasband.margins.limits import HeldLimit
from biasband.signoff.beyond import Beyond


def beyond_json(each: Beyond) -> dict[str, Any]:
    """What is known of a limit's failures, and what that rests on."""
    return {
        **limit_json(each.limit),
        "standing": each.standing,
        "failures": each.failures,
        "monotone": None if each.monotone is None else asdict(each.monotone),
        "rare": None if each.rare is None else asdict(each.rare),
    }


def limit_json(limit: HeldLimit) -> dict[str, Any]:
    """Which limit it is, as it was required [SI]."""
    return {"id": limit.id, "quantity": limit.quantity, "limit": limit.limit, "side": limit.side}
