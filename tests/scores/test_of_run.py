"""The scores of one run, against closed forms."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from rigbench.arm.arm import Arm, Drives
from rigbench.motion.via import ViaMotion
from rigbench.rig.log import Log
from rigbench.scores.names import score_info
from rigbench.scores.of_run import score_run

REACH = 0.8  # m, of the tool from joint j1's axis in the arms below, at q = 0
TURN = ViaMotion(points=((0.0,), (1.0,), (0.2,)), leg_s=0.5, rest_s=0.4)


def flat_arm(kinds: tuple[float, ...] = (0.0,), limits: tuple[float, ...] = (np.inf,)) -> Arm:
    """Joints at one place: revolute ones about z, prismatic ones along z; the tool out along x."""
    n = len(kinds)
    drives = replace(Drives.ideal(n), torque_limit=np.array(limits, float))
    return Arm(
        name="flat",
        joints=tuple(f"j{i + 1}" for i in range(n)),
        links=tuple(f"link{i + 1}" for i in range(n)),
        kinds=np.array(kinds),
        rotation=np.tile(np.eye(3), (n, 1, 1)),
        position=np.zeros((n, 3)),
        axis=np.tile([0.0, 0.0, 1.0], (n, 1)),
        parameters=np.zeros((n, 10)),
        tool_rotation=np.eye(3),
        tool_position=np.array([REACH, 0.0, 0.0]),
        lower=np.full(n, -np.inf),
        upper=np.full(n, np.inf),
        drives=drives,
    )


def log_of(motion: ViaMotion, error: Any, arm: Arm | None = None, hz: float = 1000.0, **more: Any) -> Log:
    """A finished run whose position is the reference minus ``error`` (a function of t, to (N,) or (N, n))."""
    t = np.arange(round(motion.duration_s * hz) + 1) / hz
    q_ref, v_ref, _ = motion.reference(t)
    off = np.broadcast_to(np.asarray(error(t), float).reshape(len(t), -1), q_ref.shape)
    given: dict[str, Any] = {
        "torque": np.zeros_like(q_ref),
        "limited": np.zeros(q_ref.shape, bool),
        "v": v_ref,
        "energy_j": 0.0,
        "torque_peak": np.zeros(q_ref.shape[1]),
    }
    return Log(
        t=t,
        q_ref=q_ref,
        v_ref=v_ref,
        q=q_ref - off,
        plant=flat_arm() if arm is None else arm,
        outcome="finished",
        reason="",
        residual=0.0,
        law_us=25.0,
        control_hz=hz,
        gravity=(0.0, 0.0, -9.81),
        **(given | more),
    )


def test_a_turned_tool_is_off_by_the_chord_of_the_angle() -> None:
    """A constant error e of one joint puts the tool off by 2 r sin(e / 2) and turns it by e."""
    error = 0.013
    scores = score_run(log_of(TURN, lambda t: 0 * t + error), TURN, 0.5)
    chord = 2e3 * REACH * np.sin(error / 2)
    assert scores["tool_peak_mm"] == pytest.approx(chord, rel=1e-10)
    assert scores["tool_rms_mm"] == pytest.approx(chord, rel=1e-10)
    assert scores["tool_angle_peak_deg"] == pytest.approx(np.degrees(error), rel=1e-10)
    assert scores["joint_peak_deg"] == pytest.approx(np.degrees(error), rel=1e-10)
    assert (
        scores["joint_rms_deg"] == scores["joint_rms_deg.j1"] == pytest.approx(np.degrees(error), rel=1e-10)
    )


@pytest.mark.parametrize("angle", [1e-7, 0.3, 3.0])
def test_small_and_large_tool_angles_keep_their_digits(angle: float) -> None:
    """An arc cosine of the trace would lose an angle of 1e-7 altogether.

    Positions carry 1e-16, which is 1e-9 of 1e-7; an arc sine near 3 rad loses a factor tan(3/2) = 14.
    """
    scores = score_run(log_of(TURN, lambda t: 0 * t + angle), TURN, 0.5)
    assert scores["tool_angle_peak_deg"] == pytest.approx(np.degrees(angle), rel=1e-8)


def test_rms_over_time_is_of_the_norm_over_joints() -> None:
    """Errors a sin(wt) and a cos(wt) of two joints have the norm a at every time, and peak at a each."""
    motion = ViaMotion(points=((0.0, 0.0), (1.0, -0.5)), leg_s=1.0)
    wave = lambda t: 0.01 * np.stack((np.sin(20 * t), np.cos(20 * t)), axis=1)  # noqa: E731
    scores = score_run(log_of(motion, wave, flat_arm((0.0, 0.0), (np.inf, np.inf))), motion, 0.5)
    assert scores["joint_rms_deg"] == pytest.approx(np.degrees(0.01), rel=1e-12)
    both = scores["joint_rms_deg.j1"] ** 2 + scores["joint_rms_deg.j2"] ** 2
    assert both == pytest.approx(scores["joint_rms_deg"] ** 2, rel=1e-12)
    assert (
        scores["joint_peak_deg.j2"] == scores["joint_peak_deg"] == pytest.approx(np.degrees(0.01), rel=1e-12)
    )


def test_prismatic_joints_are_scored_in_mm_apart_from_revolute_ones() -> None:
    """A slide that is 2 mm off moves the tool by 2 mm and turns nothing; degrees tell of j1 alone."""
    motion = ViaMotion(points=((0.0, 0.0), (1.0, 0.1)), leg_s=1.0)
    error = lambda t: np.stack((0 * t, 0 * t + 2e-3), axis=1)  # noqa: E731
    scores = score_run(log_of(motion, error, flat_arm((0.0, 1.0), (np.inf, np.inf))), motion, 0.5)
    for name in ("joint_peak_mm", "joint_rms_mm", "joint_peak_mm.j2", "joint_rms_mm.j2", "tool_peak_mm"):
        assert scores[name] == pytest.approx(2.0, rel=1e-10), name
    assert scores["joint_rms_deg"] == scores["joint_peak_deg.j1"] == scores["tool_angle_peak_deg"] == 0.0
    assert not {"joint_peak_deg.j2", "joint_peak_mm.j1"} & set(scores)


def test_an_arm_without_revolute_joints_has_no_score_in_degrees_of_joints() -> None:
    """And one without prismatic joints none in mm."""
    slide = score_run(log_of(TURN, lambda t: 0 * t, flat_arm((1.0,))), TURN, 0.5)
    assert "joint_rms_mm" in slide
    assert "joint_rms_deg" not in slide
    assert "joint_rms_mm" not in score_run(log_of(TURN, lambda t: 0 * t), TURN, 0.5)


def test_a_timing_error_is_not_a_path_error() -> None:
    """A tool that follows the path 20 ms late is off by up to r v_max 20 ms = 30 mm, yet on the path.

    Peak speed of the quintic: 15/8 of 1 rad in 0.5 s. Between the path's samples 3 mm apart the chord's
    sag is at most s^2 / (8 r) = 1.4e-3 mm.
    """
    t = np.arange(round(TURN.duration_s * 1000) + 1) / 1000
    late = TURN.reference(t)[0] - TURN.reference(t - 0.02)[0]
    scores = score_run(log_of(TURN, lambda _: late), TURN, 0.5)
    assert scores["tool_peak_mm"] == pytest.approx(1e3 * REACH * 15 / 8 / 0.5 * 0.02, rel=0.01)
    assert scores["path_peak_mm"] < 1.4e-3


def test_a_slow_control_rate_does_not_cut_the_path_s_corners() -> None:
    """At 50 Hz the ticks are up to 60 mm apart and their chords sag by 0.56 mm; the path itself doesn't."""
    t = np.arange(round(TURN.duration_s * 50) + 1) / 50
    late = TURN.reference(t)[0] - TURN.reference(t - 0.01)[0]
    scores = score_run(log_of(TURN, lambda _: late, hz=50.0), TURN, 0.5)
    assert scores["tool_peak_mm"] > 20.0
    assert scores["path_peak_mm"] < 1.4e-3


def test_a_tool_off_the_path_is_off_by_its_distance() -> None:
    """A slide that lifts the tool by 3 mm, once, takes it 3 mm off the path."""
    motion = ViaMotion(points=((0.0, 0.0), (1.0, 0.0)), leg_s=1.0)
    bump = lambda t: np.stack((0 * t, -3e-3 * np.exp(-(((t - 0.5) / 0.05) ** 2))), axis=1)  # noqa: E731
    scores = score_run(log_of(motion, bump, flat_arm((0.0, 1.0), (np.inf, np.inf))), motion, 0.5)
    assert scores["path_peak_mm"] == pytest.approx(3.0, rel=1e-9)


def ringing(motion: ViaMotion, amplitudes: tuple[float, ...], natural: float, damping: float) -> Any:
    """The error of a second-order system let go at the end of each leg, at rest and ``amplitude`` short of it."""
    damped = natural * np.sqrt(1 - damping**2)

    def error(t: np.ndarray) -> np.ndarray:
        off = np.zeros_like(t)
        for (start, end), amplitude in zip(motion.rests, amplitudes, strict=True):
            since = t - start
            wave = np.cos(damped * since) + damping * natural / damped * np.sin(damped * since)
            inside = (since >= -1e-9) & (t <= end + 1e-9)
            off = np.where(inside, amplitude * np.exp(-damping * natural * since) * wave, off)
        return off

    return error


def test_overshoot_is_that_of_a_second_order_system() -> None:
    """The first overshoot is exp(-pi d / sqrt(1 - d^2)) of the step; the worst rest counts.

    Along the arrival, a chord of the path's last mm: cos of up to 1/800 rad takes 1e-6, the tick that
    misses the peak by half a ms (w t)^2 / 2 = 2e-4.
    """
    damping, natural = 0.3, 40.0
    log = log_of(TURN, ringing(TURN, (0.004, -0.006), natural, damping))
    ratio = np.exp(-np.pi * damping / np.sqrt(1 - damping**2))
    scores = score_run(log, TURN, 0.5)
    assert scores["overshoot_mm"] == pytest.approx(0.006 * ratio * REACH * 1e3, rel=5e-4)


def test_a_tool_that_only_comes_nearer_does_not_overshoot() -> None:
    """Critically damped, from either side in turn: it never gets beyond its target."""

    def creeping(t: np.ndarray) -> np.ndarray:
        off = np.zeros_like(t)
        for (start, end), sign in zip(TURN.rests, (1.0, -1.0), strict=True):
            inside = (t >= start - 1e-9) & (t <= end + 1e-9)
            off = np.where(inside, sign * 0.004 * (1 + 60 * (t - start)) * np.exp(-60 * (t - start)), off)
        return off

    assert score_run(log_of(TURN, creeping), TURN, 0.5)["overshoot_mm"] == 0.0


def test_an_arm_that_hangs_beyond_its_target_has_not_overshot_it() -> None:
    """It was never there: it does not settle. What counts is what comes after it has been there."""
    start, end = TURN.rests[0]
    hanging = log_of(TURN, lambda t: np.where((t >= start - 0.01) & (t <= end + 1e-9), -0.01, 0.0))
    scores = score_run(hanging, TURN, 0.5)
    assert (scores["overshoot_mm"], scores["settle_ms"]) == (0.0, np.inf)

    def ahead_then_ringing(t: np.ndarray) -> np.ndarray:
        since = t - start
        return np.where((since >= -1e-9) & (t <= end), -0.01 * np.exp(-10 * since) * np.cos(40 * since), 0.0)

    # Ahead by 10 mrad at first, then short, then beyond again at the second maximum: tan(wt) = -10 / 40.
    peak = (2 * np.pi - np.arctan(10 / 40)) / 40
    beyond = 0.01 * np.exp(-10 * peak) * np.cos(40 * peak)
    scores = score_run(log_of(TURN, ahead_then_ringing), TURN, 0.5)
    assert scores["overshoot_mm"] == pytest.approx(1e3 * REACH * beyond, rel=2e-3)


def test_settling_ends_when_the_tool_is_in_its_band_for_good() -> None:
    """An exponential approach settles at ln(amplitude / band) / rate after its leg, the slower rest counting.

    Between ticks it is interpolated: off by (rate T)^2 / 8 of 1 / rate, here 1e-5 of a tick's fraction.
    """
    rate, amplitudes = 20.0, (0.002, 0.006)

    def error(t: np.ndarray) -> np.ndarray:
        off = np.zeros_like(t)
        for (start, end), amplitude in zip(TURN.rests, amplitudes, strict=True):
            off = np.where(
                (t >= start - 1e-9) & (t <= end + 1e-9), amplitude * np.exp(-rate * (t - start)), off
            )
        return off

    band = 0.5
    chord_angle = 2 * np.arcsin(band * 1e-3 / (2 * REACH))
    expected = 1e3 * np.log(0.006 / chord_angle) / rate
    assert score_run(log_of(TURN, error), TURN, band)["settle_ms"] == pytest.approx(expected, abs=1e-2)


def test_a_return_out_of_the_band_starts_the_settling_anew() -> None:
    """In band from 50 ms on, out again at 200 ms and back at 210 ms: it settles between the last two ticks."""
    start = TURN.rests[0][0]

    def error(t: np.ndarray) -> np.ndarray:
        since = np.round(1e3 * (t - start)).astype(int)
        out = ((since >= 0) & (since < 50)) | ((since >= 200) & (since < 210))
        return np.where(out, 0.01, 0.0)

    assert 209 < score_run(log_of(TURN, error), TURN, 0.5)["settle_ms"] <= 210


def test_settling_is_immediate_or_never_or_not_defined() -> None:
    """0 where the tool is in its band throughout, inf where the rest ends outside, absent without rests."""
    assert score_run(log_of(TURN, lambda t: 0 * t), TURN, 0.5)["settle_ms"] == 0.0
    outside = log_of(TURN, lambda t: np.where(t > TURN.duration_s - 5e-4, 0.01, 0.0))
    assert score_run(outside, TURN, 0.5)["settle_ms"] == np.inf
    straight_on = ViaMotion(points=((0.0,), (1.0,)), leg_s=0.5)
    assert not {"settle_ms", "overshoot_mm"} & set(
        score_run(log_of(straight_on, lambda t: 0 * t), straight_on, 0.5)
    )


def test_a_leg_that_leaves_the_tool_in_place_has_no_beyond() -> None:
    """A via point repeated: no direction of arrival, so no overshoot; settling counts as ever."""
    motion = ViaMotion(points=((0.3,), (0.3,)), leg_s=0.2, rest_s=0.2)
    scores = score_run(log_of(motion, lambda t: np.where(t < 0.3, 0.01, 0.0)), motion, 0.5)
    assert scores["overshoot_mm"] == 0.0
    assert 99 <= scores["settle_ms"] <= 100


def test_a_leg_s_direction_is_its_own() -> None:
    """A leg that stays where the one before it arrived has no beyond either; 5 mm off is unsettled alone."""
    motion = ViaMotion(points=((0.0,), (1.0,), (1.0,)), leg_s=0.2, rest_s=0.2)
    late = lambda t: np.where((t > 0.6) & (t < 0.7), -0.01, 0.0)  # noqa: E731
    scores = score_run(log_of(motion, late), motion, 0.5)
    assert scores["overshoot_mm"] == 0.0
    assert 99 <= scores["settle_ms"] <= 100


def test_a_rest_of_no_duration_is_none() -> None:
    """There is no time to settle in, so it can't be missed."""

    class Passing(ViaMotion):
        @property
        def rests(self) -> tuple[tuple[float, float], ...]:
            return ((self.leg_s, self.leg_s),)

    motion = Passing(points=((0.0,), (1.0,)), leg_s=0.2)
    assert "settle_ms" not in score_run(log_of(motion, lambda t: 0 * t + 0.1), motion, 0.5)


def test_torque_is_measured_against_each_joint_s_limit() -> None:
    """The worst joint is the one nearest to its own limit; a joint without one has no such score.

    The peak is that of all physics steps, the RMS that of the ticks.
    """
    motion = ViaMotion(points=((0.0,) * 3, (1.0,) * 3), leg_s=1.0)
    ticks = np.arange(1001)
    torque = np.stack((np.full(1001, 8.0), np.where(ticks % 2, 3.0, -3.0), np.full(1001, 1e6)), axis=1)
    arm = flat_arm((0.0,) * 3, (100.0, 4.0, np.inf))
    log = log_of(motion, lambda t: 0 * t, arm, torque=torque, torque_peak=np.array([8.5, 3.2, 1e6]))
    scores = score_run(log, motion, 0.5)
    assert scores["torque_peak_percent.j1"] == pytest.approx(8.5)
    assert scores["torque_rms_percent.j1"] == pytest.approx(8.0)
    assert scores["torque_peak_percent"] == pytest.approx(80.0)
    assert scores["torque_rms_percent"] == pytest.approx(75.0)
    assert scores["chatter"] == pytest.approx(6.0 / 4.0)
    assert "torque_peak_percent.j3" not in scores


def test_without_limits_there_is_nothing_to_measure_torque_against() -> None:
    """Energy and saturation stay."""
    scores = score_run(log_of(TURN, lambda t: 0 * t), TURN, 0.5)
    assert not any(name.startswith(("torque", "chatter")) for name in scores)
    assert scores["saturated_percent"] == scores["energy_j"] == 0.0


def test_saturation_is_the_share_of_ticks_with_any_joint_limited() -> None:
    """Two joints limited on overlapping thirds of the time: half of it."""
    motion = ViaMotion(points=((0.0, 0.0), (1.0, 1.0)), leg_s=0.999)
    tick = np.arange(1000)
    limited = np.stack(((tick < 400), (tick >= 200) & (tick < 500)), axis=1)
    arm = flat_arm((0.0, 0.0), (np.inf, np.inf))
    scores = score_run(log_of(motion, lambda t: 0 * t, arm, limited=limited), motion, 0.5)
    assert scores["saturated_percent"] == 50.0


def test_energy_is_that_of_every_physics_step() -> None:
    """As logged: torques and link speeds at the ticks don't tell what lags and elastic joints do between."""
    log = log_of(TURN, lambda t: 0 * t, energy_j=12.5)
    assert score_run(log, TURN, 0.5)["energy_j"] == 12.5


def test_the_law_s_time_is_a_share_of_its_period() -> None:
    """25 us at 1000 Hz are 2.5 percent."""
    scores = score_run(log_of(TURN, lambda t: 0 * t), TURN, 0.5)
    assert scores["law_us"] == 25.0
    assert scores["law_share_percent"] == pytest.approx(2.5)


@pytest.mark.parametrize("outcome", ["diverged", "hit-stop"])
def test_a_run_that_did_not_finish_has_no_scores(outcome: str) -> None:
    """Not even if it broke off before its first tick."""
    log = replace(log_of(TURN, lambda t: 0 * t), outcome=outcome, q=np.full((0, 1), np.nan))
    assert score_run(log, TURN, 0.5) == {}


def test_every_score_is_a_float_of_a_known_name() -> None:
    """None is NaN; all have an entry in SCORES."""
    arm = flat_arm((0.0, 1.0), (10.0, 10.0))
    motion = ViaMotion(points=((0.0, 0.0), (1.0, 0.1)), leg_s=0.5, rest_s=0.1)
    scores = score_run(log_of(motion, lambda t: np.stack((0.01 * t, 0.001 * t), axis=1), arm), motion, 0.5)
    for name, value in scores.items():
        assert score_info(name) is not None, name
        assert type(value) is float, name
        assert not np.isnan(value)
