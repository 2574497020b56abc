"""Results as JSON: SI units, full precision, stable keys, NaN as null."""

from __future__ import annotations

import json
import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import asdict
from typing import Any

from biasband.boards.sampling import QUANTILES, Boards, Sample
from biasband.circuit.operating_point import Region
from biasband.constants import VERSION
from biasband.margins.records import Margin
from biasband.show.beyond_json import beyond_json
from biasband.show.capacitors_json import capacitors_json
from biasband.show.parts_json import markings_json, parts_json
from biasband.show.summary import Attempt
from biasband.show.table import REGION_WORDS, code
from biasband.signoff.drifting import DriftStudy, LimitDrift
from biasband.signoff.snapping import SnapStudy
from biasband.signoff.study import Review
from biasband.stage import Stage
from biasband.values.choosing import Design
from biasband.values.joint import Contender, Contest
from biasband.variation.causes import Causes
from biasband.variation.corners import Corners

Json = dict[str, Any]

SPREAD_PLACES = ("nominal_use", "lowest_in_use", "highest_in_use")


def as_text(result: Json | list[Json]) -> str:
    """Write a result as JSON text, in ASCII, so that it passes any output unharmed."""
    return json.dumps(result, indent=2, allow_nan=False) + "\n"


def finite(result: Json) -> Json:
    """The same with null for every number that JSON does not have."""
    return {key: _finite_value(value) for key, value in result.items()}


def _finite_value(value: Any) -> Any:
    if isinstance(value, dict):
        return finite(value)
    if isinstance(value, list | tuple):
        return [_finite_value(each) for each in value]
    return None if isinstance(value, float) and not math.isfinite(value) else value


def review_json(review: Review) -> Json:
    """A review as plain data (formats: "JSON")."""
    boards, words = review.evidence.boards, review.looked_into
    evidence, standing = review.evidence, review.standing
    result = {
        **origin(review.stage),
        "seed": boards.seed,
        "boards": boards.boards,
        "boards_per_batch": boards.boards_per_batch,
        "parts": parts_json(
            review.design, {name: evidence.corners.ranges[name].high.value for name in words}
        ),
        "capacitors": capacitors_json(review.design),
        "choice": _choice(review.design.contest),
        "nominal": {**review.nominal.values, "region": REGION_WORDS[review.nominal.region]},
        "corners": _ranges(evidence.corners, words),
        "rss": {name: {"low": evidence.rss[name].low, "high": evidence.rss[name].high} for name in words},
        "spread": _spread(boards),
        "causes": {name: causes_json(evidence.causes[name]) for name in words},
        "margins": [margin_json(row) for row in review.rows],
        "checks": {
            "made": [check.name for check in standing.made],
            "not_made": [{"check": each.check, "missing": each.missing} for each in standing.not_made],
        },
        "beyond": [beyond_json(each) for each in review.beyond],
        "outside": [asdict(each) for each in evidence.outside],
        "warnings": list(review.warnings),
        "verdict": review.verdict.outcome,
        "because": list(review.verdict.because),
    }
    return finite(result)


def summary_json(attempts: Sequence[Attempt]) -> list[Json]:
    """The reviews of several stages; in place of one that could not be made, what stood in its way."""
    return [
        review_json(attempt.review) if attempt.review else _problem(attempt.path, attempt.problem)
        for attempt in attempts
    ]


def _problem(path: str, problem: str) -> Json:
    return {"files": [{"path": path, "sha256": None}], "biasband": VERSION, "error": problem.split("\n")}


def design_json(design: Design) -> Json:
    """A design as plain data: the parts of `review_json`, without what only a review knows."""
    return finite(
        {
            **origin(design.stage),
            "parts": parts_json(design, {}),
            "capacitors": capacitors_json(design),
            "choice": _choice(design.contest),
            "warnings": list(design.warnings),
        }
    )


def snap_json(study: SnapStudy) -> list[Json]:
    """Snapped values as plain data [Ω]."""
    return [
        finite(
            {
                "asked": row.asked,
                "series": row.snap.series,
                "value": row.snap.value,
                "below": row.snap.below,
                "above": row.snap.above,
                "chosen": row.snap.chosen,
                "code": code(row.snap.chosen),
                "error": row.snap.error,
                "worst_error": study.worst_error,
                "markings": markings_json(row.markings),
                "pairs": [asdict(pair) for pair in row.pairs],
                "notes": [*row.notes, *row.against],
            }
        )
        for row in study.rows
    ]


def _choice(contest: Contest | None) -> Json | None:
    """The sets of values that were compared, the best first."""
    if contest is None:
        return None
    nearest = contest.nearest
    return {
        "sets": contest.sets,
        "decided_by": "swing" if contest.by_swing else "margin_share",
        "proved": contest.proved,
        "contenders": [_contender(each, contest.names) for each in contest.contenders],
        "nearest": None if nearest is None else _contender(nearest, contest.names),
    }


def _contender(contender: Contender, names: Sequence[str]) -> Json:
    return {
        "values": dict(zip(names, contender.values, strict=True)),
        "margin_share": contender.share,
        "corner_share": contender.corner_share,
        "smallest_margin": margin_json(contender.smallest),
        "failing": [row.quantity if row.standing else row.id for row in contender.failing],
        "collector_current": contender.current,
        "symmetric_peak_swing": contender.swing,
    }


def corners_json(design: Design, corners: Corners, words: Iterable[str]) -> Json:
    """The corners of a designed stage as plain data."""
    return finite(
        {
            **origin(design.stage),
            "parts": parts_json(design, {}),
            "capacitors": capacitors_json(design),
            "corners": _ranges(corners, words),
            "count": corners.count,
            "regions": regions_json(corners.regions),
            "warnings": list(design.warnings),
        }
    )


def drift_json(study: DriftStudy) -> Json:
    """A stage over ambient temperature as plain data: columns of the sweep, what fails where, stability."""
    slopes = ("slope", "relative_slope", "mean_slope", "relative_mean_slope")
    return finite(
        {
            **origin(study.design.stage),
            "parts": parts_json(study.design, {}),
            "capacitors": capacitors_json(study.design),
            "temperatures": study.temperatures.tolist(),
            "nominal_ambient": study.nominal_ambient,
            "drift": {
                name: {
                    **{line: getattr(found, line).tolist() for line in ("nominal", "low", "high")},
                    **{slope: getattr(found, slope) for slope in slopes},
                }
                for name, found in study.drifts.items()
            },
            "regions": {
                "nominal": [REGION_WORDS[region] for region in study.regions],
                "corners": [regions_json(found.regions) for found in study.corners],
            },
            "start": study.start,
            "limits": [_limit_drift(each) for each in study.limits],
            "not_made": [{"check": each.check, "missing": each.missing} for each in study.standing.not_made],
            "stability": {
                "beta": study.stability.beta,
                "region": REGION_WORDS[study.stability.region],
                "changes": {
                    change.name: {**asdict(change), "region": REGION_WORDS[change.region]}
                    for change in study.stability.changes
                },
            },
            "warnings": list(study.design.warnings),
        }
    )


def _limit_drift(each: LimitDrift) -> Json:
    limit = each.limit
    return {
        "id": limit.id or None,
        "quantity": limit.quantity,
        "limit": limit.limit,
        "side": limit.side,
        "standing": limit.standing,
        "colder": asdict(each.colder),
        "hotter": asdict(each.hotter),
    }


def origin(stage: Stage) -> Json:
    """Which stage this is, the files that were read, and the program."""
    head = ("title", "document", "revision", "topology", "polarity")
    return {
        "stage": {name: getattr(stage, name) for name in head},
        "files": [{"path": file.path, "sha256": file.sha256} for file in stage.files],
        "biasband": VERSION,
    }


def _ranges(corners: Corners, words: Iterable[str]) -> Json:
    return {
        name: {
            "low": found.low.value,
            "high": found.high.value,
            "low_at": dict(found.low.at),
            "high_at": dict(found.high.at),
            "extreme_at": "interior" if found.interior else "corner",
        }
        for name, found in ((name, corners.ranges[name]) for name in words)
    }


def _spread(boards: Boards) -> Json:
    quantities = {
        name: {place: _sample(getattr(found, place)) for place in SPREAD_PLACES}
        for name, found in boards.spread.items()
    }
    return {**quantities, "regions": regions_json(boards.regions)}


def _sample(sample: Sample) -> Json:
    quantiles = {f"p{100 * share:g}": sample.quantile(share) for share in QUANTILES}
    return {"mean": sample.mean, "sd": sample.sd, **quantiles}


def regions_json(regions: Mapping[Region, int]) -> Json:
    """How many scenarios stand in each region, by its name in tables."""
    return {REGION_WORDS[region]: count for region, count in regions.items()}


def causes_json(causes: Causes) -> Json:
    """Shares of the worst case by contributor, of both sides."""
    return {"low": dict(causes.low), "high": dict(causes.high)}


def margin_json(row: Margin) -> Json:
    """One row of the margin table."""
    return {
        "id": None if row.standing else row.id,
        "quantity": row.quantity,
        "limit": row.limit,
        "side": row.side,
        "judged_by": row.judged_by,
        "nominal": row.nominal,
        "corners": row.corners,
        "rss": row.rss,
        "yield": row.yield_held,
        "yield_low": row.yield_low,
        "margin": row.margin,
        "margin_share": row.margin_share,
        "verdict": row.verdict,
        "worst_at": dict(row.worst.at),
        "main_cause": row.main_cause,
        "standing": row.standing,
    }
