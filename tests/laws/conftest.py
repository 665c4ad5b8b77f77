"""Laws started on an arm, and a sampled loop around an exact plant without the rig."""

from __future__ import annotations

import numpy as np
import pytest

from rigbench.arm.dynamics import bias_torque, mass_matrix
from rigbench.laws.law import Reference, Setup
from rigbench.laws.model import Model
from rigbench.laws.registry import registered

GRAVITY = (0.0, 0.0, -9.81)


@pytest.fixture(scope="session")
def start_law():
    """Start a registered law: start_law(name, arm, **options); it believes ``arm``."""

    def start(name, arm, gain_pose=None, hz=1000.0, gravity=GRAVITY, **options):
        law = registered().laws[name].cls(**options)
        pose = np.zeros(arm.n) if gain_pose is None else np.asarray(gain_pose, float)
        limits = arm.drives.torque_limit, arm.drives.speed_limit
        law.start(Setup(arm.joints, Model(arm, gravity), hz, pose, *limits))
        return law

    return start


@pytest.fixture(scope="session")
def acceleration():
    """Acceleration of a plant with rotors and without friction: (M + Jr)^-1 (tau - h(q, v))."""

    def of(arm, q, v, tau, gravity=GRAVITY):
        chain = arm.chain(gravity)
        mass = mass_matrix(chain, q) + np.diag(arm.drives.reflected)
        return np.linalg.solve(mass, tau - bias_torque(chain, q, v))

    return of


@pytest.fixture(scope="session")
def sampled_loop(acceleration):
    """Close the loop: sampled_loop(law, plant, reference, seconds) -> t, e (N, n), v_ref - v (N, n), torque.

    The torque is held over each period and cut at the plant's limit; the plant is integrated by the
    classical Runge-Kutta method over the period. ``load(t)`` [N m] acts against the torque.
    """

    def close(law, plant, reference, seconds, hz=1000.0, start=None, load=None, gravity=GRAVITY):
        h, ticks = 1.0 / hz, round(seconds * hz)
        q = np.array(reference(0.0).q if start is None else start, float)
        v, rows = np.zeros(plant.n), []
        every = max(1, round(hz / (getattr(law, "model_hz", None) or hz)))
        for k in range(ticks):
            t, ref = k * h, reference(k * h)
            if k % every == 0:
                held = law.model_term(t, q, v, ref)
            tau = np.asarray(law.torque(t, q.copy(), v.copy(), ref, held))
            rows.append((t, ref.q - q, ref.v - v, tau))
            limit = plant.drives.torque_limit
            given = np.clip(tau, -limit, limit) - (0.0 if load is None else load(t))

            def rate(q, v, given=given):
                return v, acceleration(plant, q, v, given, gravity)

            k1 = rate(q, v)
            k2 = rate(q + h / 2 * k1[0], v + h / 2 * k1[1])
            k3 = rate(q + h / 2 * k2[0], v + h / 2 * k2[1])
            k4 = rate(q + h * k3[0], v + h * k3[1])
            q = q + h / 6 * (k1[0] + 2 * k2[0] + 2 * k3[0] + k4[0])
            v = v + h / 6 * (k1[1] + 2 * k2[1] + 2 * k3[1] + k4[1])
        return [np.array(column) for column in zip(*rows, strict=True)]

    return close


@pytest.fixture(scope="session")
def standing():
    """A reference that stands still: standing(q)."""
    return lambda q: lambda t: Reference(np.array(q, float), np.zeros(len(q)), np.zeros(len(q)))
