"""For authors of laws: a check of a law against the rules, and arms and runs that need no engine.

::

    from rigbench.testing import check_law

    def test_my_law():
        check_law(MyLaw)
"""

from rigbench.testing.arms import make_arm
from rigbench.testing.check import CheckedLaw, check_law
from rigbench.testing.simulated import SimulatedArm, run_law

__all__ = ["CheckedLaw", "SimulatedArm", "check_law", "make_arm", "run_law"]
