"""Capacitors: each alone takes a share of the lowest frequency, so that all together meet it.

A capacitor that sees a resistance R with the others short has its own corner at 1/(2πRC), and the
corner of all together is at most the sum of these. So the shares add up to one; they go as 1/√R, which
makes the sum of the capacitances least, and leaves most to the bypass capacitor, which sees the least.
Where collector feedback lets them act on each other the sum may be passed: then all are raised by as much
as the exact corner is too high.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from math import isfinite, pi, sqrt

import numpy as np

from biasband.circuit.low_corner import low_corner_frequency, seen_resistances
from biasband.circuit.operating_point import Region
from biasband.circuit.reading import read
from biasband.circuit.scenarios import Scenarios, Values
from biasband.coupling import LARGEST_CAPACITOR, SMALLEST_CAPACITOR
from biasband.errors import Fault, PhysicallyImpossible
from biasband.parts.series import Series, nearest
from biasband.quantity import Kind, format_quantity
from biasband.stage import Capacitor, Stage
from biasband.variation.contributors import axes, columns, realise
from biasband.variation.corners import vertices
from biasband.variation.evaluation import cut_off_current

LEAST_LEFT = 0.1
"""Given capacitors may take all of the lowest frequency; the free ones get this share of it nevertheless."""

_TRIES, _LEAST_RAISE = 12, 1.05
"""How often capacitors are raised: once by what is missing, then in steps in case snapping upset that."""

_ROUNDING = 1e-9


@dataclass(frozen=True, kw_only=True)
class CapacitorStep:
    """One capacitor's formula with its numbers: `farads = raised / (2π · frequency · resistance · left)`.

    `frequency` [Hz] is the corner that it is to have alone, `resistance` [Ω] what it sees with the others
    short, `left` the share of its value that is left at worst.
    """

    farads: float
    frequency: float
    resistance: float
    left: float = 1.0
    raised: float = 1.0


@dataclass(frozen=True, kw_only=True)
class CapacitorChoice:
    """One capacitor: its formulas where it was free, and the value that was taken [F].

    `hand` is for the nominal stage, `ideal` for the least resistance at any corner and what is left of the
    capacitor at worst.
    """

    name: str
    value: float
    chosen: bool
    hand: CapacitorStep | None = None
    ideal: CapacitorStep | None = None


@dataclass(frozen=True)
class Coupling:
    """The capacitors of a stage, every one valued, and what was missed."""

    capacitors: tuple[CapacitorChoice, ...]
    warnings: tuple[str, ...]


def choose_capacitors(stage: Stage, series: Mapping[str, Series]) -> Coupling:
    """Give every free capacitor of a stage, every resistor valued, the next value up in its series.

    Raises PhysicallyImpossible where the stage has no operating point to compute them for, or one would
    have to be larger than any capacitor.

    Worked case: 50 Hz, R 34.7 Ω, 5.39 kΩ and 50.2 kΩ: shares 0.903, 0.072 and 0.024, so 102 µF, 8.2 µF and
    2.7 µF before tolerances.
    """
    wanted = None if stage.signal is None else stage.signal.lowest_frequency
    given = {c.name: c.value for c in stage.capacitors if c.value is not None}
    if wanted is None:
        return Coupling(_as_given(given), ())
    work = _Work.of(stage)
    if not work.free:
        return Coupling(_as_given(given), tuple(work.missed(given, wanted)))
    by_hand = work.steps(work.nominal_resistances(), wanted, worst=False)
    steps = work.steps(work.least_resistances(), wanted, worst=True)
    steps = _raised(steps, work.raise_by(steps, wanted, series))
    values = work.snapped(steps, series)
    choices = tuple(
        CapacitorChoice(
            name=capacitor.name,
            value=values[capacitor.name],
            chosen=capacitor.value is None,
            hand=by_hand.get(capacitor.name),
            ideal=steps.get(capacitor.name),
        )
        for capacitor in stage.capacitors
    )
    return Coupling(choices, tuple(work.missed(values, wanted)))


def _as_given(values: Mapping[str, float]) -> tuple[CapacitorChoice, ...]:
    return tuple(CapacitorChoice(name=name, value=value, chosen=False) for name, value in values.items())


def with_capacitances(stage: Stage, values: Mapping[str, float]) -> Stage:
    """The stage with these capacitor values [F]."""
    return replace(stage, capacitors=tuple(replace(c, value=values[c.name]) for c in stage.capacitors))


@dataclass(frozen=True)
class _Work:
    """A stage, the same with its capacitors short, and the corners at which that is active."""

    stage: Stage
    shorted: Stage
    corners: Scenarios

    @classmethod
    def of(cls, stage: Stage) -> _Work:
        """The stage with its active corners; where there are none, its nominal point."""
        shorted = replace(stage, capacitors=())
        box = axes(shorted)
        everywhere = realise(shorted, columns(box, vertices(box)))
        active = read(shorted, everywhere).regions(cut_off_current(shorted)) == Region.ACTIVE
        return cls(stage, shorted, everywhere.part(active) if active.any() else realise(shorted, {}))

    @property
    def free(self) -> tuple[Capacitor, ...]:
        """The capacitors without a value."""
        return tuple(capacitor for capacitor in self.stage.capacitors if capacitor.value is None)

    def nominal_resistances(self) -> Mapping[str, float]:
        """What each capacitor sees at the nominal point [Ω]."""
        return _least(seen_resistances(read(self.shorted, realise(self.shorted, {}))))

    def least_resistances(self) -> Mapping[str, float]:
        """The least that each capacitor sees at any active corner [Ω]."""
        found = _least(seen_resistances(read(self.shorted, self.corners)))
        if not all(isfinite(ohms) and ohms > 0.0 for ohms in found.values()):
            problem = "no capacitors can be computed: the stage has no operating point for a signal to move"
            raise PhysicallyImpossible((self._fault(problem, "the values given decide that"),))
        return found

    def steps(
        self, resistances: Mapping[str, float], wanted: float, *, worst: bool
    ) -> dict[str, CapacitorStep]:
        """A step for every free capacitor: what given ones leave of the frequency, shared as 1/√R."""
        given = [c for c in self.stage.capacitors if c.value is not None]
        taken = sum(_corner(c, resistances[c.name], worst) for c in given)
        left = max(wanted - taken, LEAST_LEFT * wanted)
        weights = {c.name: 1.0 / sqrt(resistances[c.name]) for c in self.free if resistances[c.name] > 0.0}
        whole = sum(weights.values())
        return {
            c.name: _step(c, left * weights[c.name] / whole, resistances[c.name], worst)
            for c in self.free
            if c.name in weights
        }

    def raise_by(
        self, steps: Mapping[str, CapacitorStep], wanted: float, series: Mapping[str, Series]
    ) -> float:
        """How many times larger the capacitors must be for all to meet the frequency; 1 where some are given.

        Where none is given the corner goes as one over all of them, before they are snapped.
        """
        factor = 1.0
        for _ in range(_TRIES if len(self.free) == len(self.stage.capacitors) else 0):
            raised = _raised(steps, factor)
            if not self.corner_at_worst(self.snapped(raised, series)) > wanted:
                break
            exact = self.corner_at_worst({name: step.farads for name, step in raised.items()})
            factor *= max(exact / wanted, _LEAST_RAISE)
        return factor

    def snapped(self, steps: Mapping[str, CapacitorStep], series: Mapping[str, Series]) -> dict[str, float]:
        """Every capacitor's value [F], the free ones the next up in their series."""
        values = {c.name: c.value for c in self.stage.capacitors if c.value is not None}
        for capacitor in self.free:
            farads = max(steps[capacitor.name].farads, SMALLEST_CAPACITOR)
            values[capacitor.name] = nearest(series[capacitor.series], farads).above
        large = [name for name, farads in values.items() if farads > LARGEST_CAPACITOR]
        if large:
            raise PhysicallyImpossible(tuple(self._too_large(name, steps[name]) for name in large))
        return values

    def corner_at_worst(self, values: Mapping[str, float]) -> float:
        """The highest low corner [Hz] at any active corner, with what is left of the capacitors at worst."""
        least = {c.name: values[c.name] * c.least_share for c in self.stage.capacitors}
        reading = read(self.shorted, replace(self.corners, capacitances=least))
        return float(np.fmax.reduce(low_corner_frequency(reading)))

    def missed(self, values: Mapping[str, float], wanted: float) -> Iterator[str]:
        """By how much the capacitors together miss the frequency: the given ones are too small."""
        reached = self.corner_at_worst(values)
        if reached > wanted * (1.0 + _ROUNDING):
            given = ", ".join(c.name for c in self.stage.capacitors if c.value is not None)
            reason = f"{given} given too small" if given else "they act on each other"
            shown, limit = (format_quantity(f, Kind.FREQUENCY) for f in (reached, wanted))
            yield f"low_corner_frequency: {shown} at worst, above the {limit} wanted: {reason}"

    def _too_large(self, name: str, step: CapacitorStep) -> Fault:
        problem = f"{name} would have to be {format_quantity(step.farads, Kind.CAPACITANCE)}"
        return self._fault(problem, "raise the lowest frequency")

    def _fault(self, problem: str, hint: str) -> Fault:
        file = self.stage.files[0].path if self.stage.files else self.stage.title
        return Fault(file, None, "signal.lowest_frequency", problem, hint=hint)


def _least(seen: Mapping[str, Values]) -> dict[str, float]:
    return {name: float(np.fmin.reduce(np.ravel(ohms))) for name, ohms in seen.items()}


def _corner(capacitor: Capacitor, resistance: float, worst: bool) -> float:
    """The corner [Hz] that a given capacitor has alone."""
    assert capacitor.value is not None
    left = capacitor.least_share if worst else 1.0
    return 1.0 / (2.0 * pi * resistance * capacitor.value * left)


def _step(capacitor: Capacitor, frequency: float, resistance: float, worst: bool) -> CapacitorStep:
    left = capacitor.least_share if worst else 1.0
    farads = 1.0 / (2.0 * pi * frequency * resistance * left)
    return CapacitorStep(farads=farads, frequency=frequency, resistance=resistance, left=left)


def _raised(steps: Mapping[str, CapacitorStep], factor: float) -> dict[str, CapacitorStep]:
    return {name: replace(step, farads=factor * step.farads, raised=factor) for name, step in steps.items()}
