"""What a stage was held against, in a few lines: the first question in a review."""

from __future__ import annotations

from collections.abc import Iterator

from biasband.margins.holding import Nominal
from biasband.quantity import Kind
from biasband.show.table import figure, percent
from biasband.stage import AnyTransistor, Distribution, Limits, Signal, Stage, Supply, Transistor


def surroundings(stage: Stage, nominal: Nominal) -> tuple[str, ...]:
    """Ambient and supplies, the transistor's limits, ageing, coupling, and the target reached."""
    return (*circumstances(stage), *_target(stage, nominal))


def circumstances(stage: Stage) -> tuple[str, ...]:
    """The same without the target: what does not depend on any operating point."""
    return (
        "; ".join(_in_use(stage)),
        "; ".join(_transistor(stage.transistor)),
        _life_drift(stage),
        _coupling(stage),
        *_drawn(stage),
    )


def _span(limits: Limits, kind: Kind) -> str:
    low, middle, high = (figure(value, kind) for value in (limits.low, limits.nominal, limits.high))
    return middle if limits.low == limits.high else f"{low} to {high} ({middle})"


def _in_use(stage: Stage) -> Iterator[str]:
    yield f"ambient {_span(stage.ambient, Kind.TEMPERATURE)}"
    yield _supply("supply", stage.supply)
    if stage.supply.ripple_peak:
        yield f"ripple ±{figure(stage.supply.ripple_peak, Kind.VOLTAGE)}"
    if stage.negative_supply is not None:
        yield _supply("negative supply", stage.negative_supply)


def _supply(name: str, supply: Supply) -> str:
    by_board = " by board" if supply.varies == "by board" else ""
    return f"{name} {_span(supply.voltage, Kind.VOLTAGE)}{by_board}"


def _transistor(transistor: AnyTransistor) -> Iterator[str]:
    yield f"h_FE {_span(transistor.gain, Kind.NUMBER)}"
    yield f"V_BE {_span(transistor.base_emitter_voltage, Kind.VOLTAGE)}"
    if not isinstance(transistor, Transistor):
        return
    drift = transistor.base_emitter_drift
    at_current = f"both at {figure(transistor.test_current, Kind.CURRENT)} and 25 °C"
    slope = "by the band-gap law" if drift is None else figure(drift, Kind.VOLTAGE_SLOPE)
    yield f"{at_current}, V_BE drifting {slope}, h_FE {figure(transistor.gain_drift, Kind.RELATIVE_SLOPE)}"
    if transistor.gain_curve is not None:
        low, high = (figure(current, Kind.CURRENT) for current in transistor.gain_curve.ends)
        yield f"h_FE following the gain curve from {low} to {high}"
    yield f"I_CBO up to {figure(transistor.leakage, Kind.CURRENT)} at 25 °C"


def _life_drift(stage: Stage) -> str:
    drifts = {resistor.name: percent(resistor.life_drift, digits=3) for resistor in stage.resistors}
    if len(set(drifts.values())) == 1:
        return f"resistors as listed, life drift ±{next(iter(drifts.values()))}"
    each = ", ".join(f"{name} ±{drift}" for name, drift in drifts.items())
    return f"resistors as listed, life drift {each}"


def _coupling(stage: Stage) -> str:
    signal = stage.signal
    if signal is None:
        return "no signal section: capacitors open, emitter resistor not bypassed, no load"
    coupling = ", ".join(_signal(signal, _bypassed_to(stage)))
    if not stage.supply.ripple_peak:
        return coupling
    return f"{coupling}; ripple at the output: the larger of capacitors open and short"


def _bypassed_to(stage: Stage) -> str:
    """Where the bypass capacitor across the emitter resistor ends: on the emitter's rail."""
    if stage.polarity == "pnp":
        return "the positive supply"
    return "ground" if stage.negative_supply is None else "the negative supply"


def _signal(signal: Signal, bypassed_to: str) -> Iterator[str]:
    yield f"source {figure(signal.source_resistance, Kind.RESISTANCE)}"
    yield "no load" if signal.load is None else f"load {figure(signal.load, Kind.RESISTANCE)}"
    yield f"emitter bypassed to {bypassed_to}" if signal.bypassed else "emitter resistor not bypassed"
    if signal.lowest_frequency is not None:
        yield f"down to {figure(signal.lowest_frequency, Kind.FREQUENCY)}"


def _drawn(stage: Stage) -> Iterator[str]:
    """How figures are drawn from board to board, where one is not uniform."""
    names: dict[str, list[str]] = {}
    for name, drawn in _distributions(stage):
        if drawn != "uniform":
            names.setdefault(drawn, []).append(name)
    if names:
        said = "; ".join(f"{', '.join(each)} {drawn}" for drawn, each in names.items())
        batches = f"; {stage.boards_per_batch} boards to a batch" if stage.drawn_by_batch else ""
        yield f"drawn from board to board: {said}; all else uniform{batches}"


def _distributions(stage: Stage) -> Iterator[tuple[str, str]]:
    transistor = stage.transistor
    yield "supply", _law(stage.supply.voltage.distribution, Kind.VOLTAGE)
    if stage.negative_supply is not None:
        yield "negative supply", _law(stage.negative_supply.voltage.distribution, Kind.VOLTAGE)
    yield "h_FE", _law(transistor.gain.distribution, Kind.RATIO)
    yield "V_BE", _law(transistor.base_emitter_voltage.distribution, Kind.VOLTAGE)
    yield "leakage", _law(transistor.leakage_distribution, Kind.CURRENT)
    for resistor in stage.resistors:
        yield resistor.name, _law(resistor.distribution, Kind.RATIO)
        yield f"life drift of {resistor.name}", _law(resistor.life_drift_distribution, Kind.RATIO)
        yield f"tempco of {resistor.name}", _law(resistor.tempco_distribution, Kind.RATIO)


def _law(distribution: Distribution, kind: Kind) -> str:
    if distribution.hollow_within is not None:
        return f"hollow (none within ±{figure(distribution.hollow_within, kind)})"
    if distribution.within_batch is not None:
        return f"by batch (within ±{figure(distribution.within_batch, kind)})"
    return distribution.name


def _target(stage: Stage, nominal: Nominal) -> Iterator[str]:
    if stage.target is None:
        return
    wished, reached = stage.target.collector_current, nominal.values["collector_current"]
    yield (
        f"target: collector current {figure(wished, Kind.CURRENT)}, nominal {figure(reached, Kind.CURRENT)} "
        f"({100.0 * (reached / wished - 1.0):+.1f} %)"
    )
