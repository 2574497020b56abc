"""A contrast as plain data."""

from __future__ import annotations

from dataclasses import asdict

from biasband.margins.records import Margin
from biasband.show.contrast_table import lesson
from biasband.show.export import Json, finite, margin_json, origin
from biasband.show.parts_json import parts_json
from biasband.show.table import REGION_WORDS
from biasband.signoff.contrasting import Contrast, Contrasted, Trial
from biasband.signoff.merits import Strength
from biasband.signoff.steadiness import Steadiness


def contrast_json(contrast: Contrast) -> Json:
    """Every topology with the same target, the stage's own first."""
    return finite(
        {
            **origin(contrast.stage),
            "seed": contrast.seed,
            "boards": contrast.boards,
            "target": {**asdict(contrast.target), "lent": contrast.lent},
            "topologies": [_row(row) for row in contrast.rows],
            "passing": [row.topology for row in contrast.passing],
            "lesson": list(lesson(contrast)),
        }
    )


def _row(row: Contrasted) -> Json:
    return {
        "topology": row.topology,
        "problem": row.problem or None,
        "left_out": [asdict(left) for left in row.left_out],
        "differs": list(row.differs),
        "strengths": [_strength(each) for each in row.strengths],
        **({"verdict": None} if row.trial is None else _trial(row.trial)),
    }


def _strength(strength: Strength) -> Json:
    merit = strength.merit
    return {"figure": merit.figure, "name": merit.name, "place": strength.place, "value": strength.value}


def _trial(trial: Trial) -> Json:
    rows: tuple[Margin, ...] = trial.held.rows
    return {
        "verdict": trial.verdict.outcome,
        "because": list(trial.verdict.because),
        "parts": parts_json(trial.design, {}),
        "figures": dict(trial.figures),
        "nominal": {**trial.nominal.values, "region": REGION_WORDS[trial.nominal.region]},
        "steadiness": _steadiness(trial.steadiness),
        "margins": [margin_json(row) for row in rows],
        "warnings": list(trial.warnings),
    }


def _steadiness(found: Steadiness) -> Json:
    """Over h_FE and ambient alone: ranges, and how far the collector current follows h_FE."""
    return {
        "ranges": {
            name: {"low": each.low.value, "high": each.high.value} for name, each in found.ranges.items()
        },
        "missing": None if found.missing is None else REGION_WORDS[found.missing],
        "current_ratio": found.current_ratio,
        "gain_ratio": found.gain_ratio,
        "followed": found.followed,
    }
