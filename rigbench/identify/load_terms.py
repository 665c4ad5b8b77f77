"""A load in the words of a data sheet: mass, centre of gravity, inertia, and what torques tell of each."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.physical import from_pseudo_inertia, inertia, pseudo_inertia
from rigbench.arm.vector import LINK
from rigbench.identify.base import NIL
from rigbench.identify.estimate import Estimate

__all__ = ["LoadTerm", "load_terms"]

ROUGH = 0.25
"""Share of the mass that half its interval may be for an inertia about the centre of gravity, whose interval
is of the first order only (our choice: what is left out is then 2 % of m c^2)."""

NONE = 1e-15
"""Less inertia [kg m^2] is the rounding of what was taken away from it."""

ENTRIES = ((0, 0), (0, 1), (1, 1), (0, 2), (1, 2), (2, 2))
"""Rows and columns of an inertia tensor in the order of a link's parameters."""

GENERIC = np.array([1.0, 0.3, 0.5, 0.7, *np.zeros(6)])
"""A load whose centre of gravity lies on no axis and in no plane of the tool frame."""


@dataclass(frozen=True)
class LoadTerm:
    """A number of a load. ``value`` is None where torques don't tell it.

    With ``told`` they would on this arm, were its mass not too near to none. ``low`` and ``high`` are the
    95 % interval; ``identified`` is that of the body that can exist, ``truth`` that of a simulated one.
    """

    name: str
    unit: str
    told: bool
    value: float | None
    low: float | None
    high: float | None
    identified: float
    truth: float | None


def load_terms(
    arm: Arm, found: Estimate, identified: Floats, truth: Floats | None = None
) -> tuple[LoadTerm, ...]:
    """Return mass [kg], centre of gravity x, y, z [mm] from the tool point, inertia about it [kg m^2].

    All in the axes of the tool frame, from base parameters ``found`` of the load in the last link's frame; so
    are ``identified`` and ``truth`` (10,). A number is told if it is the same for all loads that have
    these base parameters. Intervals: of the mass by Student's t, of the centre of gravity, a quotient, by
    Fieller 1954, "Some problems in interval estimation"; there is none where the mass may be 0. Of the
    inertia to the first order, where half the mass's interval is at most :data:`ROUGH` of it.
    """
    to_tool = _to_tool(arm)
    base, reach = found.base, found.quantile
    lift, hidden = np.zeros((LINK, base.count)), np.zeros((LINK, len(base.dependent)))
    lift[base.kept] = np.eye(base.count)
    hidden[base.kept] = -base.shares
    hidden[base.dependent] = np.eye(len(base.dependent))
    told = np.abs(_slope(GENERIC) @ to_tool @ hidden).max(axis=1, initial=0.0) < NIL
    x = to_tool @ lift @ found.values
    covariance = to_tool @ lift @ found.covariance @ (to_tool @ lift).T
    m, half = x[0], reach * np.sqrt(covariance[0, 0])
    ends: list[tuple[float, float, float] | None] = [(m, m - half, m + half)]
    for k in (1, 2, 3):
        ends.append(_quotient(x[k], m, covariance[np.ix_([k, 0], [k, 0])], reach) if told[0] else None)
    if told[0] and half <= ROUGH * m:
        slope, values = _slope(x)[4:], _values(x)[4:]
        halves = reach * np.sqrt(np.einsum("ij,jk,ik->i", slope, covariance, slope))
        ends += list(zip(values, values - halves, values + halves, strict=True))
    else:
        ends += [None] * 6
    of_body = _values(to_tool @ identified)
    of_truth = None if truth is None else _values(to_tool @ truth)
    return tuple(
        _term(k, bool(told[k]), ends[k] if told[k] else None, of_body, of_truth) for k in range(LINK)
    )


def _term(
    k: int, told: bool, ends: tuple[float, float, float] | None, of_body: Floats, of_truth: Floats | None
) -> LoadTerm:
    """Return the k-th term, centres of gravity in mm."""
    names = ("mass", "cog x", "cog y", "cog z", *(f"I{'xyz'[r]}{'xyz'[c]}" for r, c in ENTRIES))
    unit, scale = ("kg", 1.0) if k == 0 else ("mm", 1e3) if k < 4 else ("kg m^2", 1.0)
    value, low, high = (None, None, None) if ends is None else (float(scale * end) for end in ends)
    truth = None if of_truth is None else float(scale * of_truth[k])
    return LoadTerm(names[k], unit, told, value, low, high, float(scale * of_body[k]), truth)


def _to_tool(arm: Arm) -> Floats:
    """Return T (10, 10): T times parameters in the last link's frame are those in the tool frame."""
    place = np.eye(4)
    place[:3, :3], place[:3, 3] = arm.tool_rotation.T, -arm.tool_rotation.T @ arm.tool_position
    turned: Floats = from_pseudo_inertia(place @ pseudo_inertia(np.eye(LINK)) @ place.T).T
    return turned


def _values(x: Floats) -> Floats:
    """Return mass, centre of gravity and the six entries of the inertia about it of parameters (10,)."""
    mass, cog, tensor = inertia(x)
    tensor[np.abs(tensor) < NONE] = 0.0
    return np.array([mass, *cog, *(tensor[entry] for entry in ENTRIES)])


def _slope(x: Floats) -> Floats:
    """Return d values / d x, (10, 10), with f = m c: I_c = I - (f.f 1 - f f') / m."""
    m, f = x[0], x[1:4]
    slope = np.eye(LINK)
    slope[1:4, 0] = -f / m**2
    slope[1:4, 1:4] /= m
    moved = f @ f * np.eye(3) - np.outer(f, f)
    for at, (row, column) in enumerate(ENTRIES, 4):
        slope[at, 0] = moved[row, column] / m**2
        slope[at, 1:4] = -2 * f * (row == column) / m
        slope[at, 1 + row] += f[column] / m
        slope[at, 1 + column] += f[row] / m
    return slope


def _quotient(a: float, m: float, covariance: Floats, reach: float) -> tuple[float, float, float] | None:
    """Return a / m and the ends of its interval by Fieller's theorem; None where m may be 0 or less.

    The quotients r with (a - r m)^2 <= reach^2 var(a - r m), of normal a and m.
    """
    aa, am, mm = covariance[0, 0], covariance[0, 1], covariance[1, 1]
    square, product, rest = m * m - reach**2 * mm, a * m - reach**2 * am, a * a - reach**2 * aa
    if m <= 0 or square <= 0:
        return None
    root = np.sqrt(max(product**2 - square * rest, 0.0))
    return a / m, (product - root) / square, (product + root) / square
