"""The order in which a reader reads: each report as tables and passages, not yet laid out."""

from __future__ import annotations

from biasband.parts.derating import PROFILES
from biasband.show.cautions import CAUTIONS
from biasband.show.prose import frozen_or_chosen, head, joint_yield, rss_assumption
from biasband.show.release import version
from biasband.show.review_tables import margin_table, nominal_table, parts_table
from biasband.show.table import Passage, Report, Tone
from biasband.signoff.study import Review

_TONES: dict[str, Tone] = {"pass": "pass", "fail": "fail", "inconclusive": "doubt"}


def review_report(review: Review) -> Report:
    """A review as a reviewer reads it, top to bottom, in a minute."""
    return (
        _header(review),
        parts_table(review),
        nominal_table(review),
        margin_table(review),
        *_statistics(review),
        *_warnings(review.warnings),
        _verdict(review),
        Passage("Cautions", CAUTIONS),
    )


def _header(review: Review) -> Passage:
    boards = review.evidence.boards
    sentences = (
        *head(review.stage),
        frozen_or_chosen(review.design.frozen, review.design.chosen),
        f"{boards.boards} boards, seed {boards.seed}, {boards.points} points of use, biasband {version()}",
        PROFILES[review.stage.derating].sentence,
    )
    return Passage(review.stage.title, sentences)


def _statistics(review: Review) -> Report:
    if not review.stage.requirements:
        return ()
    return (Passage("", (joint_yield(review), rss_assumption(review))),)


def _warnings(warnings: tuple[str, ...]) -> Report:
    return (Passage("Warnings", warnings, "doubt"),) if warnings else ()


def _verdict(review: Review) -> Passage:
    verdict = review.verdict
    return Passage(verdict.line, verdict.because, _TONES[verdict.outcome])
