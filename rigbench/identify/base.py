"""Base parameters: the combinations of parameters that joint torques can tell."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
import scipy.linalg
from numpy.typing import NDArray

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.arm.vector import LINK, vector_labels
from rigbench.errors import InputFaults
from rigbench.identify.regressor import LINKS_ALONE, Terms, parameter_labels, regressor

__all__ = ["GAP_DECADES", "Base", "Indices", "base_of", "base_of_load"]

GAP_DECADES = 6.0
"""Least gap [powers of ten] between what counts as independent and what as rounding."""

NIL = 1e-9
"""A share of a dependent parameter below this is none: rounding leaves some 1e-13 of it."""

Indices = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class Base:
    """Base parameters of an arm: b of them, each one parameter plus shares of dependent ones.

    ``kept`` (b,) and ``dependent`` (d,) are columns of the regressor; Y x = Y[kept] (x[kept] + ``shares``
    x[dependent]) for every state, with ``shares`` (b, d). ``gap_decades`` is the gap by which the rank
    was decided.
    """

    labels: tuple[str, ...]  # (p,), of all parameters
    kept: Indices
    dependent: Indices
    shares: Floats
    gap_decades: float

    @property
    def count(self) -> int:
        """Number of base parameters b."""
        return len(self.kept)

    @cached_property
    def combination(self) -> Floats:
        """K (b, p): the base parameters are K x."""
        matrix = np.zeros((self.count, len(self.labels)))
        matrix[np.arange(self.count), self.kept] = 1.0
        matrix[:, self.dependent] = self.shares
        return matrix

    @property
    def names(self) -> tuple[str, ...]:
        """The base parameters in words, as 'Izz.upper + 0.1 mcx.fore - m.hand'."""
        return tuple(self._name(i) for i in range(self.count))

    def _name(self, i: int) -> str:
        said: str = self.labels[self.kept[i]]
        for column, share in zip(self.dependent, self.shares[i], strict=True):
            if share != 0:
                size = "" if abs(abs(share) - 1) < NIL else f"{abs(share):.4g} "
                said += f" {'-' if share < 0 else '+'} {size}{self.labels[column]}"
        return said


def base_of(arm: Arm, gravity: tuple[float, float, float], terms: Terms) -> Base:
    """Return the base parameters of an arm, by QR with pivoting of its regressor in random states.

    Gautier 1991, "Numerical calculation of the base inertial parameters of robots". The rank is where the
    diagonal of R falls most. Which columns are kept is then chosen by pivoting within four ranks, so that
    the combinations read as in textbooks: the drives' and the inertia about a joint's axis first, then
    products of inertia and first moments across the axis, then what these absorb, masses last.

    Raises InputFaults, addressed by the arm's name, if the diagonal nowhere falls by
    :data:`GAP_DECADES`: then some combination of parameters is all but invisible, because joint axes are
    all but parallel or crossing, and there is no saying how many parameters there are.
    """
    y = _random_states(arm, gravity, terms)
    return _base(arm.name, parameter_labels(arm, terms), y, _order(arm, terms))


def base_of_load(arm: Arm, gravity: tuple[float, float, float]) -> Base:
    """Return the base parameters of a body that the last link holds, alone: 'm.load' and so on.

    What torques tell of it with the arm known. Its parameters are in the last link's frame, so its columns
    of the regressor are those of the last link. The rest as in :func:`base_of`.
    """
    labels = vector_labels(("load",), (), ())
    y = _random_states(arm, gravity, LINKS_ALONE)[:, -LINK:]
    return _base(arm.name, labels, y, _order(arm, LINKS_ALONE)[-LINK:])


def _base(name: str, labels: tuple[str, ...], y: Floats, order: Floats) -> Base:
    """Return the base of labelled columns y (N, p), with the rank 0 to 3 by which each is kept."""
    diagonal = np.abs(np.diag(scipy.linalg.qr(y, mode="r", pivoting=True)[0]))
    rank, gap = _rank(diagonal)
    if gap < GAP_DECADES:
        problem = (
            f"{rank} parameters can be told apart by a gap of {gap:.1f} decades only: two of its joint axes "
            "are almost, but not quite, parallel or crossing"
        )
        raise InputFaults.one(name, "", problem, f"a gap of {GAP_DECADES:g} decades or more")
    floor = diagonal[rank - 1] * 10 ** (-gap / 2)
    kept = _choose(y, order, floor)
    dependent = np.setdiff1d(np.arange(len(labels)), kept)
    shares: Floats = np.zeros((rank, 0))
    if dependent.size:
        shares = scipy.linalg.lstsq(y[:, kept], y[:, dependent])[0]
    shares[np.abs(shares) < NIL] = 0.0
    return Base(labels, kept, dependent, shares, gap)


def _random_states(arm: Arm, gravity: tuple[float, float, float], terms: Terms) -> Floats:
    """Return the regressor (N n, p) in random states, four times as many rows as columns at least."""
    rng = np.random.default_rng(20260)
    shape = (4 * (LINK + len(terms.names)) + 20, arm.n)
    turn = np.where(arm.kinds == PRISMATIC, 1.0, np.pi)
    q, v, a = rng.uniform(-1, 1, shape) * turn, 3 * rng.normal(size=shape), 10 * rng.normal(size=shape)
    y = regressor(arm, gravity, q, v, a, terms)
    return y.reshape(-1, y.shape[2])


def _rank(diagonal: Floats) -> tuple[int, float]:
    """Return where the diagonal of R (p,), falling, falls most, and by how many decades.

    What is below rounding counts as rounding, and so does what comes after the last entry.
    """
    least = diagonal[0] * np.finfo(float).eps
    size = np.log10(np.append(np.maximum(diagonal, least), least))
    falls = size[:-1] - size[1:]
    rank = int(falls.argmax()) + 1
    return rank, float(falls[rank - 1])


def _order(arm: Arm, terms: Terms) -> Floats:
    """Return the rank 0 to 3 by which each parameter (p,) is kept rather than be dependent."""
    ranks = []
    for axis in np.abs(arm.axis):
        along = int(axis.argmax())
        other = (along + 1) % 3
        first = [2 if k == along else 1 for k in range(3)]
        tensor = {(0, 0): 0, (0, 1): 1, (1, 1): 2, (0, 2): 3, (1, 2): 4, (2, 2): 5}
        second = [1] * 6
        second[tensor[along, along]] = 0
        second[tensor[other, other]] = 2
        ranks.append([3, *first, *second])
    return np.concatenate([np.ravel(ranks), np.zeros(arm.n * len(terms.names))])


def _choose(y: Floats, order: Floats, floor: float) -> Indices:
    """Return the independent columns, rising, taken from the lowest rank first by pivoting in each."""
    kept: list[int] = []
    found = np.empty((len(y), 0))
    for rank in np.unique(order):
        columns = np.flatnonzero(order == rank)
        rest = y[:, columns]
        for _ in range(2):  # twice is enough: what rounding leaves of the first pass, the second takes
            rest = rest - found @ (found.T @ rest)
        q, r, pivots = scipy.linalg.qr(rest, mode="economic", pivoting=True)
        new = int((np.abs(np.diag(r)) > floor).sum())
        kept += columns[pivots[:new]].tolist()
        found = np.hstack([found, q[:, :new]])
    return np.sort(np.array(kept, np.intp))
