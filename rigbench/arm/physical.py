"""Link parameters as a physical body: pseudo-inertia, consistency, and other ways to say the same.

Symbols: m mass [kg]; c centre of gravity [m] in the link frame; I inertia tensor about the frame's
origin, I_c about the centre of gravity [kg m^2]; Sigma = integral of r r^T dm, the second moments of
mass [kg m^2], with Sigma = tr(I)/2 1 - I and I = tr(Sigma) 1 - Sigma. About the centre of gravity
Sigma_c = Sigma - m c c^T. Unlike those of an inertia tensor, the principal values of Sigma_c are free
of each other: any three that are positive belong to some body, which is the triangle inequality of
the principal inertias put another way.
"""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats

__all__ = [
    "add_point_mass",
    "central_moments",
    "from_central_moments",
    "from_inertia",
    "from_pseudo_inertia",
    "impossible",
    "inertia",
    "possible",
    "principal_moments",
    "pseudo_inertia",
    "second_moments",
]

TENSOR = ((4, 5, 7), (5, 6, 8), (7, 8, 9))
"""Where the entries of the inertia tensor stand among a link's ten parameters."""

ROUNDING = 32 * np.finfo(float).eps
"""Second moments about the centre of gravity count as positive above this share of those about the
frame's origin: below it they are rounding left over from the subtraction of m c c^T."""

ALIKE = 1e-9
"""Principal moments nearer to each other than this share of the largest count as equal."""


def second_moments(tensor: Floats) -> Floats:
    """Turn an inertia tensor into second moments of mass: Sigma = tr(I)/2 1 - I, shape (..., 3, 3)."""
    half = 0.5 * np.trace(tensor, axis1=-2, axis2=-1)
    result: Floats = half[..., None, None] * np.eye(3) - tensor
    return result


def _about_origin(parameters: Floats) -> tuple[Floats, Floats, Floats]:
    """Return m (...), m c (..., 3) and Sigma (..., 3, 3), about the frame's origin."""
    return parameters[..., 0], parameters[..., 1:4], second_moments(parameters[..., TENSOR])


def _pack(mass: Floats, first: Floats, sigma: Floats) -> Floats:
    """Pack m, m c and Sigma about the frame's origin into the ten parameters (..., 10)."""
    tensor = np.trace(sigma, axis1=-2, axis2=-1)[..., None, None] * np.eye(3) - sigma
    parameters = np.empty((*np.shape(mass), 10))
    parameters[..., 0] = mass
    parameters[..., 1:4] = first
    parameters[..., 4:] = tensor[..., (0, 0, 1, 0, 1, 2), (0, 1, 1, 2, 2, 2)]
    return parameters


def pseudo_inertia(parameters: Floats) -> Floats:
    """Return J = [[Sigma, m c], [(m c)^T, m]] of parameters (..., 10); shape (..., 4, 4).

    Source: Wensing, Kim, Slotine 2018, "Linear matrix inequalities for physically consistent
    inertial parameter identification".
    """
    mass, first, sigma = _about_origin(parameters)
    pseudo = np.empty((*np.shape(mass), 4, 4))
    pseudo[..., :3, :3] = sigma
    pseudo[..., :3, 3] = pseudo[..., 3, :3] = first
    pseudo[..., 3, 3] = mass
    return pseudo


def from_pseudo_inertia(pseudo: Floats) -> Floats:
    """Return the ten parameters (..., 10) of a pseudo-inertia (..., 4, 4)."""
    return _pack(pseudo[..., 3, 3], pseudo[..., :3, 3], pseudo[..., :3, :3])


def central_moments(parameters: Floats) -> tuple[Floats, Floats, Floats]:
    """Return m (...) [kg], c (..., 3) [m] and Sigma_c (..., 3, 3) [kg m^2] of parameters (..., 10).

    A link without mass has its centre of gravity at the frame's origin.
    """
    mass, first, sigma = _about_origin(parameters)
    cog = np.divide(first, mass[..., None], out=np.zeros_like(first), where=mass[..., None] != 0)
    return mass, cog, sigma - first[..., :, None] * cog[..., None, :]


def from_central_moments(mass: Floats, cog: Floats, sigma: Floats) -> Floats:
    """Return the ten parameters (..., 10) of m (...), c (..., 3) and Sigma_c (..., 3, 3)."""
    first = np.asarray(mass)[..., None] * cog
    return _pack(mass, first, sigma + first[..., :, None] * cog[..., None, :])


def inertia(parameters: Floats) -> tuple[Floats, Floats, Floats]:
    """Return m (...) [kg], c (..., 3) [m] and I_c (..., 3, 3) [kg m^2] of parameters (..., 10).

    I_c is the inertia tensor about the centre of gravity, in axes parallel to the link frame's, as a
    URDF's <inertial> with rpy = 0 holds it.
    """
    mass, cog, sigma = central_moments(parameters)
    return mass, cog, np.trace(sigma, axis1=-2, axis2=-1)[..., None, None] * np.eye(3) - sigma


def from_inertia(mass: Floats | float, cog: Floats, tensor: Floats) -> Floats:
    """Return the ten parameters (..., 10) of m (...), c (..., 3) and I_c (..., 3, 3)."""
    return from_central_moments(
        np.asarray(mass, float), np.asarray(cog, float), second_moments(np.asarray(tensor, float))
    )


def add_point_mass(parameters: Floats, mass: float, at: Floats) -> Floats:
    """Return the parameters (10,) of a link with a point mass [kg] added at ``at`` (3,) [m].

    m + mp, m c + mp r, I + mp (r.r 1 - r r^T), with r in the link frame.
    """
    added: Floats = parameters + _pack(np.array(mass), mass * at, mass * np.outer(at, at))
    return added


def principal_moments(sigma: Floats) -> tuple[Floats, Floats]:
    """Return the principal values (n, 3), ascending, and directions (n, 3, 3), as columns, of Sigma_c.

    Directions of equal values are any basis of their plane (or of space) to an eigenvalue solver. So
    that the draw does not hang on its rounding, they are taken nearest to the link frame's axes: the
    frame's own for three equal values; for two, the projection of x onto their plane (of y, where x is
    nearer than 45 degrees to the plane's normal) and what completes the triad. The sign of a direction
    means nothing.
    """
    moments, axes = np.linalg.eigh(sigma)
    alike = np.diff(moments, axis=1) <= ALIKE * moments[:, 2:]
    for link in np.flatnonzero(alike.any(axis=1)):
        if alike[link].all():
            axes[link] = np.eye(3)
            continue
        first, normal = (0, 2) if alike[link, 0] else (1, 0)
        across = axes[link, :, normal]
        start = 0 if across[0] ** 2 <= 0.5 else 1
        inside = np.eye(3)[start] - across[start] * across
        inside /= np.linalg.norm(inside)
        axes[link, :, first] = inside
        axes[link, :, first + 1] = np.cross(across, inside)
    return moments, axes


def possible(parameters: Floats) -> bool:
    """Tell whether every link of parameters (..., 10) is a body that can exist.

    True if m > 0 and the pseudo-inertia is positive definite, which for m > 0 is Sigma_c positive
    definite (its Schur complement). A body without extent in some direction (a lamina, a thin rod, a
    point mass) is on the border and does not count as possible; nor does what is not finite.
    """
    if not np.isfinite(parameters).all() or not (parameters[..., 0] > 0).all():
        return False
    sigma = second_moments(parameters[..., TENSOR])
    least = np.linalg.eigvalsh(central_moments(parameters)[2])[..., 0]
    return bool((least > ROUNDING * np.trace(sigma, axis1=-2, axis2=-1)).all())


def impossible(parameters: Floats) -> str | None:
    """Say why no body has the parameters (10,), or return None if one does (see :func:`possible`)."""
    if possible(parameters):
        return None
    if not np.isfinite(parameters).all():
        return "its parameters are not finite"
    if parameters[0] <= 0:
        return f"its mass is {parameters[0]:.6g} kg, which is not above 0"
    moments = np.linalg.eigvalsh(inertia(parameters)[2])
    said = ", ".join(f"{moment:.6g}" for moment in moments)
    return (
        f"its principal inertias about the centre of gravity are {said} kg m^2, and in a body that "
        "can exist each is less than the sum of the other two"
    )
