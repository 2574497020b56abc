"""What each of several stages is best at: the reason why one would choose it, from the figures alone."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import isnan

from biasband.quantity import Kind

DIGITS = 3
"""Figures that read the same in so many digits are equally good."""


@dataclass(frozen=True)
class Merit:
    """A figure that stages are compared by, what its best is called, and whether that is the largest."""

    figure: str
    name: str
    kind: Kind
    largest: bool = False


MERITS = (
    Merit("parts", "fewest parts", Kind.NUMBER),
    Merit("supply_current", "least supply current", Kind.CURRENT),
    Merit("current_ratio", "steadiest I_C over h_FE and ambient", Kind.NUMBER),
    Merit("swing", "largest swing", Kind.VOLTAGE, largest=True),
    Merit("voltage_gain", "largest gain", Kind.NUMBER, largest=True),
    Merit("input_resistance", "highest input resistance", Kind.RESISTANCE, largest=True),
    Merit("output_resistance", "lowest output resistance", Kind.RESISTANCE),
    Merit("margin_share", "largest smallest margin", Kind.RATIO, largest=True),
)


@dataclass(frozen=True)
class Strength:
    """A merit that a stage has its best place in (1: none is better), and its figure [SI]."""

    merit: Merit
    place: int
    value: float


def strengths(figures: Sequence[Mapping[str, float]]) -> tuple[tuple[Strength, ...], ...]:
    """Find for each of several stages the merits that it does best in, compared with the others.

    `figures` holds those of each stage, by `Merit.figure`; NaN is not compared. A merit in which all are
    equally good tells nothing, and is nobody's.
    """
    every = [_placed(merit, [each[merit.figure] for each in figures]) for merit in MERITS]
    return tuple(_best([placed[k] for placed in every if placed[k] is not None]) for k in range(len(figures)))


def _placed(merit: Merit, values: Sequence[float]) -> list[Strength | None]:
    """Every stage's place in one merit; None where it has no figure, or all have the same."""
    keys = [(-1.0 if merit.largest else 1.0) * float(f"{value:.{DIGITS}g}") for value in values]
    known = [key for key in keys if not isnan(key)]
    if len(set(known)) < 2:
        return [None] * len(values)
    return [
        None if isnan(key) else Strength(merit, 1 + sum(other < key for other in known), value)
        for key, value in zip(keys, values, strict=True)
    ]


def _best(found: Sequence[Strength | None]) -> tuple[Strength, ...]:
    places = [each for each in found if each is not None]
    first = min((each.place for each in places), default=0)
    return tuple(each for each in places if each.place == first)
