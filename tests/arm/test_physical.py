"""Link parameters as physical bodies."""

from __future__ import annotations

import numpy as np
import pinocchio
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigbench.arm.physical import (
    add_point_mass,
    central_moments,
    from_central_moments,
    from_inertia,
    from_pseudo_inertia,
    impossible,
    inertia,
    possible,
    principal_moments,
    pseudo_inertia,
    second_moments,
)

# Log-Cholesky vector (Rucker, Wensing 2022) theta = (alpha, d1, d2, d3, s12, s23, s13, t1, t2, t3) and the
# parameters that belong to it, computed by hand from J = U U^T, to the nine digits given.
THETA = (0.3, -0.2, 0.1, 0.05, 0.2, -0.1, 0.15, 0.05, -0.02, 0.1)
OF_THETA = np.array(
    [
        *(1.8221188, 0.09110594, -0.03644238, 0.18221188),
        *(4.27646486, -0.37359664, 3.37181438, -0.29644172, 0.19519832, 3.58433144),
    ]
)

finite = st.floats(-2, 2)
positive = st.floats(0.01, 3)


def random_parameters(seed: int, count: int = 1) -> np.ndarray:
    """Parameters of ``count`` clouds of mass, summed directly from their integrals: m, m r, r.r 1 - r r^T."""
    rng = np.random.default_rng(seed)
    made = []
    for _ in range(count):
        mass, at = rng.uniform(0.1, 1, 8), rng.normal(0, 0.2, (8, 3)) + rng.normal(0, 0.3, 3)
        tensor = sum(m * (r @ r * np.eye(3) - np.outer(r, r)) for m, r in zip(mass, at, strict=True))
        first = mass @ at
        upper = [tensor[0, 0], tensor[0, 1], tensor[1, 1], tensor[0, 2], tensor[1, 2], tensor[2, 2]]
        made.append([mass.sum(), *first, *upper])
    return np.array(made)


def log_cholesky(theta: tuple[float, ...]) -> np.ndarray:
    """J = U U^T, written out as the paper has it."""
    alpha, d1, d2, d3, s12, s23, s13, t1, t2, t3 = theta
    upper = np.exp(alpha) * np.array(
        [[np.exp(d1), s12, s13, t1], [0, np.exp(d2), s23, t2], [0, 0, np.exp(d3), t3], [0, 0, 0, 1]]
    )
    return upper @ upper.T


def test_pseudo_inertia_of_the_log_cholesky_vector():
    """The log-Cholesky vector's J and its ten parameters turn into each other."""
    np.testing.assert_allclose(from_pseudo_inertia(log_cholesky(THETA)), OF_THETA, atol=5e-9)
    np.testing.assert_allclose(pseudo_inertia(OF_THETA), log_cholesky(THETA), atol=1e-8)
    assert possible(OF_THETA)


@pytest.mark.parametrize("seed", range(5))
def test_agrees_with_an_independent_library(seed):
    """Pseudo-inertia, mass, centre of gravity and central inertia are those of Pinocchio."""
    parameters = random_parameters(seed)[0]
    body = pinocchio.Inertia.FromDynamicParameters(parameters)  # the same ten, in the same order
    np.testing.assert_allclose(pseudo_inertia(parameters), body.toPseudoInertia().toMatrix(), atol=1e-13)
    mass, cog, tensor = inertia(parameters)
    np.testing.assert_allclose(mass, body.mass)
    np.testing.assert_allclose(cog, body.lever, atol=1e-14)
    np.testing.assert_allclose(tensor, body.inertia, atol=1e-13)
    np.testing.assert_allclose(from_inertia(body.mass, body.lever, body.inertia), parameters, atol=1e-13)


def test_conversions_return_where_they_came_from():
    """Each way to say the ten parameters is undone by its inverse, for many links at once."""
    parameters = random_parameters(7, 6)
    for there, back in (
        (lambda p: (pseudo_inertia(p),), from_pseudo_inertia),
        (central_moments, from_central_moments),
        (inertia, from_inertia),
    ):
        np.testing.assert_allclose(back(*there(parameters)), parameters, atol=1e-13)


def test_second_moments_swap_back():
    """tr(I)/2 1 - I, and tr(Sigma) 1 - Sigma: for diag(3, 4, 5) the second moments are (3, 2, 1)."""
    np.testing.assert_array_equal(second_moments(np.diag([3.0, 4.0, 5.0])), np.diag([3.0, 2.0, 1.0]))


def test_a_point_mass_adds_its_own_integrals():
    """A point mass added to a link is one more particle of its cloud, and a zero mass is none."""
    rng = np.random.default_rng(3)
    parameters, at = random_parameters(3)[0], rng.normal(size=3)
    body = pinocchio.Inertia.FromDynamicParameters(parameters) + pinocchio.Inertia(1.7, at, np.zeros((3, 3)))
    np.testing.assert_allclose(add_point_mass(parameters, 1.7, at), body.toDynamicParameters(), atol=1e-13)
    np.testing.assert_array_equal(add_point_mass(parameters, 0.0, at), parameters)


def test_a_massless_link_has_its_cog_at_the_origin():
    """A link without mass converts without a division by zero, and is not possible."""
    mass, cog, _ = inertia(np.zeros(10))
    assert mass == 0
    assert (cog == 0).all()
    assert impossible(np.zeros(10)) == "its mass is 0 kg, which is not above 0"


def turned(moments: list[float], seed: int) -> np.ndarray:
    """Parameters of 2 kg somewhere, with the given principal inertias in some directions."""
    rng = np.random.default_rng(seed)
    axes = np.linalg.qr(rng.normal(size=(3, 3)))[0]
    return from_inertia(2.0, rng.normal(size=3), axes @ np.diag(moments) @ axes.T)


@pytest.mark.parametrize("seed", range(4))
def test_the_triangle_inequality_decides(seed):
    """Principal inertias 1, 1, 3 are positive definite yet impossible; 1, 1, 1.9 are possible; a lamina
    (1, 1, 2) is on the border and is rejected, whatever its directions and wherever it is."""
    assert not possible(turned([1, 1, 3], seed))
    assert not possible(turned([1, 1, 2], seed))
    assert possible(turned([1, 1, 1.9], seed))
    said = impossible(turned([1, 1, 3], seed))
    assert said is not None
    assert "1, 1, 3 kg m^2" in said


@given(st.tuples(*[finite] * 3), st.tuples(positive, positive, positive), st.floats(-1, 5))
def test_possible_is_positive_definiteness_of_the_pseudo_inertia(cog, moments, mass):
    """For bodies clear of the border, possible() says what the eigenvalues of J say."""
    parameters = from_inertia(mass, np.array(cog), np.diag(moments))
    least = np.linalg.eigvalsh(pseudo_inertia(parameters))[0]
    margin = 2 * max(moments) - sum(moments)
    if min(abs(margin), abs(mass), abs(least)) > 1e-9:
        assert possible(parameters) == (least > 0)
        assert (impossible(parameters) is None) == (least > 0)


@pytest.mark.parametrize("value", [np.nan, np.inf])
@pytest.mark.parametrize("at", [0, 2, 6])
def test_what_is_not_finite_is_impossible(value, at):
    """A parameter that is nan or inf never passes for a body."""
    parameters = random_parameters(1)[0]
    parameters[at] = value
    assert not possible(parameters)
    assert impossible(parameters) == "its parameters are not finite"


def test_one_bad_link_spoils_the_arm():
    """possible() of many links is that of all of them."""
    parameters = random_parameters(2, 6)
    assert possible(parameters)
    parameters[3, 0] = -1
    assert not possible(parameters)


@pytest.mark.parametrize("moments", [(1, 2, 3), (1, 1, 3), (1, 3, 3), (2, 2, 2)])
@pytest.mark.parametrize("seed", range(6))
def test_principal_directions_rebuild_the_tensor(moments, seed):
    """Values ascend, directions are orthonormal, and together they are the tensor: equal values or not."""
    axes = np.linalg.qr(np.random.default_rng(seed).normal(size=(3, 3)))[0]
    sigma = (axes @ np.diag(np.array(moments, float)) @ axes.T)[None]
    values, found = principal_moments(sigma)
    np.testing.assert_allclose(values[0], moments, rtol=1e-13)
    np.testing.assert_allclose(found[0].T @ found[0], np.eye(3), atol=1e-13)
    np.testing.assert_allclose(found[0] @ np.diag(values[0]) @ found[0].T, sigma[0], atol=1e-13)


@pytest.mark.parametrize(
    "moments", [(1, 1, 3), (1, 3, 1), (3, 1, 1), (1, 3, 3), (3, 3, 1), (3, 1, 3), (2, 2, 2)]
)
def test_principal_directions_of_a_round_link_are_the_frames_own(moments):
    """A link that is round about an axis of its frame has the frame's axes for principal directions."""
    values, found = principal_moments(np.diag(np.array(moments, float))[None])
    np.testing.assert_array_equal(values[0], np.sort(moments))
    np.testing.assert_allclose(np.sort(np.abs(found[0]), axis=0), [[0] * 3, [0] * 3, [1] * 3], atol=1e-15)


@pytest.mark.parametrize("moments", [(1, 1, 3), (1, 3, 3), (2, 2, 2)])
@pytest.mark.parametrize("seed", range(6))
def test_principal_directions_of_equal_moments_ignore_rounding(moments, seed):
    """A round link's directions don't hang on the last digits of its numbers: noise of 1e-15 moves the
    unequal-scaled tensor by as little, where a plain eigenvalue solver would turn it at will."""
    rng = np.random.default_rng(seed)
    axes = np.linalg.qr(rng.normal(size=(3, 3)))[0]
    sigma = axes @ np.diag(np.array(moments, float)) @ axes.T
    noise = 1e-15 * rng.normal(size=(3, 3))
    scale = np.diag([0.5, 1.0, 2.0])
    rebuilt = []
    for tensor in (sigma, sigma + noise + noise.T):
        values, found = principal_moments(tensor[None])
        rebuilt.append(found[0] @ scale @ np.diag(values[0]) @ found[0].T)
    np.testing.assert_allclose(rebuilt[0], rebuilt[1], atol=1e-12)
