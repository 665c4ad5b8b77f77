"""What an identification's page says in words."""

from __future__ import annotations

import numpy as np
from numpy import bool_
from numpy.typing import NDArray

from rigbench.arm.arm import Floats
from rigbench.report.cautions import BEFORE_A_REAL_ARM, CAUTION
from rigbench.report.identify_numbers import Shown
from rigbench.report.words import figure

__all__ = [
    "caution_words",
    "known_words",
    "left_words",
    "noise_words",
    "torque_words",
    "unexplained_joints",
    "worse_joints",
]

MUCH_LEFT = 1.5
"""Times the noise from which on what is left on another motion is more than noise (our choice: chance
alone is within a quarter of it from a hundred samples on)."""

KNOWN_PERCENT = 1.0
MOST_NAMES = 4
LONGEST = 60  # characters of a recording's name, from its end


def torque_words(shown: Shown) -> str:
    """Say how far predicted torques were off, and are."""
    before, after = shown.shares["declared"], shown.shares["identified"]
    said = (
        f"Predicted torques were off by {_range(before)} % of how much they vary; with the identified arm it "
        f"is {_range(after)} %"
    )
    if not (worse := worse_joints(shown)):
        return f"{said}."
    return f"{said}, but more than before at {_names(worse)}: don't use this arm before you know why."


def left_words(shown: Shown) -> str:
    """Say on which motion that was, and whether what is left is noise."""
    name = shown.rows.name
    name = name if len(name) <= LONGEST else f"\u2026{name[-LONGEST:]}"
    if not shown.done.checked:
        return f"On the motion that was fitted ({name}), so it is no test; a check would be."
    return f"On a motion that was not fitted ({name}). {noise_words(shown)}"


def noise_words(shown: Shown) -> str:
    """Say whether what is left on a motion that was not fitted is noise."""
    times = shown.errors["identified"].rms_nm / shown.done.found.noise
    said = f"What is left is {_range(times)} times the noise of the fit"
    if not (much := unexplained_joints(shown)):
        return f"{said}."
    return f"{said}: at {_names(much)} there is more in it, which these parameters don't explain."


def worse_joints(shown: Shown) -> list[str]:
    """Name the joints whose torques the identified arm predicts worse than the declared one."""
    return _joints(shown, shown.errors["identified"].rms_nm > shown.errors["declared"].rms_nm)


def unexplained_joints(shown: Shown) -> list[str]:
    """Name the joints at which more than noise is left of a motion that was not fitted."""
    times = shown.errors["identified"].rms_nm / shown.done.found.noise
    return _joints(shown, times > MUCH_LEFT) if shown.done.checked else []


def known_words(shown: Shown) -> str:
    """Say how many parameters are known, off their declared values and, in practice, right."""
    done, count = shown.done, shown.done.found.base.count
    low, high = done.found.interval()
    off = int(((done.declared_values < low) | (done.declared_values > high)).sum())
    known = int((shown.departures.half <= KNOWN_PERCENT).sum())
    said = (
        f"Of {count} parameters, {off} are shown to be off their declared values (95 %); {known} are known "
        f"to {KNOWN_PERCENT:g} % of how much a torque varies"
    )
    if done.true_values is None:
        return f"{said}."
    right = int(((low <= done.true_values) & (done.true_values <= high)).sum())
    return f"{said}; {right} of the {count} intervals hold the true value."


def caution_words(shown: Shown) -> str:
    """Return what every page says about itself."""
    return BEFORE_A_REAL_ARM if shown.done.truth is None else f"{CAUTION} {BEFORE_A_REAL_ARM}"


def _joints(shown: Shown, which: NDArray[bool_]) -> list[str]:
    return [name for name, is_one in zip(shown.joints, which, strict=True) if is_one]


def _names(names: list[str]) -> str:
    more = len(names) - MOST_NAMES
    return ", ".join(names[:MOST_NAMES]) + (f" and {more} more" if more > 0 else "")


def _range(values: Floats) -> str:
    """Return the least and the largest of the numbers that are there."""
    there = values[np.isfinite(values)]
    if not there.size:
        return "-"
    low, high = figure(float(there.min())), figure(float(there.max()))
    return low if low == high else f"{low} to {high}"
