"""What a review costs, as ratios: run `python tests/benchmarks/bench_review.py`.

Goals: a review of a sample with 2^15 boards at all points of use, start-up included, takes at most
10 times what importing numpy and scipy.optimize takes; all corners of a four-resistor stage cost
milliseconds.
"""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Callable
from functools import partial
from pathlib import Path

import numpy as np
from clock import shortest as shortest_of

from biasband.circuit.quantities import words
from biasband.files.stage_file import read_stage
from biasband.signoff import study
from biasband.variation.contributors import axes
from biasband.variation.evaluation import cut_off_current, evaluate

ROOT = Path(__file__).parent.parent.parent
SAMPLE = "samples/hive_microphone.toml"
REPEATS = 5
shortest = partial(shortest_of, repeats=REPEATS)


def process(*words: str) -> Callable[[], object]:
    """A whole Python process, start-up included."""
    return lambda: subprocess.run([sys.executable, *words], cwd=ROOT, check=True, capture_output=True)


def main() -> None:
    """Print the ratios."""
    imports = shortest(process("-c", "import numpy, scipy.optimize"))
    for sample in ("hive_microphone", "wind_mast", "river_gauge"):
        review = shortest(process("-m", "biasband", "review", f"samples/{sample}.toml"))
        ratio = review / imports
        print(f"review of {sample}: {ratio:.1f} times the import of numpy and scipy.optimize (goal: 10)")
    print(f"--help: {shortest(process('-m', 'biasband', '--help')) / imports:.2f} times")

    stage = study.design(read_stage(ROOT / SAMPLE)).stage
    box, vocabulary, cut_off = axes(stage), words(stage), cut_off_current(stage)
    sides = 2.0 * np.indices((2,) * len(box)).reshape(len(box), -1) - 1.0
    corners = dict(zip((axis.name for axis in box), sides, strict=True))
    alone = {"collector_voltage": vocabulary["collector_voltage"]}
    for measures, what in ((alone, "one quantity"), (vocabulary, "all quantities")):
        cost = shortest(lambda measures=measures: evaluate(stage, corners, measures, cut_off=cut_off))
        print(f"all {sides.shape[1]} corners, {what}: {1e3 * cost:.1f} ms")
    print(f"corners with the search of the box: {1e3 * shortest(lambda: study.corners(stage)):.0f} ms")


if __name__ == "__main__":
    main()
