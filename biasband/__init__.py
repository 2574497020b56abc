"""biasband: from a hand-computed bias network to buyable parts and a signed-off margin table."""

from biasband.errors import BadlyWritten, BiasbandError, PhysicallyImpossible, UsageError
from biasband.files.stage_file import read_stage
from biasband.signoff.study import corners, design, review, snap, spread
from biasband.stage import Stage

__all__ = [
    "BadlyWritten",
    "BiasbandError",
    "PhysicallyImpossible",
    "Stage",
    "UsageError",
    "corners",
    "design",
    "read_stage",
    "review",
    "snap",
    "spread",
]
