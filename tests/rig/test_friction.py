"""The coupled stick-slip problem that the drive solves at every step."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from rigbench.rig.friction import _gauss_seidel, solve_friction


def problem(seed: int, n: int, spread: float):
    """A random, well-conditioned to badly conditioned instance."""
    rng = np.random.default_rng(seed)
    root = rng.normal(size=(n, n)) * 10.0 ** rng.uniform(-spread, spread, size=n)
    mass = root @ root.T + 1e-3 * np.eye(n)
    size = rng.uniform(0, 10, n) * (rng.random(n) > 0.2)
    return mass, rng.normal(size=n) * 0.02, size, rng.choice([-1.0, 0.0, 1.0], n)


def check(mass, momentum, size, dt, v, f):
    """The conditions of the problem: balance, box, and full friction against every motion."""
    scale = np.abs(mass) @ np.abs(v) + dt * np.abs(f) + np.abs(momentum)
    assert np.all(np.abs(mass @ v + dt * f - momentum) <= 1e-9 * scale.max() + 1e-15)
    assert np.all(np.abs(f) <= size * (1 + 1e-9))
    sliding = np.abs(v) > 1e-12
    np.testing.assert_allclose(f[sliding], (size * np.sign(v))[sliding], rtol=1e-9)


@settings(max_examples=400, deadline=None)
@given(seed=st.integers(0, 2**32), n=st.integers(1, 8), spread=st.floats(0, 0.7))
def test_solution_meets_the_conditions(seed, n, spread):
    """Whatever the first guess, the result satisfies the conditions, of which there is one solution."""
    mass, momentum, size, slide = problem(seed, n, spread)
    v, f = np.empty(n), np.empty(n)
    solve_friction(mass, momentum, size, 1e-3, slide, v, f)
    check(mass, momentum, size, 1e-3, v, f)


@settings(max_examples=100, deadline=None)
@given(seed=st.integers(0, 2**32), n=st.integers(1, 7))
def test_fallback_finds_the_same(seed, n):
    """Projected Gauss-Seidel, the fall-back, arrives at the active set's solution.

    It converges as fast as the matrix is diagonally strong, so the instance is made so, as rotors
    behind gears make it.
    """
    mass, momentum, size, slide = problem(seed, n, 0.1)
    mass = mass + n * np.eye(n)
    v, f, w, g = np.empty(n), np.empty(n), np.zeros(n), np.zeros(n)
    solve_friction(mass, momentum, size, 1e-3, slide.copy(), v, f)
    _gauss_seidel(mass, momentum, size, 1e-3, slide.copy(), w, g)
    np.testing.assert_allclose(w, v, atol=1e-8)


def test_coupling_matters():
    """A joint pushed below its own breakaway still moves when the other's motion drags it along.

    Two joints, M = [[2, 1], [1, 1]], sizes (0, 0.5), momentum (1, 0.1) with dt = 1: stuck, joint 2
    would need f2 = 0.1 - v1 = 0.1 - 0.5 = -0.4, within its box; with size 0.3 it slides backwards:
    2 v1 + v2 = 1, v1 + v2 - 0.3 = 0.1 gives v = (0.6, -0.2).
    """
    mass, momentum = np.array([[2.0, 1.0], [1.0, 1.0]]), np.array([1.0, 0.1])
    v, f = np.empty(2), np.empty(2)
    solve_friction(mass, momentum, np.array([0.0, 0.5]), 1.0, np.zeros(2), v, f)
    np.testing.assert_allclose([*v, f[1]], [0.5, 0.0, -0.4], atol=1e-12)
    solve_friction(mass, momentum, np.array([0.0, 0.3]), 1.0, np.zeros(2), v, f)
    np.testing.assert_allclose([*v, f[1]], [0.6, -0.2, -0.3], atol=1e-12)
