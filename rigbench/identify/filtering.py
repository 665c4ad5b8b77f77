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

__all__ = ["CORNER_HZ", "Rows", "derivative", "low_pass", "rows_of"]

CORNER_HZ = 10.0
"""Default corner of the low-pass on torques and regressor [Hz] (our choice: five times and more what
excitation moves an arm at)."""

STATE_FACTOR = 4.0
"""Positions are filtered at so many times the corner, so that what the regressor's filter lets through
passes theirs unharmed."""

ORDER = 4
KEPT = 1.79
"""Samples kept each second over the corner: half of that is where this filter lets half of the power
through, so that white noise, folded there, is white again and samples hang together no more."""

NONE = np.empty(0, np.intp)
"""No columns."""

TRIM = 4.0
"""Periods of the corner dropped at either end, where the filters swing in."""

CHUNK = 4096
"""Samples whose whole regressor is in memory at once."""

STANDING = 0.01
"""Share of its greatest speed below which a joint counts as standing."""

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


def low_pass(x: Floats, rate_hz: float, corner_hz: float) -> Floats:
    """Filter x (N, ...) along its first axis without shifting it in time.

    A fourth-order Butterworth filter forwards and backwards: half the amplitude at the corner.
    """
    sections = scipy.signal.butter(ORDER, corner_hz, fs=rate_hz, output="sos")
    filtered: Floats = scipy.signal.sosfiltfilt(sections, x, axis=0)
    return filtered


def derivative(x: Floats, rate_hz: float) -> Floats:
    """Return dx/dt of x (N, n) by five-point central differences; the two rows at each end are copies."""
    slope = np.empty_like(x)
    for i in range(x.shape[1]):
        slope[2:-2, i] = np.convolve(x[:, i], STENCIL, mode="valid") * rate_hz
    slope[:2], slope[-2:] = slope[2], slope[-3]
    return slope


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

    Positions (and velocities, where recorded) are low-passed at four times the corner and
    differentiated; the regressor is worked out at every sample; then regressor and torque
    pass the same filter at the corner, which biases nothing (Gautier 1997), and samples are kept
    at :data:`KEPT` times the corner.

    Raises InputFaults if the rate is below eight times the corner, or nothing is left between the ends.
    """
    rate = recording.rate_hz
    if rate < 2 * STATE_FACTOR * corner_hz:
        problem = f"{rate:.4g} samples a second are too few for a filter at {corner_hz:g} Hz"
        raise InputFaults.one(recording.name, "t_s", problem, f"{2 * STATE_FACTOR * corner_hz:g} or more")
    trim, step = int(TRIM * rate / corner_hz), round(rate / (KEPT * corner_hz))
    if len(recording.t) <= 2 * trim + step:
        least = 2 * TRIM / corner_hz
        problem = f"{recording.t[-1] - recording.t[0]:.3g} s are too short for a filter at {corner_hz:g} Hz"
        raise InputFaults.one(recording.name, "t_s", problem, f"more than {least:g} s")
    q = low_pass(recording.q, rate, STATE_FACTOR * corner_hz)
    v = derivative(q, rate)
    if recording.v is not None:
        v = low_pass(recording.v, rate, STATE_FACTOR * corner_hz)
    a = derivative(v, rate)
    parts = [slice(start, start + CHUNK) for start in range(0, len(q), CHUNK)]
    columns = np.append(base.kept, further)
    y = np.concatenate([regressor(arm, gravity, q[k], v[k], a[k], terms)[:, :, columns] for k in parts])
    torque = low_pass(recording.torque, rate, corner_hz)
    standing = _standing(v, int(rate / corner_hz)) if terms.coulomb else np.zeros(v.shape, bool)
    kept = slice(trim, len(q) - trim, step)
    filtered = [low_pass(y[:, i], rate, corner_hz)[kept] for i in range(arm.n)]
    return Rows(
        y=np.stack(filtered, axis=1), torque=torque[kept], usable=~standing[kept], name=recording.name,
        t=recording.t[kept] - recording.t[0], v=v[kept],
    )  # fmt: skip


def _standing(v: Floats, window: int) -> NDArray[bool_]:
    """Tell (N, n) where a joint stands or turns back at any of the ``window`` samples around.

    There the sign of its speed is the noise's, and the filter carries that as far as its window.
    """
    slow = np.abs(v) < STANDING * np.abs(v).max(axis=0)
    standing: NDArray[bool_] = scipy.ndimage.maximum_filter1d(slow, max(1, window), axis=0)
    return standing
