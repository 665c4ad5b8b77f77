"""The time law of a leg."""

from __future__ import annotations

import numpy as np
import pytest

from rigbench.motion.quintic import elapsed, quintic, when


def test_it_runs_from_rest_to_rest():
    """s goes from 0 to 1 with both derivatives zero at the ends, and they are the polynomial's own."""
    s, ds, dds = quintic(np.array([0.0, 1.0]))
    assert (s == [0, 1]).all()
    assert (ds == 0).all()
    assert (dds == 0).all()
    law = np.polynomial.Polynomial([0, 0, 0, 10, -15, 6])
    x = np.linspace(0, 1, 101)
    for ours, theirs in zip(quintic(x), (law(x), law.deriv()(x), law.deriv(2)(x)), strict=True):
        np.testing.assert_allclose(ours, theirs, atol=1e-14)


@pytest.mark.parametrize("x", [0.0, 0.01, 0.3, 0.5, 0.77, 0.99, 1.0])
def test_when_is_its_inverse(x):
    """when(s(x)) is x, up to what s forgets near its flat ends: a cube root of the rounding."""
    assert when(float(quintic(np.array(x))[0])) == pytest.approx(x, abs=1e-5)
    assert float(quintic(np.array(when(x)))[0]) == pytest.approx(x, abs=1e-14)
    assert (when(0.0), when(1.0)) == (0, 1)


def test_elapsed_is_a_share_of_the_leg():
    """Times before, in, just short of and after a leg of 2 s."""
    t = np.array([-1.0, 0.0, 0.5, 2 - 1e-9, 2.0, 3.0])
    assert elapsed(t, 2.0).tolist() == [0, 0, 0.25, 1, 1, 1]
