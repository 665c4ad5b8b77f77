"""Slips in a recording's columns, found by torques: units, signs, sides of a gear, order."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from itertools import combinations

import numpy as np
import scipy.linalg

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.arm.dynamics import inverse_dynamics
from rigbench.errors import Fault
from rigbench.identify.filtering import CORNER_HZ, STATE_FACTOR, derivative, inner, low_pass, without_spikes
from rigbench.identify.recording import Recording
from rigbench.identify.recording_file import column_names
from rigbench.identify.recording_table import Table
from rigbench.identify.regressor import Terms, regressor

__all__ = ["FACTORS", "TURN", "corner_of", "slip_faults", "slip_of"]

TURN = float(np.degrees(1.0))
FACTORS = {
    TURN: "57.3 times too large",
    1 / TURN: "57.3 times too small",
    1e3: "1000 times too large",
    1e-3: "1000 times too small",
}
"""Slips of a unit: degrees for radians, thousandths for wholes."""

WRONG_SIGN = "looks of the wrong sign"

EXPLAINED = 0.5
"""Share of a joint's torque that even a poor model leaves unexplained at most."""

POOR = 0.75
"""Share of any joint's torque unexplained beyond which slips have not set things right."""

GAIN = math.log(2.0)
"""What a slip must bring, as a sum over joints of logarithms of unexplained shares: half of one joint's."""

LEAST, MOST = 0.1, 10.0
"""Unexplained shares below and above count as these."""

MUTE = 0.02
"""A model whose torque is below this share of the recorded says nothing of it."""

TINY = 1e-12

SAMPLES = 400
"""States at which torques are compared."""

LEAST_SAMPLES = 50
"""A recording with fewer samples between the filters' ends says nothing of slips."""

MOST_JOINTS = 8
"""Up to so many joints, every set of positions in radians is tried."""


@dataclass(frozen=True, eq=False)
class _Seen:
    """A recording's motion and torques, low-passed, at some of its instants, each (S, n)."""

    q: Floats
    v: Floats
    a: Floats
    torque: Floats
    noise: Floats  # (n,), about what the filter leaves of a torque's white noise


@dataclass(frozen=True)
class _Slip:
    """A mistake, or ``count`` of them: the columns of ``what`` ('q', 'tau') of these joints are wrong."""

    what: tuple[str, ...]
    joints: tuple[int, ...]
    said: str
    count: int = 1


@dataclass(frozen=True, eq=False)
class _Positions:
    """Positions set right: column ``order``[i] times ``scale``[i]; so torques where ``both`` are wrong."""

    slip: _Slip | None
    order: list[int]
    scale: Floats
    both: bool = False


def slip_of(ratio: float) -> str | None:
    """Say which slip of a unit makes a ratio that should be 1, within a factor of 2."""
    near = [said for factor, said in FACTORS.items() if 0.5 < ratio / factor < 2.0]
    return near[0] if near else None


def slip_faults(
    arm: Arm, gravity: tuple[float, float, float], recording: Recording, table: Table
) -> list[Fault]:
    """Return the slips without which the arm explains the torques, or else what no arm like it explains.

    Looked for where the declared arm, with friction as it fits best, leaves more than half of a joint's
    torque unexplained. Positions: 57.3 or 1000 times too large or small, or of the wrong sign, all or of one
    joint; in radians of some; two swapped. Torques: 1000 times too large or small, of the wrong sign, or on
    the motor's side of the gear, all or of some joints; two swapped. Both: of a joint that turns the other
    way, or of two swapped. A slip must halve what is unexplained of a joint and leave none explained worse;
    where it changes torques by less than the declared arm is wrong by, nothing tells it.

    Where there is no slip, what no masses, inertias and friction explain of a joint's torque, beyond noise,
    is told if it is more than half.
    """
    kept = inner(len(recording.t), recording.rate_hz, corner_of(recording))
    if kept.stop - kept.start < LEAST_SAMPLES:
        return []
    seen = _seen(recording)
    before = _shares(seen.torque, _modelled(arm, gravity, seen.q, seen.v, seen.a), seen.v)
    if (before <= EXPLAINED).all():
        return []
    names = column_names(arm)
    found, after = _likeliest(arm, gravity, seen, before)
    if not found:
        return _foreign_faults(arm, gravity, seen, table)
    left = (
        f"the model misses the torques by {100 * before.max():.3g} % as they stand, by "
        f"{100 * after.max():.3g} % without this"
    )
    faults = []
    for slip in found:
        for what in slip.what:
            columns = [names[what][i] for i in slip.joints]
            other = "" if len(found) > 1 else _other_sign(arm, gravity, seen, slip, after)
            said = f"{slip.said.format(*columns)}{other}: {left}"
            faults += [table.column_fault(name, said, "what the header says") for name in columns]
    return faults


def _other_sign(
    arm: Arm, gravity: tuple[float, float, float], seen: _Seen, slip: _Slip, after: Floats
) -> str:
    """Name the column that may be of the wrong sign instead: one joint's torques for its positions, or they.

    Where gravity does not act on a joint and its axis is one of symmetry, all but the same torques follow.
    """
    if slip.said != WRONG_SIGN or slip.what not in (("q",), ("tau",)) or len(slip.joints) > 1:
        return ""
    i, sign = slip.joints[0], np.ones(arm.n)
    sign[i] = -1.0
    if slip.what == ("q",):
        model, v, torque = _modelled(arm, gravity, seen.q, seen.v, seen.a), seen.v, sign * seen.torque
    else:
        q, v, a = (sign * x for x in (seen.q, seen.v, seen.a))
        model, torque = _modelled(arm, gravity, q, v, a), seen.torque
    if _size(_shares(torque, model, v)) > _size(after) + GAIN:
        return ""
    return f", or else {column_names(arm)['tau' if slip.what == ('q',) else 'q'][i]} does"


def corner_of(recording: Recording) -> float:
    """Return the corner of the filters through which a recording is judged [Hz]."""
    return min(CORNER_HZ, recording.rate_hz / (2 * STATE_FACTOR))


def _seen(recording: Recording) -> _Seen:
    rate, corner = recording.rate_hz, corner_of(recording)
    q = low_pass(without_spikes(recording.q)[0], rate, corner)
    v = derivative(q, rate)
    a = derivative(v, rate)
    raw = without_spikes(recording.torque)[0]
    torque = low_pass(raw, rate, corner)
    noise = (raw - torque).std(axis=0) * np.sqrt(2 * corner / rate)
    kept = inner(len(q), rate, corner)
    some = np.unique(np.linspace(kept.start, kept.stop - 1, SAMPLES).astype(int))
    return _Seen(q[some], v[some], a[some], torque[some], noise)


def _modelled(arm: Arm, gravity: tuple[float, float, float], q: Floats, v: Floats, a: Floats) -> Floats:
    """Return the declared arm's torques (S, n) along a motion, without friction."""
    chain = arm.chain(gravity)
    links = np.array([inverse_dynamics(chain, *state) for state in zip(q, v, a, strict=True)])
    torque: Floats = links + arm.drives.reflected * a
    return torque


def _shares(torque: Floats, model: Floats, v: Floats) -> Floats:
    """Return the rms of what is unexplained of each joint's torque (S, n) as a share of it, (n,).

    What the ``model`` leaves may be friction, of any size: viscous and Coulomb's, neither below 0. Where that
    is all but everything, so that the model might as well say nothing, nothing counts as explained.
    """
    error, dry = torque - model, np.sign(v)
    vv, vd, dd, ve, de, ee = (
        (one * other).sum(axis=0)
        for one, other in ((v, v), (v, dry), (dry, dry), (v, error), (dry, error), (error, error))
    )
    alone = np.maximum(ve, 0) ** 2 / np.maximum(vv, TINY), np.maximum(de, 0) ** 2 / np.maximum(dd, TINY)
    across = np.maximum(vv * dd - vd**2, TINY)
    viscous, coulomb = (dd * ve - vd * de) / across, (vv * de - vd * ve) / across
    both = np.where((viscous > 0) & (coulomb > 0), viscous * ve + coulomb * de, 0.0)
    left, whole = ee - np.maximum.reduce([*alone, both]), np.maximum((torque**2).sum(axis=0), TINY)
    mute = (model**2).sum(axis=0) < MUTE**2 * whole
    share: Floats = np.where(mute, 1.0, np.sqrt(np.maximum(left, 0) / whole))
    return share


def _size(shares: Floats, count: int = 0) -> float:
    """Return how bad shares are that took so many slips."""
    return float(np.log(np.clip(shares, LEAST, MOST)).sum()) + GAIN * count


def _likeliest(
    arm: Arm, gravity: tuple[float, float, float], seen: _Seen, before: Floats
) -> tuple[list[_Slip], Floats]:
    """Return the likeliest slips, if any, and the share of each joint's torque unexplained without (n,)."""
    least, found, after = _size(before), list[_Slip](), before
    for positions in _positions(arm):
        q, v, a = (x[:, positions.order] * positions.scale for x in (seen.q, seen.v, seen.a))
        torque = seen.torque[:, positions.order] * np.sign(positions.scale) if positions.both else seen.torque
        model = _modelled(arm, gravity, q, v, a)
        own = [] if positions.slip is None else [positions.slip]
        for slips, right in _torques(arm, model, torque, v):
            shares = _shares(right, model, v)
            size = _size(shares, sum(slip.count for slip in (*own, *slips)))
            better = (before > EXPLAINED) & (shares <= EXPLAINED) & (2 * shares < before)
            worse = (before <= EXPLAINED) & (shares > EXPLAINED)
            if size < least and better.any() and not worse.any() and shares.max() <= POOR:
                least, found, after = size, [*own, *slips], shares
    return found, after


def _positions(arm: Arm) -> Iterator[_Positions]:
    """Yield positions as they are, then every slip of theirs that is looked for."""
    n = arm.n
    whole, ones = list(range(n)), np.ones(n)
    yield _Positions(None, whole, ones)
    for which in _sets(whole):
        for factor, said in FACTORS.items():
            scale = ones.copy()
            scale[list(which)] = 1 / factor
            yield _Positions(_Slip(("q",), which, f"looks {said}"), whole, scale)
        scale = ones.copy()
        scale[list(which)] = -1.0
        yield _Positions(_Slip(("q",), which, WRONG_SIGN), whole, scale)
        yield _Positions(
            _Slip(("q", "tau"), which, "looks of a joint that turns the other way"), whole, scale, True
        )
    turning = [i for i in whole if arm.kinds[i] != PRISMATIC]
    for count in range(2, len(turning) + 1 if n <= MOST_JOINTS else 0):
        for which in combinations(turning, count):
            scale = ones.copy()
            scale[list(which)] = TURN
            yield _Positions(_Slip(("q",), which, f"looks {FACTORS[1 / TURN]}", count), whole, scale)
    for i, j in combinations(whole, 2):
        order = list(whole)
        order[i], order[j] = j, i
        yield _Positions(_Slip(("q",), (i, j), "{} and {} look swapped"), order, ones)
        yield _Positions(_Slip(("q", "tau"), (i, j), "{} and {} look swapped"), order, ones, both=True)


def _sets(whole: list[int]) -> list[tuple[int, ...]]:
    """Return all joints, and each of them."""
    return list(dict.fromkeys([tuple(whole), *((i,) for i in whole)]))


def _torques(arm: Arm, model: Floats, torque: Floats, v: Floats) -> Iterator[tuple[list[_Slip], Floats]]:
    """Yield torques as they are, then set right for every slip of theirs that is looked for, (S, n)."""
    n = arm.n
    yield [], torque
    kinds = {
        "looks 1000 times too large": np.full(n, 1e-3),
        "looks 1000 times too small": np.full(n, 1e3),
        WRONG_SIGN: np.full(n, -1.0),
        "looks like the motor's own, before its gear": arm.drives.gear_ratio,
    }
    for said, factor in kinds.items():
        if (moved := np.flatnonzero(factor != 1)).size:
            yield [_Slip(("tau",), tuple(moved.tolist()), said)], torque * factor
    for i, j in combinations(range(n), 2):
        order = list(range(n))
        order[i], order[j] = j, i
        yield [_Slip(("tau",), (i, j), "{} and {} look swapped")], torque[:, order]
    slips, right = list[_Slip](), torque.copy()
    best = _shares(torque, model, v)
    for said, factor in kinds.items():
        shares = _shares(torque * factor, model, v)
        halved = (2 * shares < best) & (best > EXPLAINED) & (shares <= EXPLAINED)
        for i in np.flatnonzero(halved).tolist():
            best[i], right[:, i] = shares[i], torque[:, i] * factor[i]
            slips = [*(slip for slip in slips if slip.joints != (i,)), _Slip(("tau",), (i,), said)]
    yield slips, right


def _foreign_faults(arm: Arm, gravity: tuple[float, float, float], seen: _Seen, table: Table) -> list[Fault]:
    """Return the torques that no parameters explain, fitted freely."""
    y = regressor(arm, gravity, seen.q, seen.v, seen.a, Terms(offset=True))
    size = np.maximum(np.sqrt((seen.torque**2).mean(axis=0)), 1e-6)
    flat = (y / size[:, None]).reshape(-1, y.shape[2])
    values = scipy.linalg.lstsq(flat, (seen.torque / size).ravel())[0]
    error = y @ values - seen.torque
    shares = np.sqrt((error**2).mean(axis=0)) / size
    noisy = np.sqrt((error**2).mean(axis=0)) < 3 * seen.noise
    problem = (
        "no masses, inertias and friction explain this torque along these positions: {:.3g} % of it is left"
    )
    return [
        table.column_fault(name, problem.format(100 * share), "torques of this arm, at the rows' instants")
        for name, share, excused in zip(column_names(arm)["tau"], shares, noisy, strict=True)
        if share > EXPLAINED and not excused
    ]
