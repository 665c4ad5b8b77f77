"""Accuracy and repeatability of poses and paths over repeated runs, after ISO 9283:1998 (from memory)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import Floats

__all__ = ["Accuracy", "at_normal_planes", "path_accuracy", "pose_accuracy"]


@dataclass(frozen=True)
class Accuracy:
    """Accuracy and repeatability, in the unit of the points; both inf if any run has no end.

    ``repeatability`` is None with fewer than two runs, ``accuracy`` None without any.
    """

    accuracy: float | None
    repeatability: float | None


def pose_accuracy(attained: Floats, commanded: Floats) -> Accuracy:
    """Return pose accuracy AP and pose repeatability RP of ``attained`` points (n, 3).

    AP is the distance of ``commanded`` (3,) from the barycentre of the attained points; RP = l + 3 S with l
    the mean and S the standard deviation (n - 1) of their distances from the barycentre. A row that is
    not finite is a run that did not finish: an infinite error. Positions only: the standard treats
    angles apart.
    """
    return path_accuracy(attained[:, None, :], commanded[None, :])


def path_accuracy(attained: Floats, commanded: Floats) -> Accuracy:
    """Return path accuracy AT and path repeatability RT: the worst of N points of the commanded path.

    ``attained`` (n, N, 3) holds, for each run, where it went through the normal plane of each of the
    points ``commanded`` (N, 3), as :func:`at_normal_planes` finds it; AT is the largest over these of the
    distance between commanded point and barycentre, RT the largest l + 3 S (see :func:`pose_accuracy`).
    """
    n = len(attained)
    if n == 0 or attained.shape[1] == 0:
        return Accuracy(None, None)
    if not np.all(np.isfinite(attained)):
        return Accuracy(np.inf, np.inf if n > 1 else None)
    barycentre = np.mean(attained, axis=0)
    accuracy = float(np.max(np.linalg.norm(barycentre - commanded, axis=1)))
    if n == 1:
        return Accuracy(accuracy, None)
    distances = np.linalg.norm(attained - barycentre, axis=2)
    spread = np.mean(distances, axis=0) + 3.0 * np.std(distances, axis=0, ddof=1)
    return Accuracy(accuracy, float(np.max(spread)))


def at_normal_planes(attained: Floats, commanded: Floats) -> tuple[Floats, Floats]:
    """Return where each run goes through the normal planes of the commanded path, and that path's points.

    ``attained`` (n, T, 3) and ``commanded`` (T, 3) are sampled at the same times. A normal plane stands on
    each commanded point across the path's direction there (central difference); points at which the
    command is at rest have no direction and are left out, N of T stay. A run goes through the plane where
    it crosses it in that direction, linear between samples, nearest in time to the command, so that a path
    which comes back or crosses itself is followed in order. A run that ends short of a plane, or starts
    beyond it, is taken at its end; one that isn't finite did not finish, and is inf. Returns (n, N, 3) and
    (N, 3).
    """
    direction = np.gradient(commanded, axis=0) if len(commanded) > 1 else np.zeros_like(commanded)
    length = np.linalg.norm(direction, axis=1)
    moves = np.flatnonzero(length > 1e-9 * max(float(length.max(initial=0.0)), np.finfo(float).tiny))
    direction, points = direction[moves] / length[moves, None], commanded[moves]
    finished = np.all(np.isfinite(attained), axis=(1, 2))
    attained = np.where(finished[:, None, None], attained, 0.0)
    k = _last_before(attained, points, direction, moves)
    runs = np.arange(len(attained))[:, None]
    start, end = attained[runs, k], attained[runs, np.minimum(k + 1, attained.shape[1] - 1)]
    before, beyond = (np.einsum("rni,ni->rn", side - points, direction) for side in (start, end))
    step = beyond - before
    part = np.clip(np.divide(-before, step, out=np.zeros_like(step), where=step > 0.0), 0.0, 1.0)
    through = start + part[:, :, None] * (end - start)
    return np.where(finished[:, None, None], through, np.inf), points


def _last_before(
    attained: Floats, points: Floats, direction: Floats, times: NDArray[np.int64]
) -> NDArray[np.int64]:
    """Return the sample after which each run crosses each plane: (n, N); the first if it starts beyond.

    From the sample of the command's own time back while the run is beyond the plane, else forth.
    """
    n, samples = attained.shape[:2]
    k = np.tile(times, (n, 1))

    def beyond(run: NDArray[np.int64], plane: NDArray[np.int64], at: NDArray[np.int64]) -> NDArray[np.bool_]:
        ahead: Floats = np.einsum("ei,ei->e", attained[run, at] - points[plane], direction[plane])
        return ahead > 0.0

    run, plane = (index.ravel() for index in np.indices(k.shape))
    is_beyond = beyond(run, plane, k.ravel())
    i, j = run[is_beyond], plane[is_beyond]  # those under way, fewer at each sample
    while i.size:
        can = k[i, j] > 0
        i, j = i[can], j[can]
        k[i, j] -= 1
        going = beyond(i, j, k[i, j])
        i, j = i[going], j[going]
    i, j = run[~is_beyond], plane[~is_beyond]
    while i.size:
        can = k[i, j] < samples - 1
        i, j = i[can], j[can]
        going = ~beyond(i, j, k[i, j] + 1)
        i, j = i[going], j[going]
        k[i, j] += 1
    return k
