"""biasband: from a hand-computed bias network to buyable parts and a signed-off margin table."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from biasband.errors import BadlyWritten, BiasbandError, PhysicallyImpossible, UsageError
    from biasband.signoff.contrasting import contrast
    from biasband.signoff.drifting import drift
    from biasband.signoff.intake import read_stage
    from biasband.signoff.spreading import spread
    from biasband.signoff.study import corners, design, review, snap
    from biasband.stage import Stage

_ROOMS = {
    "BadlyWritten": "errors",
    "BiasbandError": "errors",
    "PhysicallyImpossible": "errors",
    "Stage": "stage",
    "UsageError": "errors",
    "contrast": "signoff.contrasting",
    "corners": "signoff.study",
    "design": "signoff.study",
    "drift": "signoff.drifting",
    "read_stage": "signoff.intake",
    "review": "signoff.study",
    "snap": "signoff.study",
    "spread": "signoff.spreading",
}

__all__ = [
    "BadlyWritten",
    "BiasbandError",
    "PhysicallyImpossible",
    "Stage",
    "UsageError",
    "contrast",
    "corners",
    "design",
    "drift",
    "read_stage",
    "review",
    "snap",
    "spread",
]


def __getattr__(name: str) -> Any:
    """Fetch a public name from its room when it is first used, so that `--help` loads no numerics."""
    from importlib import import_module

    if name not in _ROOMS:
        raise AttributeError(f"module 'biasband' has no attribute {name!r}")
    return getattr(import_module(f"biasband.{_ROOMS[name]}"), name)


def __dir__() -> list[str]:
    return __all__
