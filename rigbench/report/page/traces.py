"""The tool's error over time in the runs that the page names, from replays of a bounded number of them."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.campaign.reading import Reader
from rigbench.campaign.replay import Replay, replay
from rigbench.errors import RigbenchError
from rigbench.report.page.runs import NamedRun
from rigbench.report.trace_data import tool_error_m

__all__ = ["POINTS", "REPLAY_S", "Trace", "chosen", "peaks", "traced"]

POINTS = 200
"""So many points a trace has at most."""

REPLAY_S = 20.0
"""Unless told otherwise so many runs are replayed as took no longer, together, when they were done."""


@dataclass(frozen=True)
class Trace:
    """``error_mm`` (n,) over ``seconds`` of the ``whole_s`` that the motion takes.

    ``note`` says why there is none, or what keeps it from being the stored run to the last bit.

    ``rests`` are the motion's rests, each from its beginning to its end [s].
    """

    seconds: float = 0.0
    whole_s: float = 0.0
    error_mm: tuple[float, ...] = ()
    rests: tuple[tuple[float, float], ...] = ()
    note: str = ""


def chosen(runs: Iterable[NamedRun], most: int | None) -> list[NamedRun]:
    """Return the runs to replay: the first ``most``, or of None as many as took 20 s altogether."""
    found: list[NamedRun] = []
    seconds = 0.0
    for run in runs:
        seconds += run.wall_s
        if len(found) >= most if most is not None else seconds > REPLAY_S:
            break
        found.append(run)
    return found


def traced(store: Reader, run: NamedRun) -> Trace:
    """Return the trace of a run, replayed; without points where that is not possible here."""
    try:
        record = store.record(run.key)
        if record is None:
            return Trace(note="It is not stored any more.")
        return _trace(replay(store, record))
    except RigbenchError as error:
        return Trace(note=f"It can't be replayed here: {error}")


def _trace(again: Replay) -> Trace:
    log, motion = again.log, again.run.motion
    note = "" if again.identical else f"Not the stored run to the last bit: {'; '.join(again.reasons)}."
    return Trace(
        seconds=len(log.t) / log.control_hz,
        whole_s=motion.duration_s,
        error_mm=tuple(float(f"{value:.3g}") for value in peaks(1e3 * tool_error_m(log)).tolist()),
        rests=tuple((float(start), float(end)) for start, end in motion.rests),
        note=note,
    )


def peaks(values: Sequence[float] | Floats, points: int = POINTS) -> Floats:
    """Return the largest value of each of ``points`` stretches alike, (n,) to (points,): no peak is lost.

    Fewer values than points are returned as they are.
    """
    values = np.asarray(values, dtype=float)
    if len(values) <= points:
        return values
    starts = np.arange(points) * len(values) // points
    found: Floats = np.maximum.reduceat(values, starts)
    return found
