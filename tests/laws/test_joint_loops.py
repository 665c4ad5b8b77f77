"""Laws with a state, and what comes of them: integrals, the observer, the layer, the filters, adaptation."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import signal

from rigbench.laws.law import Reference

NO_GRAVITY = (0.0, 0.0, 0.0)


@pytest.fixture
def wheel(one_joint):
    """One joint of 0.5 kg m^2 in all, to be used without gravity."""
    return lambda **drives: one_joint(inertia=0.375, mass=2.0, cog=0.25, **drives)


@pytest.mark.parametrize("name", ["independent-joint-pid", "joint-cascade", "disturbance-observer"])
def test_a_constant_load_leaves_no_error(name, published_two_link, start_law, sampled_loop, standing):
    """On the two-link arm in gravity, which PD alone leaves hanging by Kp e = g."""
    arm, goal = published_two_link(), np.array([0.4, 0.3])
    options = {"kp": (200.0, 80.0), "kd": (30.0, 9.0)}
    _, e, _, _ = sampled_loop(start_law(name, arm, **options), arm, standing(goal), 6.0)
    _, plain, _, _ = sampled_loop(start_law("independent-joint", arm, **options), arm, standing(goal), 6.0)
    hanging = start_law("gravity-compensated", arm)._model.gravity_torque(goal - plain[-1]) / [200.0, 80.0]
    np.testing.assert_allclose(plain[-1], hanging, rtol=1e-4)
    assert np.abs(e[-1]).max() < 1e-4 * np.abs(hanging).max()


def test_an_integral_follows_its_characteristic_polynomial(wheel, start_law, sampled_loop, standing):
    """A load step D on inertia J: e = D s / (J (s^3 + 2 z w s^2 + w^2 s + wi w^2)) for the integral,

    and D s / (J (s^3 + 2 z w s^2 + (w^2 + 2 z w wi) s + w^2 wi)) for the cascade. At 4 kHz the held torque
    shifts that by less than 1 % of its peak.
    """
    w, z, wi = 2 * np.pi * 3.0, 0.8, 2 * np.pi * 0.5
    polynomials = {
        "independent-joint-pid": [1, 2 * z * w, w**2, wi * w**2],
        "joint-cascade": [1, 2 * z * w, w**2 + 2 * z * w * wi, wi * w**2],
    }
    for name, polynomial in polynomials.items():
        law = start_law(
            name, wheel(), gravity=NO_GRAVITY, hz=4000.0, natural_hz=3.0, damping=0.8, integral_hz=0.5
        )
        t, e, _, _ = sampled_loop(
            law, wheel(), standing([0.0]), 2.0, hz=4000.0, load=lambda t: np.array([4.0]), gravity=NO_GRAVITY
        )
        _, expected = signal.step(signal.TransferFunction([4.0 / 0.5, 0.0], polynomial), T=t)
        assert np.abs(e[:, 0] - expected).max() < 0.01 * expected.max(), name


def test_the_pid_loses_its_stability_where_routh_says(wheel, start_law, sampled_loop, standing):
    """integral_hz of 1.05 times 2 damping natural_hz grows, 0.95 times decays."""
    ends = {}
    for share in (0.95, 1.05):
        options = {"natural_hz": 3.0, "damping": 0.5, "integral_hz": share * 3.0}
        law = start_law("independent-joint-pid", wheel(), gravity=NO_GRAVITY, hz=4000.0, **options)
        _, e, _, _ = sampled_loop(
            law, wheel(), standing([0.0]), 3.0, hz=4000.0, start=[0.01], gravity=NO_GRAVITY
        )
        early, late = np.abs(e[4000:6000]).max(), np.abs(e[-2000:]).max()
        ends[share] = late / early
    assert ends[0.95] < 0.8
    assert ends[1.05] > 1.2


@pytest.mark.parametrize("name", ["independent-joint-pid", "joint-cascade"])
def test_an_integral_does_not_wind_up(name, wheel, start_law, sampled_loop, standing):
    """A far goal with a weak motor: the law that knows the limit overshoots less than half as far as one that doesn't.

    The plant's motor is the same; the other law is told of no limit.
    """
    weak = wheel(torque_limit=[6.0])
    over = []
    for believed in (weak, wheel()):
        law = start_law(name, believed, gravity=NO_GRAVITY, natural_hz=3.0, integral_hz=1.0)
        _, e, _, torque = sampled_loop(law, weak, standing([1.0]), 3.0, start=[0.0], gravity=NO_GRAVITY)
        assert (np.abs(torque) > 6.0).any()
        over.append(-e.min())
    assert over[0] < 0.5 * over[1]
    assert over[1] > 0.05


def test_a_cascade_without_integral_is_independent_joint(published_two_link, start_law):
    """The same Kp and Kd, to rounding; and beyond the speed limit the position loop asks for no more."""
    arm, rng = published_two_link(), np.random.default_rng(4)
    pair = [
        start_law(name, arm, **more)
        for name, more in (("independent-joint", {}), ("joint-cascade", {"integral_hz": 0.0}))
    ]
    for _ in range(20):
        q, v, ref = *rng.normal(size=(2, 2)), Reference(*rng.normal(size=(3, 2)))
        one, other = (law.torque(0.0, q, v, ref, np.empty(0)) for law in pair)
        np.testing.assert_allclose(one, other, rtol=1e-12)
    slow = start_law("joint-cascade", published_two_link(speed_limit=[0.5, 0.5]), integral_hz=0.0)
    still = Reference(np.array([3.0, -3.0]), np.zeros(2), np.zeros(2))
    torque = slow.torque(0.0, np.zeros(2), np.zeros(2), still, np.empty(0))
    np.testing.assert_allclose(torque, slow._kd * [0.5, -0.5])


def test_the_observer_takes_a_disturbance_away_as_its_transfer_function_says(
    wheel, start_law, sampled_loop, standing
):
    """e = D s / ((s + g) (J s^2 + Kd s + Kp)) for a step of D, Nakao, Ohnishi, Miyachi 1987 (from memory).

    At 8 kHz the hold and the difference shift that by less than 3 % of its peak.
    """
    w, g, hz = 2 * np.pi * 3.0, 2 * np.pi * 10.0, 8000.0
    law = start_law(
        "disturbance-observer", wheel(), gravity=NO_GRAVITY, hz=hz, natural_hz=3.0, observer_hz=10.0
    )
    t, e, _, _ = sampled_loop(
        law, wheel(), standing([0.0]), 1.0, hz=hz, load=lambda t: np.array([4.0]), gravity=NO_GRAVITY
    )
    below = np.polymul([1, g], [1, 2 * w, w**2])
    _, expected = signal.step(signal.TransferFunction([4.0 / 0.5, 0.0], below), T=t)
    assert np.abs(e[:, 0] - expected).max() < 0.03 * expected.max()
    assert abs(e[-1, 0]) < 1e-3 * expected.max()


def test_the_observer_does_not_wind_up_at_the_limit(wheel, start_law, sampled_loop, standing):
    """A motor at its limit is no disturbance to a law that knows the limit; one that doesn't overshoots farther."""
    weak = wheel(torque_limit=[6.0])
    over = []
    for believed in (weak, wheel()):
        law = start_law("disturbance-observer", believed, gravity=NO_GRAVITY, natural_hz=3.0)
        _, e, _, _ = sampled_loop(law, weak, standing([1.0]), 3.0, start=[0.0], gravity=NO_GRAVITY)
        over.append(-e.min())
    assert over[0] < 0.7 * over[1]


def test_sliding_mode_reaches_its_layer_in_time_and_stays(wheel, start_law, sampled_loop, standing):
    """abs(s) <= boundary after abs(s0) / (rho - d), then abs(e) <= boundary / L, for a load of d J below rho."""
    rho, boundary, d = 20.0, 0.2, 8.0
    options = {"kp": (100.0,), "kd": (20.0,), "rho": rho, "boundary": boundary}
    law = start_law("sliding-mode", wheel(), gravity=NO_GRAVITY, hz=4000.0, **options)
    t, e, rate, _ = sampled_loop(
        law, wheel(), standing([0.0]), 3.0, hz=4000.0, start=[0.5], gravity=NO_GRAVITY,
        load=lambda t: np.array([-d * 0.5 * np.sign(np.sin(9 * t))]),
    )  # fmt: skip
    s = np.abs(rate[:, 0] + 5.0 * e[:, 0])
    reached = (s[0] - boundary) / (rho - d)
    inside = t > reached + 0.002
    assert s[0] > 10 * boundary
    assert np.all(s[inside] <= boundary * (1 + 1e-3))
    assert np.abs(e[t > 2.5, 0]).max() <= boundary / 5.0 * (1 + 1e-3)
    assert s[t < 0.8 * s[0] / (rho + d)].min() > boundary


def test_the_robust_outer_loop_ends_up_in_its_region(wheel, start_law, sampled_loop, standing):
    """From far off V ends below what Kd (Kp e^2 + e'^2) <= rho boundary / 2 allows, and below a tenth without rho.

    V <= lmax(P) / lmin(Q) rho boundary / 2, with P and Q of the law's docstring; the load jumps between
    +-rho J in the rhythm that hurts.
    """
    kp, kd, rho, boundary = 100.0, 20.0, 10.0, 0.05
    p = np.array([[kp + kd**2 / 2, kd / 2], [kd / 2, 1.0]])
    region = np.linalg.eigvalsh(p)[-1] / min(kd * kp, kd) * rho * boundary / 2
    ends = {}
    for size in (rho, 0.0):
        options = {"kp": (kp,), "kd": (kd,), "rho": size, "boundary": boundary}
        law = start_law("robust-outer-loop", wheel(), gravity=NO_GRAVITY, hz=2000.0, **options)
        t, e, rate, _ = sampled_loop(
            law, wheel(), standing([0.0]), 4.0, hz=2000.0, start=[0.4], gravity=NO_GRAVITY,
            load=lambda t: np.array([rho * 0.5 * np.sign(np.sin(10 * t))]),
        )  # fmt: skip
        x = np.column_stack([e[:, 0], rate[:, 0]])
        ends[size] = np.einsum("ki,ij,kj->k", x, p, x)[t > 2.0].max()
    assert ends[rho] <= region
    assert ends[rho] < 0.1 * ends[0.0]


def test_the_filter_on_the_reference_is_its_closed_form(published_two_link, start_law):
    """A step of a_ref from rest: d = a / w^2 (1 - (1 + w t) exp(-w t)), d'' = a (1 - w t) exp(-w t)."""
    arm, w, a = published_two_link(), 2 * np.pi * 15.0, np.array([2.0, -3.0])
    law = start_law("computed-torque", arm, filter_hz=15.0)
    plain = start_law("computed-torque", arm)
    for k in range(60):
        t = k / 1000.0
        ref = Reference(a * t**2 / 2, a * t, a)
        fade = np.exp(-w * t)
        filtered = Reference(
            ref.q - a / w**2 * (1 - (1 + w * t) * fade), ref.v - a * t * fade, a - a * (1 - w * t) * fade
        )
        q, v = ref.q - 0.01, ref.v + 0.02
        held = plain.model_term(t, q, v, ref)
        expected = plain.torque(t, q, v, filtered, held)
        np.testing.assert_allclose(law.torque(t, q, v, ref, held), expected, atol=1e-9)


def test_the_look_ahead_is_the_model_term_of_later(published_two_link, start_law):
    """On a cubic reference, of constant jerk, the term half a hold ahead is that of the time half a hold later.

    v_ref ahead lacks j T^2 / 2 and q_ref j T^3 / 6: with j of some 10 rad/s^3 and T = 5 ms 1e-4 rad/s.
    """
    arm = published_two_link()
    jerk = np.array([10.0, -6.0])

    def ref(t):
        return Reference(jerk * t**3 / 6 + 0.3, jerk * t**2 / 2, jerk * t)

    ahead = start_law("torque-feedforward", arm, model_hz=100.0, look_ahead=0.5)
    plain = start_law("torque-feedforward", arm, model_hz=100.0)
    q = v = np.zeros(2)
    for k in range(1, 20):
        t = k / 100.0
        term, later = ahead.model_term(t, q, v, ref(t)), plain.model_term(t, q, v, ref(t + 0.005))
        now = plain.model_term(t, q, v, ref(t))
        if k > 1:  # the first tick knows no jerk yet
            assert np.abs(term - later).max() < 0.02 * np.abs(now - later).max()


def test_diagonal_terms_leave_out_the_coupling(published_two_link, start_law):
    """(diag M + Jr) a_ref + g, by the closed form of Kelly, Santibanez, Loria 2005, ch. 5."""
    arm = published_two_link(rotor_inertia=1e-4, gear_ratio=30.0)
    law = start_law("torque-feedforward", arm, terms="diagonal")
    q, a = np.array([0.5, -0.8]), np.array([2.0, -3.0])
    # M11 and M22 of published values, DERIVED there by hand for this position; g likewise
    expected = np.array([0.352267859, 0.012672838]) * a + 0.09 * a + [5.381323, -0.135817]
    found = law.model_term(0.0, q, q, Reference(q, np.array([1.2, -0.7]), a))
    np.testing.assert_allclose(found, expected, atol=1e-6)


@pytest.mark.parametrize("adapts", ["payload", "masses", "links"])
def test_adaptation_stops_at_its_bounds_and_waits_at_the_limit(adapts, published_two_link, start_law):
    """However long the error pushes, no number leaves -1 to 1; beyond the torque limit none moves."""
    still = Reference(np.array([0.8, 0.4]), np.zeros(2), np.zeros(2))
    law = start_law("slotine-li", published_two_link(), adapts=adapts, adaptation=1e3)
    q = np.array([0.5, 0.3])
    for _ in range(50):
        law.torque(0.0, q, np.zeros(2), still, np.empty(0))
    assert np.abs(law._x).max() == 1.0
    weak = start_law("slotine-li", published_two_link(torque_limit=[0.1, 0.1]), adapts=adapts, adaptation=1e3)
    weak.torque(0.0, q, np.zeros(2), still, np.empty(0))
    assert not weak._x.any()


def test_an_adapted_payload_finds_its_mass(published_two_link, start_law, sampled_loop):
    """A point mass of 0.5 kg at the tool that nobody announced is found to within 2 % while the arm swings."""
    from rigbench.arm.physical import add_point_mass

    arm = published_two_link()
    loaded = arm.parameters.copy()
    loaded[1] = add_point_mass(loaded[1], 0.5, arm.tool_position)

    def swing(t):
        phase = np.array([2.0, 3.0]) * t
        return Reference(
            0.6 * (1 - np.cos(phase)),
            0.6 * np.array([2.0, 3.0]) * np.sin(phase),
            0.6 * np.array([4.0, 9.0]) * np.cos(phase),
        )

    law = start_law("slotine-li", arm, adapts="payload", kp=(200.0, 150.0), kd=(3.0, 3.0))
    _, e, _, _ = sampled_loop(law, arm.replaced(parameters=loaded), swing, 4.0)
    assert law._x[0, 1] * 2.0 == pytest.approx(0.5, rel=0.02)
    assert np.abs(e[-1000:]).max() < 0.05 * np.abs(e[:1000]).max()
