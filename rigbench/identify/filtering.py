"""From recorded samples to rows of equations: zero-phase filters, differentiation, fewer samples."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import scipy.ndimage
import scipy.signal
from numpy import bool_
from numpy.typing import NDArray

from rigbench.arm.arm import Arm, Floats
from rigbench.errors import InputFaults
from rigbench.identify.base import Base, Indices
from rigbench.identify.recording import Recording
from rigbench.identify.regressor import Terms, regressor

__all__ = ["CORNER_HZ", "Rows", "derivative", "inner", "low_pass", "rows_of", "without_spikes"]

CORNER_HZ = 10.0
"""Default corner of the low-pass on torques and regressor [Hz] (our choice: five times and more what
excitation moves an arm at)."""

STATE_FACTOR = 4.0
"""Positions are filtered at so many times the corner, so that what the regressor's filter lets through
passes theirs unharmed."""

LEAST_RATE = 10.0
"""Samples a second over the corner that the filter of positions needs: more than twice their corner."""

ORDER = 4
KEPT = 1.79
"""Samples kept each second over the corner: half of that is where this filter lets half of the power
through, so that white noise, folded there, is white again and samples hang together no more."""

NONE = np.empty(0, np.intp)
"""No columns."""

TRIM = 4.0
"""Periods of the corner dropped at either end, where the filters swing in."""

NEIGHBOURS = 7
"""Samples, itself in their middle, whose median a sample is held against."""

USUAL, SPIKE, SPIKE_SHARE = 95.0, 5.0, 0.02
"""A sample is a spike that is away from that median by more than so many times the 95th percentile of such
distances, ten standard deviations of noise, and by more than this share of the column's own deviation, which
the turns of a smooth curve stay below."""

DENSE = 100.0
"""Samples a second over the corner beyond which they are thinned out before the regressor."""

CHUNK = 4096
"""Samples whose whole regressor is in memory at once."""

STANDING = 0.01
"""Share of its greatest speed below which a joint counts as standing."""

AROUND = 1.5
"""Periods of the corner, half before and half after, over which a joint's turn is felt."""

NOISY = 3.0
"""A speed below so many standard deviations of its noise has no sign that counts."""

STENCIL = np.array([-1.0, 8.0, 0.0, -8.0, 1.0]) / 12.0
"""Five-point central difference as a convolution, exact for polynomials of degree 4."""


@dataclass(frozen=True, eq=False)
class Rows:
    """The equations of a recording: torque = y x + noise, for S samples of n joints and b parameters.

    Samples are so far apart that white noise is independent from one to the next. ``usable`` is False
    where a joint stands or turns back: its dry friction can be anything there. ``t`` and ``v`` say when
    a sample was, and how fast the joints moved.
    """

    y: Floats  # (S, n, b)
    torque: Floats  # (S, n) [N m]
    usable: NDArray[bool_]  # (S, n)
    name: str  # of the recording
    t: Floats  # (S,) [s], from where the recording began
    v: Floats  # (S, n) [rad/s or m/s]
    spikes: int = 0  # recorded samples that were replaced before


def low_pass(x: Floats, rate_hz: float, corner_hz: float) -> Floats:
    """Filter x (N, ...) along its first axis without shifting it in time.

    A fourth-order Butterworth filter forwards and backwards: half the amplitude at the corner.
    """
    sections = scipy.signal.butter(ORDER, corner_hz, fs=rate_hz, output="sos")
    filtered: Floats = scipy.signal.sosfiltfilt(sections, x, axis=0)
    return filtered


def inner(count: int, rate_hz: float, corner_hz: float) -> slice:
    """Return which of so many filtered samples are far enough from both ends; none where they are few."""
    trim = int(TRIM * rate_hz / corner_hz)
    return slice(trim, max(trim, count - trim))


def derivative(x: Floats, rate_hz: float) -> Floats:
    """Return dx/dt of x (N, n) by five-point central differences; the two rows at each end are copies."""
    slope = np.empty_like(x)
    for i in range(x.shape[1]):
        slope[2:-2, i] = np.convolve(x[:, i], STENCIL, mode="valid") * rate_hz
    slope[:2], slope[-2:] = slope[2], slope[-3]
    return slope


def without_spikes(x: Floats) -> tuple[Floats, int]:
    """Return x (N, n) with each column's spikes replaced by straight lines, and how many there were.

    A filter would smear a spike over all of its window, where nothing tells it from noise any more. The edge
    of a step is none: the median keeps it. Up to 5 percent of the samples may be spikes (our choice).
    """
    away = np.abs(x - scipy.ndimage.median_filter(x, (NEIGHBOURS, 1), mode="nearest"))
    least, most = np.percentile(x, (100 - USUAL, USUAL), axis=0)
    share = SPIKE_SHARE * (most - least) / np.sqrt(8)  # the deviation, of a sine
    spikes = away > np.maximum(SPIKE * np.percentile(away, USUAL, axis=0), share)
    result, at = x.copy(), np.arange(len(x))
    for i in np.flatnonzero(spikes.any(axis=0)):
        good = ~spikes[:, i]
        result[:, i] = np.interp(at, at[good], x[good, i])
    return result, int(spikes.sum())


def rows_of(
    arm: Arm,
    gravity: tuple[float, float, float],
    terms: Terms,
    base: Base,
    recording: Recording,
    corner_hz: float = CORNER_HZ,
    further: Indices = NONE,
) -> Rows:
    """Return the equations of a recording: the base's columns, then ``further`` ones of the regressor.

    Spikes are taken out of what was recorded. Positions (and velocities, where recorded) are low-passed at
    four times the corner, thinned out to a hundred times the corner a second and differentiated; the
    regressor is worked out at every sample left; then regressor and torque pass the same filter at the
    corner, which biases nothing (Gautier 1997), and samples are kept at :data:`KEPT` times the corner.

    Raises InputFaults if the rate is below ten times the corner, or nothing is left between the ends.
    """
    rate = recording.rate_hz
    if rate < LEAST_RATE * corner_hz:
        problem = f"{rate:.4g} samples a second are too few for a filter at {corner_hz:g} Hz"
        raise InputFaults.one(
            recording.name, "t_s", problem, f"{LEAST_RATE * corner_hz:g} or more, or a lower corner_hz"
        )
    least = 2 * TRIM / corner_hz + 1 / (KEPT * corner_hz)
    if len(recording.t) <= least * rate + 1:
        problem = f"{recording.duration_s:.3g} s are too short for a filter at {corner_hz:g} Hz"
        raise InputFaults.one(recording.name, "t_s", problem, f"more than {least:g} s")
    every = max(1, int(rate / (DENSE * corner_hz)))
    columns = [x for x in (recording.q, recording.torque, recording.v) if x is not None]
    cleaned, counts = zip(*map(without_spikes, columns), strict=True)
    q = low_pass(cleaned[0], rate, STATE_FACTOR * corner_hz)[::every]
    torque = cleaned[1]
    if every > 1:
        torque = low_pass(torque, rate, STATE_FACTOR * corner_hz)[::every]
    v = derivative(q, rate / every)
    if recording.v is not None:
        v = low_pass(cleaned[2], rate, STATE_FACTOR * corner_hz)[::every]
    rate /= every
    a = derivative(v, rate)
    parts = [slice(start, start + CHUNK) for start in range(0, len(q), CHUNK)]
    wanted = np.append(base.kept, further)
    y = np.concatenate([regressor(arm, gravity, q[k], v[k], a[k], terms)[:, :, wanted] for k in parts])
    torque = low_pass(torque, rate, corner_hz)
    standing = _standing(v, rate, corner_hz) if terms.coulomb else np.zeros(v.shape, bool)
    within = inner(len(q), rate, corner_hz)
    kept = slice(within.start, within.stop, round(rate / (KEPT * corner_hz)))
    filtered = [low_pass(y[:, i], rate, corner_hz)[kept] for i in range(arm.n)]
    return Rows(
        y=np.stack(filtered, axis=1), torque=torque[kept], usable=~standing[kept], name=recording.name,
        t=np.arange(len(q))[kept] / rate, v=v[kept], spikes=sum(counts),
    )  # fmt: skip


def _standing(v: Floats, rate_hz: float, corner_hz: float) -> NDArray[bool_]:
    """Tell (N, n) where a joint stands or turns back within :data:`AROUND` periods of the corner.

    There the sign of its speed is the noise's. The noise is what speeds hold above the corner.
    """
    noise = 1.4826 * np.median(np.abs(v - low_pass(v, rate_hz, corner_hz)), axis=0)
    slow = np.abs(v) < np.maximum(STANDING * np.abs(v).max(axis=0), NOISY * noise)
    window = max(1, int(AROUND * rate_hz / corner_hz))
    standing: NDArray[bool_] = scipy.ndimage.maximum_filter1d(slow, window, axis=0)
    return standing
