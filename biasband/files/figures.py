"""The fields of a stage file: figures with their unit and range, words, choices.

Each is a type for pydantic. A refusal is a `QuantityError` or, for words, a `Refusal`: both carry
what is wrong and what is allowed.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Collection, Mapping
from dataclasses import dataclass
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BeforeValidator, ValidationInfo

from biasband.constants import HOTTEST_JUNCTION
from biasband.coupling import LARGEST_CAPACITOR, SMALLEST_CAPACITOR
from biasband.errors import QuantityError, UsageError
from biasband.files.ledger import nearest, shown
from biasband.gain_curve import MOST_POINTS, GainCurve
from biasband.parts.series import MOST_STEPS
from biasband.quantity import Kind, Toleranced, format_quantity, parse, parse_toleranced

_SMALLEST, _LARGEST = 1e-21, 1e15
"""In SI: no figure of a stage lies outside, and what lies inside overflows nowhere."""


class Refusal(ValueError):
    """A word that is none of the allowed ones."""

    def __init__(self, problem: str, *, allowed: str, hint: str = "") -> None:
        self.problem, self.allowed, self.hint = problem, allowed, hint
        super().__init__(problem)


@dataclass(frozen=True)
class SupplyOver:
    """The target "supply / N"."""

    divisor: float


def figure(
    kind: Kind,
    *,
    above: float | None = None,
    least: float | None = None,
    below: float | None = None,
    most: float | None = None,
) -> BeforeValidator:
    """Make a reader of figures of a kind, within a range in SI."""

    def read(value: Any) -> float:
        return within(parse(value, kind), value, kind, above=above, least=least, below=below, most=most)

    return BeforeValidator(read)


def within(
    number: float,
    value: object,
    kind: Kind,
    *,
    above: float | None = None,
    least: float | None = None,
    below: float | None = None,
    most: float | None = None,
) -> float:
    """Return the number where it is in range; raise QuantityError, naming `value`, where it is not."""
    if number != 0.0 and not _SMALLEST <= abs(number) <= _LARGEST:
        allowed = f"0, or from {_SMALLEST:g} to {_LARGEST:g} in SI"
        raise QuantityError(shown(value), f"no {kind.value} that a stage can have", allowed)
    bounds = (
        ("above", above, above is None or number > above),
        ("at least", least, least is None or number >= least),
        ("below", below, below is None or number < below),
        ("at most", most, most is None or number <= most),
    )
    if all(good for _, _, good in bounds):
        return number
    wanted = " and ".join(
        f"{word} {format_quantity(bound, kind, plain=True)}" for word, bound, _ in bounds if bound is not None
    )
    raise QuantityError(shown(value), f"not {wanted}", f"a {kind.value} {wanted}")


def choice(known: Callable[[], Collection[str]]) -> BeforeValidator:
    """Make a reader of one word out of those that `known` returns."""

    return BeforeValidator(lambda value: _chosen(value, known()))


def choice_of_caller(name: str, *, hint: str = "") -> BeforeValidator:
    """Make a reader of one word out of those that the caller of the check holds ready under a name.

    `hint` helps where another word is read that is near none of them.
    """

    def read(value: Any, info: ValidationInfo) -> str:
        held: Mapping[str, Collection[str]] = info.context or {}
        return _chosen(value, held[name], hint)

    return BeforeValidator(read)


def _chosen(value: object, words: Collection[str], hint: str = "") -> str:
    if isinstance(value, str) and value in words:
        return value
    near = nearest(value, words) if isinstance(value, str) else ""
    raise Refusal("unknown", allowed=", ".join(words), hint=near or hint)


def _toleranced(
    kind: Kind, *, above: float | None = None, least: float | None = None, most: float | None = None
) -> BeforeValidator:
    def read(value: Any) -> Toleranced:
        figure = parse_toleranced(value, kind)
        within(figure.value, value, kind, above=above, least=least, most=most)
        within(figure.tolerance or 0.0, value, Kind.RATIO, below=1.0)
        return figure

    return BeforeValidator(read)


def one_line(text: str) -> str:
    """Return a text with every run of blanks made one; raise Refusal where it cannot be printed."""
    line = " ".join(text.split())
    if re.search(r"[\x00-\x1f\x7f-\x9f]", line):
        raise Refusal("control characters in a text", allowed="printable text")
    return line


def _emitter_voltage(value: Any) -> float | SupplyOver:
    over = re.fullmatch(r"\s*supply\s*/\s*(.*)", value) if isinstance(value, str) else None
    try:
        if over:
            return SupplyOver(within(parse(over[1], Kind.NUMBER), value, Kind.NUMBER, above=0.0))
        return within(parse(value, Kind.VOLTAGE), value, Kind.VOLTAGE, above=0.0)
    except QuantityError as error:
        raise Refusal(error.problem, allowed='a voltage above 0 ("1 V"), or "supply / 9"') from None


def _whole(value: Any) -> int:
    number = within(parse(value, Kind.NUMBER), value, Kind.NUMBER, least=1.0)
    if not number.is_integer():
        raise QuantityError(shown(value), "not a whole number", "a whole number from 1")
    return int(number)


def _steps(value: Any) -> int:
    within(parse(value, Kind.NUMBER), value, Kind.NUMBER, least=1.0, below=MOST_STEPS + 1.0)
    return _whole(value)


def _gain_point(value: Any) -> tuple[Any, ...]:
    if isinstance(value, list) and len(value) == 2:
        return tuple(value)
    raise Refusal("not a point of the curve", allowed='a current and the h_FE there: ["1 mA", 240]')


def _gain_points(value: Any) -> Any:
    if isinstance(value, list):
        return value
    raise Refusal("not a list of points", allowed='as in [["0.1 mA", 180], ["1 mA", 240]]')


def _gain_curve(points: list[tuple[float, float]]) -> GainCurve:
    try:
        return GainCurve(tuple(points))
    except UsageError as error:
        raise Refusal(str(error), allowed=_A_CURVE) from None


_A_CURVE = f"2 to {MOST_POINTS} points, currents rising, h_FE rising by less than they do"

COLLECTOR_PLACES = ("mid-swing", "max-swing")


def _collector(value: Any) -> Any:
    if value in COLLECTOR_PLACES:
        return value
    try:
        return parse(value, Kind.VOLTAGE)
    except QuantityError as error:
        hint = nearest(value, COLLECTOR_PLACES) if isinstance(value, str) else ""
        allowed = f'{", ".join(COLLECTOR_PLACES)}, or a voltage ("5 V")'
        raise Refusal(error.problem, allowed=allowed, hint=hint) from None


Text = Annotated[str, AfterValidator(one_line)]
Volts = Annotated[float, figure(Kind.VOLTAGE)]
PositiveVolts = Annotated[float, figure(Kind.VOLTAGE, above=0.0)]
VoltsFromZero = Annotated[float, figure(Kind.VOLTAGE, least=0.0)]
TolerancedVolts = Annotated[Toleranced, _toleranced(Kind.VOLTAGE)]
PositiveAmperes = Annotated[float, figure(Kind.CURRENT, above=0.0)]
AmperesFromZero = Annotated[float, figure(Kind.CURRENT, least=0.0)]
PositiveWatts = Annotated[float, figure(Kind.POWER, above=0.0)]
PositiveOhms = Annotated[float, figure(Kind.RESISTANCE, above=0.0)]
OhmsFromZero = Annotated[float, figure(Kind.RESISTANCE, least=0.0)]
TolerancedOhms = Annotated[Toleranced, _toleranced(Kind.RESISTANCE, above=0.0)]
PositiveHertz = Annotated[float, figure(Kind.FREQUENCY, above=0.0)]
TolerancedFarads = Annotated[
    Toleranced, _toleranced(Kind.CAPACITANCE, least=SMALLEST_CAPACITOR, most=LARGEST_CAPACITOR)
]
Temperature = Annotated[float, figure(Kind.TEMPERATURE)]
Ambient = Annotated[float, figure(Kind.TEMPERATURE, above=150.0, below=HOTTEST_JUNCTION)]
"""Between −123 °C and the hottest junction that the model knows."""

PositiveKelvins = Annotated[float, figure(Kind.TEMPERATURE_DIFFERENCE, above=0.0)]
KelvinsBelow = Annotated[float, figure(Kind.TEMPERATURE_DIFFERENCE, least=0.0, below=200.0)]
"""A distance below T_j max: 200 K leave no junction that any ambient allows."""

KelvinsPerWatt = Annotated[float, figure(Kind.THERMAL_RESISTANCE, least=0.0)]
GainDrift = Annotated[float, figure(Kind.RELATIVE_SLOPE, above=-0.05, below=0.05)]
"""Ten times what a transistor does either way; a bare number is usually a forgotten unit."""

Tempco = Annotated[float, figure(Kind.RELATIVE_SLOPE, least=0.0, below=0.01)]
"""Below 10 000 ppm/K: no resistor drifts more, a bare number is usually a forgotten unit."""
Share = Annotated[float, figure(Kind.RATIO, least=0.0, below=1.0)]
Factor = Annotated[float, figure(Kind.RATIO, above=0.0, most=1.0)]
ProperShare = Annotated[float, figure(Kind.RATIO, above=0.0, below=1.0)]
PositiveNumber = Annotated[float, figure(Kind.NUMBER, above=0.0)]
GainPoint = Annotated[tuple[PositiveAmperes, PositiveNumber], BeforeValidator(_gain_point)]
GainCurvePoints = Annotated[list[GainPoint], BeforeValidator(_gain_points), AfterValidator(_gain_curve)]
Count = Annotated[int, BeforeValidator(_whole)]
Steps = Annotated[int, BeforeValidator(_steps)]
EmitterVoltage = Annotated[float | SupplyOver, BeforeValidator(_emitter_voltage)]
Collector = Annotated[float | Literal["mid-swing", "max-swing"], BeforeValidator(_collector)]
