"""Results as JSON: SI units, full precision, stable keys, NaN as null."""

from __future__ import annotations

import json
import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import asdict
from typing import Any

from biasband.circuit.operating_point import Region
from biasband.constants import VERSION
from biasband.margins.records import Margin
from biasband.parts.marking import Markings
from biasband.show.summary import Attempt
from biasband.show.table import REGION_WORDS, code
from biasband.signoff.parts_list import PartLine, parts_list
from biasband.signoff.snapping import SnapStudy
from biasband.signoff.study import Review
from biasband.stage import Resistor, Stage
from biasband.values.choosing import Design, PartChoice
from biasband.values.joint import Contender, Contest
from biasband.variation.causes import Causes
from biasband.variation.corners import Corners
from biasband.variation.sampling import QUANTILES, Boards, Sample

Json = dict[str, Any]

SPREAD_PLACES = ("nominal_use", "lowest_in_use", "highest_in_use")


def as_text(result: Json | list[Json]) -> str:
    """Write a result as JSON text, in ASCII, so that it passes any output unharmed."""
    return json.dumps(result, indent=2, allow_nan=False) + "\n"


def _finite(result: Json) -> Json:
    """The same with null for every number that JSON does not have."""
    return {key: _finite_value(value) for key, value in result.items()}


def _finite_value(value: Any) -> Any:
    if isinstance(value, dict):
        return _finite(value)
    if isinstance(value, list):
        return [_finite_value(each) for each in value]
    return None if isinstance(value, float) and not math.isfinite(value) else value


def review_json(review: Review) -> Json:
    """A review as plain data (formats: "JSON")."""
    boards, words = review.evidence.boards, review.quantities
    evidence, standing = review.evidence, review.standing
    result = {
        **_origin(review.stage),
        "seed": boards.seed,
        "boards": boards.boards,
        "boards_per_batch": boards.boards_per_batch,
        "parts": _parts(review.design, {name: evidence.corners.ranges[name].high.value for name in words}),
        "choice": _choice(review.design.contest),
        "nominal": {**review.nominal.values, "region": REGION_WORDS[review.nominal.region]},
        "corners": _ranges(evidence.corners, words),
        "rss": {name: {"low": evidence.rss[name].low, "high": evidence.rss[name].high} for name in words},
        "spread": _spread(boards),
        "causes": {name: _causes(evidence.causes[name]) for name in words},
        "margins": [_margin(row) for row in review.rows],
        "checks": {
            "made": [check.name for check in standing.made],
            "not_made": [{"check": each.check, "missing": each.missing} for each in standing.not_made],
        },
        "warnings": list(review.warnings),
        "verdict": review.verdict.outcome,
        "because": list(review.verdict.because),
    }
    return _finite(result)


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
    return _finite(
        {
            **_origin(design.stage),
            "parts": _parts(design, {}),
            "choice": _choice(design.contest),
            "warnings": list(design.warnings),
        }
    )


def snap_json(study: SnapStudy) -> list[Json]:
    """Snapped values as plain data [Ω]."""
    return [
        _finite(
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
                "markings": _markings(row.markings),
                "pairs": [asdict(pair) for pair in row.pairs],
                "notes": [*row.notes, *row.against],
            }
        )
        for row in study.rows
    ]


def _markings(found: Markings) -> Json:
    return {
        "letter_code": found.letter_code,
        "bands": found.bands.colours and list(found.bands.colours),
        "six_bands": found.six_bands.colours and list(found.six_bands.colours),
        "chip_three": found.chip_three,
        "chip_four": found.chip_four,
        "chip_e96": found.chip_e96,
    }


def _choice(contest: Contest | None) -> Json | None:
    """The sets of values that were compared, the best first."""
    if contest is None:
        return None
    nearest = contest.nearest
    return {
        "sets": contest.sets,
        "decided_by": "swing" if contest.by_swing else "margin_share",
        "contenders": [_contender(each, contest.names) for each in contest.contenders],
        "nearest": None if nearest is None else _contender(nearest, contest.names),
    }


def _contender(contender: Contender, names: Sequence[str]) -> Json:
    return {
        "values": dict(zip(names, contender.values, strict=True)),
        "margin_share": contender.share,
        "corner_share": contender.corner_share,
        "smallest_margin": _margin(contender.smallest),
        "failing": [row.quantity if row.standing else row.id for row in contender.failing],
        "collector_current": contender.current,
        "symmetric_peak_swing": contender.swing,
    }


def corners_json(design: Design, corners: Corners, words: Iterable[str]) -> Json:
    """The corners of a designed stage as plain data."""
    return _finite(
        {
            **_origin(design.stage),
            "parts": _parts(design, {}),
            "corners": _ranges(corners, words),
            "count": corners.count,
            "regions": _regions(corners.regions),
            "warnings": list(design.warnings),
        }
    )


def spread_json(design: Design, boards: Boards) -> Json:
    """The sampled boards of a designed stage as plain data."""
    return _finite(
        {
            **_origin(design.stage),
            "seed": boards.seed,
            "boards": boards.boards,
            "boards_per_batch": boards.boards_per_batch,
            "parts": _parts(design, {}),
            "spread": _spread(boards),
            "warnings": list(design.warnings),
        }
    )


def _origin(stage: Stage) -> Json:
    head = ("title", "document", "revision", "topology", "polarity")
    return {
        "stage": {name: getattr(stage, name) for name in head},
        "files": [{"path": file.path, "sha256": file.sha256} for file in stage.files],
        "biasband": VERSION,
    }


def _parts(design: Design, worst: Mapping[str, float]) -> Json:
    """Every part; `worst` holds the highest value of each quantity, where that is known."""
    powers = {part.name: worst[power] for part in design.parts if (power := _power(part.name)) in worst}
    lines = {name: line for line in parts_list(design, powers) for name in line.references}
    return {
        part.name: _part(part, design.stage.resistor(part.name), lines[part.name], powers.get(part.name))
        for part in design.parts
    }


def _power(name: str) -> str:
    return f"resistor_power.{name}"


def _part(part: PartChoice, resistor: Resistor, line: PartLine, power: float | None) -> Json:
    return {
        "hand": None if part.hand is None else part.hand.ohms,
        "ideal": None if part.ideal is None else part.ideal.ohms,
        "value": part.value,
        "chosen": part.chosen,
        "kept": resistor.kept,
        "series": resistor.series if part.chosen else None,
        "tolerance": resistor.tolerance,
        "tempco": resistor.tempco,
        "code": code(part.value),
        "markings": _markings(line.markings),
        "stock": None if line.item is None else asdict(line.item),
        "power_worst": power,
        "power_rating": resistor.power_rating,
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
    return {**quantities, "regions": _regions(boards.regions)}


def _sample(sample: Sample) -> Json:
    quantiles = {f"p{100 * share:g}": sample.quantile(share) for share in QUANTILES}
    return {"mean": sample.mean, "sd": sample.sd, **quantiles}


def _regions(regions: Mapping[Region, int]) -> Json:
    return {REGION_WORDS[region]: count for region, count in regions.items()}


def _causes(causes: Causes) -> Json:
    return {"low": dict(causes.low), "high": dict(causes.high)}


def _margin(row: Margin) -> Json:
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
