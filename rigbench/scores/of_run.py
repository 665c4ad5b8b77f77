"""The scores of one run."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from rigbench.arm.arm import PRISMATIC, Floats
from rigbench.arm.dynamics import tool_path
from rigbench.motion.motion import Motion
from rigbench.rig.log import Log
from rigbench.scores.polyline import farthest

__all__ = ["score_run"]

PATH_HZ = 1000.0
"""The commanded path is sampled at least this finely, so that a slow control rate doesn't cut its corners."""

ROUNDING_S = 1e-9
"""A tick this much before the end of a leg is at its end."""

ARRIVAL_M = 1e-3
"""The direction of arrival at a target is that of the commanded path's last millimetre."""


def score_run(log: Log, motion: Motion, settle_band_mm: float) -> dict[str, float]:
    """Return the scores of a finished run, by the names in SCORES; {} for a run that did not finish.

    With e = q_ref - q the true position error at the N control ticks and p, R the tool's position and
    rotation, subscript r where commanded (at q_ref):

    - joint_rms = sqrt(mean over ticks of sum over joints of e^2), joint_peak = max of abs(e); in deg over
      the revolute joints, in mm over the prismatic ones; and for each joint.
    - tool_rms = sqrt(mean of d^2), tool_peak = max of d, d = norm(p - p_r); tool_angle_peak = max of the
      angle of R_r' R.
    - path_peak: the largest distance of p from the path that p_r takes over the whole motion.
    - overshoot, settle: see :func:`_rests`; absent where the motion has no rests.
    - torque_rms, chatter (at the ticks) and torque_peak (at any physics step, as logged) over each joint's
      limit, the worst joint; absent where no joint has one. saturated: the share of ticks at which the
      drive limited any joint.
    - energy: as logged, from every physics step.
    - law_us and law_share: as logged, and over the control period.
    """
    if log.outcome != "finished":
        return {}
    chain = log.plant.chain(log.gravity)
    commanded, commanded_frames = tool_path(chain, np.ascontiguousarray(log.q_ref))
    attained, attained_frames = tool_path(chain, np.ascontiguousarray(log.q))
    miss = attained - commanded
    distance = np.sqrt(np.einsum("ij,ij->i", miss, miss))
    scores = {
        "tool_peak_mm": 1e3 * float(distance.max()),
        "tool_rms_mm": 1e3 * _rms(distance),
        "tool_angle_peak_deg": _largest_angle_deg(commanded_frames, attained_frames),
        "path_peak_mm": 1e3 * farthest(attained, _path(log, motion, chain, commanded)),
    }
    scores |= _rests(log.t, motion.rests, commanded, miss, settle_band_mm)
    scores |= dict(_joints(log))
    scores |= dict(_torques(log))
    scores["saturated_percent"] = 100.0 * float(np.any(log.limited, axis=1).mean())
    scores["energy_j"] = log.energy_j
    scores["law_us"] = log.law_us
    scores["law_share_percent"] = 100.0 * log.law_us * 1e-6 * log.control_hz
    return scores


def _rms(values: Floats) -> float:
    """Return the root of the mean square over ticks."""
    return float(np.sqrt(np.mean(values**2)))


def _largest_angle_deg(one: Floats, other: Floats) -> float:
    """Return the largest angle [deg] between two sequences of rotations (N, 3, 3).

    From norm(R1 - R2) = 2 sqrt(2) sin(angle / 2) (Frobenius), which keeps its digits at small angles.
    """
    gap = (one - other).reshape(-1, 9)
    norm = np.sqrt(np.einsum("ij,ij->i", gap, gap).max())
    return float(np.degrees(2.0 * np.arcsin(min(1.0, norm / (2.0 * np.sqrt(2.0))))))


def _path(log: Log, motion: Motion, chain: Floats, commanded: Floats) -> Floats:
    """Return the commanded path of the tool point (P, 3): the ticks' points, or finer between slow ticks."""
    if log.control_hz >= PATH_HZ:
        return commanded
    steps = int(np.ceil(motion.duration_s * PATH_HZ)) + 1
    q, _, _ = motion.reference(np.linspace(0.0, motion.duration_s, steps))
    path, _ = tool_path(chain, np.ascontiguousarray(q))
    return np.asarray(path)


def _rests(
    t: Floats, rests: tuple[tuple[float, float], ...], commanded: Floats, miss: Floats, band_mm: float
) -> dict[str, float]:
    """Return overshoot_mm and settle_ms, each of the worst rest; {} if the motion has none.

    A rest lasts from the end of its leg to the start of the next. settle_ms: from the end of the leg
    until the tool point is within ``band_mm`` of its target for all that is left of the rest
    (interpolated between ticks; inf if it is outside when the rest ends). overshoot_mm: how far the
    tool point gets beyond the target, along the direction in which the commanded path arrives there,
    once it has been within the band or short of the target in this rest; so an arm that hangs beyond
    it throughout does not overshoot, it does not settle. 0 where the leg doesn't move the tool point.
    """
    overshoot, settle = [], []
    before = 0
    for leg_end, rest_end in rests:
        first = int(np.searchsorted(t, leg_end - ROUNDING_S))
        last = int(np.searchsorted(t, rest_end + ROUNDING_S))
        if rest_end <= leg_end or first >= last:
            continue
        beyond = miss[first:last] @ _arrival(commanded[before : first + 1])
        excess = np.linalg.norm(miss[first:last], axis=1) - 1e-3 * band_mm
        settle.append(_settle_s(t[first:last] - leg_end, excess))
        overshoot.append(_overshoot_m(beyond, excess))
        before = last - 1
    return {"overshoot_mm": 1e3 * max(overshoot), "settle_ms": 1e3 * max(settle)} if settle else {}


def _settle_s(since: Floats, excess: Floats) -> float:
    """Return the time [s] from which ``excess`` over the band stays at or below 0."""
    outside = np.flatnonzero(excess > 0.0)
    if not outside.size:
        return 0.0
    k = int(outside[-1])
    if k + 1 == len(excess):
        return np.inf
    share = excess[k] / (excess[k] - excess[k + 1])
    return float(since[k] + share * (since[k + 1] - since[k]))


def _overshoot_m(beyond: Floats, excess: Floats) -> float:
    """Return the largest distance ``beyond`` the target from the first tick in band or short of it on."""
    entered = np.flatnonzero((excess <= 0.0) | (beyond <= 0.0))
    return max(0.0, float(beyond[entered[0] :].max())) if entered.size else 0.0


def _arrival(leg: Floats) -> Floats:
    """Return the unit vector (3,) along which the commanded points ``leg`` (K, 3) arrive at the last one."""
    gaps = np.linalg.norm(leg[-1] - leg, axis=1)
    clear = np.flatnonzero(gaps >= ARRIVAL_M)
    start = int(clear[-1]) if clear.size else int(np.argmax(gaps))
    direction: Floats = (leg[-1] - leg[start]) / (gaps[start] if gaps[start] > 0 else 1.0)
    return direction


def _joints(log: Log) -> Iterator[tuple[str, float]]:
    """Yield the position errors, whole and joint by joint."""
    error = log.q_ref - log.q
    prismatic = log.plant.kinds == PRISMATIC
    for unit, scale, which in (("deg", np.degrees(1.0), ~prismatic), ("mm", 1e3, prismatic)):
        columns = np.flatnonzero(which)
        if not columns.size:
            continue
        part = scale * error[:, columns]
        rms, peak = np.sqrt(np.mean(part**2, axis=0)), np.abs(part).max(axis=0)
        yield f"joint_peak_{unit}", float(peak.max())
        yield f"joint_rms_{unit}", float(np.sqrt(np.sum(rms**2)))
        for column, joint_rms, joint_peak in zip(columns, rms, peak, strict=True):
            yield f"joint_peak_{unit}.{log.plant.joints[column]}", float(joint_peak)
            yield f"joint_rms_{unit}.{log.plant.joints[column]}", float(joint_rms)


def _torques(log: Log) -> Iterator[tuple[str, float]]:
    """Yield what is measured against the torque limits, of the joints that have one."""
    limits = log.plant.drives.torque_limit
    columns = np.flatnonzero(np.isfinite(limits))
    if not columns.size:
        return
    part = log.torque[:, columns] / limits[columns]
    rms = 100.0 * np.sqrt(np.mean(part**2, axis=0))
    peak = 100.0 * log.torque_peak[columns] / limits[columns]
    yield "torque_peak_percent", float(peak.max())
    yield "torque_rms_percent", float(rms.max())
    for column, joint_rms, joint_peak in zip(columns, rms, peak, strict=True):
        yield f"torque_peak_percent.{log.plant.joints[column]}", float(joint_peak)
        yield f"torque_rms_percent.{log.plant.joints[column]}", float(joint_rms)
    changes = np.diff(part, axis=0)
    yield "chatter", float(np.sqrt(np.mean(changes**2, axis=0)).max()) if len(changes) else 0.0
