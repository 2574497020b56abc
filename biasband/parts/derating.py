"""How much of a rating may be used: derating profiles, and a resistor's rating when it is hot.

A profile is named by what it does and implies no standard; the user checks its figures against the
one that applies.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from biasband.constants import KELVIN_OFFSET
from biasband.errors import UsageError
from biasband.stage import Derating

FACTORS: Mapping[str, str] = MappingProxyType(
    {
        "resistor_power": "resistor power",
        "supply_voltage": "supply",
        "transistor_power": "transistor power",
        "current": "collector current",
        "emitter_base_voltage": "emitter-base voltage",
    }
)
"""What each factor of a profile is a share of, in words."""

MARGIN, CEILING = "junction_margin", "junction_ceiling"

FIGURES = (*FACTORS, MARGIN, CEILING)
"""The figures of a profile, each with an origin of its own."""

NO_ORIGIN = "origin not stated"


def in_words(derating: Derating) -> str:
    """Write a profile as one sentence: each limit with its origin, then what is not derated."""
    said = dict(_limits(derating))
    if not said:
        return f"Derating profile {derating.name}: no derating applied."
    by_origin: dict[str, list[str]] = {}
    for figure, words in said.items():
        by_origin.setdefault(derating.origins.get(figure, NO_ORIGIN), []).append(words)
    parts = [f"{', '.join(words)} ({origin})" for origin, words in by_origin.items()]
    left = [words for figure, words in FACTORS.items() if figure not in said]
    left += [] if MARGIN in said or CEILING in said else ["junction temperature"]
    parts += [f"not derated: {', '.join(left)}"] if left else []
    return f"Derating profile {derating.name}: {'; '.join(parts)}."


def _limits(derating: Derating) -> Iterator[tuple[str, str]]:
    """Each figure that limits something, and the limit in words."""
    for figure, words in FACTORS.items():
        share: float = getattr(derating, figure)
        if share != 1.0:
            yield figure, f"{words} at most {100 * share:.4g} % of its limit"
    if derating.junction_ceiling is not None:
        yield CEILING, f"junction at most {derating.junction_ceiling - KELVIN_OFFSET:.4g} °C"
    if derating.junction_margin:
        yield MARGIN, f"junction at least {derating.junction_margin:.4g} K below its limit"


_MEMORY = "memory of published practice, to be checked against the standard that applies"

_ALL = (
    Derating(name="full"),
    Derating(
        name="half-power",
        resistor_power=0.5,
        supply_voltage=0.8,
        emitter_base_voltage=0.8,
        origins=dict.fromkeys(("resistor_power", "supply_voltage", "emitter_base_voltage"), _MEMORY),
    ),
    Derating(
        name="stringent",
        resistor_power=0.5,
        supply_voltage=0.75,
        transistor_power=0.65,
        current=0.75,
        emitter_base_voltage=0.75,
        junction_margin=40.0,
        junction_ceiling=110.0 + KELVIN_OFFSET,
        origins=dict.fromkeys(FIGURES, _MEMORY),
    ),
)

PROFILES: Mapping[str, Derating] = MappingProxyType({profile.name: profile for profile in _ALL})
"""Biasband's own profiles by name (physics: "Cautions").

The sources' factor on a resistor's *voltage* (80 %) has no field: a stage states no such rating.
"""


def derated_rating(
    rating: ArrayLike, ambient: ArrayLike, *, derate_from: float, derate_to: float
) -> NDArray[np.float64]:
    """Compute what is left of a power rating [W] at an ambient temperature [K].

    Full up to `derate_from` [K], then a straight line to zero at `derate_to` [K], and zero beyond:
    rating · (derate_to − T) / (derate_to − derate_from), held within 0 … rating. `rating` and
    `ambient` broadcast against each other; NaN in gives NaN out.

    Raises UsageError where `derate_to` is not above `derate_from`.

    Worked case: 0.25 W from 70 °C to 155 °C; at 104 °C 51/85 of it, 0.15 W, is left.
    Source: common practice for film resistors.
    """
    if not derate_to > derate_from:
        raise UsageError(f"derate_to ({derate_to:g} K) must be above derate_from ({derate_from:g} K)")
    share = (derate_to - np.asarray(ambient, dtype=np.float64)) / (derate_to - derate_from)
    return np.asarray(np.asarray(rating, dtype=np.float64) * np.clip(share, 0.0, 1.0))
