"""Estimates against the numbers that made the data."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.dynamics import inverse_dynamics
from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Mismatch
from rigbench.errors import InputFaults
from rigbench.identify import filtering
from rigbench.identify.base import base_of
from rigbench.identify.bounds import bounds_of
from rigbench.identify.estimate import estimate, torque_error
from rigbench.identify.excitation import Search, excite
from rigbench.identify.filtering import Rows, derivative, low_pass, rows_of, without_spikes
from rigbench.identify.fourier import FourierMotion
from rigbench.identify.procedure import Settings, Simulated, identify, record
from rigbench.identify.recording import Recording, of_run
from rigbench.identify.regressor import Terms, parameter_values, regressor
from rigbench.identify.series import SeriesSpace
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose, registered
from rigbench.rig import Rates, Run, simulate
from rigbench.rig.sampled import Sensing, noise_of

GRAVITY = (0.0, 0.0, -9.81)
FILES = ArmFiles.read(Path(__file__).resolve().parents[2] / "robots_demo" / "planar2" / "arm.yaml")
TRAY6 = ArmFiles.read(Path(__file__).resolve().parents[2] / "robots_demo" / "tray6" / "arm.yaml")
HIDDEN = Mismatch(
    link_mass_percent=10, link_cog_mm=5, coulomb_percent=30, viscous_percent=30, rotor_inertia_percent=15
)
SOURCES = ("link_mass_percent", "link_cog_mm", "coulomb_percent", "viscous_percent", "rotor_inertia_percent")
LINKS = Terms(rotor=False, viscous=False, coulomb=False)
MOTION = FourierMotion(
    centre=(0.2, -0.3),
    sine=((0.9, -0.15, -0.2), (-0.7, 0.5, -0.1)),
    cosine=((0.4, 0.8, -0.4), (0.9, -0.9, 0.3)),
    period_s=4.0,
    periods=4,
)
OTHER = FourierMotion(
    centre=(-0.4, 0.5),
    sine=((0.6, -0.3), (0.9, -0.45)),
    cosine=((0.8, -0.2), (-0.8, 0.2)),
    period_s=3.0,
    periods=2,
)


def formula_torque(arm, q, v, a):
    """Torques by the dynamics kernels and the drives' formulas, not by the regressor."""
    links = np.array([inverse_dynamics(arm.chain(GRAVITY), *state) for state in zip(q, v, a, strict=True)])
    return links + arm.drives.reflected * a + arm.drives.viscous * v + arm.drives.coulomb * np.sign(v)


def formula_rows(arm, terms, base, count=400, seed=5):
    rng = np.random.default_rng(seed)
    q, v, a = (
        rng.uniform(-2, 2, (count, arm.n)),
        rng.normal(size=(count, arm.n)),
        rng.normal(size=(count, arm.n)),
    )
    y = regressor(arm, GRAVITY, q, v, 5 * a, terms)[:, :, base.kept]
    t = np.arange(float(count))
    return Rows(y, formula_torque(arm, q, v, 5 * a), np.ones(q.shape, bool), "formulas", t, v)


def formula_recording(arm, motion=MOTION, rate=1000, v=True):
    t = np.arange(0, motion.duration_s, 1 / rate)
    q, speed, a = motion.reference(t)
    return Recording("formulas", t, q, speed if v else None, formula_torque(arm, q, speed, a))


def truth(arm, terms, base):
    return base.combination @ parameter_values(arm, terms)


def scale(arm, terms, base):
    """What each base parameter is made of, all signs taken as plus: the size that errors are a share of."""
    return np.abs(base.combination) @ np.abs(parameter_values(arm, terms))


def test_data_from_the_formulas_give_the_base_parameters_back(tray6, rubbing):
    """Without noise every base parameter comes back to 1e-8 of the largest of its kind (condition below 1e3)."""
    for arm in (tray6, rubbing):
        base = base_of(arm, GRAVITY, Terms())
        found = estimate(base, [formula_rows(arm, Terms(), base)])
        assert np.abs(found.values - truth(arm, Terms(), base)).max() < 1e-8


@pytest.mark.parametrize("v", [True, False])
def test_filters_and_differences_leave_no_trace_of_their_own(rubbing, v):
    """Exact positions, with velocities or without: back to 1e-6, the Butterworth filter's (f / 40 Hz)^8 and less."""
    base = base_of(rubbing, GRAVITY, Terms())
    found = estimate(base, [rows_of(rubbing, GRAVITY, Terms(), base, formula_recording(rubbing, v=v))])
    error = found.values - truth(rubbing, Terms(), base)
    assert np.abs(error / np.maximum(scale(rubbing, Terms(), base), 0.01)).max() < 1e-6


def test_a_filter_shifts_nothing_and_halves_at_the_corner():
    """A sine at the corner keeps its phase and half its amplitude; one far below keeps all of it."""
    t = np.arange(0, 20, 1e-3)
    middle = slice(5000, 15000)
    for hz, kept in ((10.0, 0.5), (0.5, 1.0)):
        wave = np.sin(2 * np.pi * hz * t)[:, None]
        assert np.allclose(low_pass(wave, 1000.0, 10.0)[middle], kept * wave[middle], atol=1e-4)


def test_differences_are_exact_for_quartics():
    """t^4 and below: to rounding, ends apart."""
    t = np.arange(50) / 10
    assert np.allclose(derivative(t[:, None] ** 4, 10.0)[2:-2, 0], 4 * t[2:-2] ** 3, rtol=1e-11)


def noisy(rows, noise, seed=1):
    rng = np.random.default_rng(seed)
    return replace(rows, torque=rows.torque + rng.normal(size=rows.torque.shape) * noise)


def test_each_joint_weighs_by_its_own_noise(planar2):
    """Noise of 3 N m and 0.01 N m comes out as such to 15 % (400 samples), and the quiet joint decides what it can."""
    base = base_of(planar2, GRAVITY, LINKS)
    found = estimate(base, [noisy(formula_rows(planar2, LINKS, base), np.array([3.0, 0.01]))])
    assert found.noise == pytest.approx([3.0, 0.01], rel=0.15)
    fore = [i for i, name in enumerate(base.names) if "upper" not in name]
    assert np.abs(found.values - truth(planar2, LINKS, base))[fore].max() < 0.01
    assert found.deviation[fore].max() < 0.003


def test_outliers_are_left_out_and_counted(planar2):
    """Ten samples of 200 N m on one joint move the estimate by less than its standard deviation."""
    base = base_of(planar2, GRAVITY, LINKS)
    rows = noisy(formula_rows(planar2, LINKS, base), 0.1)
    spoiled = rows.torque.copy()
    spoiled[5:400:40, 0] += 200.0
    clean, found = estimate(base, [rows]), estimate(base, [replace(rows, torque=spoiled)])
    assert found.outliers.tolist() == [10, 0]
    assert (np.abs(found.values - clean.values) < clean.deviation).all()


def test_rows_say_when_they_were_and_how_fast(rubbing):
    """Times count from where the recording began, not from its clock; speeds are those of the motion, to 1e-3."""
    base, given = base_of(rubbing, GRAVITY, Terms()), formula_recording(rubbing, v=False)
    rows = rows_of(rubbing, GRAVITY, Terms(), base, replace(given, t=given.t + 1e6))
    assert np.allclose(rows.t, rows_of(rubbing, GRAVITY, Terms(), base, given).t, atol=1e-6)
    speed = MOTION.reference(rows.t)[1]
    assert np.abs(rows.v - speed).max() < 1e-3 * np.abs(speed).max()


def test_a_standing_joint_says_nothing_of_friction(rubbing):
    """While a joint stands its torque may be anything within Coulomb's: those samples are not used."""
    base = base_of(rubbing, GRAVITY, Terms())
    given = formula_recording(rubbing)
    rest = 3000
    q = np.concatenate([given.q, np.repeat(given.q[-1:], rest, axis=0)])
    held = (
        formula_torque(rubbing, q[-rest:], np.zeros((rest, 2)), np.zeros((rest, 2)))
        + 0.9 * rubbing.drives.coulomb
    )
    torque = np.concatenate([given.torque, held])
    recording = Recording("rests", np.arange(len(q)) / 1000, q, None, torque)
    rows = rows_of(rubbing, GRAVITY, Terms(), base, recording)
    assert not rows.usable[-40:].any()
    error = estimate(base, [rows]).values - truth(rubbing, Terms(), base)
    assert np.abs(error / np.maximum(scale(rubbing, Terms(), base), 0.01)).max() < 1e-4


def test_a_second_motion_tells_a_good_model_from_a_wrong_one(rubbing):
    """Torques of a motion that was not fitted are predicted to the noise; with a mass 20 % wrong, far from it."""
    base = base_of(rubbing, GRAVITY, Terms())
    first, second = (
        rows_of(rubbing, GRAVITY, Terms(), base, formula_recording(rubbing, m)) for m in (MOTION, OTHER)
    )
    found = estimate(base, [noisy(first, 0.05)])
    check = torque_error(found.values, noisy(second, 0.05, seed=2))
    assert check.rms_nm == pytest.approx([0.05, 0.05], rel=0.25)  # 84 samples a joint: 8 % is one deviation
    wrong = base.combination @ parameter_values(rubbing.replaced(1.2 * rubbing.parameters), Terms())
    assert (torque_error(wrong, second).share > 5 * check.share).all()


def test_two_recordings_are_fitted_as_one(rubbing):
    """Twice the same recording: the same values, and the covariance is half of it."""
    base = base_of(rubbing, GRAVITY, Terms())
    rows = noisy(rows_of(rubbing, GRAVITY, Terms(), base, formula_recording(rubbing)), 0.1)
    one, two = estimate(base, [rows]), estimate(base, [rows, rows])
    assert np.allclose(one.values, two.values, rtol=1e-6, atol=1e-9)
    assert np.allclose(np.diag(two.covariance) / np.diag(one.covariance), 0.5, atol=0.03)


def test_what_is_not_excited_is_named(planar2, rubbing):
    """One joint alone at rest: the parameters that only its motion shows are named in the fault."""
    still = FourierMotion((0.1, 0.2), ((0.8, -0.4), (0.0, 0.0)), ((0.8, -0.2), (0.0, 0.0)), 4.0, 3)
    base = base_of(rubbing, GRAVITY, Terms())
    rows = rows_of(rubbing, GRAVITY, Terms(), base, formula_recording(rubbing, still))
    with pytest.raises(InputFaults, match=r"does not excite .*elbow"):
        estimate(base, [rows])


def test_too_short_is_a_fault(rubbing):
    """0.5 s leave nothing between the filters' ends, 3 s too few samples for 11 parameters; 20 Hz is no rate."""
    base = base_of(rubbing, GRAVITY, Terms())
    whole = formula_recording(rubbing)

    def cut(step, end):
        rows = slice(0, end, step)
        return Recording("cut.csv", whole.t[rows], whole.q[rows], None, whole.torque[rows])

    with pytest.raises(InputFaults, match="too short for a filter"):
        rows_of(rubbing, GRAVITY, Terms(), base, cut(1, 500))
    with pytest.raises(InputFaults, match="samples a second"):
        rows_of(rubbing, GRAVITY, Terms(), base, cut(50, 16000))
    with pytest.raises(InputFaults, match="samples after filtering for 11 parameters"):
        estimate(base, [rows_of(rubbing, GRAVITY, Terms(), base, cut(1, 3000))])


def held(done, right):
    """Which of the 95 % intervals hold the right values."""
    low, high = done.interval()
    return (low <= right) & (right <= high)


def test_ten_samples_a_parameter_and_joint_are_the_least(rubbing):
    """11 parameters of two joints take 55 samples: 54 are a fault, 55 and 56 give finite intervals that hold most."""
    base = base_of(rubbing, GRAVITY, Terms())
    rows = noisy(formula_rows(rubbing, Terms(), base, count=56), 1.0)

    def first(count):
        cut = (part[:count] for part in (rows.y, rows.torque, rows.usable))
        return Rows(*cut, "short.csv", rows.t[:count], rows.v[:count])

    with pytest.raises(
        InputFaults, match="54 samples after filtering for 11 parameters; expected 55 or more"
    ):
        estimate(base, [first(54)])
    for count in (55, 56):
        found = estimate(base, [first(count)])
        assert np.isfinite(found.deviation).all()
        assert held(found, truth(rubbing, Terms(), base)).sum() >= 8


def coverage(repetitions):
    """Share of 95 % intervals that hold the truth, pooled; planar2 on the rig with noisy sensors."""
    arm, base = FILES.arm(), base_of(FILES.arm(), GRAVITY, LINKS)
    law = choose("computed-torque", options_model(registered().laws["computed-torque"].cls)(natural_hz=5.0))
    hits = []
    for draw in range(repetitions):
        sensing = Sensing(noise_deg=0.001)
        log = simulate(
            Run(FILES, law, MOTION, Rates(1000, 2000), (0.0, 0.0), 0.5, seed=1, draw=draw, sensing=sensing)
        )
        torque_noise = 0.2 * np.random.default_rng(draw).normal(size=log.torque.shape)
        noise = noise_of(sensing, len(log.t), arm, 1, draw)
        recording = of_run(log, "rig", noise, torque_noise)
        found = estimate(base, [rows_of(arm, GRAVITY, LINKS, base, recording)])
        hits.append(held(found, truth(arm, LINKS, base)))
    return float(np.mean(hits))


def tray6_coverage(repetitions, periods):
    """The same of all 52 parameters of tray6 along one excited motion.

    One run of the engine serves all repetitions: its law senses without noise, so that what the sensors'
    noise is changes nothing that happens, and each repetition reads the same run with noise of its own.
    """
    bounds = bounds_of(TRAY6.arm())
    search = Search(TRAY6.arm(), GRAVITY, Terms(), bounds, SeriesSpace(bounds, 5, 4.0))
    motion = excite(search, starts=5, rounds=15, periods=periods).motion
    run, plant = record(TRAY6, Settings(), Simulated(Mismatch(), ()), motion, "run", 0)
    right, hits = truth(plant, Terms(), search.base), []
    for draw in range(repetitions):
        rng = np.random.default_rng(draw)
        q = run.q + np.radians(0.001) * rng.normal(size=run.q.shape)
        torque = run.torque + 0.5 * rng.normal(size=run.q.shape)
        rows = rows_of(plant, GRAVITY, Terms(), search.base, replace(run, q=q, torque=torque))
        hits.append(held(estimate(search.base, [rows]), right))
    return float(np.mean(hits))


def test_intervals_cover_the_truth_on_the_rig():
    """12 repetitions: 80 % or more of 72 intervals, of which 95 % are expected (5 % of chance: 90 %)."""
    assert coverage(12) > 0.8


@pytest.mark.evidence
def test_intervals_cover_the_truth_as_often_as_they_say():
    """200 repetitions with noise of 0.001 deg and 0.2 N m: 93 to 97 % of 1200 intervals."""
    assert 0.93 <= coverage(200) <= 0.97


@pytest.mark.evidence
def test_intervals_cover_the_truth_with_dry_friction_too():
    """tray6, 200 repetitions of 20 s with noise of 0.001 deg and 0.5 N m: 93 to 97 % of 10,400 intervals."""
    assert 0.93 <= tray6_coverage(200, 5) <= 0.97


@pytest.mark.evidence
def test_intervals_cover_the_truth_of_any_machine_on_any_motion(tray6):
    """40 hidden machines on 40 random motions, each run with the noise in its loop: 93 to 97 % of 2,080 intervals
    (a standard deviation of 0.5 % if they were independent)."""
    bounds, hits = bounds_of(tray6), []
    search = Search(tray6, GRAVITY, Terms(), bounds, SeriesSpace(bounds, 5, 4.0))
    for seed in range(40):
        machine = Simulated(HIDDEN, SOURCES, seed=seed, noise_deg=0.001, torque_noise_nm=0.5)
        recording, plant = record(TRAY6, Settings(), machine, search.random_motion(seed, 5), "random", 0)
        done = identify(TRAY6, Settings(), [recording], truth=plant)
        hits.append(held(done.found, done.true_values))
    assert 0.93 <= float(np.mean(hits)) <= 0.97


def test_samples_left_out_count_neither_as_known_nor_as_exact(rubbing):
    """Where 40 % of one joint's samples and 10 % of the other's are left out, the covariance is that of least squares
    on the rest, (Y'Y)^-1 over noise of 1, to 15 % in each parameter on the mean of 40 draws (4 % each by chance)."""
    base, rng = base_of(rubbing, GRAVITY, Terms()), np.random.default_rng(0)
    rows = formula_rows(rubbing, Terms(), base, count=500)
    usable = rng.random((500, 2)) > np.array([0.4, 0.1])
    y = rows.y[usable]
    right = np.diag(np.linalg.inv(y.T @ y))
    draws = [replace(noisy(rows, 1.0, seed), usable=usable) for seed in range(40)]
    told = np.mean([np.diag(estimate(base, [draw]).covariance) for draw in draws], axis=0)
    assert told == pytest.approx(right, rel=0.15)


def test_noise_that_hangs_together_widens_intervals(planar2):
    """Each sample's noise shared half with the next: an offset, sum of c_s times the torques, has the variance of white
    noise times 1 + sum c_s c_s+1 / sum c_s^2, of which Bartlett's weights over two lags see 2/3; to 5 % on 20 draws."""
    terms = Terms(rotor=False, viscous=False, coulomb=False, offset=True)
    base, told = base_of(planar2, GRAVITY, terms), []
    rows = formula_rows(planar2, terms, base)
    offsets = [i for i, name in enumerate(base.names) if name.startswith("offset")]
    for seed in range(20):
        white = np.random.default_rng(seed).normal(size=(401, 2))
        for noise in (white[1:], (white[1:] + white[:-1]) / np.sqrt(2)):
            found = estimate(base, [replace(rows, torque=rows.torque + noise)])
            told.append(found.deviation[offsets] ** 2)
    c = np.linalg.pinv(rows.y.reshape(-1, base.count))[offsets].reshape(2, -1, 2)
    widened = 1 + 2 / 3 * (c[:, 1:] * c[:, :-1]).sum(axis=(1, 2)) / (c**2).sum(axis=(1, 2))
    assert (widened > 1.2).all()
    assert np.mean(told[1::2], axis=0) / np.mean(told[::2], axis=0) == pytest.approx(widened, rel=0.05)


def test_spikes_do_not_count(rubbing):
    """50 N m more or less in 1 % of the torques and 2 degrees in 0.2 % of the positions move no value by its own
    standard deviation, and are counted: filters would smear them into noise of 1 N m."""
    base = base_of(rubbing, GRAVITY, Terms())
    given, rng = formula_recording(rubbing), np.random.default_rng(3)
    shape = given.q.shape
    clean = replace(given, v=None, torque=given.torque + 0.5 * rng.normal(size=shape))
    struck, jumped = rng.random(shape) < 0.01, rng.random(shape) < 0.002
    spoiled = replace(
        clean,
        torque=clean.torque + struck * rng.choice([-50.0, 50.0], shape),
        q=clean.q + jumped * np.radians(2.0),
    )
    fits, rows = [], []
    for recording in (clean, spoiled):
        rows.append(rows_of(rubbing, GRAVITY, Terms(), base, recording))
        fits.append(estimate(base, rows[-1:]))
    assert rows[0].spikes == 0
    assert rows[1].spikes == pytest.approx(struck.sum() + jumped.sum(), rel=0.01)
    assert (np.abs(fits[1].values - fits[0].values) < fits[0].deviation).all()
    assert fits[1].deviation == pytest.approx(fits[0].deviation, rel=0.2)


def test_steps_and_turns_are_no_spikes():
    """At 100 Hz a square wave, sines of 5 and 0.2 Hz, a standing column and counts of an encoder come back as they
    were."""
    t = np.arange(2000) / 100
    wave = np.sin(2 * np.pi * 5 * t)
    columns = np.column_stack(
        [np.sign(np.sin(t)), wave, np.sin(0.4 * np.pi * t), np.zeros(2000), np.round(wave / 0.05) * 0.05]
    )
    cleaned, count = without_spikes(columns)
    assert count == 0
    assert np.array_equal(cleaned, columns)


@pytest.mark.parametrize("rate", [100, 20_000])
def test_slow_and_fast_recordings(rubbing, rate, monkeypatch):
    """At ten times the corner and at two thousand times the parameters come back to 1e-3 of what they are made of; the
    regressor is worked out at 1000 samples a second at most."""
    asked = []

    def counting(arm, gravity, q, *rest):
        asked.append(len(q))
        return regressor(arm, gravity, q, *rest)

    monkeypatch.setattr(filtering, "regressor", counting)
    base, given = base_of(rubbing, GRAVITY, Terms()), formula_recording(rubbing, rate=rate, v=False)
    rows = rows_of(rubbing, GRAVITY, Terms(), base, given)
    assert sum(asked) == min(len(given.t), 1000 * given.t[-1] + 1) // 1
    error = estimate(base, [rows]).values - truth(rubbing, Terms(), base)
    assert np.abs(error / np.maximum(scale(rubbing, Terms(), base), 0.01)).max() < 1e-3


def test_the_slowest_rate_is_ten_times_the_corner(rubbing):
    """80 Hz is twice the corner of the positions' filter at 10 Hz, which nothing filters: a fault, and the way out."""
    base = base_of(rubbing, GRAVITY, Terms())
    with pytest.raises(InputFaults, match="expected 100 or more, or a lower corner_hz"):
        rows_of(rubbing, GRAVITY, Terms(), base, formula_recording(rubbing, rate=80))
    assert len(rows_of(rubbing, GRAVITY, Terms(), base, formula_recording(rubbing, rate=80), 8.0).y) > 100


def test_a_speed_below_its_noise_counts_as_standing(rubbing):
    """Noise of 0.1 deg hides where a joint turns: more samples are left out than without, but not all."""
    base = base_of(rubbing, GRAVITY, Terms())
    given = replace(formula_recording(rubbing), v=None)
    noise = np.radians(0.1) * np.random.default_rng(0).normal(size=given.q.shape)
    exact, rough = (
        rows_of(rubbing, GRAVITY, Terms(), base, recording).usable.mean()
        for recording in (given, replace(given, q=given.q + noise))
    )
    assert 0.2 < rough < exact - 0.05


def test_counts_and_zero_of_the_encoder_are_recorded(planar2):
    """A run's recording carries the plant's counts and its torque at the tick is the mean of both sides."""
    log = simulate(
        Run(
            FILES.with_drives([("all", "encoder_counts", 1000)]),
            choose(
                "computed-torque", options_model(registered().laws["computed-torque"].cls)(natural_hz=5.0)
            ),
            OTHER,
            Rates(1000, 1000),
            (0.0, 0.0),
            0.5,
        )
    )
    recording = of_run(log, "rig")
    counts = recording.q / (2 * np.pi / 1000)
    assert np.allclose(counts, np.round(counts), atol=1e-9)
    assert np.abs(recording.q - log.q).max() <= np.pi / 1000 * (1 + 1e-9)
    assert np.array_equal(recording.torque[5], (log.torque[4] + log.torque[5]) / 2)
