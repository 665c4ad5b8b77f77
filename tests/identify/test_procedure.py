"""The whole procedure on the rig: what is recorded, and what comes of it."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Mismatch, Spread
from rigbench.arm.physical import possible
from rigbench.errors import InputFaults
from rigbench.identify.bounds import bounds_of
from rigbench.identify.excitation import Search
from rigbench.identify.fourier import FourierMotion
from rigbench.identify.procedure import Settings, Simulated, identify, record
from rigbench.identify.regressor import Terms
from rigbench.identify.series import SeriesSpace
from rigbench.report.identify_text import identify_text

ROBOTS = Path(__file__).resolve().parents[2] / "robots_demo"
PLANAR2 = ArmFiles.read(ROBOTS / "planar2" / "arm.yaml")
GANTRY = Path(__file__).resolve().parents[1] / "arm" / "gantry" / "arm.yaml"
TRAY6 = ArmFiles.read(ROBOTS / "tray6" / "arm.yaml")
LINKS = Terms(rotor=False, viscous=False, coulomb=False)
EXACT = Simulated(Mismatch(), ())
MOTION = FourierMotion((0.2, -0.3), ((0.9, -0.45), (-0.7, 0.35)), ((0.4, -0.1), (0.8, -0.2)), 4.0, 3)


def test_the_same_machine_for_every_recording_with_its_own_noise():
    """Two draws of the noise: the same machine, other noise on torques, and on positions, each of its size."""
    for noise_deg, torque_noise_nm in ((0.0, 0.3), (0.01, 0.0)):
        noisy = Simulated(
            Mismatch(link_mass_percent=Spread(20)), ("link_mass_percent",), 1, noise_deg, torque_noise_nm
        )
        (one, plant), (two, other) = (
            record(PLANAR2, Settings(LINKS), noisy, MOTION, "a", draw) for draw in (0, 1)
        )
        assert np.array_equal(plant.parameters, other.parameters)
        assert not np.allclose(plant.parameters, PLANAR2.arm().parameters, rtol=0.01)
        q_noise = np.degrees(one.q - two.q).std() / np.sqrt(2)
        assert q_noise == pytest.approx(noise_deg, rel=0.03)  # 24000 samples: 0.5 %, and what the arm follows
        if noise_deg > 0:
            assert not np.allclose(one.torque, two.torque, atol=0.1)  # the law saw each its own
        else:
            torque_noise = (one.torque - two.torque).std() / np.sqrt(2)
            assert torque_noise == pytest.approx(torque_noise_nm, rel=0.03)


def test_a_motion_that_the_machine_does_not_follow_is_a_fault():
    """A reference beyond a joint's stop ends the run early, and no estimate is made of that."""
    still = ((0.0, 0.0),) * 4
    sine = ((0.4, -0.2), (1.5, -0.75), *still)
    beyond = FourierMotion((0.0, -0.9, 1.0, 0.1, 0.5, -0.2), sine, ((0.0, 0.0),) * 6, 4.0)
    with pytest.raises(InputFaults, match="did not follow excitation"):
        record(TRAY6, Settings(), EXACT, beyond, "excitation", 0)


def test_gravity_reaches_run_and_regressor_alike():
    """On a machine on a slope, with the slope declared: back to the rig's own accuracy of 1e-5 and some."""
    settings = Settings(LINKS, gravity=(2.0, 0.0, -9.6))
    recording, truth = record(PLANAR2, settings, EXACT, MOTION, "slope", 0)
    done = identify(PLANAR2, settings, [recording], truth=truth)
    assert done.true_values is not None
    assert np.abs(done.found.values - done.true_values).max() < 1e-4


def test_an_offset_is_found_and_predicted_with():
    """0.7 N m too much on one joint's torque sensor: found, kept beside the arm, part of the prediction."""
    settings = Settings(Terms(rotor=False, viscous=False, coulomb=False, offset=True))
    recording, _ = record(PLANAR2, settings, EXACT, MOTION, "zero", 0)
    recording.torque[:, 1] += 0.7
    done = identify(PLANAR2, settings, [recording], recording)
    assert done.result.offset == pytest.approx([0.0, 0.7], abs=1e-3)
    assert (done.torque_errors["identified"].rms_nm < 0.02).all()
    assert done.torque_errors["declared"].rms_nm[1] == pytest.approx(0.7, rel=0.02)
    assert "offset.elbow" in identify_text(done)


def test_the_report_counts_spikes():
    """Three torques of 500 N m among the recorded ones: said; none: not a word."""
    recording, _ = record(PLANAR2, Settings(LINKS), EXACT, MOTION, "a", 0)
    torque = recording.torque.copy()
    torque[[1000, 2000, 3000], 0] = 500.0
    spoiled, clean = (
        identify_text(identify(PLANAR2, Settings(LINKS), [replace(recording, torque=each)]))
        for each in (torque, recording.torque)
    )
    assert "3 recorded samples taken for spikes and left out" in spoiled
    assert "spikes" not in clean


def test_the_spread_says_how_far_declared_values_hold_on():
    """Torques 1.5 times the declared under noise of 20 N m: held within 0.1 % the arm moves less than half way,
    with 100 % to the estimate."""
    noisy = Simulated(Mismatch(), (), torque_noise_nm=20.0)
    recording, _ = record(PLANAR2, Settings(LINKS), noisy, MOTION, "a", 0)
    recording.torque[:] *= 1.5
    near, far = (identify(PLANAR2, Settings(LINKS, spread=spread), [recording]) for spread in (0.001, 1.0))
    first = near.declared_values[0]
    assert far.identified_values[0] == pytest.approx(1.5 * first, rel=0.05)
    assert abs(near.identified_values[0] - first) < 0.25 * first


def test_joints_without_friction_do_not_stop_the_fit_short():
    """Friction asked of joints that have none, estimated below: the links' parameters are as near as the truth's.

    The truth is an arm that can exist, so the nearest such arm lies no farther from the estimate than it, but
    for the pull of the declared values, of a few. With this seed a solver that keeps inside the bounds stopped
    at 2,300.
    """
    mismatch = Mismatch(link_mass_percent=20, link_cog_mm=20)
    hidden = Simulated(mismatch, mismatch.sources, seed=4, noise_deg=0.001, torque_noise_nm=0.2)
    settings = Settings(Terms(rotor=False))
    recording, truth = record(PLANAR2, settings, hidden, MOTION, "a", 0)
    done = identify(PLANAR2, settings, [recording], truth=truth)
    assert done.true_values is not None

    def distance(values):
        error = values - done.found.values
        return error @ np.linalg.solve(done.found.covariance, error)

    assert distance(done.identified_values) < distance(done.true_values) + 10


ARMS = {"tray6": TRAY6, "planar2": PLANAR2, "gantry": ArmFiles.read(GANTRY)}
GRAVITIES = {"down": (0.0, 0.0, -9.81), "none": (0.0, 0.0, 0.0), "tilted": (2.0, -3.0, -9.0)}
EVERY = {
    "links": LINKS,
    "drives": Terms(),
    "all four": Terms(offset=True),
}


@pytest.mark.parametrize(
    ("arm", "gravity", "terms"),
    [
        ("gantry", "down", "drives"),
        ("gantry", "none", "links"),
        ("gantry", "tilted", "all four"),
        ("planar2", "none", "all four"),
        ("planar2", "tilted", "links"),
        ("tray6", "none", "drives"),
        ("tray6", "tilted", "all four"),
    ],
)
def test_every_identified_arm_can_exist(arm, gravity, terms):
    """From no noise to a million N m: bodies that are possible, friction and rotors not below 0, a covariance that is
    positive definite; with slides, without gravity, on a slope, and without friction in the terms where there is some."""
    files, settings = ARMS[arm], Settings(EVERY[terms], gravity=GRAVITIES[gravity])
    bounds = bounds_of(files.arm())
    search = Search(files.arm(), settings.gravity, settings.terms, bounds, SeriesSpace(bounds, 4, 4.0))
    recording, _ = record(files, settings, EXACT, search.random_motion(1, 3), "rig", 0)
    rng = np.random.default_rng(0)
    for noise in (0.0, 1e-6, 1.0, 1e6):
        torque = recording.torque + noise * rng.normal(size=recording.torque.shape)
        result = identify(files, settings, [replace(recording, torque=torque)]).result
        drives = result.arm.drives
        assert possible(result.arm.parameters)
        for name in ("viscous", "coulomb", "static", "rotor_inertia"):
            assert (getattr(drives, name) >= 0).all()
        assert np.linalg.eigvalsh(result.covariance).min() > 0
