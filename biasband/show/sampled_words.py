"""Sentences: what was sampled, how it ended, and what a reader must know before any figure of it."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from biasband.boards.quasi import SCRAMBLINGS
from biasband.circuit.operating_point import Region
from biasband.constants import VERSION
from biasband.margins.holding import nominal
from biasband.show.table import REGION_WORDS, Passage, Report, Tone
from biasband.signoff.goals import DigitsGoal
from biasband.signoff.spread_study import SpreadStudy

_ALARMS = {
    Region.RUNAWAY: ("THERMAL RUNAWAY", "ran away thermally"),
    Region.UNSOLVED: ("INCONCLUSIVE", "were not solved"),
}
_TONES: Mapping[Region, Tone] = {Region.RUNAWAY: "fail", Region.UNSOLVED: "doubt"}
_LEFT_OUT = "Boards without a point count as failing; means and quantiles leave them out."


def alarms(study: SpreadStudy) -> Report:
    """What a reader must know before any figure: that the run is partial, that points are missing."""
    return (*_partial(study), *_nominal(study), *_without_point(study))


def _partial(study: SpreadStudy) -> Iterator[Passage]:
    if study.ending == "interrupted" and not study.shares:
        title = f"PARTIAL: {study.boards} of {study.job.source.boards} boards, causes not looked for"
        yield Passage(title, ("What follows rests on the boards and the corners.",), "fail")
    elif study.ending == "interrupted":
        title = f"PARTIAL: interrupted after {study.boards} of {study.job.source.boards} boards"
        yield Passage(title, ("All that follows rests on the boards so far.",), "fail")


def _nominal(study: SpreadStudy) -> Iterator[Passage]:
    region = nominal(study.job.stage, {}).region
    if region in (Region.SATURATED, Region.CUT_OFF):
        yield Passage(f"THE NOMINAL POINT ITSELF IS {REGION_WORDS[region].upper()}", (), "fail")


def _without_point(study: SpreadStudy) -> Iterator[Passage]:
    for region, (alarm, what) in _ALARMS.items():
        sampled, corners = int(study.total.regions[region]), study.corners.regions.get(region, 0)
        counted = [f"{sampled} of {study.total.regions.sum()} sampled scenarios"] if sampled else []
        counted += [f"{corners} of {study.corners.count} corners"] if corners else []
        if counted:
            yield Passage(f"{alarm}: {' and '.join(counted)} {what}", (_LEFT_OUT,), _TONES[region])


def sampled_how(study: SpreadStudy) -> Passage:
    """How many boards were sampled, how, and why no more."""
    batch = study.boards_per_batch
    batches = f" in {-(-study.boards // batch)} batches" if batch > 1 else ""
    points = f"each solved at {len(study.job.points)} points of use"
    regions = [(study.total.regions[region], REGION_WORDS[region]) for region in Region]
    return Passage(
        "Sampled",
        (
            f"{study.boards} boards{batches}, seed {study.job.seed}, {points}, biasband {VERSION}",
            _source(study),
            _ending(study),
            f"scenarios: {', '.join(f'{count} {word}' for count, word in regions if count)}",
            *([] if study.limits else ["no requirements, so there are no yields"]),
        ),
        "" if study.ending in ("complete", "good enough") else "doubt",
    )


def _source(study: SpreadStudy) -> str:
    if study.sampling == "plain":
        return "plain: each board drawn at random"
    boards = study.job.source.boards
    rounded = f", rounded up from {study.asked} boards" if boards != study.asked else ""
    if study.boards != boards:
        each = study.tallies[0].boards
        return f"quasi-random: {len(study.tallies)} scramblings, the first {each} points of each"
    each = (boards // SCRAMBLINGS).bit_length() - 1
    return f"quasi-random: {SCRAMBLINGS} scramblings of 2^{each} points{rounded}"


def _ending(study: SpreadStudy) -> str:
    if study.ending == "interrupted" and study.boards == study.job.source.boards:
        return "run complete, but causes not looked for"
    if study.ending == "interrupted":
        return f"interrupted after {study.boards} of {study.job.source.boards} boards"
    if study.goal is None:
        return "run complete"
    rule = " (JCGM 101:2008, 7.9.4)" if isinstance(study.goal, DigitsGoal) else ""
    if study.ending == "good enough":
        return f"stopped when good enough: {study.goal.text}{rule}, after {study.boards} boards"
    return f"GOAL NOT REACHED within {study.boards} boards: {study.goal.text}{rule}"
