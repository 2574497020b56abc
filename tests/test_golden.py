"""Golden text: what each sample's review prints at 80 columns, so that no change of it goes unseen.

After a change that is meant: `python tests/test_golden.py` writes the texts anew; read the diff.
"""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
GOLDEN = ROOT / "tests" / "golden"
SAMPLES = sorted(path.stem for path in (ROOT / "samples").glob("*.toml"))


def printed(sample: str) -> str:
    """What a review of a sample prints, with few boards: the text is what matters here."""
    words = ["-m", "biasband", "review", f"samples/{sample}.toml", "--boards", "2048"]
    environment = {**os.environ, "COLUMNS": "80", "NO_COLOR": "1", "PYTHONIOENCODING": "utf-8"}
    run = subprocess.run(
        [sys.executable, *words],
        cwd=ROOT,
        env=environment,
        capture_output=True,
        encoding="utf-8",
        stdin=subprocess.DEVNULL,
        check=False,
    )
    assert run.stderr == ""
    return run.stdout


def test_every_sample_has_its_text_and_no_other_is_kept() -> None:
    assert sorted(path.stem for path in GOLDEN.glob("*.txt")) == SAMPLES


@pytest.mark.parametrize("sample", SAMPLES)
def test_review_prints_what_it_printed(sample: str) -> None:
    assert printed(sample) == (GOLDEN / f"{sample}.txt").read_text(encoding="utf-8")


if __name__ == "__main__":
    for name in SAMPLES:
        (GOLDEN / f"{name}.txt").write_text(printed(name), encoding="utf-8")
