"""Via points joined by quintic legs."""

from __future__ import annotations

import json
import pickle
from math import radians, sqrt

import numpy as np
import pytest

from rigbench.motion.via import ViaMotion

POINTS = ((0.0, -1.0, 0.3), (1.2, -0.2, 0.3), (-0.4, 0.1, 0.3))
MOTION = ViaMotion(POINTS, leg_s=0.8, rest_s=0.3)


def derivative(function, t, step):
    """Central difference of fourth order."""
    return (
        8 * (function(t + step) - function(t - step)) - function(t + 2 * step) + function(t - 2 * step)
    ) / (12 * step)


@pytest.mark.parametrize("pace", [1.0, 0.5, 2.5])
def test_velocity_and_acceleration_are_the_derivatives(pace):
    """v and a agree with finite differences of q and v inside legs and rests."""
    motion = ViaMotion(POINTS, 0.8, 0.3, pace)
    period = 0.8 / pace + 0.3
    # Clear of the legs' ends, where the quintic's third derivative jumps.
    t = np.concatenate(
        [leg * period + np.linspace(0.02, 0.98, 40) * 0.8 / pace for leg in (0, 1)]
        + [leg * period + 0.8 / pace + np.linspace(0.02, 0.28, 5) for leg in (0, 1)]
    )
    _, v, a = motion.reference(t)
    step = 1e-3
    # The difference's own error is step^4/30 times the fifth derivative of q, 720 x 1.6 / T^5 (none for v,
    # a quartic); rounding adds 1e-16 of q and 1e-14 of v, over the step.
    slack = 1e-12 + step**4 / 30 * 720 * 1.6 * (pace / 0.8) ** 5
    np.testing.assert_allclose(v, derivative(lambda s: motion.reference(s)[0], t, step), atol=slack)
    np.testing.assert_allclose(a, derivative(lambda s: motion.reference(s)[1], t, step), atol=1e-10)


def test_peaks_of_a_published_quintic():
    """A quintic of 250 deg in 1.3 s peaks at 360.6 deg/s and 854.1 deg/s^2."""
    # An, Atkeson, Hollerbach 1988, "Model-Based Control of a Robot Manipulator" (quoted from memory).
    motion = ViaMotion(((0.0,), (radians(250),)), 1.3)
    _, v, a = motion.reference(np.linspace(0, 1.3, 100_001))
    assert np.degrees(v.max()) == pytest.approx(360.6, abs=0.05)
    assert np.degrees(np.abs(a).max()) == pytest.approx(854.1, abs=0.05)
    assert v.max() == pytest.approx(15 / 8 * radians(250) / 1.3, rel=1e-9)
    assert a.max() == pytest.approx(10 / sqrt(3) * radians(250) / 1.3**2, rel=1e-8)


def test_legs_and_rests_add_up():
    """Two legs of 0.8 s, each followed by its rest of 0.3 s, from the first point on."""
    np.testing.assert_allclose(MOTION.rests, [(0.8, 1.1), (1.9, 2.2)], rtol=1e-14)
    assert MOTION.duration_s == pytest.approx(2.2)
    assert (MOTION.reference(np.zeros(1))[0] == POINTS[0]).all()


@pytest.mark.parametrize("pace", [1.0, 0.7, 1.3])
@pytest.mark.parametrize("leg_s", [0.8, 0.1, 1 / 3])
def test_rests_are_still_to_the_bit(leg_s, pace):
    """From each leg's end through its rest q is the point's own bits, v and a are zero; late legs too."""
    motion = ViaMotion(POINTS * 40, leg_s, 0.3, pace)
    for (start, end), point in zip(motion.rests, motion.points[1:], strict=True):
        q, v, a = motion.reference(np.linspace(start, end - 1e-12, 7))
        assert (q == point).all()
        assert (v == 0).all()
        assert (a == 0).all()


def test_a_joint_that_does_not_move_stays_put_to_the_bit():
    """Equal coordinates of two points are held without the ripple of rounding."""
    q, v, a = MOTION.reference(np.linspace(0, 2.2, 997))
    assert (q[:, 2] == 0.3).all()
    assert (v[:, 2] == 0).all()
    assert (a[:, 2] == 0).all()


@pytest.mark.parametrize("outside", [-5.0, -1e-9, 2.2 + 1e-9, 1e9, np.inf, -np.inf])
def test_the_ends_are_held_outside(outside):
    """Before the start and after the end the reference rests on the nearer point."""
    q, v, a = MOTION.reference(np.array([outside]))
    assert (q == (POINTS[0] if outside < 0 else POINTS[-1])).all()
    assert (v == 0).all()
    assert (a == 0).all()


def test_without_rests_the_legs_follow_each_other():
    """rest_s = 0: no rests, and position, velocity and acceleration are continuous at the via point."""
    motion = ViaMotion(POINTS, 0.8)
    assert motion.rests == ()
    assert motion.duration_s == pytest.approx(1.6)
    q, v, a = motion.reference(0.8 + np.array([-1e-7, 0, 1e-7]))
    np.testing.assert_allclose(q, [POINTS[1]] * 3, atol=1e-15)
    np.testing.assert_allclose(v, 0, atol=1e-11)
    np.testing.assert_allclose(a, 0, atol=3e-5)  # third derivative 60 x 1.6 / 0.512, times 1e-7 s


@pytest.mark.parametrize("leg_s", [0.1, 0.7, 1 / 3])
def test_many_legs_meet_every_point(leg_s):
    """Rounding of a leg's start never lands the reference on another leg's point."""
    points = tuple((float(k % 7), float(-k)) for k in range(200))
    motion = ViaMotion(points, leg_s, 0.0, 1.1)
    starts = np.arange(200) * (leg_s / 1.1)
    for shift in (-1e-12, 0, 1e-12):
        np.testing.assert_allclose(motion.reference(starts + shift)[0], points, atol=1e-12)


def test_pace_shortens_legs_and_leaves_rests():
    """At twice the pace a leg takes half the time, at four times the acceleration; rests keep theirs."""
    fast = ViaMotion(POINTS, 0.8, 0.3, pace=2.0)
    np.testing.assert_allclose(fast.rests, [(0.4, 0.7), (1.1, 1.4)], rtol=1e-14)
    x = np.linspace(0, 1, 11)
    slow_q, slow_v, slow_a = MOTION.reference(0.8 * x)
    q, v, a = fast.reference(0.4 * x)
    np.testing.assert_allclose(q, slow_q, atol=1e-14)
    np.testing.assert_allclose(v, 2 * slow_v, atol=1e-13)
    np.testing.assert_allclose(a, 4 * slow_a, atol=1e-12)


def test_it_is_vectorised_in_time():
    """Many times give what each gives alone; no times give empty arrays of the right shape."""
    t = np.linspace(-0.1, 2.3, 50)
    for many, single in zip(
        MOTION.reference(t),
        zip(*(MOTION.reference(t[k : k + 1]) for k in range(50)), strict=True),
        strict=True,
    ):
        np.testing.assert_array_equal(many, np.concatenate(single))
    assert all(part.shape == (0, 3) for part in MOTION.reference(np.empty(0)))


def test_it_is_a_value():
    """Equal motions are equal, hash alike, survive pickling, and their inputs are the same JSON."""
    again = pickle.loads(pickle.dumps(MOTION))
    assert again == MOTION
    assert hash(again) == hash(MOTION)
    assert ViaMotion(POINTS, 0.8, 0.3, 1.1) != MOTION
    whole = ViaMotion(((0, 1), (-0.0, 2)), 1, 0)
    same = ViaMotion(((0.0, 1.0), (0.0, 2.0)), 1.0, 0.0, 1.0)
    assert json.dumps(whole.inputs()) == json.dumps(same.inputs())
    assert MOTION.inputs() != ViaMotion(POINTS, 0.8, 0.3, 1.1).inputs()


@pytest.mark.parametrize(
    "nonsense",
    [
        {"points": ((1.0,),)},
        {"points": ()},
        {"points": ((1.0,), (1.0, 2.0))},
        {"points": ((1.0,), (float("nan"),))},
        {"leg_s": 0},
        {"leg_s": float("inf")},
        {"rest_s": -0.1},
        {"pace": 0},
        {"pace": float("nan")},
    ],
)
def test_nonsense_is_refused(nonsense):
    """Too few or ragged points, and times that can't be, are mistakes of the caller."""
    good = {"points": ((1.0,), (2.0,)), "leg_s": 1.0, "rest_s": 0.0, "pace": 1.0}
    with pytest.raises(ValueError, match=r"via points|leg_s"):
        ViaMotion(**(good | nonsense))
