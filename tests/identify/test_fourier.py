"""The Fourier motion is a motion: exact derivatives, rests, pace, faults."""

from __future__ import annotations

import pickle

import numpy as np
import pytest

from rigbench.identify.fourier import FourierMotion

GIVEN = {"centre": (0.1, -0.3), "sine": ((0.4, -0.2), (0.0, 0.0)), "cosine": ((0.4, -0.1), (0.8, -0.2))}


def made(**changes) -> FourierMotion:
    return FourierMotion(**({"period_s": 4.0, "periods": 2, "rest_s": 0.5} | GIVEN | changes))


def test_velocity_and_acceleration_are_derivatives():
    """Central differences of q and v over 2e-5 s meet v and a to 1e-8 of their size: h^2/6 w^2, w = 2 pi."""
    motion, h = made(pace=1.3), 1e-5
    t = np.linspace(0.1, 6.0, 50)
    (_, v, a), after, before = motion.reference(t), motion.reference(t + h), motion.reference(t - h)
    assert np.allclose((after[0] - before[0]) / (2 * h), v, atol=1e-8)
    assert np.allclose((after[1] - before[1]) / (2 * h), a, atol=1e-8)


def test_it_repeats_and_rests_where_it_began():
    """Every period is the same; from the last one's end the start is held, at rest, and so before 0."""
    motion = made()
    t = np.linspace(0, 3.99, 30)
    assert np.allclose(motion.reference(t)[0], motion.reference(t + 4.0)[0], atol=1e-12)
    q, v, a = motion.reference(np.array([-1.0, 0.0, 8.0, 8.3, 8.5, 99.0]))
    assert (q == q[0]).all()
    assert not v.any()
    assert not a.any()
    assert motion.duration_s == 8.5
    assert motion.rests == ((8.0, 8.5),)
    assert made(rest_s=0.0).rests == ()


def test_it_leaves_and_reaches_rest_smoothly():
    """No jump of speed or acceleration at either end: after 1e-6 s both are still next to nothing."""
    motion = made()
    for at in (1e-6, 8.0 - 1e-6):
        _, v, a = motion.reference(np.array([at]))
        assert np.abs(v).max() < 1e-5
        assert np.abs(a).max() < 1e-4


def test_pace_scales_time_and_not_the_rest():
    """At twice the pace the same positions come in half the time, and the rest is as long."""
    motion, fast = made(), made().paced(2.0)
    t = np.linspace(0.1, 7.9, 20)
    assert np.allclose(motion.reference(t)[0], fast.reference(t / 2)[0], atol=1e-12)
    assert np.allclose(2 * motion.reference(t)[1], fast.reference(t / 2)[1], atol=1e-12)
    assert fast.duration_s == 4.5


def test_equal_motions_are_equal_values():
    """Hash, pickle and inputs tell equal motions as equal, and others as others."""
    assert pickle.loads(pickle.dumps(made())) == made()
    assert hash(made()) == hash(made())
    assert made().inputs() == made().inputs() != made(pace=2.0).inputs()


@pytest.mark.parametrize(
    "wrong",
    [
        {"sine": ((0.4, 0.2), (0.0, 0.0))},  # speed at the start
        {"cosine": ((0.4, 0.1), (0.8, -0.2))},  # acceleration at the start
        {"centre": (0.1,)},
        {"sine": ((0.4, -0.2), (0.0,))},
        {"centre": (0.1, float("nan"))},
        {"period_s": 0.0},
        {"periods": 0},
        {"rest_s": -1.0},
        {"pace": 0.0},
    ],
)
def test_what_is_no_motion_is_refused(wrong):
    """Each condition of the class has its ValueError."""
    with pytest.raises(ValueError, match=r"."):
        made(**wrong)
