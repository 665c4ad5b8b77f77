"""Whether a recording can be of this arm: rate, limits, motion, velocities, and then what its torques say."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.errors import Fault, counted
from rigbench.identify.filtering import derivative, low_pass, without_spikes
from rigbench.identify.recording import Recording
from rigbench.identify.recording_file import TIME, column_names
from rigbench.identify.recording_table import Table
from rigbench.identify.slips import FACTORS, TURN, corner_of, slip_faults, slip_of
from rigbench.motion.limits import unit_of

__all__ = ["implausible"]

SLOWEST_HZ = 19.5
"""Fewer samples a second can't show a controlled motion."""

LEAST_MOVE = {"deg": 1.0, "mm": 5.0}
"""A joint that moves by less is not excited."""

PAST = 1.05
"""Share of its range that a joint may be recorded beyond its limits by: zero offsets."""

FAR = 3.0
"""A position beyond its limit by so many times looks like one in another unit."""

FAST = 1.3
"""Share of its speed limit beyond which a joint was not moved by its drive."""

LARGEST = 1e12
"""Torques [N m or N] that are larger, or smaller than one over this, are no drive's (our choice)."""

WINDOW_S = 0.05
"""Time over which a speed is taken for that [s]: noise of 0.1 deg is 3 deg/s then."""

LEAST_JUMP, TURNED = 5.0, 180.0
"""A position that changes from row to row by less than this [deg, or cm] beside what speed allows is noisy or
counted; one that changes by half a turn was wrapped."""


def implausible(
    arm: Arm, gravity: tuple[float, float, float], recording: Recording, table: Table
) -> list[Fault]:
    """Return what makes a recording, read without faults, not one of this arm in these units.

    By itself: too few samples a second, as when times are in ms; joints beyond their limits; joints that do
    not move, jump, or outrun their drives, single spikes of position aside; torques that are the same all
    along or of no drive's size; velocities that are not the positions' own. If there is none of these, what
    :func:`rigbench.identify.slips.slip_faults` finds. A model that is merely wrong is no fault.
    """
    rate = recording.rate_hz
    if rate < SLOWEST_HZ:
        problem = f"{rate:.4g} samples a second, so times may be in ms"
        return [table.column_fault(TIME, problem, "seconds, and 20 samples or more in each")]
    recording = replace(recording, q=without_spikes(recording.q)[0])  # which are left out later, and counted
    faults = [*_range_faults(arm, recording, table), *_still_faults(arm, recording, table)]
    faults = faults or [*_jump_faults(arm, recording, table)]
    faults = faults or [*_speed_faults(arm, recording, table)]
    if recording.v is not None:
        faults += _velocity_faults(arm, recording, recording.v, table)
    return faults or slip_faults(arm, gravity, recording, table)


def _range_faults(arm: Arm, recording: Recording, table: Table) -> Iterator[Fault]:
    """Yield the joints that were recorded beyond their limits."""
    for i, name in enumerate(column_names(arm)["q"]):
        (unit, scale), q, low, high = unit_of(arm, i), recording.q[:, i], arm.lower[i], arm.upper[i]
        room = (PAST - 1) * (high - low) if np.isfinite(high - low) else 0.0
        far = np.flatnonzero((q < low - room) | (q > high + room))
        if far.size:
            why = _why_beyond(q, low, high, 1e3 if arm.kinds[i] == PRISMATIC else TURN)
            also = f" (and in {counted(far.size - 1, 'more row')})" if far.size > 1 else ""
            problem = (
                f"{q[far[0]] * scale:.5g} {unit} at {recording.t[far[0]]:.4f} s is beyond the joint's limits"
                f"{also}{why}"
            )
            yield table.fault(int(far[0]), name, problem, f"{low * scale:.4g} to {high * scale:.4g}")


def _why_beyond(q: Floats, low: float, high: float, factor: float) -> str:
    """Say which slip would bring all of a joint's positions within its limits, if one would."""
    least, most = float(q.min()), float(q.max())
    if max(-least, most) > FAR * max(-low, high) and low <= least / factor and most / factor <= high:
        return f"; it looks {FACTORS[factor]}"
    return "; it looks of the wrong sign" if low <= -most and -least <= high else ""


def _still_faults(arm: Arm, recording: Recording, table: Table) -> Iterator[Fault]:
    """Yield the joints that hardly move, and the torques that never change or are no drive's."""
    names = column_names(arm)
    for i, (name, torque) in enumerate(zip(names["q"], names["tau"], strict=True)):
        unit, scale = unit_of(arm, i)
        moved = float(np.ptp(recording.q[:, i])) * scale
        if moved < LEAST_MOVE[unit]:
            problem = f"no excitation: joint {arm.joints[i]} moves by {moved:.3g} {unit} in all"
            if moved:
                problem += f", unless these are in {'m' if unit == 'mm' else 'rad'}"
            expected = f"{LEAST_MOVE[unit]:g} {unit} or more, better all of its range"
            yield table.column_fault(name, problem, expected)
        if np.ptp(recording.torque[:, i]) == 0:
            problem = f"the same all along: {recording.torque[0, i] + 0.0:.5g}"
            yield table.column_fault(torque, problem, "a torque that changes along the motion")
        usual = float(np.percentile(np.abs(recording.torque[:, i]), 95))
        if usual > LARGEST or 0 < usual < 1 / LARGEST:
            problem = f"is of {usual:.3g} for the most part, which no drive gives"
            yield table.column_fault(torque, problem, "a torque in the unit that the header says")


def _jump_faults(arm: Arm, recording: Recording, table: Table) -> Iterator[Fault]:
    """Yield the joints whose position is suddenly another."""
    for i, name in enumerate(column_names(arm)["q"]):
        unit, scale = unit_of(arm, i)
        step = np.abs(np.diff(recording.q[:, i])) * scale
        own = 10 * LEAST_JUMP if unit == "mm" else LEAST_JUMP
        most = min(
            own + FAR * arm.drives.speed_limit[i] * scale / recording.rate_hz, own / LEAST_JUMP * TURNED
        )
        if (jumps := np.flatnonzero(step > most)).size:
            wrapped = unit == "deg" and (step[jumps] > TURNED).all()
            problem = f"jumps by {step[jumps[0]]:.4g} {unit} from the row before"
            problem += f", as at {len(jumps) - 1} other rows" if len(jumps) > 1 else ""
            problem += "; it looks wrapped at half a turn" if wrapped else ""
            yield table.fault(int(jumps[0]) + 1, name, problem, "positions that go on from row to row")


def _speed_faults(arm: Arm, recording: Recording, table: Table) -> Iterator[Fault]:
    """Yield the joints that outrun their drives, as they do when times are too short."""
    window = min(max(1, round(WINDOW_S * recording.rate_hz)), len(recording.t) - 1)
    q = recording.q
    v = np.abs(q[window:] - q[:-window]) * recording.rate_hz / window
    for i, name in enumerate(column_names(arm)["q"]):
        unit, scale = unit_of(arm, i)
        limit = arm.drives.speed_limit[i]
        fast = np.flatnonzero(v[:, i] > FAST * limit)
        if fast.size:
            at = int(v[:, i].argmax())
            problem = f"moves at {v[at, i] * scale:.4g} {unit}/s, beyond the drive's speed limit"
            problem += f"; or times in {TIME} are too short"
            yield table.fault(at, name, problem, f"{limit * scale:.4g} {unit}/s at most")


def _speeds(recording: Recording) -> Floats:
    """Return the low-passed speeds (N, n) that the positions say."""
    rate = recording.rate_hz
    return derivative(low_pass(recording.q, rate, corner_of(recording)), rate)


def _velocity_faults(arm: Arm, recording: Recording, v: Floats, table: Table) -> Iterator[Fault]:
    """Yield the columns of velocity that do not go with the positions' change."""
    names = column_names(arm)
    rate, own = recording.rate_hz, _speeds(recording)
    seen = low_pass(without_spikes(v)[0], rate, corner_of(recording))
    alike = _alike(seen, own)
    for i, name in enumerate(names["v"]):
        best = int(alike[i].argmax())
        ratio = float(seen[:, i] @ own[:, i]) / max(float(own[:, i] @ own[:, i]), 1e-12)
        if np.ptp(v[:, i]) == 0:
            problem = f"the same all along: {v[0, i] * unit_of(arm, i)[1] + 0.0:.5g}"
        elif best != i and alike[i, best] > 0.9 > 2 * alike[i, i]:
            problem = f"looks like the velocity of joint {arm.joints[best]}: swapped columns"
        elif (slip := slip_of(ratio)) is not None:
            problem = f"{slip}, beside the change of {names['q'][i]}"
        elif not alike[i, i] > 0.5:
            problem = f"does not go with the change of {names['q'][i]}"
        else:
            continue
        yield table.column_fault(name, problem, f"the velocity of joint {arm.joints[i]}")


def _alike(one: Floats, other: Floats) -> Floats:
    """Return the correlations (n, n) of one's columns (N, n) with the other's; 0 of a constant."""
    parts = [x - x.mean(axis=0) for x in (one, other)]
    parts = [x / np.maximum(np.linalg.norm(x, axis=0), 1e-12) for x in parts]
    alike: Floats = parts[0].T @ parts[1]
    return alike
