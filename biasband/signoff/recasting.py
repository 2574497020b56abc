"""A stage recast in another topology: the same surroundings, target and requirements, values still free."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, replace

from biasband.circuit.operating_point import Region
from biasband.circuit.quantities import LOW_CORNER, words
from biasband.circuit.reading import CUT_OFF_SHARE, wiring_of
from biasband.circuit.topology import EMITTER_PARTS, TOPOLOGIES, Node, Topology
from biasband.errors import Fault, PhysicallyImpossible, UsageError
from biasband.margins.holding import nominal
from biasband.quantity import Kind, format_quantity
from biasband.stage import Requirement, Resistor, Signal, Stage, Target
from biasband.values.aim import frame_rails

_LENDING = ("collector_current", "collector_voltage", "emitter_voltage", "collector_emitter_voltage")
_OUTPUTS = {f"{node}_voltage" for node in (Node.COLLECTOR, Node.EMITTER)}
_USELESS = {
    Region.SATURATED: "it is saturated",
    Region.CUT_OFF: "it is cut off",
    Region.RUNAWAY: "it is in thermal runaway",
    Region.UNSOLVED: "it was not solved",
}


@dataclass(frozen=True)
class LeftOut:
    """A limit that means nothing in another topology, and why."""

    id: str
    quantity: str
    reason: str


@dataclass(frozen=True)
class Recast:
    """A stage in some topology: the requirements left out there, and what else differs, in sentences."""

    stage: Stage
    left_out: tuple[LeftOut, ...]
    differs: tuple[str, ...] = ()


def target_of(stage: Stage) -> Target:
    """The target of a stage; one without lends its nominal point.

    Raises UsageError where there are neither a target nor all values, PhysicallyImpossible where the nominal
    point is no active one: saturated, in runaway, not solved, or cut off, V_CE being 99 % of rail to rail.
    """
    if stage.target is not None:
        return stage.target
    if any(resistor.value is None for resistor in stage.resistors):
        raise UsageError("no target, and no values whose nominal point could lend one")
    vocabulary = words(stage)
    here = nominal(stage, {name: vocabulary[name] for name in _LENDING})
    across, span = here.values["collector_emitter_voltage"], _rail_to_rail(stage)
    problem = _USELESS.get(here.region, "")
    if not problem and across > (1.0 - CUT_OFF_SHARE) * span:
        volts, rails = (format_quantity(each, Kind.VOLTAGE) for each in (across, span))
        problem = f"it is cut off, V_CE is {volts} of the {rails} from rail to rail"
    if problem:
        raise PhysicallyImpossible((_cannot_lend(stage, problem),))
    return Target(
        collector_current=here.values["collector_current"],
        emitter_voltage=abs(here.values["emitter_voltage"] - _emitter_rail(stage)) or None,
        collector=here.values["collector_voltage"] if _output(stage) is Node.COLLECTOR else "mid-swing",
    )


def _cannot_lend(stage: Stage, problem: str) -> Fault:
    file = stage.files[0].path if stage.files else stage.title
    problem = f"missing, and the nominal point cannot lend one: {problem}"
    return Fault(file, None, "target", problem, hint="say in [target] what the stage is to do")


def _rail_to_rail(stage: Stage) -> float:
    rails = frame_rails(stage)
    return rails[Node.COLLECTOR_RAIL] - rails[Node.EMITTER_RAIL]


def _emitter_rail(stage: Stage) -> float:
    """The real voltage [V] of the rail that the emitter's resistor stands on."""
    rail = frame_rails(stage)[Node.EMITTER_RAIL]
    return rail if stage.polarity == "npn" else -rail


def _output(stage: Stage) -> Node:
    return TOPOLOGIES[stage.topology].output


def recast(stage: Stage, target: Target, topology: Topology) -> Recast:
    """Recast a stage in a topology, with the resistors that this cannot do without, all free.

    In its own topology the stage stays as it is, optional resistors and given values too. Capacitors are
    left out of all: they are shorts. The target means the collector current and the place of the output; V_E
    is wished for only where it does the same work. Resistors are of the grade of their namesakes, else of the
    grade that most have. Raises UsageError where a topology needs a negative supply and there is none, or the
    output's place is not between its rails.
    """
    if topology.name == stage.topology:
        return replace(
            _required(stage, replace(stage, capacitors=())), differs=tuple(_beside(stage, topology))
        )
    if topology.split_supply and stage.negative_supply is None:
        raise UsageError("needs a negative supply, and the stage has none")
    bare = replace(
        stage,
        topology=topology.name,
        resistors=tuple(_grade(stage, name) for name in topology.compulsory),
        negative_supply=stage.negative_supply if topology.split_supply else None,
        capacitors=(),
        signal=_signal(stage.signal, topology),
    )
    placed = replace(bare, target=_target(stage, target, bare))
    return replace(_required(stage, placed), differs=tuple(_differs(stage, placed)))


def _grade(stage: Stage, name: str) -> Resistor:
    """A free resistor like its namesake, else like most."""
    plain = {
        r.name: replace(r, name="", value=None, kept=False, group=None, tracking=None, pairs=False)
        for r in stage.resistors
    }
    return replace(plain.get(name) or Counter(plain.values()).most_common(1)[0][0], name=name)


def _signal(signal: Signal | None, topology: Topology) -> Signal | None:
    """What couples; a bypass only where it shorts neither the output nor nothing."""
    if signal is None:
        return None
    can = topology.output is not Node.EMITTER and "RE" in topology.compulsory
    return replace(signal, bypassed=signal.bypassed and can)


def _target(stage: Stage, target: Target, new: Stage) -> Target:
    """What a target means where another topology's emitter does other work."""
    free = replace(target, emitter_voltage=None, supply_over=None)
    if _output(stage) is _output(new):
        same = (stage.negative_supply is None) is (new.negative_supply is None)
        return target if same else free
    if _output(stage) is Node.COLLECTOR:
        return free if isinstance(target.collector, str) else _output_at(free, target.collector, new)
    across = target.emitter_voltage
    if target.supply_over is not None:
        across = stage.supply.voltage.nominal / target.supply_over
    if across is None:
        return free
    return replace(free, collector=_emitter_rail(stage) + (across if stage.polarity == "npn" else -across))


def _output_at(free: Target, place: float, new: Stage) -> Target:
    """The target of a stage whose output is its emitter, at a node voltage [V]."""
    across = (place - _emitter_rail(new)) * (1.0 if new.polarity == "npn" else -1.0)
    if not 0.0 < across < _rail_to_rail(new):
        volts = format_quantity(place, Kind.VOLTAGE)
        raise UsageError(f"the target's place of the output, {volts}, is not between its rails")
    return replace(free, collector="mid-swing", emitter_voltage=across)


def _required(stage: Stage, new: Stage) -> Recast:
    """The recast stage with the requirements that mean something there."""
    free = replace(new, requirements=())
    why = {requirement: _meaningless(requirement, stage, free) for requirement in stage.requirements}
    left_out = [LeftOut(each.id, each.quantity, reason) for each, reason in why.items() if reason]
    kept = tuple(each for each, reason in why.items() if not reason)
    return Recast(replace(new, requirements=kept), tuple(left_out))


def _meaningless(requirement: Requirement, stage: Stage, new: Stage) -> str:
    """Why a requirement means nothing in another topology; empty where it does mean something."""
    quantity = requirement.quantity
    if quantity == LOW_CORNER:
        return "capacitors are left out"
    if quantity not in words(new):
        return f"there is no {quantity.partition('.')[2]}"
    if quantity in _OUTPUTS and _output(stage) is not _output(new):
        return f"the output is the {_output(new)}"
    own = wiring_of(stage).ties
    tied = {f"{node}_voltage": node for node in wiring_of(new).ties if node not in own}
    return f"the {tied[quantity]} is tied to a rail" if quantity in tied else ""


def _beside(stage: Stage, topology: Topology) -> Iterator[str]:
    """What a stage has beside the plainest form of its topology."""
    more = [
        r.name for r in stage.resistors if r.name in topology.resistors and r.name not in topology.compulsory
    ]
    if "RE" not in topology.compulsory:
        more += [r.name for r in stage.resistors if r.name in EMITTER_PARTS]
    if more:
        yield f"with {' and '.join(more)}, which this topology can do without"


def _differs(stage: Stage, new: Stage) -> Iterator[str]:
    names = {resistor.name for resistor in new.resistors}
    if stage.signal is not None and stage.signal.bypassed and "RE" in names and _output(new) is Node.EMITTER:
        yield "RE is not bypassed, the output stands on it"
    if "RE" in names and any(resistor.name in EMITTER_PARTS for resistor in stage.resistors):
        yield f"RE is one resistor, not {' and '.join(EMITTER_PARTS)}"
    if stage.negative_supply is not None and new.negative_supply is None:
        yield "the negative supply is not used"
