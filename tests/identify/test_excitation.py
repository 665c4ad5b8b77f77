"""Excitation: within every limit, the same each time, and better than chance."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest

from rigbench.arm.dynamics import inverse_dynamics, tool_path
from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Mismatch
from rigbench.errors import InputFaults
from rigbench.identify import excitation
from rigbench.identify.bounds import bounds_of
from rigbench.identify.excitation import Search, excite
from rigbench.identify.regressor import Terms, regressor
from rigbench.identify.series import SeriesSpace
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose, registered
from rigbench.motion.limits import check_motion
from rigbench.rig import Rates, Run, simulate

GRAVITY = (0.0, 0.0, -9.81)
FILES = ArmFiles.read(Path(__file__).resolve().parents[2] / "robots_demo" / "tray6" / "arm.yaml")
BOX = {"tool_least": (-1.0, -1.0, 0.15), "tool_most": (1.0, 1.0, 1.2)}


def search(arm, harmonics=5, period_s=4.0, **bounds):
    return Search(
        arm, GRAVITY, Terms(), bounds_of(arm, **bounds), SeriesSpace(bounds_of(arm), harmonics, period_s)
    )


def random_conditions(found, count, seed=1):
    rng = np.random.default_rng(seed)
    return [found.condition(found.motion(found.random_point(rng))) for _ in range(count)]


def check_on_the_rig(motion, box=BOX, mismatch=None, tool_slack=1e-3):
    """The run of tray6, or of one with a mismatch, keeps all of its limits, and the tool stays in the box but for the
    slack: the reference keeps it, and a run of the model tracks it to 0.1 mm."""
    arm = FILES.arm()
    assert check_motion(motion, arm, 1000.0) == []
    law = choose("computed-torque", options_model(registered().laws["computed-torque"].cls)(natural_hz=5.0))
    start = tuple(motion.reference(np.zeros(1))[0][0].tolist())
    run = Run(FILES, law, motion, Rates(1000, 2000), start, 0.5)
    if mismatch is not None:
        sources = ("link_mass_percent", "coulomb_percent", "viscous_percent")
        run = replace(run, mismatch=mismatch, level=1.0, sources=sources, draw=0)
    log = simulate(run)
    assert log.outcome == "finished"
    assert not log.limited.any()
    assert ((log.q > arm.lower) & (log.q < arm.upper)).all()
    assert (np.abs(log.v) < arm.drives.speed_limit).all()
    assert (log.torque_peak < arm.drives.torque_limit).all()
    tool = tool_path(log.plant.chain(GRAVITY), np.ascontiguousarray(log.q))[0]
    assert (tool > np.array(box["tool_least"]) - tool_slack).all()
    assert (tool < np.array(box["tool_most"]) + tool_slack).all()


def test_bounds_are_a_share_of_the_limits(tray6, chain):
    """90 % of a range about its middle; a joint without limits has 180 degrees or 1 m to either side."""
    bounds = bounds_of(tray6, 0.9)
    assert bounds.upper - bounds.lower == pytest.approx(0.9 * (tray6.upper - tray6.lower))
    assert bounds.upper + bounds.lower == pytest.approx(tray6.upper + tray6.lower)
    assert bounds.torque == pytest.approx(0.9 * tray6.drives.torque_limit)
    free = bounds_of(chain([[0, 0, 1], [1, 0, 0]], np.zeros((2, 3)), [0, 1]), 1.0)
    assert free.upper == pytest.approx([np.pi, 1.0])
    assert free.lower == pytest.approx([-np.pi, -1.0])


def test_every_random_motion_begins_at_rest_and_fills_its_room(tray6):
    """Each joint comes within 1 % of its range or of its speed limit, and passes neither (tray6, 20 motions)."""
    bounds = bounds_of(tray6)
    space = SeriesSpace(bounds, 5, 4.0)
    rng = np.random.default_rng(0)
    for _ in range(20):
        q, v, a = space.states(space.series(space.random(rng)), 2000)
        assert np.abs(v[0]).max() < 1e-12
        assert np.abs(a[0]).max() < 1e-12
        used = np.maximum(
            np.ptp(q, axis=0) / (bounds.upper - bounds.lower), np.abs(v).max(axis=0) / bounds.speed
        )
        assert (used > 0.99).all()
        assert (used <= 1).all()
        assert ((q >= bounds.lower) & (q <= bounds.upper)).all()


def test_a_random_motion_keeps_every_limit_on_the_rig(tray6):
    """Limits of position, speed, torque and a tool box, on tray6 under computed torque."""
    found = search(tray6, **BOX)
    motion = found.motion(found.random_point(np.random.default_rng(5)))
    check_on_the_rig(motion)


def test_a_machine_that_is_off_keeps_the_limits_of_the_arm(tray6):
    """Masses by 20 %, friction by 40 %: what 90 % of the limits leave takes up the errors of tracking, half a degree,
    and the tool, whose box has no such margin, passes it by 2 cm at most."""
    found = search(tray6, **BOX)
    motion = found.motion(found.random_point(np.random.default_rng(5)))
    off = Mismatch(link_mass_percent=20, coulomb_percent=40, viscous_percent=40)
    check_on_the_rig(motion, mismatch=off, tool_slack=0.02)


def test_the_search_is_reproducible_and_follows_its_seed(rubbing):
    """Twice the same motion, bit for bit, and another for another seed."""
    one, two, other = (excite(search(rubbing), seed=seed, starts=3, rounds=3) for seed in (4, 4, 5))
    assert one.motion == two.motion
    assert one.condition == two.condition
    assert one.motion != other.motion


def test_a_better_motion_than_chance_is_found(rubbing):
    """Two links with rotors and friction: below half the median of 30 random ones after 40 rounds, within limits."""
    found, rounds = search(rubbing), []
    best = excite(
        found, seed=2, starts=8, rounds=40, periods=3, tell=lambda done, cost: rounds.append((done, cost))
    )
    assert best.condition < 0.5 * np.median(random_conditions(found, 30))
    assert check_motion(best.motion, rubbing, 1000.0) == []
    assert best.motion.duration_s == pytest.approx(12.5)
    assert [done for done, _ in rounds] == list(range(1, len(rounds) + 1))
    assert rounds[-1][1] < rounds[0][1]


def test_the_determinant_is_a_criterion_too(rubbing):
    """The mean log of the squared singular values is larger than at the best of the random starts."""
    found = search(rubbing)
    best = excite(found, criterion="determinant", seed=2, starts=5, rounds=15)
    rng = np.random.default_rng(2)

    def merit(motion):
        times = np.arange(1000) * motion.period_s / 1000
        y = regressor(rubbing, GRAVITY, *motion.reference(times), Terms())[:, :, found.base.kept]
        rows = y / (0.9 * rubbing.drives.torque_limit)[:, None]
        return np.log(np.linalg.svd(rows.reshape(-1, found.base.count), compute_uv=False)).mean()

    assert merit(best.motion) > max(merit(found.motion(found.random_point(rng))) for _ in range(5))


def test_the_best_start_is_left_where_the_search_ends_outside(rubbing, monkeypatch):
    """A descent that ends where no amplitude keeps the limits: the motion of the best start, not a fault."""

    def astray(cost, start, **_):
        return SimpleNamespace(x=start + 1e3)

    monkeypatch.setattr(excitation, "minimize", astray)
    found = search(rubbing)
    best = excite(found, seed=2, starts=3, rounds=1)
    rng = np.random.default_rng(2)
    assert best.condition == min(found.condition(found.motion(found.random_point(rng))) for _ in range(3))


def test_torques_are_limited_by_shrinking(rubbing):
    """Where random motions would ask for more torque than there is, they come within 1 % of 90 % of it, not above.

    The torques are worked out from the motion by the dynamics kernels, apart from the regressor.
    """
    limit = np.array([40.0, 12.0])
    weak = rubbing.replaced(drives=replace(rubbing.drives, torque_limit=limit))
    found, rng, shrunk = search(weak, period_s=1.5), np.random.default_rng(0), 0
    for _ in range(5):
        point = found.random_point(rng)
        motion = found.motion(point)
        states = motion.reference(np.linspace(0, motion.period_s, 3000, endpoint=False))
        drives, chain = weak.drives, weak.chain(GRAVITY)
        torque = np.array([inverse_dynamics(chain, *state) for state in zip(*states, strict=True)])
        torque += (
            drives.reflected * states[2] + drives.viscous * states[1] + drives.coulomb * np.sign(states[1])
        )
        used = (np.abs(torque) / limit).max()
        assert used < 0.9 * 1.001
        if not np.allclose(found.space.series(point)[1], motion.sine):
            shrunk += 1
            assert used > 0.9 * 0.97
    assert shrunk >= 3


def test_limits_that_nothing_keeps_are_a_fault(tray6):
    """A tool box out of reach, and torques below what holds the arm up."""
    far = search(tray6, tool_least=(5.0, 5.0, 5.0), tool_most=(6.0, 6.0, 6.0))
    weak = search(tray6.replaced(drives=replace(tray6.drives, torque_limit=0.01 * tray6.drives.torque_limit)))
    for found in (far, weak):
        with pytest.raises(InputFaults, match="however small"):
            found.random_point(np.random.default_rng(0))


@pytest.mark.evidence
def test_five_times_better_than_chance_on_tray6(tray6):
    """All 52 parameters: a fifth of the median condition number of 100 random motions of the same limits, and every
    limit is kept on the rig."""
    found = search(tray6)
    best = excite(found, seed=0, rounds=80)
    assert 5 * best.condition < np.median(random_conditions(found, 100))
    check_on_the_rig(best.motion, {"tool_least": (-9, -9, -9), "tool_most": (9, 9, 9)})
