"""What may stand in each section of a stage file, key by key, for pydantic to check.

A field that is None was not given; what that means is decided where the section becomes a record.
"""

from __future__ import annotations

from typing import Annotated, Any, Literal, get_args

from pydantic import BaseModel, BeforeValidator, ConfigDict, Discriminator, Tag

from biasband.circuit.topology import TOPOLOGIES
from biasband.errors import QuantityError
from biasband.files import figures as f
from biasband.files.figures import Refusal, choice, choice_of_caller
from biasband.parts.derating import PROFILES
from biasband.quantity import Kind, parse
from biasband.stage import DistributionName, Method, PlainName, Polarity, Snapping, Varies

SERIES = "series"
"""The name under which the caller of a check holds the series that there are."""

OWN_TABLES = "a table of your own is read with --tables DIR"

ONE_FIGURE, RANGE = "<one figure>", "<range>"
"""Tags that pydantic puts into an error's place, where a figure may also be given as a range."""


def _form(value: Any) -> str:
    return RANGE if isinstance(value, (dict, BaseModel)) else ONE_FIGURE


def _drift(value: Any) -> float | Literal["bandgap"]:
    if value == "bandgap":
        return "bandgap"
    try:
        return f.within(parse(value, Kind.VOLTAGE_SLOPE), value, Kind.VOLTAGE_SLOPE, above=-0.01, below=0.01)
    except QuantityError as error:
        raise Refusal(error.problem, allowed='"bandgap", or a slope such as "-2 mV/K"') from None


Drift = Annotated[float | Literal["bandgap"], BeforeValidator(_drift)]


class Section(BaseModel):
    """A table whose keys are all known, and whose texts and booleans are taken as written."""

    model_config = ConfigDict(frozen=True, extra="forbid", strict=True)


def _in_place(names: tuple[str, ...]) -> BeforeValidator:
    """Make a reader that gives the reason why another distribution than these cannot be used here."""

    def read(value: Any) -> Any:
        if isinstance(value, str) and value in _WHY_MISPLACED and value not in names:
            raise Refusal(_WHY_MISPLACED[value], allowed=", ".join(names))
        return value

    return BeforeValidator(read)


_WHY_MISPLACED = {
    "hollow": "only a resistor's tolerance is hollow: its middle was sold as a tighter grade",
    "batch": "only a resistor's tolerance, h_FE and V_BE are drawn by batch",
}
_ANY, _PLAIN = get_args(DistributionName), get_args(PlainName)
_PLAIN_OR_BATCH = (*_PLAIN, "batch")

# Of the readers in an annotation the last one reads first.
AnyDistribution = Annotated[DistributionName, choice(lambda: _ANY)]
PlainOrBatch = Annotated[DistributionName, choice(lambda: _PLAIN_OR_BATCH), _in_place(_PLAIN_OR_BATCH)]
PlainDistribution = Annotated[PlainName, choice(lambda: _PLAIN), _in_place(_PLAIN)]


class GainRange(Section):
    """h_FE between two limits, with or without a typical value, and how it is drawn between them."""

    min: f.PositiveNumber
    typ: f.PositiveNumber | None = None
    max: f.PositiveNumber
    distribution: PlainOrBatch | None = None
    within_batch: f.Share | None = None


class VoltageRange(Section):
    """A positive voltage between two limits, with or without a typical value, and how it is drawn."""

    min: f.PositiveVolts
    typ: f.PositiveVolts | None = None
    max: f.PositiveVolts
    distribution: PlainOrBatch | None = None
    within_batch: f.VoltsFromZero | None = None


Gain = Annotated[
    Annotated[f.PositiveNumber, Tag(ONE_FIGURE)] | Annotated[GainRange, Tag(RANGE)], Discriminator(_form)
]
BaseEmitterVoltage = Annotated[
    Annotated[f.PositiveVolts, Tag(ONE_FIGURE)] | Annotated[VoltageRange, Tag(RANGE)], Discriminator(_form)
]


class StageSection(Section):
    """[stage]"""

    title: f.Text
    topology: Annotated[str, choice(lambda: tuple(TOPOLOGIES))]
    polarity: Annotated[Polarity, choice(lambda: get_args(Polarity))]
    document: f.Text = ""
    revision: f.Text = ""
    designed_by: f.Text = ""
    boards_per_batch: f.Count | None = None


class SupplySection(Section):
    """[supply] and [negative_supply]"""

    voltage: f.TolerancedVolts | None = None
    tolerance: f.Share | None = None
    min: f.Volts | None = None
    nominal: f.Volts | None = None
    max: f.Volts | None = None
    ripple_peak: f.VoltsFromZero | None = None
    ripple_peak_to_peak: f.VoltsFromZero | None = None
    varies: Annotated[Varies, choice(lambda: get_args(Varies))] = "in use"
    distribution: PlainDistribution | None = None


class AmbientSection(Section):
    """[ambient]"""

    min: f.Ambient | None = None
    nominal: f.Ambient | None = None
    max: f.Ambient | None = None


class TransistorSection(Section):
    """[transistor], or the file that it names"""

    type: f.Text | None = None
    gain: Gain
    base_emitter_voltage: BaseEmitterVoltage
    test_current: f.PositiveAmperes
    test_voltage: f.PositiveVolts | None = None
    base_emitter_drift: Drift | None = None
    gain_drift: f.GainDrift | None = None
    gain_curve: f.GainCurvePoints | None = None
    leakage: f.AmperesFromZero | None = None
    leakage_distribution: PlainDistribution | None = None
    leakage_doubling: f.PositiveKelvins | None = None
    saturation_voltage: f.VoltsFromZero | None = None
    early_voltage: f.PositiveVolts | None = None
    reverse_gain: f.PositiveNumber | None = None
    thermal_resistance: f.KelvinsPerWatt | None = None
    max_collector_emitter: f.PositiveVolts | None = None
    max_emitter_base: f.PositiveVolts | None = None
    max_current: f.PositiveAmperes | None = None
    max_power: f.PositiveWatts | None = None
    max_junction: f.Temperature | None = None
    source: f.Text | None = None


class TargetSection(Section):
    """[target]"""

    collector_current: f.PositiveAmperes
    emitter_voltage: f.EmitterVoltage | None = None
    collector: f.Collector | None = None
    divider_current_ratio: f.PositiveNumber | None = None


class SignalSection(Section):
    """[signal]"""

    load: f.PositiveOhms | None = None
    source_resistance: f.OhmsFromZero | None = None
    bypassed: bool = False
    lowest_frequency: f.PositiveHertz | None = None


class CapacitorsSection(Section):
    """What may be said of all capacitors, in [capacitors] without its sub-tables, and of each"""

    series: Annotated[str, choice_of_caller(SERIES, hint=OWN_TABLES)] | None = None
    tolerance: f.Share | None = None
    temperature_change: f.Share | None = None


class CapacitorSection(CapacitorsSection):
    """[capacitors.NAME]"""

    value: f.TolerancedFarads | None = None


class ResistorDefaults(Section):
    """What may be said of all resistors, and of each"""

    series: Annotated[str, choice_of_caller(SERIES, hint=OWN_TABLES)] | None = None
    tolerance: f.Share | None = None
    tempco: f.Tempco | None = None
    life_drift: f.Share | None = None
    power_rating: f.PositiveWatts | None = None
    distribution: AnyDistribution | None = None
    hollow_within: f.Share | None = None
    within_batch: f.Share | None = None
    life_drift_distribution: PlainDistribution | None = None
    tempco_distribution: PlainDistribution | None = None
    group: f.Text | None = None
    tracking: f.Tempco | None = None
    search_steps: f.Steps | None = None
    derate_from: f.Temperature | None = None
    derate_to: f.Temperature | None = None


class ResistorsSection(ResistorDefaults):
    """[resistors], without its sub-tables"""

    stock: f.Text | None = None
    snapping: Annotated[Snapping, choice(lambda: get_args(Snapping))] | None = None


OF_THE_WHOLE = tuple(key for key in ResistorsSection.model_fields if key not in ResistorDefaults.model_fields)
"""The keys of [resistors] that are about the stage, not about each resistor."""


class ResistorSection(ResistorDefaults):
    """[resistors.NAME]"""

    value: f.TolerancedOhms | None = None
    pairs: bool | None = None


class RequireSection(Section):
    """[[require]]; its limits are read once the kind of its quantity is known"""

    id: f.Text | None = None
    quantity: f.Text
    at_least: Any = None
    at_most: Any = None
    judged_by: Annotated[Method, choice(lambda: get_args(Method))] = "corners"
    yield_at_least: f.ProperShare | None = None
    reason: f.Text = ""


class DeratingSection(Section):
    """[derating]"""

    profile: Annotated[str, choice(lambda: tuple(PROFILES))] | None = None
    file: f.Text | None = None


class DeratingFile(Section):
    """A derating profile in a file of its own; its table of origins is read apart"""

    name: f.Text
    resistor_power: f.Factor | None = None
    supply_voltage: f.Factor | None = None
    transistor_power: f.Factor | None = None
    current: f.Factor | None = None
    emitter_base_voltage: f.Factor | None = None
    junction_margin: f.KelvinsBelow | None = None
    junction_ceiling: f.Ambient | None = None
    origin: Any = None


class OriginTable(Section):
    """[origin] of such a file"""

    resistor_power: f.Text | None = None
    supply_voltage: f.Text | None = None
    transistor_power: f.Text | None = None
    current: f.Text | None = None
    emitter_base_voltage: f.Text | None = None
    junction_margin: f.Text | None = None
    junction_ceiling: f.Text | None = None
