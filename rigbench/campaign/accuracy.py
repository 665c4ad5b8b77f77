"""Accuracy and repeatability of one machine over its runs, after ISO 9283, from replays of stored runs.

What the standard asks for, where the tool went in each run, is not stored: a replay gives it bit for bit.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.campaign.reading import Reader, Record
from rigbench.campaign.replay import Replay, replay
from rigbench.motion.chained import ChainMotion
from rigbench.motion.motion import Motion
from rigbench.motion.path import PathMotion
from rigbench.scores.iso9283 import Accuracy, at_normal_planes, path_accuracy, pose_accuracy
from rigbench.scores.results import CellKey
from rigbench.scores.row import MACHINE_OUTCOMES

__all__ = ["CYCLES", "MotionAccuracy", "accuracies", "is_one_machine"]

CYCLES = 30
"""So many runs the standard asks for (of poses; of paths 10); more are not replayed."""

ROUNDING_S = 1e-9


@dataclass(frozen=True)
class MotionAccuracy:
    """One motion over so many ``runs``, in mm: pose accuracy at the end of each rest, and path accuracy.

    ``path`` is None unless the motion leads the tool along a circle or a line. ``otherwise`` counts the
    replays that are not the stored run to the last bit.
    """

    motion: str
    runs: int
    poses: tuple[Accuracy, ...]
    path: Accuracy | None
    otherwise: int


def is_one_machine(store: Reader, key: CellKey) -> bool:
    """Whether all runs of a cell are of one machine, so that they differ by noise and late ticks alone."""
    places = store.places().values()
    return not any(p.sources for p in places if (p.sheet, p.law, p.condition) == key)


def accuracies(store: Reader, key: CellKey) -> tuple[MotionAccuracy, ...]:
    """Return accuracy and repeatability of a law under a condition, motion by motion.

    Of the first 30 draws with the machine's verdict, each of which is replayed. A run that did not finish
    makes its motion's numbers infinite. For a cell of one machine, see :func:`is_one_machine`.
    """
    by_motion: dict[str, list[Record]] = {}
    for record in store.records_of(key[1], key[2]):
        if record.row.sheet == key[0] and record.row.outcome in MACHINE_OUTCOMES:
            by_motion.setdefault(record.row.motion, []).append(record)
    return tuple(
        _of_motion(motion, [replay(store, record) for record in records[:CYCLES]])
        for motion, records in by_motion.items()
    )


def _of_motion(motion: str, runs: list[Replay]) -> MotionAccuracy:
    reference, hz = runs[0].run.motion, runs[0].log.control_hz
    whole = max(len(run.log.t) for run in runs)
    commanded, attained = np.zeros((whole, 3)), np.full((len(runs), whole, 3), np.inf)
    for number, run in enumerate(runs):
        if run.log.outcome == "finished":
            commanded, attained[number] = _tool(run)
    poses = tuple(pose_accuracy(attained[:, at], commanded[at]) for at in _ends(reference, hz, whole))
    path = path_accuracy(*at_normal_planes(attained, commanded)) if _is_path(reference) else None
    return MotionAccuracy(motion, len(runs), poses, path, sum(not run.identical for run in runs))


def _tool(run: Replay) -> tuple[Floats, Floats]:
    """Return the commanded and the attained tool point at every tick, (T, 3) each [mm]."""
    from rigbench.arm.dynamics import tool_path  # the compiler: slow to import

    chain = run.log.plant.chain(run.log.gravity)
    commanded, attained = (
        1e3 * np.asarray(tool_path(chain, np.ascontiguousarray(q))[0]) for q in (run.log.q_ref, run.log.q)
    )
    return commanded, attained


def _ends(motion: Motion, hz: float, ticks: int) -> Iterator[int]:
    """Yield the last tick of each rest that has a length."""
    for start, end in motion.rests:
        if end > start:
            yield min(int((end + ROUNDING_S) * hz), ticks - 1)


def _is_path(motion: Motion) -> bool:
    """Whether the tool is led along circles and lines all the time."""
    if isinstance(motion, ChainMotion):
        return all(_is_path(part) for part in motion.parts)
    return isinstance(motion, PathMotion)
