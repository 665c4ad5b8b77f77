"""The data of a replayed run, as named arrays in a file that numpy reads."""

from __future__ import annotations

import json
import math
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rigbench import __version__
from rigbench.arm.arm import PRISMATIC, Floats
from rigbench.arm.dynamics import tool_path
from rigbench.campaign.labels import Labels
from rigbench.campaign.replay import Replay
from rigbench.report.drawn import drawn_of
from rigbench.report.output_file import write_whole
from rigbench.rig.log import Log

__all__ = ["ARRAYS", "tool_error_m", "trace_arrays", "write_trace"]

ARRAYS = {
    "t_s": "(N,) control ticks [s]; they end where the run did",
    "q_ref_rad": "(N, n) commanded positions, in the order of `joint` [rad; m for a prismatic joint]",
    "q_rad": "(N, n) true positions [rad; m]",
    "v_ref_rad_s": "(N, n) commanded velocities [rad/s; m/s]",
    "v_rad_s": "(N, n) true velocities [rad/s; m/s]",
    "torque_nm": "(N, n) the motor's torque, carried to the joint [N m; N]",
    "limited": "(N, n) true where the drive gave less than the law asked for",
    "tool_ref_m": "(N, 3) tool point at the commanded positions, base frame [m]",
    "tool_m": "(N, 3) tool point at the true positions, base frame [m]",
    "tool_angle_deg": "(N,) angle between the tool's frames at commanded and true positions [deg]",
    "rest_s": "(R, 2) each rest of the motion: end of the leg, end of the rest [s]",
    "joint": "(n,) names of the joints",
    "joint_kind": "(n,) revolute or prismatic",
    "lower_rad": "(n,) position limits [rad; m], -inf for none",
    "upper_rad": "(n,) position limits [rad; m], inf for none",
    "torque_limit_nm": "(n,) [N m; N], inf for none",
    "speed_limit_rad_s": "(n,) [rad/s; m/s], inf for none",
    "parameter": "(P,) names of the parameters that were random, the largest abs(u) first",
    "parameter_u": "(P,) their factors u in [-1, 1); a percent source multiplies by (1 + spread)^(level u)",
    "about": "JSON: which run this is, its outcome, its scores as stored and as replayed",
}
"""What is in the file of a trace, array by array."""


def trace_arrays(replay: Replay, labels: Labels) -> dict[str, NDArray[Any]]:
    """Return the arrays of ARRAYS."""
    log, drives, drawn = replay.log, replay.log.plant.drives, drawn_of(replay.run)
    chain = log.plant.chain(log.gravity)
    commanded, commanded_frames = tool_path(chain, np.ascontiguousarray(log.q_ref))
    attained, attained_frames = tool_path(chain, np.ascontiguousarray(log.q))
    return {
        "t_s": log.t,
        "q_ref_rad": log.q_ref,
        "q_rad": log.q,
        "v_ref_rad_s": log.v_ref,
        "v_rad_s": log.v,
        "torque_nm": log.torque,
        "limited": log.limited,
        "tool_ref_m": commanded,
        "tool_m": attained,
        "tool_angle_deg": _angles_deg(commanded_frames, attained_frames),
        "rest_s": np.array(replay.run.motion.rests, float).reshape(-1, 2),
        "joint": np.array(log.plant.joints),
        "joint_kind": np.where(log.plant.kinds == PRISMATIC, "prismatic", "revolute"),
        "lower_rad": log.plant.lower,
        "upper_rad": log.plant.upper,
        "torque_limit_nm": drives.torque_limit,
        "speed_limit_rad_s": drives.speed_limit,
        "parameter": np.array([one.name for one in drawn], dtype=np.str_),
        "parameter_u": np.array([one.u for one in drawn]),
        "about": np.array(json.dumps(_about(replay, labels), allow_nan=False)),
    }


def tool_error_m(log: Log) -> Floats:
    """Return the distance between commanded and true tool point at each tick (N,) [m]."""
    chain = log.plant.chain(log.gravity)
    miss = tool_path(chain, np.ascontiguousarray(log.q))[0]
    miss = miss - tool_path(chain, np.ascontiguousarray(log.q_ref))[0]
    distance: Floats = np.sqrt(np.einsum("ij,ij->i", miss, miss))
    return distance


def write_trace(replay: Replay, labels: Labels, path: Path) -> None:
    """Write the arrays to ``path``, an .npz file; the same run gives the same bytes.

    ``numpy.load(path)`` reads it, without ``allow_pickle``. StoreError if the disk refuses.
    """
    arrays: dict[str, Any] = trace_arrays(replay, labels)
    write_whole(path, lambda stream: np.savez(stream, **arrays))


def _angles_deg(one: Floats, other: Floats) -> Floats:
    """Return the angle [deg] between rotations (N, 3, 3), pair by pair, as the score of the tool's angle."""
    gap = (one - other).reshape(-1, 9)
    norm = np.sqrt(np.einsum("ij,ij->i", gap, gap))
    angles: Floats = np.degrees(2.0 * np.arcsin(np.minimum(1.0, norm / (2.0 * np.sqrt(2.0)))))
    return angles


def _about(replay: Replay, labels: Labels) -> dict[str, Any]:
    row = replay.record.row
    return {
        "rigbench": __version__,
        "title": labels.title,
        "arm": labels.arm,
        "key": replay.record.key,
        "sheet": row.sheet,
        "law": row.law,
        "motion": row.motion,
        "condition": row.condition,
        "level": row.level,
        "draw": row.draw,
        "sources": list(replay.run.sources),
        "outcome": replay.log.outcome,
        "reason": replay.log.reason,
        "control_hz": replay.log.control_hz,
        "gravity_m_s2": list(replay.log.gravity),
        "scores": {
            name: {"stored": _plain(stored), "replayed": _plain(replayed)}
            for name, (stored, replayed) in replay.pairs().items()
        },
        "identical": replay.identical,
        "reasons": list(replay.reasons),
        "arrays": ARRAYS,
    }


def _plain(value: float | None) -> float | None:
    """Return a number as JSON has it: None for what is infinite or not there."""
    return None if value is None or not math.isfinite(value) else value
