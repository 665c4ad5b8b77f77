"""Whole runs on plants that depart in torque path, encoders, timing and tilt: closed forms, and the same bits."""

from __future__ import annotations

import hashlib
import json
import pickle
import subprocess
import sys
from dataclasses import replace

import numpy as np
import pytest

from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Case, Mismatch, delay_of, tilt_of
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose, registered
from rigbench.motion.via import ViaMotion
from rigbench.rig import Rates, Run, simulate
from rigbench.rig.sampled import Sensing, Timing

MASS, KP, G = 4.0, 4000.0, 9.81
COG = 0.25
URDF = """
<robot name="one">
  <link name="base"/>
  <link name="link"><inertial><origin xyz="0 0 -0.25"/><mass value="4"/>
    <inertia ixx="0.03" iyy="0.03" izz="0.003" ixy="0" ixz="0" iyz="0"/></inertial></link>
  <link name="tip"/>
  <joint name="joint" type="{kind}">
    <parent link="base"/><child link="link"/><axis xyz="{axis}"/>
    <limit lower="-3" upper="3" effort="200" velocity="20"/>
  </joint>
  <joint name="end" type="fixed"><parent link="link"/><child link="tip"/><origin xyz="0 0 -0.5"/></joint>
</robot>
"""
ARM = "urdf: one.urdf\ntool: tip\ndrives: {joint: {gear_ratio: 1}}\n"
LIFT = ArmFiles("lift.yaml", ARM, "lift.urdf", URDF.format(kind="prismatic", axis="0 0 1"))
# about -y, so that a positive angle lifts the bar towards +x
BAR = ArmFiles("bar.yaml", ARM, "bar.urdf", URDF.format(kind="revolute", axis="0 -1 0"))


def held(
    arm: ArmFiles = LIFT,
    law: str = "independent-joint",
    at: float = 0.3,
    gains: tuple[float, float] = (KP, 250.0),
    **changes,
) -> Run:
    """A joint that is asked to stay where it is for 1.2 s under PD, by default with KP and nearly critical."""
    options = options_model(registered().laws[law].cls)(kp=[gains[0]], kd=[gains[1]])
    return Run(
        arm=arm,
        law=choose(law, options),
        motion=ViaMotion(((at,), (at,)), leg_s=1.0, rest_s=0.2),
        rates=Rates(1000, 2000),
        gain_pose=(at,),
        settle_band_mm=0.5,
        **changes,
    )


def error(run: Run) -> float:
    """By how much the joint stands below its reference at the end."""
    log = simulate(run)
    assert log.outcome == "finished"
    return float(log.q_ref[-1, 0] - log.q[-1, 0])


def digest(run: Run) -> str:
    """A digest of every bit of what happened."""
    log = simulate(run)
    arrays = (log.q, log.v, log.torque, log.limited)
    return hashlib.blake2b(b"".join(array.tobytes() for array in arrays)).hexdigest()


# --- closed forms at rest: the loop settles with a rate of at least 30 /s, so 1.2 s leave less than 1e-9


def test_a_weak_torque_constant_lets_pd_sag_further():
    """kp e = m g; with 10 % less torque than asked 0.9 kp e = m g, so e grows by 1/0.9."""
    nominal, weak = error(held()), error(held(case=Case(torque_constant_percent=-10)))
    assert nominal == pytest.approx(MASS * G / KP, rel=1e-8)
    assert weak == pytest.approx(nominal / 0.9, rel=1e-8)


def test_a_torque_bias_shifts_by_bias_over_gain():
    """5 % of the limit of 200 N pushes upwards: kp e + 10 N = m g."""
    got = error(held(case=Case(torque_bias_percent=5)))
    assert got == pytest.approx((MASS * G - 10.0) / KP, rel=1e-8)


@pytest.mark.parametrize(("arm", "unit"), [(LIFT, 1e-3), (BAR, np.pi / 180)])
def test_an_encoder_offset_shifts_the_arm_by_exactly_it(arm, unit):
    """What reads 2 mm (deg) too much stands 2 mm (deg) too low, gravity held by the model as before.

    The model of gravity is evaluated at the sensed position: without weight, so that nothing else shifts.
    """
    run = held(arm, gravity=(0.0, 0.0, 0.0), case=Case(encoder_offset_deg=2))
    assert error(run) == pytest.approx(2 * unit, rel=1e-8)
    assert error(replace(run, case=None)) == 0.0


def test_a_tilted_base_makes_a_lift_lighter():
    """Tilted by 1 deg about x and 2 deg about y the vertical has the weight m g cos 1 cos 2 along it."""
    tilt = Case(base_tilt_deg=(1.0, 2.0))
    expected = MASS * G * np.cos(np.deg2rad(1)) * np.cos(np.deg2rad(2)) / KP
    assert error(held(case=tilt)) == pytest.approx(expected, rel=1e-8)


@pytest.mark.parametrize("tilt_deg", [1.0, -3.0])
def test_a_tilted_base_turns_gravity_at_the_joint(tilt_deg):
    """About y by t the bar's vertical lies at the joint angle t: it takes m g c sin(q - t) to hold it."""
    log = simulate(held(BAR, base_tilt=(0.0, np.deg2rad(tilt_deg))))
    q, torque = log.q[-1, 0], log.torque[-1, 0]
    assert torque == pytest.approx(MASS * G * COG * np.sin(q - np.deg2rad(tilt_deg)), rel=1e-7)
    sideways = simulate(held(BAR, base_tilt=(np.deg2rad(tilt_deg), 0.0)))
    q, torque = sideways.q[-1, 0], sideways.torque[-1, 0]
    assert torque == pytest.approx(MASS * G * COG * np.cos(np.deg2rad(tilt_deg)) * np.sin(q), rel=1e-7)


def test_the_law_does_not_know_of_tilt_delay_or_torque():
    """The first torque that a model-based law asks for is the same on every plant, to the bit.

    Of the torque constant it comes out 0.9 of that, for that is after the law.
    """
    run = held(BAR, law="gravity-compensated")
    first = simulate(run).torque[0, 0]
    assert first == pytest.approx(MASS * G * COG * np.sin(0.3), rel=1e-12)
    assert simulate(replace(run, case=Case(base_tilt_deg=(0, 5), delay_ms=3))).torque[0, 0] == first
    weak = simulate(replace(run, case=Case(torque_constant_percent=-10))).torque[0, 0]
    assert weak == (1 - 10 / 100) * first


# --- delay and tilt: by source, by case and declared they are the same


def test_a_drawn_delay_is_that_delay():
    """The run of draw 4 is bit for bit that in which its delay, and its tilt, is declared."""
    mismatch = Mismatch(delay_ms=1.5, base_tilt_deg=2)
    run = held(
        BAR, mismatch=mismatch, level=1.0, sources=mismatch.sources, seed=3, draw=4, timing=Timing(2.0)
    )
    departs = (mismatch, 1.0, mismatch.sources, 3, 4)
    delay, tilt = delay_of(2.0, *departs), tilt_of((0.0, 0.0), *departs)
    assert 0.5 < delay < 3.5
    assert delay != 2.0
    assert digest(run) == digest(held(BAR, timing=Timing(delay), base_tilt=tilt))
    assert digest(run) != digest(held(BAR, timing=Timing(2.0), base_tilt=tilt))
    stated = Case(delay_ms=1.0, base_tilt_deg=(0.0, 1.0))
    assert digest(replace(run, case=stated)) == digest(
        held(BAR, timing=Timing(1.0), base_tilt=(0.0, np.deg2rad(1)))
    )


def test_keys_follow_what_acts():
    """Runs without these keep their key; each of them makes another; noise brings the draw into it."""
    run = held()
    assert not {"case", "sensing", "timing", "base_tilt"} & run.inputs().keys()
    assert run.key() == held(mismatch=Mismatch(delay_ms=1), draw=3, seed=9).key()
    changes = [
        {},
        {"case": Case(delay_ms=1)},
        {"case": Case(base_tilt_deg=(0, 1))},
        {"case": Case(encoder_offset_deg=1)},
        {"timing": Timing(1.0)},
        {"timing": Timing(model_late=True)},
        {"base_tilt": (0.0, 0.1)},
        {"sensing": Sensing("link")},
        {"sensing": Sensing(noise_deg=0.1), "draw": 1},
        {"sensing": Sensing(noise_deg=0.1), "draw": 2},
        {"timing": Timing(dropped_percent=1), "draw": 1},
        {"timing": Timing(dropped_percent=1), "draw": 2},
        {"mismatch": Mismatch(delay_ms=1), "level": 1.0, "sources": ("delay_ms",), "draw": 1},
        {"mismatch": Mismatch(delay_ms=2), "level": 1.0, "sources": ("delay_ms",), "draw": 1},
    ]
    keys = [replace(run, **change).key() for change in changes]
    assert len(set(keys)) == len(keys)
    json.dumps([replace(run, **change).inputs() for change in changes], allow_nan=False)


# --- determinism


def noisy(draw: int, **changes) -> Run:
    """Noise, jitter, dropped ticks, a late model and a drawn plant, all at once."""
    mismatch = Mismatch(
        torque_constant_percent=5,
        torque_bias_percent=1,
        encoder_offset_deg=0.1,
        stiffness_percent=20,
        delay_ms=1,
        base_tilt_deg=0.5,
    )
    drives = [("all", "stiffness", 2e3), ("all", "rotor_inertia", 0.05), ("all", "encoder_counts", 4000)]
    given = {
        "sensing": Sensing(noise_deg=0.01),
        "timing": Timing(1.0, 50, 2, True),
        "mismatch": mismatch,
        "level": 1.0,
        "sources": mismatch.sources,
        "seed": 5,
        "draw": draw,
    }
    return held(BAR.with_drives(drives), law="computed-torque", gains=(900.0, 60.0), **given | changes)


def test_the_same_draw_is_the_same_bits_in_another_process():
    """Pickled, sent to a fresh interpreter and done there, a noisy run comes out in the same bits."""
    run = noisy(2)
    code = (
        "import hashlib, pickle, sys\n"
        "from rigbench.rig import simulate\n"
        "log = simulate(pickle.load(sys.stdin.buffer))\n"
        "arrays = (log.q, log.v, log.torque, log.limited)\n"
        "print(hashlib.blake2b(b''.join(array.tobytes() for array in arrays)).hexdigest())\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], input=pickle.dumps(run), capture_output=True, check=True
    )
    assert done.stdout.decode().strip() == digest(run) == digest(noisy(2))


def test_draws_differ_also_where_only_noise_does():
    """Other draws are other runs: with sources, and in nominal, where noise or ticks alone are random."""
    nominal = {"level": 0.0, "sources": ()}
    assert len({digest(noisy(draw)) for draw in range(4)}) == 4
    assert len({digest(noisy(draw, **nominal)) for draw in range(4)}) == 4
    for timing in (Timing(jitter_percent=50), Timing(dropped_percent=20)):
        assert len({digest(noisy(d, **nominal, sensing=Sensing(), timing=timing)) for d in range(4)}) == 4
    still = {"sensing": Sensing(), "timing": Timing(1.0, model_late=True), **nominal}
    assert len({digest(noisy(draw, **still)) for draw in range(3)}) == 1


def test_noise_does_not_hang_on_what_else_is_random():
    """The noise of a draw is the same at every level and beside every source: it has its own stream."""
    run = noisy(1, level=0.0, sources=())
    more = replace(run, mismatch=replace(run.mismatch, coulomb_percent=30), sources=("coulomb_percent",))
    assert digest(run) == digest(replace(more, level=1.0))  # no Coulomb friction here: the same machine
