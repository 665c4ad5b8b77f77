"""Base parameters from recordings: weighted least squares, with a covariance that can be believed."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import scipy.stats
from numpy import bool_
from numpy.typing import NDArray

from rigbench.arm.arm import Floats
from rigbench.errors import Fault, InputFaults
from rigbench.identify.base import Base
from rigbench.identify.filtering import Rows

__all__ = ["Estimate", "TorqueError", "check_length", "estimate", "torque_error"]

OUTLIER = 5.0
"""Residuals beyond so many robust standard deviations of their joint are left out."""

HUBER = 1.345
"""Where Huber's weights begin to fall, in standard deviations (95 % efficient on normal noise)."""

ROUNDS = 40
SOFT_ROUNDS = 10
"""Rounds of reweighting at most, and how many of them are soft before outliers are cut."""

LEAST_NOISE = 1e-11
"""Floor of a joint's noise as a share of its torque: rounding, where data are without noise."""

NIL = 1e-9
"""Least share of a joint's samples that is divided by: one without any has no weight anyway."""

LAGS = 2
"""Samples over which residuals may still hang together: noise on positions leaves a trace, torques' none."""

MOST_CONDITION = 1e4
"""Beyond this condition number of the regressor, its columns brought to one length, an error of 1e-4 in
what was recorded, which no sensor is below, becomes one as large as the parameter."""

LEAST_ROWS = 10
"""Least samples per parameter and joint for a covariance that means anything (our choice)."""


@dataclass(frozen=True, eq=False)
class Estimate:
    """Base parameters (b,) and how well they are known.

    ``noise`` (n,) [N m] is the standard deviation of each joint's residual after the filter; ``outliers``
    (n,) how many of the ``rows`` samples were left out; ``condition`` the condition number of the weighted
    regressor with columns of unit length; ``spikes`` how many recorded samples were replaced before.
    """

    base: Base
    values: Floats
    covariance: Floats  # (b, b)
    noise: Floats
    outliers: NDArray[np.int64]
    rows: int
    condition: float
    spikes: int = 0

    @property
    def deviation(self) -> Floats:
        """Standard deviation of each value, (b,)."""
        return np.sqrt(np.diag(self.covariance))

    @property
    def quantile(self) -> float:
        """Half a 95 % interval in standard deviations.

        Student's t with as many degrees of freedom as a variance smoothed over these lags has.
        """
        return float(scipy.stats.t.ppf(0.975, 1.5 * self.rows / (LAGS + 1)))

    def interval(self) -> tuple[Floats, Floats]:
        """Return the ends of the 95 % interval of each value, each (b,)."""
        half = self.quantile * self.deviation
        return self.values - half, self.values + half


@dataclass(frozen=True, eq=False)
class TorqueError:
    """How far predicted torques are from measured ones, joint by joint, each (n,)."""

    rms_nm: Floats
    measured_nm: Floats  # rms of the measured torque about its mean

    @property
    def share(self) -> Floats:
        """The error as a share of how much the torque varies."""
        return self.rms_nm / self.measured_nm


def estimate(base: Base, recordings: Sequence[Rows]) -> Estimate:
    """Return the base parameters that explain the recordings best.

    Weighted least squares: each joint's equations are divided by the standard deviation of its own
    residuals, in turns with the fit until both stand. Outliers are weighed down as by Huber first, then
    left out. The covariance is (Y'Y)^-1 Y' R Y (Y'Y)^-1 with R that of the residuals, which may hang
    together over :data:`LAGS` samples (Bartlett weights; Newey, West 1987) and from joint to joint, alike
    all along. The fit takes its b degrees of freedom out of that band, so R grows by N / (N - b (LAGS + 1)).

    Raises InputFaults where the recordings are too short, or excite some parameters too little.
    """
    y = np.concatenate([rows.y for rows in recordings])
    torque = np.concatenate([rows.torque for rows in recordings])
    usable = np.concatenate([rows.usable for rows in recordings])
    name = ", ".join(dict.fromkeys(rows.name for rows in recordings))
    check_length(recordings, base.count)
    values, noise, used = _fit(y, torque, usable)
    weighted = y / noise[:, None] * used[:, :, None]
    condition = _condition(name, base, weighted.reshape(-1, base.count))
    residual = np.where(used, torque - y @ values, 0.0) / (noise * np.sqrt(used.mean(axis=0).clip(NIL)))
    bread = np.linalg.inv(np.einsum("sja,sjb->ab", weighted, weighted))
    ends = np.cumsum([len(rows.y) for rows in recordings])[:-1]
    meat = _long_run(np.split(weighted, ends), np.split(residual, ends))
    factor = used.sum() / max(1, used.sum() - base.count * (LAGS + 1))
    return Estimate(
        base=base,
        values=values,
        covariance=factor * bread @ meat @ bread,
        noise=noise,
        outliers=(usable & ~used).sum(axis=0),
        rows=len(y),
        condition=condition,
        spikes=sum(rows.spikes for rows in recordings),
    )


def check_length(recordings: Sequence[Rows], parameters: int) -> None:
    """Raise InputFaults if recordings have too few samples for so many parameters."""
    samples = sum(len(rows.y) for rows in recordings)
    least = math.ceil(LEAST_ROWS * parameters / recordings[0].y.shape[1])
    if samples < least:
        problem = f"too short: {samples} samples after filtering for {parameters} parameters"
        raise InputFaults.one(recordings[0].name, "t_s", problem, f"{least} or more, so a longer recording")


def torque_error(values: Floats, rows: Rows) -> TorqueError:
    """Return how well base parameters (b,) predict the torques of a recording, of a second one say."""
    usable = rows.usable
    count = np.maximum(1, usable.sum(axis=0))
    error = np.where(usable, rows.torque - rows.y @ values, 0.0)
    mean = np.where(usable, rows.torque, 0.0).sum(axis=0) / count
    varied = np.where(usable, rows.torque - mean, 0.0)
    return TorqueError(np.sqrt((error**2).sum(axis=0) / count), np.sqrt((varied**2).sum(axis=0) / count))


def _fit(y: Floats, torque: Floats, usable: NDArray[bool_]) -> tuple[Floats, Floats, NDArray[bool_]]:
    """Return parameters (b,), noise (n,) and which equations (S, n) were used."""
    size = np.sqrt((torque**2).mean(axis=0))
    floor = LEAST_NOISE * np.maximum(size, size.max() * 1e-6)
    noise, weight = np.maximum(size, floor), usable.astype(float)
    values = np.zeros(y.shape[2])
    for turn in range(ROUNDS):
        root = np.sqrt(weight) / noise
        before = values
        flat = (y * root[:, :, None]).reshape(-1, y.shape[2])
        values = np.linalg.lstsq(flat, (torque * root).ravel(), rcond=None)[0]
        residual = torque - y @ values
        noise = np.maximum(_spread(residual, usable), floor)
        ratio = np.abs(residual) / noise
        if turn < SOFT_ROUNDS:
            weight = usable * np.minimum(1.0, HUBER / np.maximum(ratio, HUBER))
        else:
            weight = usable * (ratio < OUTLIER)
            if np.allclose(values, before, rtol=1e-9, atol=0):
                break
    used = weight > 0
    count = np.maximum(1, used.sum(axis=0))
    noise = np.maximum(np.sqrt((residual**2 * used).sum(axis=0) / count), floor)
    return values, noise, used


def _spread(residual: Floats, usable: NDArray[bool_]) -> Floats:
    """Return a robust standard deviation of each joint's residuals (n,): 1.4826 times their median size."""
    sizes = [np.abs(r[u]) for r, u in zip(residual.T, usable.T, strict=True)]
    return np.array([1.4826 * np.median(size) if size.size else 0.0 for size in sizes])


def _long_run(weighted: list[Floats], residual: list[Floats]) -> Floats:
    """Return Y' R Y (b, b) of recordings' regressors (S, n, b) and residuals (S, n), both over the noise.

    Where a sample is not used both are 0; residuals are larger by one over the root of the share that is,
    so that their products' mean over all samples is a covariance, and Bartlett's weights keep R positive.
    """
    total = np.zeros((weighted[0].shape[2],) * 2)
    count = sum(len(part) for part in residual)
    for lag in range(LAGS + 1):
        pairs = [
            (y[lag:], r[lag:], y[: len(y) - lag], r[: len(r) - lag])
            for y, r in zip(weighted, residual, strict=True)
        ]
        shared = sum((later.T @ sooner for _, later, _, sooner in pairs), np.zeros((1, 1))) / count
        cross = sum(np.einsum("sja,jk,skb->ab", late, shared, soon) for late, _, soon, _ in pairs)
        total += cross if lag == 0 else (1 - lag / (LAGS + 1)) * (cross + cross.T)
    return total


def _condition(name: str, base: Base, weighted: Floats) -> float:
    """Return the condition number, or raise InputFaults that name what the recordings do not show."""
    length = np.linalg.norm(weighted, axis=0)
    silent = length <= 1e-9 * length.max()
    unit = weighted / np.where(silent, 1.0, length)
    _, size, directions = np.linalg.svd(unit, full_matrices=False)
    if size[-1] > 0 and size[0] / size[-1] <= MOST_CONDITION:
        return float(size[0] / size[-1])
    hidden = (np.abs(directions[size * MOST_CONDITION < size[0]]) > 0.3).any(axis=0) | silent
    names = np.array(base.names)[hidden].tolist()
    problem = f"the motion does not excite {', '.join(names[:5])}"
    problem += f" and {len(names) - 5} more" if len(names) > 5 else ""
    raise InputFaults([Fault(name, None, "", problem, "a motion that moves every joint far and fast enough")])
