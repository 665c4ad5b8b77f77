"""Whether a recording can be of this arm: units, order of columns, motion."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from itertools import combinations

import numpy as np

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.errors import Fault
from rigbench.identify.filtering import CORNER_HZ, STATE_FACTOR, derivative, low_pass
from rigbench.identify.recording import Recording
from rigbench.identify.recording_file import TIME, column_names
from rigbench.identify.recording_table import Table
from rigbench.identify.regressor import Terms, parameter_values, regressor

__all__ = ["implausible"]

SLOWEST_HZ = 20.0
"""Fewer samples a second can't show a controlled motion."""

LEAST_MOVE = {"deg": 1.0, "mm": 5.0}
"""A joint that moves by less is not excited."""

PAST = 1.05
"""Share of its range that a joint may be recorded beyond its limits by: zero offsets."""

EXPLAINED = 0.5
"""Share of a joint's torque that even a poor model leaves unexplained at most."""

BETTER = 2.0
"""A slip is told where the model leaves so many times less of the worst joint unexplained without it."""

SAMPLES = 400
"""States at which torques are compared."""

TURN = float(np.degrees(1.0))
FACTORS = {
    TURN: "57.3 times too large",
    1 / TURN: "57.3 times too small",
    1e3: "1000 times too large",
    1e-3: "1000 times too small",
}
"""Slips of a unit: degrees for radians, thousandths for wholes."""


@dataclass(frozen=True)
class _Slip:
    """One way in which columns may be wrong; ``q`` and ``torque`` are they set right."""

    columns: tuple[str, ...]
    said: str
    q: Floats
    torque: Floats


def implausible(
    arm: Arm, gravity: tuple[float, float, float], recording: Recording, table: Table
) -> list[Fault]:
    """Return what makes a recording, read without faults, not one of this arm in these units.

    By itself: too few samples a second, as when times are in ms; joints beyond their limits; joints that do
    not move; velocities that are not the positions' own. Against the declared arm's torques: columns of
    positions or torques that are 57.3 or 1000 times too large or small, or swapped, told where the arm
    leaves more than half of a joint's torque unexplained, and less than half of that once the slip is set
    right. A model that is merely wrong is no fault.
    """
    rate = recording.rate_hz
    if rate < SLOWEST_HZ:
        problem = f"{rate:.4g} samples a second, so times may be in ms"
        return [table.column_fault(TIME, problem, f"seconds, and {SLOWEST_HZ:g} samples or more in each")]
    faults = [*_range_faults(arm, recording, table), *_still_faults(arm, recording, table)]
    if recording.v is not None:
        faults += _velocity_faults(arm, recording, recording.v, table)
    return faults or list(_slip_faults(arm, gravity, recording, table))


def _range_faults(arm: Arm, recording: Recording, table: Table) -> Iterator[Fault]:
    """Yield the joints that were recorded beyond their limits."""
    slides = arm.kinds == PRISMATIC
    for i, name in enumerate(column_names(arm)["q"]):
        room = (PAST - 1) * (arm.upper[i] - arm.lower[i]) if np.isfinite(arm.upper[i] - arm.lower[i]) else 0.0
        q, scale = recording.q[:, i], 1e3 if slides[i] else TURN
        far = np.flatnonzero((q < arm.lower[i] - room) | (q > arm.upper[i] + room))
        if far.size:
            factor = 1e3 if slides[i] else TURN
            fits = (q / factor >= arm.lower[i]).all() and (q / factor <= arm.upper[i]).all()
            why = f"; it looks {FACTORS[factor]}" if fits else ""
            problem = (
                f"{q[far[0]] * scale:.5g} at {recording.t[far[0]]:.4g} s is beyond the joint's limits{why}"
            )
            low, high = arm.lower[i] * scale, arm.upper[i] * scale
            yield table.fault(int(far[0]), name, problem, f"{low:.4g} to {high:.4g}")


def _still_faults(arm: Arm, recording: Recording, table: Table) -> Iterator[Fault]:
    """Yield the joints that hardly move."""
    for i, name in enumerate(column_names(arm)["q"]):
        unit, scale = ("mm", 1e3) if arm.kinds[i] == PRISMATIC else ("deg", TURN)
        moved = float(np.ptp(recording.q[:, i])) * scale
        if moved < LEAST_MOVE[unit]:
            problem = f"no excitation: joint {arm.joints[i]} moves by {moved:.3g} {unit} in all"
            yield table.column_fault(
                name,
                problem,
                f"{LEAST_MOVE[unit]:g} {unit} or more, better all of its range",
            )


def _velocity_faults(arm: Arm, recording: Recording, v: Floats, table: Table) -> Iterator[Fault]:
    """Yield the columns of velocity that do not go with the positions' change."""
    names = column_names(arm)
    rate = recording.rate_hz
    corner = min(CORNER_HZ, rate / 8)
    own = derivative(low_pass(recording.q, rate, corner), rate)
    seen = low_pass(v, rate, corner)
    alike = np.corrcoef(seen.T, own.T)[: arm.n, arm.n :]
    for i, name in enumerate(names["v"]):
        best = int(np.nanargmax(alike[i]))
        ratio = float((seen[:, i] @ own[:, i]) / (own[:, i] @ own[:, i]))
        if best != i and alike[i, best] > 0.9 > 2 * alike[i, i]:
            problem = f"looks like the velocity of joint {arm.joints[best]}: swapped columns"
        elif (slip := _factor(ratio)) is not None:
            problem = f"{slip}, beside the change of {names['q'][i]}"
        elif not alike[i, i] > 0.5:
            problem = f"does not go with the change of {names['q'][i]}"
        else:
            continue
        yield table.column_fault(name, problem, f"the velocity of joint {arm.joints[i]}")


def _factor(ratio: float) -> str | None:
    """Say which slip of a unit makes a ratio that should be 1, within a factor of 2."""
    near = [said for factor, said in FACTORS.items() if 0.5 < ratio / factor < 2.0]
    return near[0] if near else None


def _slip_faults(
    arm: Arm, gravity: tuple[float, float, float], recording: Recording, table: Table
) -> Iterator[Fault]:
    """Yield the slip without which the arm explains the torques, if there is one."""
    before = _unexplained(arm, gravity, recording)
    if (before <= EXPLAINED).all():
        return
    slips = list(_slips(arm, recording))
    after = [
        _unexplained(arm, gravity, replace(recording, q=slip.q, v=None, torque=slip.torque)) for slip in slips
    ]
    worst = [float(share.max()) for share in after]
    best = int(np.argmin(worst))
    if worst[best] * BETTER < before.max() and worst[best] < EXPLAINED:
        slip = slips[best]
        left = (
            f"the model misses the torques by {before.max():.0%} as they stand, by {worst[best]:.0%} without"
        )
        for name in slip.columns:
            yield table.column_fault(name, f"{slip.said}: {left}", "units and joints as the header says")


def _slips(arm: Arm, recording: Recording) -> Iterator[_Slip]:
    """Yield every slip that is looked for: of all columns of a kind, of one, and of two that are swapped."""
    names = column_names(arm)
    whole = list(range(arm.n))
    for which in [whole, *([i] for i in whole if arm.n > 1)]:
        for factor, said in FACTORS.items():
            for what in ("q", "tau"):
                columns = tuple(names[what][i] for i in which)
                scale = np.ones(arm.n)
                scale[which] = 1 / factor
                q, torque = (scale, np.ones(arm.n)) if what == "q" else (np.ones(arm.n), scale)
                yield _Slip(columns, f"looks {said}", recording.q * q, recording.torque * torque)
    for i, j in combinations(whole, 2):
        order = list(whole)
        order[i], order[j] = j, i
        for what in ("q", "tau"):
            pair = names[what][i], names[what][j]
            left, right = (order, whole) if what == "q" else (whole, order)
            said = f"{pair[0]} and {pair[1]} look swapped"
            yield _Slip(pair, said, recording.q[:, left], recording.torque[:, right])


def _unexplained(arm: Arm, gravity: tuple[float, float, float], recording: Recording) -> Floats:
    """Return the share of each joint's torque (n,) that the declared arm leaves unexplained."""
    rate = recording.rate_hz
    corner = min(CORNER_HZ, rate / (2 * STATE_FACTOR))
    q = low_pass(recording.q, rate, corner)
    v = derivative(q, rate)
    a = derivative(v, rate)
    some = np.unique(np.linspace(0.05 * len(q), 0.95 * len(q) - 1, SAMPLES).astype(int))
    y = regressor(arm, gravity, q[some], v[some], a[some], Terms())
    torque = low_pass(recording.torque, rate, corner)[some]
    error = torque - y @ parameter_values(arm, Terms())
    share: Floats = np.sqrt((error**2).mean(axis=0) / np.maximum((torque**2).mean(axis=0), 1e-12))
    return share
