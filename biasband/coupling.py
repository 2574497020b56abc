"""What couples the signal: its source, its load, and the capacitors between them and the stage."""

from __future__ import annotations

from dataclasses import dataclass

INPUT, OUTPUT, BYPASS = "C_in", "C_out", "C_bypass"
"""The capacitors that a stage can have: in series with the source, with the load, across RE or RE2."""

SMALLEST_CAPACITOR, LARGEST_CAPACITOR = 1e-12, 1.0
"""[F] No capacitor for a transistor stage lies outside."""


@dataclass(frozen=True, kw_only=True)
class Signal:
    """What the capacitors couple: a load [Ω] (None: no load) and a source resistance [Ω].

    `lowest_frequency` [Hz] is what capacitors without a value are computed for. Where the stage has no
    capacitors they are shorts.
    """

    load: float | None = None
    source_resistance: float = 0.0
    bypassed: bool = False
    lowest_frequency: float | None = None

    @property
    def capacitors(self) -> tuple[str, ...]:
        """Which capacitors couple: the source, a load, and the emitter where it is bypassed."""
        load, bypass = self.load is not None, self.bypassed
        return (INPUT, *([OUTPUT] if load else []), *([BYPASS] if bypass else []))


@dataclass(frozen=True, kw_only=True)
class Capacitor:
    """One capacitor of the stage: [F], tolerance and change with temperature as fractions.

    `value` None means that biasband chooses it. Its class may move it by ±`temperature_change`, of unknown
    sign, at `temperature_distance` [K] from 25 °C either way, in proportion on the way there and no further
    beyond (0: it stays). `tolerance_stated` is False where the file says nothing about tolerance.
    """

    name: str
    value: float | None = None
    series: str = "E6"
    tolerance: float = 0.0
    tolerance_stated: bool = True
    temperature_change: float = 0.0
    temperature_distance: float = 0.0

    @property
    def least_share(self) -> float:
        """What is left of its value at worst, as a fraction."""
        warmed = self.temperature_change if self.temperature_distance else 0.0
        return (1.0 - self.tolerance) * (1.0 - warmed)
