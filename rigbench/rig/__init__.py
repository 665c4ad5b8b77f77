"""The rig: one run of a law against a simulated machine."""

from rigbench.rig.attach import Rig
from rigbench.rig.log import RESIDUAL_LIMIT, Log
from rigbench.rig.run import NUMERICS, Rates, Run
from rigbench.rig.scene import SceneChoice
from rigbench.rig.simulate import simulate
from rigbench.rig.warm import warm_up
from rigbench.rig.world import tool_pose

__all__ = [
    "NUMERICS",
    "RESIDUAL_LIMIT",
    "Log",
    "Rates",
    "Rig",
    "Run",
    "SceneChoice",
    "simulate",
    "tool_pose",
    "warm_up",
]
