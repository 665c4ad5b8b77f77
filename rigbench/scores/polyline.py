"""How far points stray from a path, regardless of time."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.kernel import kernel

__all__ = ["farthest"]

SAME = 1.0 + 1e-9
"""Two distances whose ratio is below this are not told apart."""

BLOCK = 64
"""Segments that share a box."""

BEYOND = 1.0 + 1e-6
"""A box farther than this times the least distance so far holds nothing nearer, whatever the rounding."""


def farthest(points: Floats, path: Floats) -> float:
    """Return the largest distance of any of ``points`` (N, 3) from the polyline ``path`` (P, 3).

    max over points of min over segments, exact to 1e-9 of its value, in the unit of the arguments. A
    walk along the path, from each point's place on to the next point's, bounds all distances from
    above; points are then measured, the farthest first, until no bound exceeds what was found. For points
    that run along the path that is a few of them. Where the path comes by again, nearer to a point than at
    the point's own place, it is many: so segments are looked at box by box, and no longer than until one is
    near enough for the point not to be the farthest.
    """
    moves = np.any(path[1:] != path[:-1], axis=1)
    path = np.ascontiguousarray(path[np.concatenate(([True], moves))])
    points = np.ascontiguousarray(points)
    bounds, boxes = walk(points, path), boxed(path)
    found = 0.0
    for index in np.argsort(bounds)[::-1]:
        if bounds[index] <= found * SAME:
            break
        found = max(found, float(nearest(points[index], path, boxes, bounds[index], found)))
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
def boxed(path: Floats) -> Floats:
    """Return the box around each BLOCK segments of a polyline (P, 3), its two corners, (B, 6)."""
    count = path.shape[0]
    boxes = np.empty(((count + BLOCK - 1) // BLOCK, 6))
    for block in range(boxes.shape[0]):
        for axis in range(3):
            own = path[max(block * BLOCK - 1, 0) : min((block + 1) * BLOCK, count), axis]
            boxes[block, axis], boxes[block, 3 + axis] = own.min(), own.max()
    return boxes


@kernel
def to_box(point: Floats, boxes: Floats, block: int) -> float:
    """Return the squared distance of ``point`` (3,) from a box, 0 within it."""
    total = 0.0
    for axis in range(3):
        low, high = boxes[block, axis] - point[axis], point[axis] - boxes[block, 3 + axis]
        beside = max(low, high)
        if beside > 0.0:
            total += beside * beside
    return total


@kernel
def nearest(point: Floats, path: Floats, boxes: Floats, bound: float, enough: float) -> float:
    """Return the distance of ``point`` (3,) from the polyline ``path`` (P, 3), or one that is ``enough``.

    That is the first that is met which is at most ``enough``; it is at least as large as the distance.
    ``bound`` is the point's distance from one of the segments.
    """
    least = np.inf
    for block in range(boxes.shape[0]):
        if to_box(point, boxes, block) > BEYOND * min(least, bound * bound):
            continue
        for k in range(block * BLOCK, min((block + 1) * BLOCK, path.shape[0])):
            least = min(least, to_segment(point, path, k))
        if np.sqrt(least) <= enough:
            break
    return float(min(np.sqrt(least), bound))  # rounding may have put that segment's box beyond the bound


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
