"""Warnings: what a reviewer must know beside the margins."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence

from biasband.boards.outside import Outside
from biasband.circuit.most_swing import most_swing
from biasband.circuit.operating_point import Region
from biasband.circuit.quantities import words
from biasband.circuit.reading import read
from biasband.constants import ASSUMED_SATURATION_VOLTAGE
from biasband.margins.records import Evidence
from biasband.quantity import Kind, format_quantity
from biasband.stage import Stage, Transistor
from biasband.values.choosing import Design
from biasband.variation.contributors import NEGATIVE, SUPPLY, realise
from biasband.variation.corners import Corners

DECADE = 10.0
"""Nominal currents this many times above or below the test current are far from it (common practice)."""

HIGH_VOLTAGE = 60.0
"""[V] DC above which a supply can hurt (common practice; local codes decide)."""


def warnings_of(design: Design, nominal: Mapping[str, float], evidence: Evidence) -> tuple[str, ...]:
    """Every warning of a reviewed stage, those about the design first."""
    stage = design.stage
    return (
        *design.warnings,
        *_regions(evidence),
        *outside_words(stage, evidence.outside),
        *_beyond_curve(stage, nominal, evidence.corners),
        *stage_warnings(stage, nominal),
    )


def spread_warnings(
    design: Design, nominal: Mapping[str, float], corners: Corners, outside: Sequence[Outside]
) -> tuple[str, ...]:
    """Every warning of a stage whose boards were sampled."""
    stage = design.stage
    return (
        *design.warnings,
        *outside_words(stage, outside),
        *_beyond_curve(stage, nominal, corners),
        *stage_warnings(stage, nominal),
    )


def stage_warnings(stage: Stage, nominal: Mapping[str, float]) -> tuple[str, ...]:
    """What a reader must know of a stage before any analysis of it."""
    return (
        *_assumed(stage),
        *_far_from_test(stage, nominal),
        *_too_much_swing(stage),
        *_lonely(stage),
        *_dangers(stage),
    )


def _regions(evidence: Evidence) -> Iterator[str]:
    for region, does in ((Region.SATURATED, "saturate"), (Region.CUT_OFF, "cut off")):
        count = evidence.corners.regions.get(region, 0)
        if count:
            yield f"{count} of {evidence.corners.count} corners {does}"


def outside_words(stage: Stage, outside: Sequence[Outside]) -> Iterator[str]:
    """Boards beyond the corner limits: a defect of the corner set, never kept quiet."""
    vocabulary = words(stage)
    for each in outside:
        kind = vocabulary[each.measure].kind
        value, limit = (format_quantity(x, kind, digits=6) for x in (each.value, each.limit))
        yield (
            f"{each.measure}: sampled board {each.board} reaches {value}, beyond the corner limit {limit}: "
            "the search of the corners missed it, and the limit was moved to that board"
        )


def _assumed(stage: Stage) -> Iterator[str]:
    transistor = stage.transistor
    if transistor.saturation_voltage is None:
        assumed = f"{ASSUMED_SATURATION_VOLTAGE:g} V assumed (common practice)"
        yield f"no saturation_voltage given: V_CE(sat) = {assumed}"
    if isinstance(transistor, Transistor) and transistor.thermal_resistance is None:
        yield "no thermal_resistance given: self-heating is left out, the junction is taken at ambient"
    if isinstance(transistor, Transistor) and transistor.leakage == 0.0:
        yield "no leakage given: taken as none"


def _far_from_test(stage: Stage, nominal: Mapping[str, float]) -> Iterator[str]:
    """h_FE limits hold only at the test current, unless a gain curve says what becomes of them."""
    transistor, current = stage.transistor, nominal["collector_current"]
    if not isinstance(transistor, Transistor) or transistor.gain_curve is not None or not current > 0.0:
        return
    ratio = current / transistor.test_current
    if not 1.0 / DECADE < ratio < DECADE:
        yield (
            f"the stage runs at {ratio:.3g} times the test current: "
            "the limits of h_FE and V_BE hold at the test current only"
        )


def _too_much_swing(stage: Stage) -> Iterator[str]:
    """A swing that these resistors cannot give however they are biased, and the most that they can."""
    lowest = dict.fromkeys((SUPPLY, NEGATIVE), -1.0)
    if stage.negative_supply is not None:
        lowest[NEGATIVE] = 1.0  # the one nearer to ground
    most = float(most_swing(read(stage, realise(stage, lowest)))[0])
    for requirement in stage.requirements:
        wanted = requirement.at_least
        if requirement.quantity == "symmetric_peak_swing" and wanted is not None and wanted > most:
            asked, there = (format_quantity(volts, Kind.VOLTAGE, digits=3) for volts in (wanted, most))
            yield (
                f"{requirement.id}: no bias gives {asked} of swing with these resistors, load and the lowest "
                f"supply: {there} at most, where cut-off and saturation are equally far"
            )


def _beyond_curve(stage: Stage, nominal: Mapping[str, float], corners: Corners) -> Iterator[str]:
    """Where the gain curve says nothing, h_FE is held, which is a guess."""
    transistor = stage.transistor
    if not isinstance(transistor, Transistor) or transistor.gain_curve is None:
        return
    low, high = transistor.gain_curve.ends
    curve = f"beyond the gain curve ({_amperes(low)} to {_amperes(high)}), where h_FE is held"
    if not low <= transistor.test_current <= high:
        yield f"the test current, {_amperes(transistor.test_current)}, is {curve}"
    current, range_ = nominal["collector_current"], corners.ranges["collector_current"]
    if current < low or current > high:
        yield f"the stage runs at {_amperes(current)}, {curve}"
    elif range_.low.value < low or range_.high.value > high:
        yield f"some corners run at {_amperes(range_.low.value)} to {_amperes(range_.high.value)}, {curve}"


def _amperes(current: float) -> str:
    return format_quantity(current, Kind.CURRENT, digits=3)


def _lonely(stage: Stage) -> Iterator[str]:
    """Groups of one: its limits are right, but nothing tracks it, so that the group is likely a slip."""
    groups = [resistor.group for resistor in stage.resistors if resistor.group is not None]
    for resistor in stage.resistors:
        if resistor.group is not None and groups.count(resistor.group) == 1:
            yield f"group {resistor.group} has one member, {resistor.name}: there is nothing for it to track"


def _dangers(stage: Stage) -> Iterator[str]:
    rails = [stage.supply.voltage.high + stage.supply.ripple_peak]
    rails += [-stage.negative_supply.voltage.low] if stage.negative_supply else []
    highest = sum(rails)
    if highest > HIGH_VOLTAGE:
        reason = f"above {HIGH_VOLTAGE:g} V DC it can hurt, and local codes apply"
        yield f"the supply reaches {highest:.3g} V: {reason}"
