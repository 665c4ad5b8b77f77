"""Base parameters: how many there are, that they say all that torques say, and how they read.

Counts: Mayeda, Yoshida, Osuka 1990, "Base parameters of manipulator dynamic models", and Gautier, Khalil
1990, "Direct calculation of minimum set of inertial parameters of serial robots", whose formulas are
quoted from memory. Those of rotors and friction were derived by rank in another program.
"""

from __future__ import annotations

import numpy as np
import pytest

from rigbench.errors import InputFaults
from rigbench.identify.base import GAP_DECADES, base_of
from rigbench.identify.regressor import Terms, parameter_values, regressor

GRAVITY = (0.0, 0.0, -9.81)
LINKS = Terms(rotor=False, viscous=False, coulomb=False)
ROTORS = Terms(rotor=True, viscous=False, coulomb=False)


def generic(chain, n, first=(0, 0, 1), parallel=1):
    """A chain without special geometry, but for its first ``parallel`` axes."""
    rng = np.random.default_rng(100 + n)
    axis, position = rng.normal(size=(n, 3)), rng.normal(size=(n, 3))
    axis[:parallel] = first
    return chain(axis, position)


def count(arm, terms, gravity=GRAVITY):
    base = base_of(arm, gravity, terms)
    assert base.gap_decades >= GAP_DECADES
    return base.count


@pytest.mark.parametrize("n", range(1, 8))
def test_count_of_generic_chains(chain, n):
    """7n - 6 with axis 1 along gravity, 7n - 4 else; rotors add n - 1, friction 2n."""
    upright, tilted = generic(chain, n), generic(chain, n, first=(0.3, 1, 0.2))
    assert count(upright, LINKS) == 7 * n - 6
    assert count(tilted, LINKS) == 7 * n - 4
    assert count(upright, ROTORS) == 7 * n - 6 + n - 1
    assert count(upright, Terms()) == 7 * n - 6 + n - 1 + 2 * n


@pytest.mark.parametrize("parallel", [2, 3])
def test_count_where_the_first_axes_are_parallel(chain, parallel):
    """With the first beta axes parallel: 7n - 4 beta - 2 along gravity, 7n - 4 beta across it."""
    n = 5
    assert count(generic(chain, n, parallel=parallel), LINKS) == 7 * n - 4 * parallel - 2
    assert count(generic(chain, n, (0, 1, 0), parallel), LINKS) == 7 * n - 4 * parallel


@pytest.mark.parametrize("n", [1, 2, 3, 4])
def test_count_of_planar_chains(chain, n):
    """3n - 2 in a horizontal plane, 3n in a vertical one."""
    position = np.zeros((n, 3))
    position[1:, 0] = 0.4
    flat = chain(np.tile([0, 0, 1], (n, 1)), position)
    assert count(flat, LINKS) == 3 * n - 2
    assert count(flat, LINKS, gravity=(0.0, -9.81, 0.0)) == 3 * n


@pytest.mark.parametrize("n", [1, 2, 3, 4])
def test_rotors_and_friction_add_as_much_on_planar_chains(chain, n):
    """n - 1 for rotors, joint 1's being its link's, and 2n for friction (derived: each acts in its own row alone)."""
    position = np.zeros((n, 3))
    position[1:, 0] = 0.4
    for gravity, links in ((GRAVITY, 3 * n - 2), ((0.0, -9.81, 0.0), 3 * n)):
        flat = chain(np.tile([0, 0, 1], (n, 1)), position)
        assert count(flat, ROTORS, gravity) == links + n - 1
        assert count(flat, Terms(), gravity) == links + n - 1 + 2 * n


@pytest.mark.parametrize("size", [0.01, 100.0])
def test_count_does_not_hang_on_size(chain, size):
    """Arms of a centimetre and of a hundred metres have as many parameters; and without gravity, as along it."""
    arm = generic(chain, 5)
    scaled = chain(arm.axis, size * arm.position)
    assert count(scaled, LINKS) == 7 * 5 - 6
    assert count(generic(chain, 5, first=(0.3, 1, 0.2)), LINKS, gravity=(0.0, 0.0, 0.0)) == 7 * 5 - 6


def test_count_of_the_demo_arms(tray6, planar2):
    """tray6 (z-y-y-x-y-x): 36, with rotors 40, with friction 52; planar2: 6, 7, 11."""
    for arm, counts in ((tray6, (36, 40, 52)), (planar2, (6, 7, 11))):
        assert tuple(count(arm, terms) for terms in (LINKS, ROTORS, Terms())) == counts


def test_base_parameters_say_all_that_torques_say(tray6, rubbing, chain):
    """Y[kept] K x is Y x in states that the base has never seen, to 1e-11 of the largest torque."""
    sliding = chain([[0, 0, 1], [1, 0, 1], [0, 1, 0]], [[0, 0, 0.2], [0.1, 0.3, 0], [0, 0.2, 0]], [1, 0, 1])
    terms = Terms(offset=True)
    for arm in (tray6, rubbing, sliding):
        base = base_of(arm, GRAVITY, terms)
        rng = np.random.default_rng(9)
        q, v, a = rng.uniform(-3, 3, (40, arm.n)), rng.normal(size=(40, arm.n)), rng.normal(size=(40, arm.n))
        y, x = regressor(arm, GRAVITY, q, v, a, terms), parameter_values(arm, terms)
        tau = y @ x
        assert np.abs(y[:, :, base.kept] @ (base.combination @ x) - tau).max() < 1e-11 * np.abs(tau).max()
        assert base.combination.shape == (base.count, len(x))


def test_names_are_those_of_the_textbook(planar2):
    """Of two links in a vertical plane, lower link 0.5 m long: its mass adds l to the upper link's first
    moment and l^2 to its inertia (worked out by hand; the joints turn about y)."""
    assert base_of(planar2, GRAVITY, LINKS).names == (
        "mcx.upper + 0.5 m.fore",
        "mcz.upper",
        "Iyy.upper + 0.25 m.fore",
        "mcx.fore",
        "mcz.fore",
        "Iyy.fore",
    )


def test_names_put_a_minus_where_one_belongs(tray6):
    """The axis of the gripper is x: of its two inertias across, torques tell the difference alone."""
    assert base_of(tray6, GRAVITY, LINKS).names[-1] == "Izz.gripper - Iyy.gripper"


def test_the_same_arm_has_the_same_base(tray6):
    """Twice the same digits: the random states have a seed."""
    one, two = base_of(tray6, GRAVITY, Terms()), base_of(tray6, GRAVITY, Terms())
    assert np.array_equal(one.combination, two.combination)
    assert one.names == two.names


def test_no_clear_rank_is_a_fault(chain):
    """Three axes that miss being parallel by 3e-6 and 1e-3 rad: what they show falls by 6 decades nowhere."""
    arm = chain([[0, 0, 1], [3e-6, 0, 1], [1e-3, 0, 1]], [[0, 0, 0], [0.4, 0, 0], [0.3, 0.1, 0]])
    with pytest.raises(InputFaults, match="parallel or crossing") as caught:
        base_of(arm, GRAVITY, LINKS)
    assert caught.value.faults[0].file == "built"
