"""What is well written but physically impossible: each rule gives the physical reason.

Rules look at nominal figures: a stage that fails only at its limits exists, and gets a verdict.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import partial

from biasband.circuit.quantities import quantity_units
from biasband.circuit.topology import TOPOLOGIES, Node
from biasband.constants import DEFAULT_EMITTER_VOLTAGE, REFERENCE_TEMPERATURE
from biasband.files.ledger import Ledger
from biasband.files.toml_lines import KeyPath
from biasband.quantity import Kind, format_quantity
from biasband.stage import Limits, Stage

_volts: Callable[[float], str] = partial(format_quantity, kind=Kind.VOLTAGE)


def note_impossibilities(stage: Stage, ledger: Ledger) -> None:
    """Note, in the ledger, every reason why the stage cannot exist."""
    for rule in (
        _limits_in_order,
        _supply_signs,
        _supply_above_base_emitter_voltage,
        _room_above_emitter,
        _collector_between_rails,
        _resistors_stay_positive,
        _requirements_in_order,
        _derating_in_order,
    ):
        rule(stage, ledger)


def _limits_in_order(stage: Stage, ledger: Ledger) -> None:
    transistor = stage.transistor
    _order(stage.supply.voltage, Kind.VOLTAGE, ("supply",), ledger)
    if stage.negative_supply is not None:
        _order(stage.negative_supply.voltage, Kind.VOLTAGE, ("negative_supply",), ledger)
    _order(stage.ambient, Kind.TEMPERATURE, ("ambient",), ledger)
    _order(transistor.gain, Kind.NUMBER, ("transistor", "gain"), ledger)
    path = ("transistor", "base_emitter_voltage")
    _order(transistor.base_emitter_voltage, Kind.VOLTAGE, path, ledger)


def _order(limits: Limits, kind: Kind, path: KeyPath, ledger: Ledger) -> None:
    low, nominal, high = (
        format_quantity(figure, kind, digits=6) for figure in (limits.low, limits.nominal, limits.high)
    )
    if limits.low > limits.high:
        ledger.add((*path, "min"), f"the lowest value, {low}, is above the highest, {high}")
    elif not limits.low <= limits.nominal <= limits.high:
        ledger.add(path, f"the nominal value, {nominal}, is outside its own limits, {low} … {high}")


def _supply_signs(stage: Stage, ledger: Ledger) -> None:
    supply, negative = stage.supply, stage.negative_supply
    lowest = supply.voltage.low
    if lowest <= 0:
        problem = f"no transistor runs from {_volts(lowest)}"
        ledger.add(_supply_path("supply", ledger), problem, allowed="above 0 V")
    elif supply.ripple_peak >= lowest:
        problem = f"a ripple of {_volts(supply.ripple_peak)} reaches through the supply's {_volts(lowest)}"
        ledger.add(("supply", "ripple_peak"), problem, allowed="a peak below the lowest supply")
    if negative is not None and negative.voltage.high >= 0:
        problem = f"no negative supply: it reaches {_volts(negative.voltage.high)}"
        ledger.add(_supply_path("negative_supply", ledger), problem, allowed='below 0 V, as in "-9 V"')


def _supply_path(name: str, ledger: Ledger) -> KeyPath:
    return (name, "min") if (name, "min") in ledger.stage_file.lines else (name, "voltage")


def _span(stage: Stage) -> float:
    """The voltage from rail to rail [V]."""
    negative = 0.0 if stage.negative_supply is None else stage.negative_supply.voltage.nominal
    return stage.supply.voltage.nominal - negative


def _base_drive(stage: Stage) -> float:
    """The most [V] that the network can put between the base and the emitter's rail."""
    if stage.negative_supply is None or stage.polarity == "pnp":
        return stage.supply.voltage.nominal
    return -stage.negative_supply.voltage.nominal


def _powered(stage: Stage) -> bool:
    """Whether the rails are the right way round, so that the rules about room between them apply."""
    return stage.supply.voltage.nominal > 0 and _base_drive(stage) > 0 and _span(stage) > 0


def _supply_above_base_emitter_voltage(stage: Stage, ledger: Ledger) -> None:
    junction, drive = stage.transistor.base_emitter_voltage.nominal, _base_drive(stage)
    if _powered(stage) and drive <= junction:
        name = "supply" if drive == stage.supply.voltage.nominal else "negative_supply"
        problem = f"{_volts(drive)} cannot turn on a base-emitter junction of {_volts(junction)}"
        ledger.add(_supply_path(name, ledger), problem, allowed=f"more than {_volts(junction)}")


def _emitter_voltage(stage: Stage) -> float | None:
    """The voltage [V] wished across the emitter resistor; None where nothing wishes for one."""
    target = stage.target
    if target is None or target.emitter_voltage is not None:
        return None if target is None else target.emitter_voltage
    if target.supply_over is not None:
        return stage.supply.voltage.nominal / target.supply_over
    return DEFAULT_EMITTER_VOLTAGE if _by_default(stage) else None


def _wished(stage: Stage) -> bool:
    target = stage.target
    return target is not None and (target.emitter_voltage is not None or target.supply_over is not None)


def _by_default(stage: Stage) -> bool:
    """Whether the 1 V rule places the emitter: no resistor is given, and nothing else has a rule."""
    topology, names = TOPOLOGIES[stage.topology], {r.name for r in stage.resistors}
    follows_output = topology.output is Node.EMITTER or topology.split_supply
    return not follows_output and "RE" in names and all(r.value is None for r in stage.resistors)


def _room_above_emitter(stage: Stage, ledger: Ledger) -> None:
    emitter, span, drive = _emitter_voltage(stage), _span(stage), _base_drive(stage)
    junction = stage.transistor.base_emitter_voltage.nominal
    if emitter is None or not _powered(stage):
        return
    path = ("target", "emitter_voltage")
    rule = " (left out, so the 1 V rule holds)" if _by_default(stage) and not _wished(stage) else ""
    if emitter + stage.saturation_voltage >= span:
        problem = (
            f"{_volts(emitter)}{rule} at the emitter and a V_CE(sat) of {_volts(stage.saturation_voltage)} "
            f"leave no swing of the {_volts(span)} from rail to rail"
        )
        ledger.add(path, problem)
    elif emitter + junction >= drive > junction:
        problem = (
            f"{_volts(emitter)}{rule} at the emitter put the base beyond the {_volts(drive)} that drive it"
        )
        ledger.add(path, problem, hint=f"V_BE is {_volts(junction)}")


def _collector_between_rails(stage: Stage, ledger: Ledger) -> None:
    if stage.target is None or isinstance(stage.target.collector, str) or not _powered(stage):
        return
    path, collector = ("target", "collector"), stage.target.collector
    if Node.COLLECTOR in TOPOLOGIES[stage.topology].ties:
        problem = f"the collector of a {stage.topology} is tied to its rail"
        ledger.add(path, problem, hint="set emitter_voltage")
        return
    top = stage.supply.voltage.nominal
    bottom = top - _span(stage)
    if not bottom < collector < top:
        problem = f"{_volts(collector)} is not between the rails, {_volts(bottom)} and {_volts(top)}"
        ledger.add(path, problem)
        return
    emitter = _emitter_voltage(stage)
    above_rail = collector - bottom if stage.polarity == "npn" else top - collector
    if emitter is not None and above_rail <= emitter + stage.saturation_voltage < _span(stage):
        problem = (
            f"{_volts(collector)} leaves no more than V_CE(sat), {_volts(stage.saturation_voltage)}, "
            f"across the transistor: {_volts(emitter)} are across the emitter resistor"
        )
        ledger.add(path, problem)


def _resistors_stay_positive(stage: Stage, ledger: Ledger) -> None:
    ends = (stage.ambient.low, stage.ambient.high)
    furthest = max(ends, key=lambda ambient: abs(ambient - REFERENCE_TEMPERATURE))
    for resistor in stage.resistors:
        if resistor.tempco * abs(furthest - REFERENCE_TEMPERATURE) >= 1.0:
            problem = f"takes {resistor.name} to nothing at {format_quantity(furthest, Kind.TEMPERATURE)}"
            ledger.add(("resistors", resistor.name, "tempco"), problem)


def _requirements_in_order(stage: Stage, ledger: Ledger) -> None:
    names = tuple(resistor.name for resistor in stage.resistors)
    kinds = quantity_units(names, with_capacitors=bool(stage.capacitors))
    for position, need in enumerate(stage.requirements):
        if need.at_least is not None and need.at_most is not None and need.at_least > need.at_most:
            shown = partial(format_quantity, kind=kinds[need.quantity], digits=6)
            problem = f"nothing is at least {shown(need.at_least)} and at most {shown(need.at_most)}"
            ledger.add(("require", position, "at_least"), problem)


def _derating_in_order(stage: Stage, ledger: Ledger) -> None:
    shown = partial(format_quantity, kind=Kind.TEMPERATURE)
    for resistor in stage.resistors:
        if resistor.derate_from >= resistor.derate_to:
            problem = (
                f"the rating of {resistor.name} cannot fall from {shown(resistor.derate_from)} "
                f"to nothing at {shown(resistor.derate_to)}"
            )
            ledger.add(("resistors", resistor.name, "derate_from"), problem, allowed="from below to")
