"""Record fields, quantities and table columns are words of the glossary in DEVELOPERS.md."""

from __future__ import annotations

import re
from dataclasses import fields
from pathlib import Path

import pytest

from biasband.boards.estimates import Estimate, Estimates, Figures
from biasband.boards.in_use import InUse
from biasband.boards.intervals import Between
from biasband.boards.job import Job
from biasband.boards.monotone import Monotone
from biasband.boards.outside import Farthest, Outside
from biasband.boards.pick_freeze import Share, VarianceShares
from biasband.boards.rare import Rare
from biasband.boards.sampling import Boards, Spread
from biasband.boards.streams import Block
from biasband.boards.summary import Summary
from biasband.boards.tally import Bound, Scale, Tally
from biasband.boards.variance import VarianceCauses
from biasband.margins.checks import NotMade, Standing
from biasband.margins.holding import Holding, Nominal
from biasband.margins.limits import HeldLimit
from biasband.margins.over_temperature import Failure
from biasband.margins.records import Evidence, Margin
from biasband.margins.verdict import Verdict
from biasband.signoff.beyond import Beyond
from biasband.signoff.contrasting import Contrast, Contrasted, Trial
from biasband.signoff.drifting import Drift, DriftStudy, LimitDrift
from biasband.signoff.merits import Merit, Strength
from biasband.signoff.parts_list import CapacitorLine, PartLine
from biasband.signoff.recasting import LeftOut, Recast
from biasband.signoff.sampling_run import Run
from biasband.signoff.snapping import Snapped, SnapStudy
from biasband.signoff.spread_study import Held, SpreadStudy
from biasband.signoff.steadiness import Steadiness
from biasband.signoff.study import CornerStudy, Review
from biasband.values.capacitors import CapacitorChoice, CapacitorStep
from biasband.values.choosing import Design, PartChoice
from biasband.values.joint import Contender, Contest
from biasband.values.pairing import Offer
from biasband.variation.causes import Causes
from biasband.variation.corners import Corners, Extreme, Range
from biasband.variation.finite_change import FiniteChange, Stability
from biasband.variation.rss import Interval

TEXT = (Path(__file__).parent.parent / "DEVELOPERS.md").read_text(encoding="utf-8")
GLOSSARY = TEXT.split("## Glossary")[1].split("\n## ")[0]
WORDS = set(re.findall(r"[A-Za-z_]+", GLOSSARY))

RECORDS = (
    CapacitorChoice, CapacitorLine, CapacitorStep,
    Boards, Causes, Contender, Contest, Corners, CornerStudy, Design, Evidence, Extreme, Holding, Interval,
    Margin, Nominal, NotMade, Offer, PartChoice, PartLine, Range, Review, Snapped, SnapStudy, Spread,
    SpreadStudy, Standing, Verdict, Drift, DriftStudy, Failure, FiniteChange, HeldLimit, LimitDrift,
    Stability, Between, Beyond, Block, Bound, Estimate, Estimates, Farthest, Figures, Held, InUse, Job,
    Monotone, Outside, Rare, Run, Scale, Share, Summary, Tally, VarianceCauses, VarianceShares,
    Contrast, Contrasted, LeftOut, Merit, Recast, Steadiness, Strength, Trial,
)  # fmt: skip


@pytest.mark.parametrize("record", RECORDS, ids=lambda record: record.__name__)
def test_fields_are_words_of_the_glossary(record: type) -> None:
    missing = [field.name for field in fields(record) if field.name not in WORDS]
    assert missing == []
