"""Cautions that stand at the end of every report."""

CAUTIONS = (
    "This is a calculation, not a test of hardware: check a built stage before you rely on it.",
    "Time is not modelled: no switch-on, no bursts, no slow drift but the life drift that was stated.",
    "Resistors and transistors get hot enough to burn fingers and scorch boards, faults included.",
    "A supply above 60 V DC, one derived from the mains, and energy stored in capacitors can hurt or kill.",
    "Local codes, the makers' data sheets and licensed practice come before anything that stands here.",
)
"""One sentence each (physics: "Cautions"; common practice)."""
