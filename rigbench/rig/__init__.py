"""The rig: one run of a law against a simulated machine."""

from rigbench.rig.log import RESIDUAL_LIMIT, Log
from rigbench.rig.run import NUMERICS, Rates, Run
from rigbench.rig.simulate import simulate
from rigbench.rig.warm import warm_up

__all__ = ["NUMERICS", "RESIDUAL_LIMIT", "Log", "Rates", "Run", "simulate", "warm_up"]
