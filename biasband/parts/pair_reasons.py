"""What speaks against a pair: that it may gain nothing, trim nothing, and is two parts."""

from __future__ import annotations

from collections.abc import Iterator
from math import log

from biasband.errors import UsageError
from biasband.parts.pairs import Pair
from biasband.parts.series import Snap
from biasband.quantity import Kind, format_exact, format_quantity


def against(pair: Pair, single: Snap) -> tuple[str, ...]:
    """Say what speaks against a pair, compared with the nearest single value: three reasons at most.

    One sentence each, the weightiest first: that the single value is as near, or that what the pair
    gains is within its own tolerance; that its smaller share is within that tolerance; that it is
    two parts. Where the single value is the wanted one exactly, the first sentence says that no pair
    is nearer.

    A pair whose tolerance is not known (NaN) is not held against it.

    Raises UsageError where the two are for different values.

    Source: common practice.
    """
    if pair.value != single.value:
        raise UsageError(f"a pair for {pair.value:g} Ω, a snap of {single.value:g} Ω")
    return (
        *_against_nearness(pair, single),
        *_against_trimming(pair),
        "Two parts and four solder joints instead of one part and two.",
    )


def _against_nearness(pair: Pair, single: Snap) -> Iterator[str]:
    alone = f"{format_exact(single.chosen, Kind.RESISTANCE)} alone"
    off, off_alone = abs(log(pair.total / pair.value)), abs(log(single.chosen / single.value))
    errors = f"{alone} is off by {_percent(abs(single.error))}, the pair by {_percent(abs(pair.error))}"
    if single.chosen == single.value:
        yield f"{alone} is the wanted value exactly: no pair is nearer."
    elif off_alone <= off:
        yield f"{errors}: no nearer."
    elif off_alone - off <= _widest(pair):
        yield f"{errors}: the gain is within the pair's own tolerance of ±{_percent(_widest(pair))}."


def _against_trimming(pair: Pair) -> Iterator[str]:
    minor = min(pair.first_share, pair.second_share)
    if not minor <= _widest(pair):  # NaN: no tolerance to hold it against
        return
    ohms = (pair.first, pair.second) if pair.first_share >= pair.second_share else (pair.second, pair.first)
    major, trimmer = (format_exact(each, Kind.RESISTANCE) for each in ohms)
    yield (
        f"{major} decides {_percent(1 - minor)} of the total and takes as much of the power; "
        f"{trimmer} trims {_percent(minor)}, within the tolerance of ±{_percent(_widest(pair))}."
    )


def _widest(pair: Pair) -> float:
    return max(-pair.tolerance_low, pair.tolerance_high)


def _percent(fraction: float) -> str:
    return format_quantity(fraction, Kind.RATIO, digits=3)
