"""Scenarios: N complete sets of physical values at which a stage is solved."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, fields, replace

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Values = Array | float
"""An array of shape (N,), or one number that holds for all N scenarios."""

Rows = slice | NDArray[np.intp] | NDArray[np.bool_]
"""Some of N scenarios."""


@dataclass(frozen=True, kw_only=True)
class Scenarios:
    """N scenarios; each field has shape (N,) or is one number for all of them.

    Resistances [Ω] by name, after tolerance, tempco and drift; `gain` (h_FE at the test point) and
    `base_emitter_voltage` [V] and `leakage` [A], all three at 25 °C; `supply` [V] without ripple,
    `ripple` [V], `negative_supply` [V]; ambient `temperature` [K]. Capacitances [F] by name, where the
    stage has capacitors.
    """

    resistances: Mapping[str, Values]
    gain: Values
    base_emitter_voltage: Values
    leakage: Values
    supply: Values
    ripple: Values
    negative_supply: Values
    temperature: Values
    capacitances: Mapping[str, Values] = field(default_factory=dict)

    def __len__(self) -> int:
        return int(np.broadcast(*(np.asarray(values) for values in self.named().values())).size)

    def named(self) -> dict[str, Values]:
        """Every value under its contributor's name (formats: `low_at`)."""
        return {**self.resistances, **self.capacitances, **{name: getattr(self, name) for name in _PLAIN}}

    def part(self, rows: Rows) -> Scenarios:
        """The scenarios at `rows`."""
        plain = {name: rows_of(getattr(self, name), rows) for name in _PLAIN}
        return Scenarios(
            resistances={name: rows_of(ohms, rows) for name, ohms in self.resistances.items()},
            capacitances={name: rows_of(farads, rows) for name, farads in self.capacitances.items()},
            **plain,
        )

    def without_ripple(self) -> Scenarios:
        """The same scenarios with a quiet supply."""
        return replace(self, ripple=0.0)


_BY_NAME = ("resistances", "capacitances")
_PLAIN = tuple(each.name for each in fields(Scenarios) if each.name not in _BY_NAME)


def rows_of(values: Values, rows: Rows) -> Values:
    """The values at `rows`, or the one number that holds for all."""
    return values if np.ndim(values) == 0 else np.asarray(values)[rows]


def chunks(count: int, size: int) -> Iterator[slice]:
    """Slices of at most `size` rows that cover `count` rows in order."""
    return (slice(start, min(start + size, count)) for start in range(0, count, size))


np.empty(2**21)
# 16 MiB, never touched and freed at once. It teaches glibc's allocator (M_MMAP_THRESHOLD and
# M_TRIM_THRESHOLD follow the largest block freed) to keep what a chunk's arrays give back, instead of
# fetching it from the system again, page by page: a review takes about 15 % less (measured).
