"""What the last link carries, from recordings with it and without: a body of its own, ten parameters more."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import scipy.linalg

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.physical import from_central_moments
from rigbench.arm.vector import LINK
from rigbench.errors import InputFaults
from rigbench.identify.base import Base, Indices
from rigbench.identify.consistent import Consistent, consistent
from rigbench.identify.estimate import Estimate, check_length, estimate
from rigbench.identify.filtering import Rows
from rigbench.identify.load_terms import LoadTerm, load_terms
from rigbench.identify.regressor import Terms

__all__ = ["Load", "beside", "carried_columns", "identify_with_load"]

DENSITY = 1000.0
"""Density of the ball that a load is guessed to be at first [kg/m^3] (our choice: that of water)."""

LEAST_SHARE = 1e-4
"""Least mass of that ball as a share of the arm's own."""

BELOW = 5.0
"""A mass so many standard deviations below none is no chance; the recordings are wrong."""

NOTABLE = 0.01
"""A mass below none by less than this share of the last link's is none: models are not that good."""


@dataclass(frozen=True, eq=False)
class Load:
    """A load. ``found`` are its base parameters, ``parameters`` (10,) those of a body that can exist.

    Both are in the frame of the last link; so is ``truth`` (10,), of a load that was simulated.
    """

    arm: Arm  # which carries it
    found: Estimate
    parameters: Floats
    truth: Floats | None = None

    @property
    def terms(self) -> tuple[LoadTerm, ...]:
        """Mass, centre of gravity and inertia about it, in the frame of the tool."""
        return load_terms(self.arm, self.found, self.parameters, self.truth)


def carried_columns(arm: Arm, load: Base) -> Indices:
    """Return which columns of the arm's regressor are those of the load's base parameters, (b,)."""
    return LINK * (arm.n - 1) + load.kept


def beside(base: Base, load: Base, links: int) -> Base:
    """Return the base of an arm of so many ``links`` and of a load: the arm's base parameters, then its.

    Among the labels the load's ten stand after the links'.
    """
    own = LINK * links

    def both(arm: Indices, carried: Indices) -> Indices:
        return np.concatenate([arm + LINK * (arm >= own), own + carried])

    return Base(
        labels=(*base.labels[:own], *load.labels, *base.labels[own:]),
        kept=both(base.kept, load.kept),
        dependent=both(base.dependent, load.dependent),
        shares=scipy.linalg.block_diag(base.shares, load.shares),
        gap_decades=min(base.gap_decades, load.gap_decades),
    )


def identify_with_load(
    arm: Arm,
    terms: Terms,
    bases: tuple[Base, Base],
    empty: Sequence[Rows],
    loaded: Sequence[Rows],
    spread: float,
) -> tuple[Estimate, Consistent, Load]:
    """Return the arm's estimate, the arm that can exist, and the load, all from one least-squares fit.

    ``bases`` are the arm's and the load's. The load adds its ten parameters to the last link's, so a row of
    ``loaded`` is [y, y_load] and one of ``empty`` [y, 0]: what the arm is known by counts in the intervals
    of the load. Friction that grows with the load (a gear's loss) is not told from it.

    Raises InputFaults as :func:`rigbench.identify.estimate.estimate`, also where either kind of recording is
    too short for what it alone can show, and where the mass comes out far below none.
    """
    base, load_base = bases
    check_length(empty, base.count)
    check_length(loaded, load_base.count)
    nothing = [replace(rows, y=np.pad(rows.y, ((0, 0), (0, 0), (0, load_base.count)))) for rows in empty]
    both = estimate(beside(base, load_base, arm.n), [*nothing, *loaded])
    found, carried = (
        replace(both, base=part, values=both.values[at], covariance=both.covariance[at, at])
        for part, at in ((base, np.s_[: base.count]), (load_base, np.s_[base.count :]))
    )
    _check_not_below_none(arm, carried, loaded[0].name)
    result = consistent(arm, terms, both, spread, _first_guess(arm, carried))
    assert result.load is not None
    return found, result, Load(arm, carried, result.load)


def _check_not_below_none(arm: Arm, found: Estimate, name: str) -> None:
    """Raise InputFaults where the load's mass, or else an inertia, is below none beyond chance."""
    told = dict(zip(found.base.names, zip(found.values, found.deviation, strict=True), strict=True))
    size = dict(zip(found.base.labels, np.abs(arm.parameters[-1]), strict=True))
    what = {"m.load": ("mass", "kg")} if "m.load" in told else {}
    what |= {} if what else {f"I{a}{a}.load": (f"inertia I{a}{a}", "kg m^2") for a in "xyz"}
    for label, (said, unit) in what.items():
        value, deviation = told.get(label, (0.0, 0.0))
        if value + BELOW * deviation < 0 and value < -NOTABLE * size[label]:
            problem = f"the {said} of the load comes out as {value:.4g} {unit}, with a standard deviation of "
            problem += f"{deviation:.2g}"
            expected = "motions with the load under loaded, and those without it under recordings"
            raise InputFaults.one(name, "", problem, expected)


def _first_guess(arm: Arm, found: Estimate) -> Floats:
    """Return a ball of water (10,): of the estimated mass, at the estimated centre of gravity.

    A centre of gravity that is not told is taken to be the tool point, and a mass that is not told as that
    which there comes nearest to the base parameters, though not above the arm's. No mass is less than its
    standard deviation, or than a share of the arm's.
    """
    point = from_central_moments(np.array(1.0), arm.tool_position, np.zeros((3, 3)))
    terms = load_terms(arm, found, point)
    most = float(arm.parameters[:, 0].sum())
    least = LEAST_SHARE * most
    mass = terms[0].value
    if mass is not None:
        least = max(least, float(found.deviation[found.base.names.index("m.load")]))
    else:
        seen = found.base.combination @ point
        mass = min(float(seen @ found.values) / max(float(seen @ seen), np.finfo(float).tiny), most)
    mass = max(mass, least)
    cog = np.array([1e-3 * (term.value or 0.0) for term in terms[1:4]])
    sigma = mass / 5 * (3 * mass / (4 * np.pi * DENSITY)) ** (2 / 3) * np.eye(3)
    return from_central_moments(np.array(mass), arm.tool_position + arm.tool_rotation @ cog, sigma)
