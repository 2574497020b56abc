"""Record fields, quantities and table columns are words of the glossary in DEVELOPERS.md."""

from __future__ import annotations

import re
from dataclasses import fields
from pathlib import Path

import pytest

from biasband.margins.checks import NotMade, Standing
from biasband.margins.records import Evidence, Margin
from biasband.margins.verdict import Verdict
from biasband.signoff.study import CornerStudy, Nominal, Review, SpreadStudy
from biasband.values.choosing import Design, PartChoice
from biasband.variation.causes import Causes
from biasband.variation.corners import Corners, Extreme, Range
from biasband.variation.rss import Interval
from biasband.variation.sampling import Boards, Spread

TEXT = (Path(__file__).parent.parent / "DEVELOPERS.md").read_text(encoding="utf-8")
GLOSSARY = TEXT.split("## Glossary")[1].split("\n## ")[0]
WORDS = set(re.findall(r"[A-Za-z_]+", GLOSSARY))

RECORDS = (
    Boards, Causes, Corners, CornerStudy, Design, Evidence, Extreme, Interval, Margin, Nominal, NotMade,
    PartChoice, Range, Review, Spread, SpreadStudy, Standing, Verdict,
)  # fmt: skip


@pytest.mark.parametrize("record", RECORDS, ids=lambda record: record.__name__)
def test_fields_are_words_of_the_glossary(record: type) -> None:
    missing = [field.name for field in fields(record) if field.name not in WORDS]
    assert missing == []
