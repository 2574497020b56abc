"""How much of a rating may be used: derating profiles, and a resistor's rating when it is hot.

A profile is named by what it does and implies no standard; the user checks its figures against the
one that applies.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from biasband.constants import KELVIN_OFFSET
from biasband.errors import UsageError


@dataclass(frozen=True, kw_only=True)
class Profile:
    """The share of each rating that a design may use, as factors of 1.

    `supply_voltage` is the share of V_CEO that the highest supply may reach, `transistor_power` of
    the power that P_tot and T_j max leave, `current` of I_C max, `emitter_base_voltage` of V_EBO,
    `resistor_power` of a resistor's rating at its ambient. The junction stays `junction_margin` [K]
    below T_j max and at or below `junction_ceiling` [K] (None: no ceiling). `origin` says where the
    figures come from.
    """

    name: str
    origin: str
    resistor_power: float = 1.0
    supply_voltage: float = 1.0
    transistor_power: float = 1.0
    current: float = 1.0
    emitter_base_voltage: float = 1.0
    junction_margin: float = 0.0
    junction_ceiling: float | None = None

    def junction_limit(self, max_junction: float) -> float:
        """The highest junction temperature [K] allowed for a T_j max [K].

        Worked case, stringent: T_j max 150 °C allows 110 °C, 125 °C allows 85 °C.
        """
        below = max_junction - self.junction_margin
        return below if self.junction_ceiling is None else min(self.junction_ceiling, below)

    @property
    def sentence(self) -> str:
        """One sentence for the report: what is derated, to what, and where the figures come from."""
        parts = [*self._shares(), *self._junction()]
        if not parts:
            return f"Derating profile {self.name}: no derating applied."
        return f"Derating profile {self.name}: {', '.join(parts)} ({self.origin})."

    def _shares(self) -> list[str]:
        shares = (
            ("resistor power", self.resistor_power),
            ("supply", self.supply_voltage),
            ("transistor power", self.transistor_power),
            ("collector current", self.current),
            ("emitter-base voltage", self.emitter_base_voltage),
        )
        return [f"{what} at most {100 * share:.4g} % of its limit" for what, share in shares if share != 1.0]

    def _junction(self) -> list[str]:
        parts = []
        if self.junction_ceiling is not None:
            parts.append(f"junction at most {self.junction_ceiling - KELVIN_OFFSET:.4g} °C")
        if self.junction_margin:
            parts.append(f"junction at least {self.junction_margin:.4g} K below its limit")
        return parts


_MEMORY = "memory of published practice, to be checked against the standard that applies"

_ALL = (
    Profile(name="full", origin="the ratings themselves"),
    Profile(
        name="half-power",
        origin=f"resistor power and both voltages: {_MEMORY}",
        resistor_power=0.5,
        supply_voltage=0.8,
        emitter_base_voltage=0.8,
    ),
    Profile(
        name="stringent",
        origin=f"every figure: {_MEMORY}",
        resistor_power=0.5,
        supply_voltage=0.75,
        transistor_power=0.65,
        current=0.75,
        emitter_base_voltage=0.75,
        junction_margin=40.0,
        junction_ceiling=110.0 + KELVIN_OFFSET,
    ),
)

PROFILES: Mapping[str, Profile] = MappingProxyType({profile.name: profile for profile in _ALL})
"""Every profile by name (physics: "Cautions").

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
