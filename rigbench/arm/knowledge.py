"""What an identification left unknown, as a source of mismatch: machines that may be the true one.

Joint torques tell only certain sums of parameters, the base parameters, and these with a covariance. A
machine of a draw has sums that depart by that covariance, and is otherwise as near to the identified one as a
machine can be: what torques don't tell makes no difference to any run, so it stays.
"""

from __future__ import annotations

import hashlib
import json
from dataclasses import dataclass, fields
from functools import cached_property, lru_cache

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.log_cholesky import Coordinates
from rigbench.arm.nearest_parameters import nearest_parameters
from rigbench.arm.vector import vector_of, with_vector
from rigbench.arm.whitening import floored, whitening

__all__ = ["FARTHEST", "Knowledge", "deviations", "known_arm"]

FARTHEST = 4.0
"""Standard deviations that a draw departs at most, in each direction; one in 16,000 would go beyond."""

Row = tuple[float, ...]


@dataclass(frozen=True)
class Knowledge:
    """The base parameters K x of an arm's parameters x (p,), and their covariance at level 1.

    x is that of :func:`rigbench.arm.vector.vector_of` with ``terms``. ``names`` (b,) are the first terms of
    the sums, as 'Izz.forearm'; ``combination`` is K (b, p); ``scales`` (p - 10 n,) are what the terms of
    drives are measured by where several parameters share a change. Tuples, so that it can be kept and
    compared.
    """

    terms: tuple[str, ...]
    names: tuple[str, ...]
    combination: tuple[Row, ...]
    covariance: tuple[Row, ...]
    scales: Row

    @cached_property  # every run's key has it
    def digest(self) -> str:
        """A digest (hex, 40 digits) of all of it."""
        whole = [getattr(self, field.name) for field in fields(self)]
        return hashlib.blake2b(json.dumps(whole).encode(), digest_size=20).hexdigest()

    def __hash__(self) -> int:
        return hash(self.digest)  # each run looks machines up by it; thousands of numbers are hashed once


def deviations(u: Floats) -> Floats:
    """Return what u in [-1, 1] means in standard deviations: normal, within :data:`FARTHEST` either way."""
    from scipy.special import ndtr, ndtri  # slow to import

    shift: Floats = ndtri(0.5 + (ndtr(FARTHEST) - 0.5) * u)
    return shift


def known_arm(arm: Arm, knowledge: Knowledge, departure: Floats) -> Arm:
    """Return the machine whose base parameters depart from the arm's by R ``departure`` (b,).

    R R' = covariance with R lower triangular, so the k-th number [standard deviations] is what is new in the
    k-th base parameter given those before it. With t = K x(0) + R departure the machine is x(z) of least

        (K x(z) - t)' C^-1 (K x(z) - t) / s^2 + z'z,    s the larger of 1 and the rms of departure,

    over the log-Cholesky coordinates z about the arm, no term of a drive below 0. z'z is a weak hold, of a
    link's mass to a factor of e^2; what is known to a few percent follows its target to a small part of
    a standard deviation. So every departure is a machine that can exist, as sums as drawn need not be.
    """
    return _known_arm(arm, knowledge, tuple(departure.tolist()))


@lru_cache(maxsize=64)  # laws and motions share the machines of a draw
def _known_arm(arm: Arm, knowledge: Knowledge, departure: Row) -> Arm:
    origin, scales = vector_of(arm, knowledge.terms), np.array(knowledge.scales)
    about, combination = Coordinates(origin, arm.n, scales), np.array(knowledge.combination)
    covariance = floored(np.array(knowledge.covariance), np.abs(combination) @ np.abs(origin))
    shift = np.array(departure)
    size = max(1.0, float(np.sqrt(np.mean(shift**2))))
    target = combination @ origin + np.linalg.cholesky(covariance) @ shift
    whitened, held = whitening(covariance * size**2), np.ones(len(origin))
    values = nearest_parameters(about, combination, target, whitened, held, len(scales), 1e-9)
    return with_vector(arm, values, knowledge.terms)
