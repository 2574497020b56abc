"""Draws: which uniform numbers a board takes, and the coordinates that they give.

Where the numbers come from (streams.py) is another matter: random ones, quasi-random ones, or those
of an analysis that holds some of them still. A batch mean is a number of its own, shared by a batch.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

from biasband.boards.streams import Number, plain
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
    """One coordinate per board: its name and its distribution; `by_batch`: alike in a batch."""

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
    return coordinates_from(stage, plain(numbers(stage), rows, seed=seed, batch_size=batch_size(stage)))


def numbers(stage: Stage) -> tuple[Number, ...]:
    """Every uniform number that a board takes: one a draw, two where a board lies around a batch's mean."""
    return tuple(number for draw in draws(stage) for number in _numbers(draw))


def _numbers(draw: Draw) -> Iterator[Number]:
    if isinstance(draw.shape, Batch):
        yield Number(_mean_of(draw), by_batch=True)
    yield Number(draw.name, by_batch=draw.by_batch)


def _mean_of(draw: Draw) -> str:
    """The name of the number that gives a draw's batch mean."""
    return f"{draw.name}.batch"


def coordinates_from(stage: Stage, uniforms: Mapping[str, Array]) -> dict[str, Array]:
    """The coordinates that uniform numbers in [0, 1] make, by name (`numbers`), shape (N,) each."""
    return {draw.name: _coordinate(draw, uniforms) for draw in draws(stage)}


def _coordinate(draw: Draw, uniforms: Mapping[str, Array]) -> Array:
    if isinstance(draw.shape, Batch):
        return draw.shape.coordinate(uniforms[_mean_of(draw)], uniforms[draw.name])
    return draw.shape.quantile(uniforms[draw.name])
