"""Boards that agree: another board on which some contributors do what they do on a given one.

A contributor here is a part or a figure with all that it does: how far a resistor was made off, how
it ages, its whole tempco. What the members of a group share, a batch mean or part of their tempco, is
no contributor but makes its members correlated: what one of them does tells something of the others.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from biasband.boards.draws import draws
from biasband.boards.pick_freeze import Board, Frozen, Redraw
from biasband.circuit.scenarios import Array
from biasband.stage import Resistor, Stage
from biasband.variation.contributors import Split, batch_axis, board_axes, group_axis, tempcos, tolerances
from biasband.variation.distributions import UNIFORM, Batch, Shape

_CELLS = 64
"""Cells that the range of what is shared is weighed in, for each board."""


@dataclass(frozen=True)
class _Member:
    """A contributor that is off by `own·x + common·c`: x is its own draw, c the shared one."""

    contributor: str
    draw: str
    split: Split
    shape: Shape

    @property
    def reach(self) -> float:
        """How far its own draw, from one limit to nominal, reaches in terms of the shared one."""
        return self.split.own / self.split.common


@dataclass(frozen=True)
class _Shared:
    """A draw that several contributors have a part in."""

    draw: str
    shape: Shape
    members: tuple[_Member, ...]


def board_contributors(stage: Stage) -> tuple[str, ...]:
    """Name every part and figure that differs from board to board, resistors first."""
    names = [axis.name for axis in board_axes(stage)]
    members = {member.contributor for shared in _shared(stage) for member in shared.members}
    resistors = [r.name for r in stage.resistors if r.name in names or r.name in members]
    groups = {axis(r.group) for r in stage.resistors if r.group for axis in (group_axis, batch_axis)}
    return (*resistors, *(name for name in names if name not in groups and name not in resistors))


def agreeing(stage: Stage) -> Redraw:
    """Make the redraw of a stage's boards, coordinates by draw: they agree in what is frozen.

    All else is drawn anew given that: independent draws are the second board's; what is shared comes
    from its distribution given what the frozen members do, and they keep doing it. That distribution,
    `p(c) ∝ f(c)·Π f_i(x_i + (c_0 − c)·common/own)`, x_i and c_0 what was drawn first, is uniform between
    limits where all shapes are uniform, as with batch means; else it is weighed in 64 cells of its range,
    finer towards its ends (measured against 2048 cells: off by 0.0005 rms of ±1, sine 0.002).
    """
    owners = {
        draw.name: name
        for name in board_contributors(stage)
        for draw in draws(stage)
        if draw.name == name or draw.name.startswith(f"{name}.")
    }
    shared = tuple(_shared(stage))

    def redraw(frozen: Frozen, board: Board, other: Board) -> Board:
        anew = {
            name: np.where(frozen[owners[name]], x, other[name]) if name in owners else other[name]
            for name, x in board.items()
        }
        for common in shared:
            anew |= _drawn_anew(common, frozen, board, other)
        return anew

    return redraw


def _shared(stage: Stage) -> Iterator[_Shared]:
    """The batch means and the shared tempcos that move anything."""
    moves = {axis.name for axis in board_axes(stage)}
    for group in dict.fromkeys(r.group for r in stage.resistors if r.group is not None):
        members = [r for r in stage.resistors if r.group == group]
        if batch_axis(group) in moves:
            made = {f"{r.name}.tolerance": (r, tolerances(r)) for r in members}
            yield _of(stage, batch_axis(group), made)
        if group_axis(group) in moves:
            warmed = {f"{r.name}.tempco": (r, tempcos(r)) for r in members}
            yield _of(stage, f"{group_axis(group)}.tempco", warmed)


def _of(stage: Stage, draw: str, splits: dict[str, tuple[Resistor, Split]]) -> _Shared:
    shapes = {draw.name: draw.shape for draw in draws(stage) if not isinstance(draw.shape, Batch)}
    members = (
        _Member(resistor.name, own, split, shapes[own])
        for own, (resistor, split) in splits.items()
        if split.common > 0.0
    )
    return _Shared(draw, shapes[draw], tuple(members))


def _drawn_anew(shared: _Shared, frozen: Frozen, board: Board, other: Board) -> Board:
    """What is shared, given what the frozen members do, and their own draws that make up for it."""
    held = np.any([frozen[member.contributor] for member in shared.members], axis=0)
    before, number = board[shared.draw], other[shared.draw]
    after = np.where(held, _given(shared, frozen, board, _below(shared.shape, number)), number)
    anew = {shared.draw: after}
    for member in shared.members:
        if member.reach > 0.0:
            own = np.clip(board[member.draw] + (before - after) / member.reach, -1.0, 1.0)
            anew[member.draw] = np.where(frozen[member.contributor], own, other[member.draw])
    return anew


def _given(shared: _Shared, frozen: Frozen, board: Board, share: Array) -> Array:
    """The quantile at `share` of what is shared, from its distribution given what the frozen members do."""
    low, high = _limits(shared, frozen, board)
    if all(shape == UNIFORM for shape in (shared.shape, *(member.shape for member in shared.members))):
        return np.asarray(low + (high - low) * share)
    way = 0.5 * (1.0 - np.cos(np.linspace(0.0, np.pi, _CELLS + 1)))
    edges = low[:, None] + (high - low)[:, None] * way
    weights = np.diff(_below(shared.shape, edges), axis=1)
    for member in shared.members:
        if member.reach > 0.0:
            own = board[member.draw][:, None] + (board[shared.draw][:, None] - edges) / member.reach
            weights *= np.where(frozen[member.contributor][:, None], _density(member.shape, own), 1.0)
    return _quantile(edges, weights, share)


def _limits(shared: _Shared, frozen: Frozen, board: Board) -> tuple[Array, Array]:
    """The limits that the frozen members leave to what is shared, (N,) each."""
    before = board[shared.draw]
    low, high = np.full_like(before, -1.0), np.ones_like(before)
    for member in shared.members:
        own, held = board[member.draw], frozen[member.contributor]
        low = np.where(held, np.maximum(low, before + (own - 1.0) * member.reach), low)
        high = np.where(held, np.minimum(high, before + (own + 1.0) * member.reach), high)
    return low, high


def _density(shape: Shape, edges: Array) -> Array:
    """The mean density of a shape within each cell; 1 for a cell without width, which weighs nothing."""
    width = np.diff(edges, axis=1)
    rise = np.diff(_below(shape, edges), axis=1)
    return np.divide(rise, width, out=np.ones_like(width), where=width != 0.0)


def _quantile(edges: Array, weights: Array, share: Array) -> Array:
    """The point of each row's cells that this share of their weight lies below, (N,)."""
    rows, ends = np.arange(len(edges)), np.cumsum(weights, axis=1)
    wanted = share * ends[:, -1]
    cell = np.minimum(np.sum(ends <= wanted[:, None], axis=1), weights.shape[1] - 1)
    weight = weights[rows, cell]
    over = wanted - (ends[rows, cell] - weight)
    way = np.divide(over, weight, out=np.zeros_like(over), where=weight > 0.0)
    return np.asarray(edges[rows, cell] + np.clip(way, 0.0, 1.0) * np.diff(edges, axis=1)[rows, cell])


def _below(shape: Shape, x: Array) -> Array:
    """The share of draws below x, read back from a shape's quantiles at 4097 shares, denser at the ends."""
    if shape == UNIFORM:
        return np.asarray(np.clip(0.5 * (x + 1.0), 0.0, 1.0))
    shares = 0.5 * (1.0 - np.cos(np.linspace(0.0, np.pi, 4097)))
    return np.asarray(np.interp(x, shape.quantile(shares), shares))
