"""What each law promises of the error, state by state: cancellation, decrease of V, agreement with the model."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from rigbench.arm.dynamics import mass_matrix
from rigbench.laws.law import Reference

SEEDS = st.integers(0, 2**32)
MODEL_BASED = (
    "torque-feedforward",
    "computed-torque",
    "robust-outer-loop",
    "sliding-mode",
    "pd-plus",
    "slotine-li",
    "robust-passivity",
)
CHECKED = settings(  # the fixtures are builders without a state
    max_examples=25, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
DRIVES = {"rotor_inertia": 2e-5, "gear_ratio": [60.0, 40.0]}


@pytest.fixture
def two_link(published_two_link):
    """Builder of the published two-link arm, geared."""
    return lambda scale=1.0, **drives: published_two_link(scale, **(DRIVES | drives))


def state(seed, size=1.0):
    """A random state and reference, errors of ``size``."""
    rng = np.random.default_rng(seed)
    ref = Reference(*rng.normal(size=(3, 2)))
    return ref.q - size * rng.normal(size=2), ref.v - size * rng.normal(size=2), ref


def asked(law, q, v, ref, t=0.0):
    return law.torque(t, q, v, ref, law.model_term(t, q, v, ref))


def mass_and_slope(arm, q, v, step=1e-5):
    """M + Jr, and its rate along v by central differences."""
    chain = arm.chain((0.0, 0.0, -9.81))
    slope = (mass_matrix(chain, q + step * v) - mass_matrix(chain, q - step * v)) / (2 * step)
    return mass_matrix(chain, q) + np.diag(arm.drives.reflected), slope


def change_of_s(law, plant, q, v, ref, acceleration):
    """V' of V = s^T (M + Jr) s / 2 on the plant, -s^T Kd s, and how far rounding and differences may go."""
    off = ref.a - acceleration(plant, q, v, asked(law, q, v, ref))
    slope, rate = law._kp / law._kd, ref.v - v
    s, s_rate = rate + slope * (ref.q - q), off + slope * rate
    mass, mass_rate = mass_and_slope(plant, q, v)
    power = s @ mass @ s_rate
    return power + 0.5 * s @ mass_rate @ s, -s @ (law._kd * s), 1e-8 * (1 + abs(power))


@pytest.mark.parametrize("name", MODEL_BASED)
@CHECKED
@given(seed=SEEDS)
def test_on_the_reference_all_model_based_laws_ask_for_the_same_torque(name, seed, two_link, start_law):
    """Without mismatch and without error: (M + Jr) a_ref + h(q_ref, v_ref) + friction(v_ref)."""
    arm = two_link(coulomb=[3.0, 1.0], viscous=[2.0, 0.5])
    _, _, ref = state(seed)
    law = start_law(name, arm)
    expected = law._model.inverse_dynamics(*ref) + law._model.friction(ref.v)
    np.testing.assert_allclose(
        asked(law, ref.q, ref.v, ref), expected, atol=1e-11 * (1 + np.abs(expected).max())
    )


@pytest.mark.parametrize(
    ("name", "options"),
    [("computed-torque", {}), ("robust-outer-loop", {"rho": 7.0}), ("sliding-mode", {"rho": 7.0})],
)
@CHECKED
@given(seed=SEEDS)
def test_laws_through_the_inertia_cancel_exactly(name, options, seed, two_link, start_law, acceleration):
    """On the exact plant e'' = -Kd e' - Kp e - rho sat(z / boundary), or s' = -rho sat(s / boundary)."""
    arm, (q, v, ref) = two_link(), state(seed)
    law = start_law(name, arm, kp=(100.0, 60.0), kd=(25.0, 11.0), **options)
    e, rate = ref.q - q, ref.v - v
    off = ref.a - acceleration(arm, q, v, asked(law, q, v, ref))
    kp, kd = np.array([100.0, 60.0]), np.array([25.0, 11.0])
    if name == "sliding-mode":
        s = rate + kp / kd * e
        expected = -kp / kd * rate - 7.0 * np.clip(s * kd / 7.0, -1, 1)
    else:
        extra = 7.0 * np.clip((rate + kd / 2 * e) / 0.1, -1, 1) if options else 0.0
        expected = -kd * rate - kp * e - extra
    np.testing.assert_allclose(off, expected, atol=1e-9 * (1 + np.abs(expected).max()))


@CHECKED
@given(seed=SEEDS)
def test_the_energy_of_pd_plus_falls_by_its_damping(seed, two_link, start_law, acceleration):
    """V = e'^T (M + Jr) e' / 2 + e^T Kp e / 2: V' = -e'^T Kd e' at every state (Paden, Panja 1988)."""
    arm, (q, v, ref) = two_link(), state(seed)
    law = start_law("pd-plus", arm, kp=(100.0, 60.0), kd=(25.0, 11.0))
    e, rate = ref.q - q, ref.v - v
    mass, slope = mass_and_slope(arm, q, v)
    off = ref.a - acceleration(arm, q, v, asked(law, q, v, ref))
    change = rate @ mass @ off + 0.5 * rate @ slope @ rate + np.array([100.0, 60.0]) * e @ rate
    size = 1 + np.abs(rate @ mass @ off) + np.abs(100 * e @ rate)
    assert change == pytest.approx(-rate @ np.diag([25.0, 11.0]) @ rate, abs=1e-8 * size)


@pytest.mark.parametrize("adapts", ["links", "masses"])
@CHECKED
@given(seed=SEEDS, truth=st.floats(0.6, 1.5))
def test_the_function_of_slotine_and_li_falls_by_its_damping(
    adapts, seed, truth, two_link, start_law, acceleration
):
    """V = s^T (M + Jr) s / 2 + sum (x - x_true)^2 / (2 adaptation): V' = -s^T Kd s at every state.

    The plant's links are ``truth`` times the believed ones; x' is the law's own, from one tick.
    """
    plant, (q, v, ref) = two_link(truth), state(seed, 0.1)
    law = start_law(
        "slotine-li", two_link(), kp=(100.0, 60.0), kd=(25.0, 11.0), adapts=adapts, adaptation=1e-3
    )
    off = ref.a - acceleration(plant, q, v, asked(law, q, v, ref))
    slope = np.array([100 / 25, 60 / 11])
    rate = ref.v - v
    s, s_rate = rate + slope * (ref.q - q), off + slope * rate
    mass, mass_rate = mass_and_slope(plant, q, v)
    ten = two_link().parameters.T
    if adapts == "masses":  # one number a link: taken from its mass
        x_true, x_rate = np.full(2, truth - 1.0), law._x[0] * 1000.0
    else:
        with np.errstate(invalid="ignore"):
            x_true = np.nan_to_num((truth - 1.0) * ten / law._size[:10])
        x_rate = law._x[:10] * 1000.0
    change = s @ mass @ s_rate + 0.5 * s @ mass_rate @ s - np.sum(x_true * x_rate) / 1e-3
    size = 1 + np.abs(s @ mass @ s_rate) + np.abs(np.sum(x_true * x_rate)) / 1e-3
    assert change == pytest.approx(-s @ np.diag([25.0, 11.0]) @ s, abs=1e-8 * size)


def wrong_within(arm, sizes, rng):
    """The arm with each parameter of its links off by at most its size, (10, n); half of them by all of it.

    No body need have such parameters: what is promised follows from the torque being linear in them.
    """
    off = rng.uniform(-1.0, 1.0, sizes.shape)
    off = np.where(rng.random(sizes.shape) < 0.5, np.sign(off), off)
    return arm.replaced(parameters=arm.parameters + (sizes * off).T)


@pytest.mark.parametrize("boundary", [1e-6, 0.3, 30.0])
@CHECKED
@given(seed=SEEDS, size=st.sampled_from([0.01, 0.1, 1.0]))
def test_leaning_parameters_beat_those_that_are_off_within_their_bounds(
    boundary, seed, size, two_link, start_law, acceleration
):
    """V = s^T (M + Jr) s / 2: V' <= -s^T Kd s + 20 boundary / 4 at every state, two links of ten parameters."""
    q, v, ref = state(seed, size)
    law = start_law(
        "robust-passivity",
        two_link(),
        kp=(100.0, 60.0),
        kd=(25.0, 11.0),
        bound_percent=20.0,
        boundary=boundary,
    )
    plant = wrong_within(two_link(), law._size, np.random.default_rng(seed))
    change, damping, rounding = change_of_s(law, plant, q, v, ref, acceleration)
    assert change <= damping + 20 * boundary / 4 + rounding


@CHECKED
@given(seed=SEEDS)
def test_where_the_bound_is_zero_nothing_leans(seed, two_link, start_law, acceleration):
    """(M + Jr) a_r + C v_r + g + Kd s of the believed arm, so on just that arm V' = -s^T Kd s."""
    q, v, ref = state(seed)
    gains = {"kp": (100.0, 60.0), "kd": (25.0, 11.0)}
    law = start_law("robust-passivity", two_link(), bound_percent=0.0, **gains)
    slope = np.array([100 / 25, 60 / 11])
    v_r, a_r = ref.v + slope * (ref.q - q), ref.a + slope * (ref.v - v)
    expected = law._model.passive_torque(q, v, v_r, a_r) + np.array(gains["kd"]) * (v_r - v)
    expected += law._model.friction(ref.v)
    np.testing.assert_allclose(asked(law, q, v, ref), expected, atol=1e-11 * (1 + np.abs(expected).max()))
    change, damping, rounding = change_of_s(law, two_link(), q, v, ref, acceleration)
    assert change == pytest.approx(damping, abs=rounding)


def test_at_rest_leaning_parameters_leave_the_error_of_their_gain(
    two_link, start_law, sampled_loop, standing
):
    """(Kd + Y size^2 Y^T / boundary) L e = g - g_model where the arm comes to rest and no sat is at 1."""
    plant, believed, goal = two_link(1.3), two_link(), np.array([0.4, 0.3])
    law = start_law("robust-passivity", believed, kp=(200.0, 80.0), kd=(30.0, 9.0), boundary=100.0)
    _, e, rate, _ = sampled_loop(law, plant, standing(goal), 3.0)
    assert np.abs(rate[-1]).max() < 1e-6
    q, still, s = goal - e[-1], np.zeros(2), np.array([200 / 30, 80 / 9]) * e[-1]
    columns = law.columns(q, still, s, still)
    assert np.abs(law._size * np.einsum("jik,j->ki", columns, s)).max() < 100.0
    gain = np.diag([30.0, 9.0]) + np.einsum("jik,ki,lik->jl", columns, law._size**2, columns) / 100.0
    np.testing.assert_allclose(gain @ s, 0.3 * law._model.gravity_torque(q), rtol=1e-4)


@CHECKED
@given(seed=SEEDS)
def test_the_bounded_acceleration_beats_what_stays_below_rho(seed, two_link, start_law, acceleration):
    """V of the robust outer loop falls wherever Kd (Kp e^2 + e'^2) exceeds rho boundary / 2, joint by joint.

    The plant's links are 1.2 times the believed ones; states in which d exceeds rho promise nothing.
    """
    plant, (q, v, ref) = two_link(1.2), state(seed, 0.3)
    law = start_law(
        "robust-outer-loop", two_link(), kp=(100.0, 60.0), kd=(25.0, 11.0), rho=40.0, boundary=0.1
    )
    kp, kd = np.array([100.0, 60.0]), np.array([25.0, 11.0])
    e, rate = ref.q - q, ref.v - v
    off = ref.a - acceleration(plant, q, v, asked(law, q, v, ref))
    missed = off + kd * rate + kp * e + 40.0 * np.clip((rate + kd / 2 * e) / 0.1, -1, 1)
    change = 2 * (kp + kd**2 / 2) * e * rate + kd * (rate**2 + e * off) + 2 * rate * off
    promised = (np.abs(missed) <= 40.0) & (kd * (kp * e**2 + rate**2) > 2.0)
    assert np.all(change[promised] < 0)


def test_at_rest_a_wrong_model_leaves_the_published_error(two_link, start_law, sampled_loop, standing):
    """Kp e = g - g_model where feedback is torque, e = Kp^-1 M_model^-1 (g - g_model) where it passes the inertia.

    Standard results of control theory. Within its boundary the robust outer loop adds rho Kd / (2 boundary)
    to Kp, and with the velocity at 0 sliding mode has rho / boundary L. All at the position where the arm
    comes to rest, which the error is solved for.
    """
    plant, believed, goal = two_link(1.3), two_link(), np.array([0.4, 0.3])
    torque_gain, through_gain = (
        {"kp": (200.0, 80.0), "kd": (30.0, 9.0)},
        {"kp": (400.0, 400.0), "kd": (40.0, 40.0)},
    )
    cases = [
        ("gravity-compensated", torque_gain, None),
        ("pd-plus", torque_gain, None),
        ("computed-torque", through_gain, np.full(2, 400.0)),
        ("robust-outer-loop", through_gain | {"rho": 30.0, "boundary": 1.0}, np.full(2, 400.0 + 30 * 40 / 2)),
        ("sliding-mode", through_gain | {"rho": 30.0, "boundary": 1.0}, np.full(2, 30.0 * 10)),
    ]
    for name, options, stiffness in cases:
        law = start_law(name, believed, **options)
        _, e, rate, _ = sampled_loop(law, plant, standing(goal), 3.0)
        assert np.abs(rate[-1]).max() < 1e-6, name
        q = goal - e[-1]
        load = 0.3 * law._model.gravity_torque(q)  # g - g_model
        if stiffness is None:
            expected = load / np.array([200.0, 80.0])
        else:
            expected = np.linalg.solve(law._model.mass_matrix(q), load) / stiffness
        np.testing.assert_allclose(e[-1], expected, rtol=1e-4, atol=1e-9, err_msg=name)
        assert np.abs(e[-1]).max() > 1e-4, name
