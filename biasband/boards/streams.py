"""Streams: where the uniform numbers of boards come from.

Plain numbers: each has its own counter-based stream, named after it, so that adding a contributor
does not reshuffle the others, two designs can be compared on the same draws, and the numbers do not
depend on the chunk they are drawn in. A number shared by a batch is indexed by batch.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.scenarios import Array, chunks

BLOCK = 2**14
"""Boards drawn and solved in one go."""

SEQUENCE = 2**16
"""Boards of one task of a run with plain numbers."""


@dataclass(frozen=True)
class Number:
    """A uniform number per board, the name of its stream; `by_batch`: alike in a batch."""

    name: str
    by_batch: bool = False


@dataclass(frozen=True)
class Block:
    """Some boards in a row, numbered from `first`: their uniform numbers by name, (B,) each."""

    first: int
    uniforms: Mapping[str, Array]


class Source(Protocol):
    """Where a run has its boards from: `tasks` pieces of work that know nothing of each other."""

    @property
    def boards(self) -> int:
        """How many boards there are in all."""

    @property
    def tasks(self) -> int:
        """How many tasks they are divided into."""

    def group(self, task: int) -> int:
        """Which tally a task belongs to, counted from 0: what is estimated from each group alone."""

    def blocks(self, numbers: Sequence[Number], task: int) -> Iterator[Block]:
        """The boards of a task, block by block."""

    def board(self, numbers: Sequence[Number], board: int) -> Mapping[str, Array]:
        """The uniform numbers of one board, (1,) each."""


@dataclass(frozen=True)
class Plain:
    """Random boards; those of one batch, `batch_size` of them, share the numbers that are by batch."""

    boards: int
    seed: int
    batch_size: int = 1

    @property
    def tasks(self) -> int:
        """Sequences of boards, the last of which may be a part of one."""
        return -(-self.boards // SEQUENCE)

    def group(self, task: int) -> int:
        """All boards are one group."""
        return 0

    def blocks(self, numbers: Sequence[Number], task: int) -> Iterator[Block]:
        """The boards of one sequence."""
        start = task * SEQUENCE
        for rows in chunks(min(SEQUENCE, self.boards - start), BLOCK):
            boards = slice(start + rows.start, start + rows.stop)
            yield Block(boards.start, plain(numbers, boards, seed=self.seed, batch_size=self.batch_size))

    def board(self, numbers: Sequence[Number], board: int) -> Mapping[str, Array]:
        """The uniform numbers of one board, (1,) each."""
        return plain(numbers, slice(board, board + 1), seed=self.seed, batch_size=self.batch_size)


def plain(numbers: Sequence[Number], rows: slice, *, seed: int, batch_size: int = 1) -> dict[str, Array]:
    """Random numbers in [0, 1) of the boards at `rows`, by name, shape (N,) each."""
    return {
        number.name: _by_batch(number.name, rows, seed, batch_size)
        if number.by_batch
        else uniform(number.name, rows, seed)
        for number in numbers
    }


def _by_batch(name: str, rows: slice, seed: int, size: int) -> Array:
    """Numbers of one stream, indexed by batch: the same for all boards of a batch."""
    batches = np.arange(rows.start, rows.stop) // size
    drawn = uniform(name, slice(int(batches[0]), int(batches[-1]) + 1), seed)
    return np.asarray(drawn[batches - batches[0]])


@lru_cache(maxsize=2**10)
def _key(name: str, seed: int) -> NDArray[np.unsignedinteger]:
    """The key of a stream, which takes longer to make than its first thousand numbers."""
    return np.random.SeedSequence([seed, *name.encode()]).generate_state(2, np.uint64)


def uniform(name: str, rows: slice, seed: int) -> Array:
    """Numbers of one stream, in [0, 1); the counter gives four doubles a step."""
    step, skip = divmod(rows.start, 4)
    stream = np.random.Philox(key=_key(name, seed), counter=step)
    return np.asarray(np.random.Generator(stream).random(rows.stop - rows.start + skip)[skip:])
