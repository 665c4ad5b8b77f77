"""The law keeps the rules that the rig relies on."""

from bakery_laws.steady_gravity import SteadyGravity

from rigbench.testing import check_law


def test_steady_gravity():
    """With its defaults, and with a slow model term."""
    print(check_law(SteadyGravity))
    check_law(SteadyGravity, natural_hz=3.0, model_hz=100.0)
