"""The order in which a reader reads: each report as tables and passages, not yet laid out."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from biasband.circuit.quantities import Quantity
from biasband.constants import VERSION
from biasband.parts.derating import in_words
from biasband.show.analysis_tables import corners_table, design_table
from biasband.show.beyond_words import beyond_words
from biasband.show.capacitor_tables import capacitor_parts, capacitor_values
from biasband.show.cause_tables import cause_tables
from biasband.show.cautions import CAUTIONS
from biasband.show.choice_table import choice_table
from biasband.show.contrast_table import (
    contrast_table,
    contrast_warnings,
    lesson,
    outcome,
    target_text,
    yields_on,
)
from biasband.show.drift_tables import drift_table, failure_table, first_to_fail, swept
from biasband.show.parts_table import parts_table
from biasband.show.prose import frozen_or_chosen, head, joint_yield, rss_assumption, sampled
from biasband.show.regions import region_sentences
from biasband.show.review_tables import margin_table, nominal_table, summary_table
from biasband.show.sampled_words import alarms, sampled_how
from biasband.show.snap_tables import offer_table, snap_tables
from biasband.show.spread_pictures import histograms
from biasband.show.spread_tables import estimate_tables
from biasband.show.stability_table import stability_table
from biasband.show.summary import Attempt
from biasband.show.surroundings import circumstances, surroundings
from biasband.show.table import OUTCOME_TONES, Passage, Report
from biasband.show.yield_table import rss_passage, yield_table
from biasband.signoff.contrasting import Contrast
from biasband.signoff.drifting import DriftStudy
from biasband.signoff.parts_list import parts_list
from biasband.signoff.snapping import SnapStudy
from biasband.signoff.spread_study import SpreadStudy
from biasband.signoff.study import Review
from biasband.values.choosing import Design
from biasband.variation.corners import Corners

_CAUTIONS = Passage("Cautions", CAUTIONS)


def review_report(review: Review) -> Report:
    """A review as a reviewer reads it, top to bottom, in a minute."""
    return (
        _header(review.design, sampled(review.evidence.boards), in_words(review.stage.derating)),
        Passage("Held against", surroundings(review.stage, review.nominal)),
        parts_table(review.parts_list, review.design),
        *capacitor_parts(review.design),
        *_compared(review.design),
        nominal_table(review),
        Passage("", region_sentences(review)),
        margin_table(review),
        *_statistics(review),
        *_warnings(review.warnings),
        _verdict(review),
        _CAUTIONS,
    )


def summary_report(attempts: Sequence[Attempt]) -> Report:
    """Several stages, one line each."""
    return (summary_table(attempts),)


def design_report(design: Design) -> Report:
    """Ideal values with their formulas, and the preferred values."""
    program = f"biasband {VERSION}"
    return (
        _header(design, program),
        design_table(design),
        *capacitor_values(design),
        parts_table(parts_list(design, {}), design),
        *_compared(design),
        *_warnings(design.warnings),
        _CAUTIONS,
    )


def snap_report(study: SnapStudy) -> Report:
    """Preferred values, the marks of the parts, and pairs."""
    return snap_tables(study)


def corners_report(design: Design, corners: Corners, words: Mapping[str, Quantity]) -> Report:
    """The corners of a stage in depth."""
    return (
        _header(design, f"biasband {VERSION}"),
        corners_table(corners, words),
        *_warnings(design.warnings),
        _CAUTIONS,
    )


def spread_report(study: SpreadStudy) -> Report:
    """The sampled boards of a stage in depth."""
    return (
        *alarms(study),
        _header(study.design),
        sampled_how(study),
        *yield_table(study),
        *histograms(study),
        *estimate_tables(study),
        *cause_tables(study),
        *beyond_words(study.beyond, corners=study.corners.count, boards=study.boards),
        *rss_passage(study),
        *_warnings(study.warnings),
        _CAUTIONS,
    )


def drift_report(study: DriftStudy) -> Report:
    """A stage over ambient temperature."""
    return (
        _header(study.design, f"biasband {VERSION}"),
        swept(study),
        *(drift_table(study, name) for name in study.drifts),
        failure_table(study),
        stability_table(study.stability),
        *_warnings(study.design.warnings),
        first_to_fail(study),
        _CAUTIONS,
    )


def contrast_report(contrast: Contrast) -> Report:
    """The same target in every topology, side by side."""
    stage = contrast.stage
    told = lesson(contrast)
    return (
        Passage(stage.title, (*head(stage), yields_on(contrast), in_words(stage.derating))),
        Passage("Held against", (*circumstances(stage), target_text(contrast))),
        contrast_table(contrast),
        *([Passage("Over h_FE and ambient alone", told)] if told else []),
        *_warnings(contrast_warnings(contrast)),
        outcome(contrast),
        _CAUTIONS,
    )


def _header(design: Design, *more: str) -> Passage:
    values = frozen_or_chosen(design.frozen, design.chosen, kept=design.kept)
    return Passage(design.stage.title, (*head(design.stage), values, *more))


def _compared(design: Design) -> Report:
    """The sets of values that were compared, and the pairs that were asked for."""
    sets = () if design.contest is None else (choice_table(design.contest, design.stage),)
    return (*sets, *(offer_table(offer) for offer in design.offers))


def _statistics(review: Review) -> Report:
    if not review.stage.requirements:
        return ()
    evidence = review.evidence
    return (
        Passage("", (joint_yield(review), rss_assumption(review))),
        *beyond_words(review.beyond, corners=evidence.corners.count, boards=evidence.boards.boards),
    )


def _warnings(warnings: tuple[str, ...]) -> Report:
    return (Passage("Warnings", warnings, "doubt"),) if warnings else ()


def _verdict(review: Review) -> Passage:
    verdict = review.verdict
    return Passage(verdict.line, verdict.because, OUTCOME_TONES[verdict.outcome])
