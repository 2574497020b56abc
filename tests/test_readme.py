"""The README is run as written: its output block and its Python lines are what the program gives."""

from __future__ import annotations

import os
import re
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")


def _block(language: str) -> str:
    found = re.search(rf"```{language}\n(.*?)```", README, re.DOTALL)
    assert found is not None
    return found.group(1)


def _without_release(text: str) -> str:
    """The text but for the version, which an uninstalled checkout does not know."""
    return re.sub(r"biasband \S.*", "biasband", text)


def test_output_block_is_a_real_run() -> None:
    environment = {**os.environ, "COLUMNS": "80", "NO_COLOR": "1", "PYTHONIOENCODING": "utf-8"}
    run = subprocess.run(
        [sys.executable, "-m", "biasband", "review", "samples/hive_microphone.toml"],
        cwd=ROOT,
        env=environment,
        capture_output=True,
        encoding="utf-8",
        stdin=subprocess.DEVNULL,
        check=False,
    )
    assert run.returncode == 0
    assert _without_release(run.stdout.rstrip()) == _without_release(_block("text").rstrip())


def test_python_lines_run_as_written(monkeypatch) -> None:
    monkeypatch.chdir(ROOT)
    names: dict[str, object] = {}
    exec(_block("python"), names)
    assert list(names["result"].margins["quantity"][:1]) == ["collector_voltage"]


def test_first_paragraph_states_the_job() -> None:
    first = README.split("\n\n")[1]
    for word in ("bias network", "buyable parts", "margin table", "review", "temperature"):
        assert word in first
