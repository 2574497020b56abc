"""Draws: which random numbers a board takes, and the coordinates that they give.

Each draw has its own counter-based stream, named after it: adding a contributor does not reshuffle
the others, two designs can be compared on the same draws, and the numbers do not depend on the
chunk they are drawn in. A batch mean has a stream of its own, indexed by batch.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from biasband.circuit.scenarios import Array
from biasband.errors import UsageError
from biasband.stage import Capacitor, Resistor, Stage
from biasband.variation.contributors import (
    BASE_EMITTER,
    GAIN,
    LEAKAGE,
    NEGATIVE,
    SUPPLY,
    batch_axis,
    batch_groups,
    board_axes,
    group_axis,
    tempcos,
    tolerances,
)
from biasband.variation.distributions import (
    UNIFORM,
    Batch,
    Shape,
    plain_shape,
    shape_around,
    shape_between,
)


@dataclass(frozen=True)
class Draw:
    """One coordinate per board: its stream's name and its distribution; `by_batch`: alike in a batch."""

    name: str
    shape: Shape | Batch = UNIFORM
    by_batch: bool = False


def draws(stage: Stage) -> tuple[Draw, ...]:
    """Every draw of a stage: a part's tolerance and what else changes it are separate ones."""
    found = [draw for resistor in stage.resistors for draw in _resistor_draws(resistor)]
    found += _group_draws(stage)
    found += [draw for capacitor in stage.capacitors for draw in _capacitor_draws(capacitor)]
    shapes, names = _shapes(stage), [axis.name for axis in board_axes(stage)]
    return (*found, *(Draw(name, shapes[name]) for name in names if name in shapes))


def _resistor_draws(resistor: Resistor) -> tuple[Draw, ...]:
    """Of a group drawn by batch, a member draws its own part only: uniform within its batch."""
    shared = tolerances(resistor).common > 0.0
    made = UNIFORM if shared else shape_around(resistor.distribution, resistor.tolerance)
    aged, warmed = resistor.life_drift_distribution, resistor.tempco_distribution
    return (
        Draw(f"{resistor.name}.tolerance", made),
        Draw(f"{resistor.name}.life_drift", plain_shape(aged)),
        Draw(f"{resistor.name}.tempco", plain_shape(warmed)),
    )


def _capacitor_draws(capacitor: Capacitor) -> tuple[Draw, ...]:
    return (Draw(f"{capacitor.name}.tolerance"), Draw(f"{capacitor.name}.temperature_change"))


def _group_draws(stage: Stage) -> Iterator[Draw]:
    """What the members of a group share: part of their tempco, and their batch mean."""
    shared = {r.group: r for r in stage.resistors if r.group is not None and tempcos(r).common > 0.0}
    for group in sorted(shared):
        yield Draw(f"{group_axis(group)}.tempco", plain_shape(shared[group].tempco_distribution))
    for group in batch_groups(stage):
        yield Draw(batch_axis(group), by_batch=True)


def _shapes(stage: Stage) -> Mapping[str, Shape | Batch]:
    """How each figure between limits is drawn, if it differs from board to board."""
    transistor, negative = stage.transistor, stage.negative_supply
    shapes = {
        GAIN: shape_between(transistor.gain, logarithmic=True),
        BASE_EMITTER: shape_between(transistor.base_emitter_voltage),
        LEAKAGE: plain_shape(transistor.leakage_distribution),
        SUPPLY: shape_between(stage.supply.voltage),
    }
    return shapes if negative is None else {**shapes, NEGATIVE: shape_between(negative.voltage)}


def batch_size(stage: Stage) -> int:
    """How many boards share a batch; 1 where nothing is drawn by batch: then boards are independent.

    Raises UsageError where something is drawn by batch and the stage does not say how many, or not
    one or more.
    """
    if not stage.drawn_by_batch:
        return 1
    if stage.boards_per_batch is None or stage.boards_per_batch < 1:
        read = stage.boards_per_batch
        raise UsageError(f"boards_per_batch: from 1, where something is drawn by batch; read {read}")
    return stage.boards_per_batch


def coordinates(stage: Stage, rows: slice, *, seed: int) -> dict[str, Array]:
    """The coordinates of the boards at `rows`, whatever the chunk they are drawn in."""
    size = batch_size(stage)
    return {draw.name: _coordinate(draw, rows, seed, size) for draw in draws(stage)}


def _coordinate(draw: Draw, rows: slice, seed: int, size: int) -> Array:
    if isinstance(draw.shape, Batch):
        mean = _uniform_by_batch(f"{draw.name}.batch", rows, seed, size)
        return draw.shape.coordinate(mean, _uniform(draw.name, rows, seed))
    if draw.by_batch:
        return draw.shape.quantile(_uniform_by_batch(draw.name, rows, seed, size))
    return draw.shape.quantile(_uniform(draw.name, rows, seed))


def _uniform_by_batch(name: str, rows: slice, seed: int, size: int) -> Array:
    """Uniform numbers of one stream, indexed by batch: the same for all boards of a batch."""
    batches = np.arange(rows.start, rows.stop) // size
    drawn = _uniform(name, slice(int(batches[0]), int(batches[-1]) + 1), seed)
    return np.asarray(drawn[batches - batches[0]])


def _uniform(name: str, rows: slice, seed: int) -> Array:
    """Uniform numbers in [0, 1) of one stream; the counter gives four doubles a step."""
    stream = np.random.Philox(np.random.SeedSequence([seed, *name.encode()]))
    stream.advance(rows.start // 4)
    skip = rows.start % 4
    return np.asarray(np.random.Generator(stream).random(rows.stop - rows.start + skip)[skip:])
