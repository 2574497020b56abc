"""Sentences: what can be said of failures beyond the boards drawn."""

from __future__ import annotations

from collections.abc import Sequence

from biasband.boards.monotone import Monotone
from biasband.boards.rare import Rare
from biasband.show.focus import limit_title
from biasband.show.prose import contributor
from biasband.show.table import Passage, Report, percent
from biasband.signoff.beyond import Beyond

_DIGITS = 3


def beyond_words(found: Sequence[Beyond], *, corners: int, boards: int) -> Report:
    """A sentence for every limit, those of one sentence together; nothing where there is none."""
    if not found:
        return ()
    alike: dict[str, list[str]] = {}
    for each in found:
        alike.setdefault(_words(each, corners, boards), []).append(limit_title(each.limit))
    said = (f"{', '.join(limits)}: {words}" for words, limits in alike.items())
    return (Passage("Beyond the draws", tuple(said)),)


def _words(each: Beyond, corners: int, boards: int) -> str:
    if each.monotone is not None:
        held = f"all {corners} corners and the located interior extremes hold"
        claim = _claim(each.limit.quantity, each.monotone)
        return f"no failure exists that was looked for: {held}; {claim}"
    if each.rare is not None:
        return f"some corner fails, of {boards} boards none: {_rare(each.rare)}"
    if each.standing == "seen":
        return f"failures are in the draws: {each.failures} of {boards} boards"
    return "not known: a corner has no value"


def _claim(name: str, found: Monotone) -> str:
    if found.holds:
        looked = f"wherever it was looked at ({found.looked_at} places)"
        return f"zero claimed, since {name} was monotone along all that differs between boards, {looked}"
    why = [] if found.breaks_along is None else [f"{name} turns along {contributor(found.breaks_along)}"]
    why += [f"{found.unsolved} of {found.looked_at} places were not solved"] if found.unsolved else []
    return f"not proved between them: {', '.join(why)}"


def _rare(found: Rare) -> str:
    low, high = (_ppm(end) for end in (found.interval.low, found.interval.high))
    unsolved = f", {found.unsolved} of them not solved and counted as failing" if found.unsolved else ""
    how = "importance sampling" if found.weighted else "plain draws, importance sampling found too little"
    draws = f"{found.effective_sample_size:.0f} effective failures of {found.draws} draws{unsolved}"
    if not found.resolved:
        return f"below {high} (95 %), too few for a figure: {how}, {draws}"
    error = percent(found.standard_error / found.probability)
    return f"{_ppm(found.probability)} (standard error {error}; 95 %: {low} to {high}), {how}, {draws}"


def _ppm(share: float) -> str:
    return f"{1e6 * share:.{_DIGITS}g} ppm"
