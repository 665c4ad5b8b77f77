"""The motion of a table: a spline through its rows."""

from __future__ import annotations

import json
import pickle

import numpy as np
import pytest
from scipy.interpolate import make_interp_spline

from rigbench.motion.table import TableMotion


def table(times, rows, pace=1.0) -> TableMotion:
    """A motion of any two arrays."""
    return TableMotion(
        tuple(map(float, times)), tuple(tuple(map(float, row)) for row in np.atleast_2d(rows)), pace
    )


def cubic(t):
    """Two cubics: a spline with free ends is exactly these."""
    return np.column_stack([t**3 - t, 2 - t + 0.5 * t**2])


UNEVEN = np.array([0.0, 0.2, 0.3, 0.7, 1.1, 1.2, 1.6, 2.0])
PLAN = np.column_stack([np.sin(3 * UNEVEN), np.cos(2 * UNEVEN)])


@pytest.mark.parametrize("pace", [1.0, 0.5, 2.0])
def test_a_cubic_plan_is_met_exactly(pace):
    """Through samples of a cubic the reference is that cubic, moving at both ends, and so are v and a."""
    motion = table(UNEVEN + 5, cubic(UNEVEN), pace)
    t = np.linspace(0, 2.0 / pace, 101)
    s = t * pace
    q, v, a = motion.reference(t)
    np.testing.assert_allclose(q, cubic(s), atol=1e-13)
    np.testing.assert_allclose(v, pace * np.column_stack([3 * s**2 - 1, s - 1]), atol=1e-12)
    np.testing.assert_allclose(a, pace**2 * np.column_stack([6 * s, np.ones_like(s)]), atol=1e-11)
    assert motion.duration_s == pytest.approx(2.0 / pace)
    assert motion.rests == ()


def test_it_is_the_spline_of_an_independent_construction():
    """B-splines of degree 3 with not-a-knot ends give the same curve and derivatives."""
    t = np.linspace(0, 2, 77)
    curve = make_interp_spline(UNEVEN, PLAN, k=3)
    for order, part in enumerate(table(UNEVEN, PLAN).reference(t)):
        np.testing.assert_allclose(part, curve(t, nu=order), atol=1e-11)


def test_it_passes_through_every_row():
    """At each row's time q is the row, and exactly so at the last."""
    motion = table(UNEVEN, PLAN, 0.7)
    q = motion.reference(motion.row_times)[0]
    np.testing.assert_allclose(q, PLAN, atol=1e-15)
    assert (q[-1] == PLAN[-1]).all()


def test_two_and_three_rows_are_enough():
    """Two rows make a line, three a parabola."""
    line = table([1, 3], [[0, 5], [4, 1]])
    np.testing.assert_allclose(line.reference(np.array([0.5]))[0], [[1, 4]])
    np.testing.assert_allclose(line.reference(np.array([0.5]))[1], [[2, -2]])
    parabola = table([0, 1, 2], [[0], [1], [4]])
    np.testing.assert_allclose(parabola.reference(np.array([1.5]))[0], [[2.25]])
    np.testing.assert_allclose(parabola.reference(np.array([1.5]))[2], [[2.0]])


@pytest.mark.parametrize("outside", [-1.0, -1e-9, 2.0 + 1e-9, 50.0, np.inf, -np.inf])
def test_the_ends_are_held_outside(outside):
    """Outside its time the nearer row is held, at rest, though the plan moves at its ends."""
    q, v, a = table(UNEVEN, PLAN).reference(np.array([outside]))
    np.testing.assert_allclose(q[0], PLAN[0] if outside < 0 else PLAN[-1], atol=1e-15)
    assert (v == 0).all()
    assert (a == 0).all()
    moving = table(UNEVEN, PLAN).reference(np.array([0.0, 2.0]))[1]
    assert (np.abs(moving) > 0.1).any(axis=1).all()


def quintic_plan(rest_rows: int):
    """A leg of 1 s in rows of 20 ms that ends on as many equal rows more."""
    x = np.linspace(0, 1, 51)
    leg = 10 * x**3 - 15 * x**4 + 6 * x**5
    rows = np.column_stack([leg, -2 * leg])
    rows = np.concatenate([rows, np.repeat(rows[-1:], rest_rows, axis=0)])
    return np.arange(len(rows)) * 0.02, rows


@pytest.mark.parametrize("pace", [1.0, 4.0, 0.7, 49.0])
def test_a_constant_tail_is_a_rest(pace):
    """A plan that ends on equal rows for 0.1 s rests there: to the bit, its time scaled with all else.

    At a pace of 49 the leg's end, times the pace, rounds to just short of it.
    """
    motion = table(*quintic_plan(10), pace)
    assert motion.rests == (pytest.approx((1.0 / pace, 1.2 / pace)),)
    q, v, a = motion.reference(np.linspace(1.0 / pace, 1.2 / pace, 33))
    assert (q == [1, -2]).all()
    assert (v == 0).all()
    assert (a == 0).all()
    before = motion.reference(np.array([(1 - 1e-9) / pace]))
    np.testing.assert_allclose(before[0], [[1, -2]], atol=1e-12)
    np.testing.assert_allclose(before[1], 0, atol=1e-6)


def test_a_leg_that_ends_on_a_rest_still_follows_its_plan():
    """Ended at zero velocity, the spline stays as near to the plan's own quintic as its rows allow."""
    motion = table(*quintic_plan(10))
    x = np.linspace(0, 1, 501)
    q, v, _ = motion.reference(x)
    # A cubic spline's error is of order 5/384 h^4 of the fourth derivative, 7.5e-7 with 360 at the ends;
    # a free end costs several times as much. The velocity's is of order h^3/24 of it, 1.2e-4, likewise.
    np.testing.assert_allclose(q[:, 0], 10 * x**3 - 15 * x**4 + 6 * x**5, atol=5e-6)
    np.testing.assert_allclose(v[:, 0], 30 * (x * (1 - x)) ** 2, atol=1e-3)


@pytest.mark.parametrize(("rest_rows", "rests"), [(0, 0), (4, 0), (5, 1)])
def test_a_short_tail_is_no_rest(rest_rows, rests):
    """0.08 s of equal rows is part of the leg; 0.10 s is a rest."""
    assert len(table(*quintic_plan(rest_rows)).rests) == rests


def test_one_moving_joint_is_no_rest():
    """A tail in which any joint still moves is no rest."""
    times, rows = quintic_plan(10)
    rows[-3:, 1] += 1e-6
    assert table(times, rows).rests == ()


def test_a_table_that_never_moves_rests_throughout():
    """All rows equal: the reference stands still, and the rest is all of it."""
    motion = table([0, 1, 2], [[0.3, 0.4]] * 3, 2.0)
    assert motion.rests == ((0.0, 1.0),)
    q, v, a = motion.reference(np.array([-1, 0, 0.5, 9]))
    assert (q == [0.3, 0.4]).all()
    assert (v == 0).all()
    assert (a == 0).all()


def test_a_single_step_before_a_rest():
    """Two moving rows before a rest: the spline still meets both and ends at zero velocity."""
    motion = table([0, 1, 2], [[0], [1], [1]])
    assert motion.rests == ((1.0, 2.0),)
    q, v, _ = motion.reference(np.array([0, 1 - 1e-9, 1, 1.5]))
    np.testing.assert_allclose(q[:, 0], [0, 1, 1, 1], atol=1e-9)
    np.testing.assert_allclose(v[1:, 0], 0, atol=1e-8)


def test_it_is_vectorised_in_time():
    """Many times give what each gives alone; no times give empty arrays of the right shape."""
    motion = table(*quintic_plan(10))
    t = np.linspace(-0.1, 1.4, 50)
    alone = zip(*(motion.reference(t[k : k + 1]) for k in range(50)), strict=True)
    for many, single in zip(motion.reference(t), alone, strict=True):
        np.testing.assert_array_equal(many, np.concatenate(single))
    assert all(part.shape == (0, 2) for part in motion.reference(np.empty(0)))


def test_it_is_a_value():
    """Equal tables are equal, hash alike and pickle alike, whether or not they have been used."""
    fresh, used = table(UNEVEN, PLAN), table(UNEVEN, PLAN)
    used.reference(np.zeros(1))
    used.inputs()
    assert fresh == used
    assert hash(fresh) == hash(used)
    assert pickle.dumps(fresh) == pickle.dumps(used)
    again = pickle.loads(pickle.dumps(used))
    assert again == used
    np.testing.assert_array_equal(again.reference(UNEVEN)[0], used.reference(UNEVEN)[0])


def test_inputs_tell_tables_apart():
    """Equal motions have equal inputs, JSON-able; another number, pace or shape has others."""
    base = table(UNEVEN, PLAN)
    # A shift by a power of two keeps the times' last digits.
    assert table(UNEVEN[[0, 3]] * 0 + [4, 5], PLAN[:2]).inputs() == table([0, 1], PLAN[:2]).inputs()
    other = PLAN.copy()
    other[3, 1] = np.nextafter(other[3, 1], 9)
    different = [
        base,
        table(UNEVEN, other),
        table(UNEVEN, PLAN, 1.1),
        table(UNEVEN, PLAN[:, :1]),
        # The same eight numbers row by row, in two shapes.
        table([0, 0.5], [[1, 0.25, 2], [3, 0.75, 4]]),
        table([0, 0.25, 0.5, 0.75], [[1], [2], [3], [4]]),
    ]
    assert len({json.dumps(motion.inputs()) for motion in different}) == len(different)


@pytest.mark.parametrize(
    "nonsense",
    [
        {"times": (0.0,), "rows": ((1.0,),)},
        {"rows": ((1.0,), (2.0,), (3.0,))},
        {"rows": ((1.0,), (2.0, 3.0))},
        {"rows": ((1.0,), (float("nan"),))},
        {"times": (0.0, 0.0)},
        {"times": (1.0, 0.5)},
        {"times": (0.0, 1e-7)},
        {"times": (0.0, float("inf"))},
        {"pace": 0.0},
        {"pace": float("inf")},
    ],
)
def test_nonsense_is_refused(nonsense):
    """Too few or ragged rows, and times that don't rise, are mistakes of the caller."""
    good = {"times": (0.0, 1.0), "rows": ((1.0,), (2.0,)), "pace": 1.0}
    with pytest.raises(ValueError, match=r"rows|finite|rise|pace"):
        TableMotion(**(good | nonsense))
