"""A spread as JSON: the figures of its tables in SI, full precision, with their intervals."""

from __future__ import annotations

from dataclasses import asdict

from biasband.boards.estimates import Estimates, Figures
from biasband.boards.in_use import PLACES
from biasband.boards.variance import VarianceCauses
from biasband.circuit.operating_point import Region
from biasband.show.beyond_json import beyond_json, limit_json
from biasband.show.capacitors_json import capacitors_json
from biasband.show.export import Json, causes_json, finite, origin, regions_json
from biasband.show.parts_json import parts_json
from biasband.show.yield_table import inside_rss
from biasband.signoff.spread_study import Held, SpreadStudy


def spread_json(study: SpreadStudy) -> Json:
    """The sampled boards of a designed stage as plain data."""
    stage, design = study.job.stage, study.design
    return finite(
        {
            **origin(stage),
            **_sampled(study),
            "parts": parts_json(design, {}),
            "capacitors": capacitors_json(design),
            "spread": {
                **{name: _places(found) for name, found in study.estimates.items()},
                "regions": regions_json(_counted(study)),
            },
            "yields": [
                {**limit_json(limit), **_held(held)}
                for limit, held in zip(study.limits, study.yields, strict=True)
            ],
            "joint_yield": _held(study.joint_yield) if study.limits else None,
            "causes": {name: causes_json(found) for name, found in study.causes.items()},
            "variance_shares": {name: _variance(found) for name, found in study.shares.items()},
            "beyond": [beyond_json(each) for each in study.beyond],
            "outside": [asdict(each) for each in study.outside],
            "rss": {name: {"low": found.low, "high": found.high} for name, found in study.rss.items()},
            "inside_rss": inside_rss(study),
            "warnings": list(study.warnings),
        }
    )


def _sampled(study: SpreadStudy) -> Json:
    """How many boards there are, how they were drawn, and why no more."""
    return {
        "seed": study.job.seed,
        "boards": study.boards,
        "boards_per_batch": study.boards_per_batch,
        "sampling": study.sampling,
        "asked": study.asked,
        "until": None if study.goal is None else study.goal.text,
        "ending": study.ending,
        "partial": study.ending == "interrupted",
        "points_of_use": len(study.job.points),
    }


def _counted(study: SpreadStudy) -> dict[Region, int]:
    """How many sampled scenarios stand in each region that there is."""
    return {region: int(study.total.regions[region]) for region in Region if study.total.regions[region]}


def _places(found: Estimates) -> Json:
    return {place: _figures(getattr(found, place)) for place in PLACES}


def _figures(found: Figures) -> Json:
    quantiles = (each.named(f"p{100 * share:g}") for share, each in found.quantiles.items())
    return {
        **found.mean.named("mean"),
        "sd": found.sd,
        **{key: value for each in quantiles for key, value in each.items()},
        "lowest": found.lowest,
        "highest": found.highest,
        "resolution": found.resolution,
    }


def _held(held: Held) -> Json:
    """A yield with its interval, the bound that it is judged by, and the share of time in use."""
    return {
        "yield": held.boards,
        "yield_interval": [held.interval.low, held.interval.high],
        "yield_low": held.bound,
        "time": held.time,
    }


def _variance(found: VarianceCauses) -> Json:
    return {place: asdict(getattr(found, place)) for place in PLACES}
