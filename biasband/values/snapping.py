"""Snapping: each free resistor gets the value nearest to its ideal one."""

from __future__ import annotations

from collections.abc import Mapping

from biasband.errors import PhysicallyImpossible
from biasband.stage import Stage, Target
from biasband.values.device import refined
from biasband.values.ideal import Ideal, ideal
from biasband.values.shelf import Shelf


def snapped(
    stage: Stage, target: Target, fixed: Mapping[str, float], exact: Ideal, room: Mapping[str, Shelf]
) -> tuple[dict[str, float], list[str]]:
    """Snap the free resistors from the emitter to the base, the rest designed anew after each.

    Returns the values [Ω] of all resistors, and warnings.
    """
    values, steps, warnings = dict(fixed), exact.steps, []
    free = [resistor for resistor in reversed(stage.resistors) if resistor.name not in fixed]
    for resistor in free:
        values[resistor.name] = room[resistor.name].nearest(steps[resistor.name].ohms)
        if resistor is free[-1]:
            break
        try:
            steps = {**steps, **ideal(stage, target, values, refined(stage)).steps}
        except PhysicallyImpossible:
            warnings.append(
                f"{resistor.name}: with its preferred value the others cannot meet the target; "
                "they are snapped from their ideal values"
            )
    return values, warnings
