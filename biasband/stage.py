"""The nouns of a stage: what a stage file says, in SI units, once it has been read.

Every record is frozen and complete: defaults are filled in, alternatives resolved. The supply, the
transistor and each resistor know whether their variation was *stated*, because a sign-off that
rests on an unstated variation is inconclusive.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from decimal import Decimal
from typing import Literal

from biasband.constants import ASSUMED_SATURATION_VOLTAGE, KELVIN_OFFSET, REFERENCE_TEMPERATURE
from biasband.coupling import Capacitor as Capacitor
from biasband.coupling import Signal as Signal
from biasband.errors import UsageError
from biasband.gain_curve import GainCurve

Polarity = Literal["npn", "pnp"]
Varies = Literal["in use", "by board"]
Method = Literal["corners", "rss", "yield"]
Snapping = Literal["margin", "nearest"]
PlainName = Literal["uniform", "normal", "triangular", "sine"]
DistributionName = Literal[PlainName, "hollow", "batch"]


@dataclass(frozen=True, kw_only=True)
class Distribution:
    """How a figure that differs from board to board lies between its limits.

    `normal` means limits at ±3σ, cut there; `sine` the arc-sine law, limits likeliest; `hollow` that
    parts within `hollow_within` of nominal are missing; `batch` that boards lie within
    ±`within_batch` of their batch's mean, which differs from batch to batch. The two companions are
    shares for resistors and for h_FE (there a ratio: 5 % is a factor of 1.05 either way), volts for
    V_BE. Raises UsageError for a companion without its name or a name without its companion.
    """

    name: DistributionName = "uniform"
    hollow_within: float | None = None
    within_batch: float | None = None

    def __post_init__(self) -> None:
        for name, key in COMPANIONS.items():
            value = getattr(self, key)
            if (value is not None) != (self.name == name) or (value is not None and not value >= 0.0):
                raise UsageError(f'distribution: "{name}" goes with {key}, from 0')


COMPANIONS: Mapping[DistributionName, str] = {"hollow": "hollow_within", "batch": "within_batch"}
"""The figure that each of these distributions cannot do without."""


@dataclass(frozen=True, kw_only=True)
class Limits:
    """A figure with its limits, in one SI unit: `low <= nominal <= high`.

    `stated` is False where the file gave a single figure and no variation. Half the probability lies
    on each side of the nominal value, which is the typical one where there is one, else the mean.
    `distribution` matters only where the figure differs from board to board.
    """

    low: float
    nominal: float
    high: float
    stated: bool = True
    distribution: Distribution = Distribution()

    @classmethod
    def exactly(cls, value: float, *, stated: bool = True) -> Limits:
        """Limits that coincide."""
        return cls(low=value, nominal=value, high=value, stated=stated)


@dataclass(frozen=True, kw_only=True)
class Supply:
    """A supply rail [V] to the stage's ground; `ripple_peak` [V] comes on top of the limits."""

    voltage: Limits
    ripple_peak: float = 0.0
    varies: Varies = "in use"


@dataclass(frozen=True, kw_only=True)
class Ratings:
    """What any transistor states: limits of gain and V_BE [V], leakage [A], ratings [V], [A], [W], [K].

    A rating that is None is not stated, and what depends on it is not checked; `saturation_voltage`
    None means that 0.2 V is assumed. Absolute values for PNP.
    """

    gain: Limits
    base_emitter_voltage: Limits
    leakage: float = 0.0
    leakage_distribution: Distribution = Distribution()
    saturation_voltage: float | None = None
    thermal_resistance: float | None = None
    max_collector_emitter: float | None = None
    max_emitter_base: float | None = None
    max_current: float | None = None
    max_power: float | None = None
    max_junction: float | None = None


@dataclass(frozen=True, kw_only=True)
class Transistor(Ratings):
    """A data sheet at 25 °C: test point [A], [V]; drifts [V/K], [1/K]; leakage doubles every [K].

    `base_emitter_drift` None means the band-gap law; `gain_curve` None, that h_FE is the same at any
    current. Raises UsageError for an early_voltage without a test_voltage.
    """

    test_current: float
    label: str = ""
    test_voltage: float | None = None
    base_emitter_drift: float | None = -2e-3
    gain_drift: float = 5e-3
    gain_curve: GainCurve | None = None
    leakage_doubling: float = 10.0
    early_voltage: float | None = None
    reverse_gain: float = 4.0
    source: str = ""

    def __post_init__(self) -> None:
        if self.early_voltage is not None and self.test_voltage is None:
            raise UsageError("transistor: early_voltage needs the test_voltage of the gain")


@dataclass(frozen=True, kw_only=True)
class IdealTransistor(Ratings):
    """A textbook transistor: constant V_BE, no Early effect, no leakage, no temperature.

    In the library only, never in a stage file, so that published answers can be checked to the
    digit. Valid in the active region; saturation is a status, with V_CE held at
    `saturation_voltage`. The gain and V_BE may still vary between limits. It never heats itself;
    `thermal_resistance` serves the power and junction checks alone.
    """


AnyTransistor = Transistor | IdealTransistor


@dataclass(frozen=True, kw_only=True)
class Resistor:
    """One resistor of the stage: [Ω], tolerances as fractions, tempco [1/K], rating [W].

    `value` None means that biasband chooses it, from those up to `search_steps` to either side of the
    ideal one (None: as many as are usual for its series); `kept`, that the value holds for this run
    only. `pairs` asks for pairs that come near the ideal value. `tolerance_stated` is False where the
    file says nothing about tolerance. Resistors of one `group` share all of their tempco but
    `tracking` [1/K], and their batch mean where their tolerance (`distribution`) is drawn by batch.
    The rating is derated linearly from `derate_from` [K] to zero at `derate_to` [K].
    """

    name: str
    value: float | None = None
    series: str = "E24"
    tolerance: float = 0.0
    tolerance_stated: bool = True
    tempco: float = 0.0
    life_drift: float = 0.0
    power_rating: float | None = None
    group: str | None = None
    tracking: float | None = None
    distribution: Distribution = Distribution()
    life_drift_distribution: Distribution = Distribution()
    tempco_distribution: Distribution = Distribution()
    search_steps: int | None = None
    pairs: bool = False
    kept: bool = False
    derate_from: float = 70.0 + KELVIN_OFFSET
    derate_to: float = 155.0 + KELVIN_OFFSET


@dataclass(frozen=True, kw_only=True)
class Target:
    """What the designer aims for.

    `emitter_voltage` [V] or `supply_over` (the N of "supply / N") is the voltage across the emitter
    resistor, so that it means the same for both polarities; with neither the 1 V rule holds.
    `collector` is "mid-swing", "max-swing" or a node voltage [V].
    """

    collector_current: float
    emitter_voltage: float | None = None
    supply_over: float | None = None
    collector: float | Literal["mid-swing", "max-swing"] = "mid-swing"
    divider_current_ratio: float = 10.0


@dataclass(frozen=True, kw_only=True)
class Requirement:
    """A limit on a quantity, in the quantity's SI unit, and how it is to be judged."""

    id: str
    quantity: str
    at_least: float | None = None
    at_most: float | None = None
    judged_by: Method = "corners"
    yield_at_least: float = 0.9973
    reason: str = ""


@dataclass(frozen=True, kw_only=True)
class FileRecord:
    """A file that was read, and the SHA-256 of its bytes."""

    path: str
    sha256: str


@dataclass(frozen=True, kw_only=True)
class Series:
    """A series of preferred values: ascending `mantissas`, each at least 1 and below 10.

    `usual_tolerance` is the tolerance that the series is made for, as a fraction (E24: 0.05); None
    where there is no single figure. What a part has is what its data sheet says.
    """

    name: str
    mantissas: tuple[Decimal, ...]
    usual_tolerance: float | None = None

    def exact_at(self, place: int) -> Decimal:
        """The preferred value at a place, in decimal."""
        decade, index = divmod(place, len(self.mantissas))
        return self.mantissas[index].scaleb(decade)

    def value_at(self, place: int) -> float:
        """The preferred value at a place: the double nearest to the decimal value."""
        return float(self.exact_at(place))


@dataclass(frozen=True, kw_only=True)
class StockItem:
    """Resistors of one kind in the house: [Ω], a fraction, [1/K], [W]; `price` of one, in any currency.

    What is None is not stated. Two items may differ in nothing but their `location`.
    """

    value: float
    tolerance: float | None = None
    tempco: float | None = None
    power_rating: float | None = None
    quantity: int | None = None
    price: float | None = None
    location: str = ""


@dataclass(frozen=True, kw_only=True)
class Stock:
    """The resistors in the house, as their list has them, and the file of that list."""

    items: tuple[StockItem, ...]
    file: FileRecord


@dataclass(frozen=True, kw_only=True)
class Derating:
    """The share of each rating that a design may use, as factors of 1: a derating profile.

    `supply_voltage` is the share of V_CEO that the highest supply may reach, `transistor_power` of
    the power that P_tot and T_j max leave, `current` of I_C max, `emitter_base_voltage` of V_EBO,
    `resistor_power` of a resistor's rating at its ambient. The junction stays `junction_margin` [K]
    below T_j max and at or below `junction_ceiling` [K] (None: no ceiling). `origins` says, by field,
    where a figure comes from; `file` is that of a profile of the user's own.
    """

    name: str = "full"
    resistor_power: float = 1.0
    supply_voltage: float = 1.0
    transistor_power: float = 1.0
    current: float = 1.0
    emitter_base_voltage: float = 1.0
    junction_margin: float = 0.0
    junction_ceiling: float | None = None
    origins: Mapping[str, str] = field(default_factory=dict, hash=False)
    file: FileRecord | None = None

    def junction_limit(self, max_junction: float) -> float:
        """The highest junction temperature [K] allowed for a T_j max [K].

        Worked case, stringent: T_j max 150 °C allows 110 °C, 125 °C allows 85 °C.
        """
        below = max_junction - self.junction_margin
        return below if self.junction_ceiling is None else min(self.junction_ceiling, below)


@dataclass(frozen=True, kw_only=True)
class Stage:
    """A one-transistor stage, its surroundings and what is asked of it.

    `resistors` holds exactly those that the topology needs, in the topology's order. `ambient` is
    in [K]. `stock` None means that any value of a resistor's series can be had. `snapping` says how
    values are chosen: for the best margin, or nearest to the ideal ones. `own_series` are the user's own,
    beside biasband's. `capacitors` are all that the signal section couples, or none: then they are shorts.
    Raises UsageError where they are some of them.
    """

    title: str
    topology: str
    polarity: Polarity
    supply: Supply
    transistor: AnyTransistor
    resistors: tuple[Resistor, ...]
    negative_supply: Supply | None = None
    ambient: Limits = field(default_factory=lambda: Limits.exactly(REFERENCE_TEMPERATURE, stated=False))
    target: Target | None = None
    signal: Signal | None = None
    capacitors: tuple[Capacitor, ...] = ()
    requirements: tuple[Requirement, ...] = ()
    derating: Derating = Derating()
    document: str = ""
    revision: str = ""
    designed_by: str = ""
    boards_per_batch: int | None = None
    stock: Stock | None = None
    snapping: Snapping = "margin"
    own_series: tuple[Series, ...] = ()
    files: tuple[FileRecord, ...] = ()

    def __post_init__(self) -> None:
        given = tuple(capacitor.name for capacitor in self.capacitors)
        wanted = () if self.signal is None else self.signal.capacitors
        if given not in ((), wanted):
            raise UsageError(f"capacitors: {', '.join(wanted) or 'none'}, or none; read {', '.join(given)}")

    @property
    def drawn_by_batch(self) -> bool:
        """Whether any contributor has a batch mean, so that boards of one batch are alike."""
        transistor = self.transistor
        drawn = [transistor.gain.distribution, transistor.base_emitter_voltage.distribution]
        drawn += [resistor.distribution for resistor in self.resistors]
        return any(distribution.name == "batch" for distribution in drawn)

    def resistor(self, name: str) -> Resistor:
        """The resistor of that name; KeyError where the stage has none."""
        for resistor in self.resistors:
            if resistor.name == name:
                return resistor
        raise KeyError(name)

    @property
    def saturation_voltage(self) -> float:
        """V_CE(sat) [V]: the data sheet's, else the assumed one."""
        stated = self.transistor.saturation_voltage
        return ASSUMED_SATURATION_VOLTAGE if stated is None else stated
