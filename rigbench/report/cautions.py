"""What every report says about itself, in one place."""

from __future__ import annotations

__all__ = ["BEFORE_A_REAL_ARM", "CAUTION", "NOT_MODELLED"]

CAUTION = "Simulation is evidence for a choice, not a safety case."

BEFORE_A_REAL_ARM = (
    "Before a law, a gain or a model meets a real arm: a risk assessment under the local machinery rules and "
    "ISO 10218, people outside the reach, reduced speed first, an emergency stop in hand, torque and speed "
    "limits in the drive. Local codes and licensed practice come first."
)

NOT_MODELLED = (
    "Not modelled: backlash, flexible links, temperature, the rotor's gyroscopic coupling (of order 1/G)."
)
