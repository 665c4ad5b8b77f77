"""How far points stray from a path, regardless of time."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.kernel import kernel

__all__ = ["farthest"]

SAME = 1.0 + 1e-9
"""Two distances whose ratio is below this are not told apart."""


def farthest(points: Floats, path: Floats) -> float:
    """Return the largest distance of any of ``points`` (N, 3) from the polyline ``path`` (P, 3).

    max over points of min over segments, exact to 1e-9 of its value, in the unit of the arguments. A
    walk along the path, from each point's place on to the next point's, bounds all distances from
    above; points are then measured against every segment, the farthest first, until no bound exceeds what
    was found. For points that run along the path that is a few of them.
    """
    moves = np.any(path[1:] != path[:-1], axis=1)
    path = np.ascontiguousarray(path[np.concatenate(([True], moves))])
    points = np.ascontiguousarray(points)
    bounds = walk(points, path)
    found = 0.0
    for index in np.argsort(bounds)[::-1]:
        if bounds[index] <= found * SAME:
            break
        found = max(found, float(nearest(points[index], path)))
    return found


@kernel
def to_segment(point: Floats, path: Floats, k: int) -> float:
    """Return the squared distance of ``point`` (3,) from the segment before vertex k (or from vertex 0)."""
    e0, e1, e2 = point[0] - path[k, 0], point[1] - path[k, 1], point[2] - path[k, 2]
    if k > 0:
        s0, s1, s2 = path[k - 1, 0] - path[k, 0], path[k - 1, 1] - path[k, 1], path[k - 1, 2] - path[k, 2]
        along = e0 * s0 + e1 * s1 + e2 * s2
        length = s0 * s0 + s1 * s1 + s2 * s2
        if (
            along > 0.0 and length > 0.0
        ):  # the square of a tiny span may underflow; its end then stands for it
            along = min(1.0, along / length)
            e0, e1, e2 = e0 - along * s0, e1 - along * s1, e2 - along * s2
    return float(e0 * e0 + e1 * e1 + e2 * e2)


@kernel
def nearest(point: Floats, path: Floats) -> float:
    """Return the distance of ``point`` (3,) from the polyline ``path`` (P, 3)."""
    least = np.inf
    for k in range(path.shape[0]):
        least = min(least, to_segment(point, path, k))
    return float(np.sqrt(least))


@kernel
def walk(points: Floats, path: Floats) -> Floats:
    """Return a bound from above of each point's distance from ``path``, (N,).

    The distance from the two segments at a vertex that is nearer than both its neighbours, to which
    one comes downhill from the vertex of the point before.
    """
    bounds = np.empty(points.shape[0])
    last, k = path.shape[0] - 1, 0
    for i in range(points.shape[0]):
        here = to_vertex(points[i], path, k)
        step = 1
        for _ in range(2):
            while 0 <= k + step <= last:
                there = to_vertex(points[i], path, k + step)
                if there >= here:
                    break
                k, here = k + step, there
            step = -step
        here = min(here, to_segment(points[i], path, k))
        bounds[i] = np.sqrt(min(here, to_segment(points[i], path, min(k + 1, last))))
    return bounds


@kernel
def to_vertex(point: Floats, path: Floats, k: int) -> float:
    """Return the squared distance of ``point`` (3,) from vertex k."""
    return float((point[0] - path[k, 0]) ** 2 + (point[1] - path[k, 1]) ** 2 + (point[2] - path[k, 2]) ** 2)
