"""The physics step with its law in one kernel: the same numbers, and who gets one."""

from __future__ import annotations

import dataclasses
from pathlib import Path

import numba
import numpy as np
import pytest

from rigbench.arm.files import ArmFiles
from rigbench.laws import Law
from rigbench.laws.law import TAU, Compiled
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose, registered
from rigbench.motion.via import ViaMotion
from rigbench.rig import Rates, Run, law_call, simulate
from rigbench.rig.fused import fused
from rigbench.rig.sampled import Sensing, Timing


@numba.njit
def nothing(io, held, chain, own):
    """A kernel of a user's module."""
    io[TAU, 0] = own[0, 0]


@pytest.fixture(scope="module")
def files():
    return ArmFiles.read(Path(__file__).resolve().parents[2] / "robots_demo/planar2/arm.yaml")


def run_of(name, files, late):
    """A run of a law whose model term is slower than the law, with substeps, noise and late ticks."""
    cls = registered().laws[name].cls
    chosen = {"model_hz": 250} if "model_hz" in {f.name for f in dataclasses.fields(cls)} else {}
    motion = ViaMotion(points=((0.0, 0.3), (0.5, -0.2)), leg_s=0.3, rest_s=0.05)
    return Run(
        files, choose(name, options_model(cls)(**chosen)), motion, Rates(500, 1000), motion.points[0], 0.5,
        sensing=Sensing(noise_deg=0.01), timing=Timing(jitter_percent=60, dropped_percent=5, model_late=late),
        draw=3,
    )  # fmt: skip


@pytest.mark.parametrize("late", [False, True])
@pytest.mark.parametrize("name", sorted(registered().laws))
def test_one_kernel_gives_the_bits_of_its_parts(name, late, files, monkeypatch):
    """A run with the fused step and one that calls the parts in turn end in the same log, bit for bit."""
    run = run_of(name, files, late)
    whole = simulate(run)
    monkeypatch.setattr(law_call, "fused", lambda compiled: None)
    parts = simulate(run)
    assert len(whole.t) == 176  # a run that broke off would compare less
    for field in ("q", "v", "torque", "limited"):
        np.testing.assert_array_equal(getattr(whole, field), getattr(parts, field))
    assert (whole.energy_j, whole.residual) == (parts.energy_j, parts.residual)


def test_a_user_s_module_gets_one_and_a_kernel_made_at_start_does_not():
    """Kernels that each run makes anew are called as they are; those of a module are fused, once."""

    @numba.njit
    def made(io, held, chain, own):
        io[TAU, 0] = 0.0

    own = np.zeros((1, 1))
    assert fused(Compiled(made, own)) is None
    assert fused(Compiled(nothing, own)) is fused(Compiled(nothing, own)) is not None


def test_what_a_kernel_made_at_start_commands_arrives(files):
    """A law whose kernel is born in compiled() runs all the same."""

    class Constant(Law):
        def start(self, setup):
            self.n = setup.n

        def compiled(self):
            @numba.njit
            def torque(io, held, chain, own):
                io[TAU] = 0.25

            return Compiled(torque, np.zeros((1, self.n)))

    run = dataclasses.replace(run_of("independent-joint", files, False), sensing=Sensing(), timing=Timing())
    started = law_call.start_law("constant", Constant(), _setup(run))
    io = np.zeros((law_call.SEES, 2))
    started.call(io, 10, late=False).at(0)
    np.testing.assert_array_equal(io[TAU], 0.25)


def _setup(run):
    from rigbench.laws.law import Setup
    from rigbench.laws.model import Model

    arm = run.arm.arm()
    limits = arm.drives.torque_limit, arm.drives.speed_limit
    return Setup(arm.joints, Model(arm, run.gravity), 500.0, np.zeros(2), *limits)
