"""Loads against the numbers that made the data, and what is said of what can't be told."""

from __future__ import annotations

import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from scipy.stats import binom

from rigbench.arm.arm import Arm
from rigbench.arm.dynamics import inverse_dynamics
from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Case, Mismatch, Spread
from rigbench.arm.physical import from_inertia, possible
from rigbench.errors import InputFaults
from rigbench.identify.base import base_of, base_of_load
from rigbench.identify.estimate import estimate
from rigbench.identify.filtering import Rows
from rigbench.identify.fourier import FourierMotion
from rigbench.identify.identified import write_identified, write_loaded
from rigbench.identify.load import Load, carried_columns, identify_with_load
from rigbench.identify.load_terms import _quotient, _slope, _values
from rigbench.identify.plausible import implausible
from rigbench.identify.procedure import Identification, Settings, Simulated, identify, record
from rigbench.identify.recording import Recording
from rigbench.identify.recording_file import read_recording, write_recording
from rigbench.identify.regressor import Terms, parameter_values, regressor
from rigbench.report.load_text import load_document, load_text

GRAVITY = (0.0, 0.0, -9.81)
ROBOTS = Path(__file__).resolve().parents[2] / "robots_demo"
PLANAR2 = ArmFiles.read(ROBOTS / "planar2" / "arm.yaml")
LINKS = Terms(rotor=False, viscous=False, coulomb=False)
MOTION = FourierMotion((0.2, -0.3), ((0.9, -0.45), (-0.7, 0.35)), ((0.4, -0.1), (0.8, -0.2)), 4.0, 4)
BODY = from_inertia(2.3, np.array([0.12, -0.03, 0.05]), np.diag([0.02, 0.03, 0.04]) + 0.002)
"""A load that is no point, in the last link's frame."""


def carrying(arm: Arm, body) -> Arm:
    """The arm with a body added to its last link."""
    parameters = arm.parameters.copy()
    parameters[-1] += body
    return arm.replaced(parameters)


def formula_torque(arm, q, v, a):
    """Torques by the dynamics kernels and the drives' formulas."""
    links = np.array([inverse_dynamics(arm.chain(GRAVITY), *state) for state in zip(q, v, a, strict=True)])
    return links + arm.drives.reflected * a + arm.drives.viscous * v + arm.drives.coulomb * np.sign(v)


def formula_rows(arm, true, terms, columns, noise=0.0, count=300, seed=5, offset=0.0):
    """Random states; torques of ``true`` by the dynamics kernels and the drives' formulas, with noise."""
    rng = np.random.default_rng(seed)
    q, v, a = (scale * rng.normal(size=(count, arm.n)) for scale in (1, 1, 5))
    torque = formula_torque(true, q, v, a) + offset + noise * rng.normal(size=q.shape)
    y = regressor(arm, GRAVITY, q, v, a, terms)[:, :, columns]
    return Rows(y, torque, np.ones(q.shape, bool), f"{seed}.csv", np.arange(count) / 1000, v)


def found_with(arm, body, terms=LINKS, noise=0.0, count=300, seed=5, offset=0.0):
    """Estimate, arm and load from formulas' torques of an arm, and of it with ``body``."""
    bases = base_of(arm, GRAVITY, terms), base_of_load(arm, GRAVITY)
    both = np.append(bases[0].kept, carried_columns(arm, bases[1]))
    empty = formula_rows(arm, arm, terms, bases[0].kept, noise, count, seed, offset)
    full = formula_rows(arm, carrying(arm, body), terms, both, noise, count, seed + 1, offset)
    return identify_with_load(arm, terms, bases, [empty], [full], 0.3)


def by_name(load: Load):
    return {term.name: term for term in load.terms}


@pytest.mark.parametrize("name", ["tray6", "rubbing"])
def test_data_from_the_formulas_give_the_load_back(request, name):
    """Without noise: all ten parameters of tray6's, the four of planar2's that show, and the arm's to 1e-8; and
    the bodies that can exist have them to 1e-4 of what they are made of."""
    arm = request.getfixturevalue(name)
    found, result, load = found_with(arm, BODY, Terms())
    assert load.found.base.count == {"tray6": 10, "rubbing": 4}[name]
    assert np.abs(load.found.values - load.found.base.combination @ BODY).max() < 1e-8
    own = found.base.combination @ parameter_values(arm, Terms())
    assert np.abs(found.values - own).max() < 1e-8
    for base, body, values in (
        (load.found.base, load.parameters, load.found.values),
        (found.base, parameter_values(result.arm, Terms()), found.values),
    ):
        made_of = np.abs(base.combination) @ np.abs(body)
        error = np.abs(base.combination @ body - values)
        assert (error < 1e-4 * np.maximum(made_of, 1e-3 * made_of.max())).all()


def test_offsets_stand_behind_the_load(rubbing):
    """With every term of the drives asked for, each base parameter is still its own."""
    terms = Terms(offset=True)
    found, result, load = found_with(rubbing, BODY, terms, offset=np.array([0.7, -0.2]))
    told = dict(zip(found.base.names, found.values, strict=True))
    assert [told["offset.shoulder"], told["offset.elbow"]] == pytest.approx([0.7, -0.2], abs=1e-8)
    assert result.offset == pytest.approx([0.7, -0.2], abs=1e-4)
    assert result.arm.drives.coulomb == pytest.approx(rubbing.drives.coulomb, rel=1e-4)
    assert by_name(load)["mass"].value == pytest.approx(2.3, abs=1e-8)


def test_terms_are_those_of_a_data_sheet(tray6):
    """Mass, centre of gravity and inertia in the tool frame, worked out from the body and the tool's place."""
    turn = np.array([[0.0, 0.0, 1.0], [1.0, 0.0, 0.0], [0.0, 1.0, 0.0]])
    arm = replace(tray6, tool_rotation=turn, tool_position=np.array([0.1, 0.02, -0.03]))
    load = found_with(arm, BODY, Terms())[2]
    cog, tensor = np.array([0.12, -0.03, 0.05]), np.diag([0.02, 0.03, 0.04]) + 0.002
    wanted = 1e3 * turn.T @ (cog - arm.tool_position)
    turned = turn.T @ tensor @ turn
    terms = by_name(load)
    assert [terms[f"cog {axis}"].value for axis in "xyz"] == pytest.approx(wanted, abs=1e-4)
    for (row, r), (column, c) in ((x, y) for x in enumerate("xyz") for y in enumerate("xyz") if x <= y):
        assert terms[f"I{r}{c}"].value == pytest.approx(turned[row, column], abs=1e-7)
        assert terms[f"I{r}{c}"].identified == pytest.approx(turned[row, column], abs=1e-4)


CHAINS = {
    "two in a plane": (([[0, 1, 0]] * 2, [[0, 0, 0], [0.5, 0, 0]]), {"mass", "cog x", "cog z", "Iyy"}),
    "one that turns": (([[0, 1, 0]], [[0, 0, 0]]), set()),
    "one that slides": (([[0, 0, 1]], [[0, 0, 0]], [1]), {"mass"}),
    "two that turn across": (([[0, 0, 1], [0, 1, 0]], [[0, 0, 0], [0.3, 0, 0.2]]), None),
}


@pytest.mark.parametrize("name", CHAINS)
def test_told_is_what_all_loads_with_the_same_torques_share(chain, name):
    """What is told is the same for loads that differ by what doesn't show, what is not told differs."""
    given, expected = CHAINS[name]
    arm = chain(*given)
    base = base_of_load(arm, GRAVITY)
    hidden = np.zeros((10, len(base.dependent)))
    hidden[base.kept], hidden[base.dependent] = -base.shares, np.eye(len(base.dependent))
    load = found_with(arm, BODY)[2]
    other = BODY + hidden @ (0.01 * np.random.default_rng(1).normal(size=len(base.dependent)))
    same = np.abs(_values(BODY) - _values(other)) < 1e-9
    assert [term.told for term in load.terms] == same.tolist()
    if expected is not None:
        assert {term.name for term in load.terms if term.told} == expected
    assert possible(load.parameters)
    assert np.abs(base.combination @ (load.parameters - BODY)).max() < 1e-3


def test_what_is_not_told_is_said_with_the_sums_that_are(chain):
    """One joint in the plane: no mass, but the sums of it; the JSON form has null."""
    load = found_with(chain(*CHAINS["one that turns"][0]), BODY)[2]
    said = "\n".join(load_text(load))
    assert "don't tell mass, cog x" in said
    assert "mcx.load" in said
    assert load_document(load)["terms"][0]["value"] is None


def test_slope_is_the_change_of_values():
    """Central differences over 2e-6 meet it to 1e-7 of the largest entry."""
    steps = 1e-6 * np.eye(10)
    expected = np.column_stack([(_values(BODY + step) - _values(BODY - step)) / 2e-6 for step in steps])
    assert np.abs(_slope(BODY) - expected).max() < 1e-7 * np.abs(expected).max()


def test_a_quotient_is_covered_as_often_as_its_interval_says():
    """20,000 pairs of normals with m known to 30 %, correlated: 94.5 to 95.5 % (a deviation is 0.15 %), where
    the first order alone is off; and no interval where m may be 0."""
    covariance = np.array([[0.04, 0.03], [0.03, 0.09]])
    pairs = np.random.default_rng(0).multivariate_normal([0.4, 1.0], covariance, size=20_000)
    ends = [_quotient(a, m, covariance, 1.959964) for a, m in pairs]
    bounded = [end for end in ends if end is not None]
    missed = sum(not low <= 0.4 <= high for _, low, high in bounded)
    assert 0.045 * len(ends) < missed < 0.055 * len(ends)
    assert len(bounded) < len(ends)
    assert _quotient(0.1, -1.0, 0.001 * covariance, 2.0) is None


def test_intervals_count_what_the_arm_is_known_by(planar2):
    """100 noisy repetitions by the formulas: 92 to 98 % of 400 intervals (a deviation is 1.1 %). Were the
    arm taken as known, they would be too narrow by a factor of 1.4: 84 %."""
    bases = base_of(planar2, GRAVITY, LINKS), base_of_load(planar2, GRAVITY)
    both = np.append(bases[0].kept, carried_columns(planar2, bases[1]))
    empty = formula_rows(planar2, planar2, LINKS, bases[0].kept, count=150, seed=1)
    full = formula_rows(planar2, carrying(planar2, BODY), LINKS, both, count=150, seed=2)
    rng, hits = np.random.default_rng(3), []
    right = bases[1].combination @ BODY
    for _ in range(100):
        noisy = [replace(rows, torque=rows.torque + rng.normal(size=(150, 2))) for rows in (empty, full)]
        low, high = identify_with_load(planar2, LINKS, bases, noisy[:1], noisy[1:], 0.3)[2].found.interval()
        hits.append((low <= right) & (right <= high))
    assert 0.92 <= float(np.mean(hits)) <= 0.98


def test_a_load_tells_of_the_arm_too(planar2):
    """The arm is known better with the second recording, and its covariance has the shape of an arm's."""
    bases = base_of(planar2, GRAVITY, LINKS), base_of_load(planar2, GRAVITY)
    alone = estimate(bases[0], [formula_rows(planar2, planar2, LINKS, bases[0].kept, noise=1.0)])
    found, result, _ = found_with(planar2, BODY, noise=1.0)
    assert found.base is not alone.base
    assert (found.deviation <= 1.05 * alone.deviation).all()
    assert found.deviation.sum() < 0.9 * alone.deviation.sum()
    assert result.covariance.shape == (20, 20)
    assert np.linalg.eigvalsh(result.covariance)[0] > 0


LOADS = {
    "a point": from_inertia(2.3, np.array([0.1, 0.0, 0.02]), np.zeros((3, 3))),
    "almost none": from_inertia(1e-5, np.array([0.1, 0.0, 0.02]), np.zeros((3, 3))),
    "none": np.zeros(10),
}


@pytest.mark.parametrize("noise", [0.0, 0.5])
@pytest.mark.parametrize("name", LOADS)
def test_loads_at_the_edge_end_in_a_body_that_can_exist(rubbing, name, noise):
    """Points and loads of next to no mass: a body that can exist, within five deviations of the truth and 10 g."""
    _, result, load = found_with(rubbing, LOADS[name], Terms(), noise)
    assert possible(load.parameters)
    assert possible(carrying(result.arm, load.parameters).parameters)
    base = load.found.base
    error = np.abs(base.combination @ (load.parameters - LOADS[name]))
    assert (error < 5 * load.found.deviation + 0.01).all()
    mass = by_name(load)["mass"]
    assert mass.low <= LOADS[name][0] <= mass.high or noise == 0
    assert mass.identified > 0


def test_a_mass_that_is_none_by_chance_has_no_centre_of_gravity(rubbing):
    """No load under noise, estimated below none: an interval around 0, no place, a light body, and words."""
    estimates = [found_with(rubbing, np.zeros(10), Terms(), 0.5, seed=seed)[2] for seed in range(0, 12, 2)]
    below = [load for load in estimates if by_name(load)["mass"].value < 0]
    assert below
    for load in below:
        terms = by_name(load)
        assert terms["mass"].low < 0 < terms["mass"].high
        assert terms["cog x"].value is None
        assert terms["cog x"].told
        assert 0 < terms["mass"].identified < 3 * load.found.deviation[load.found.base.names.index("m.load")]
        said = "\n".join(load_text(load))
        assert "can't be told from none" in said
        assert "too roughly to tell cog x, cog z, Iyy" in said


def test_a_mass_known_roughly_has_a_place_but_no_inertia(rubbing):
    """0.1 kg known to about 40 %: its centre of gravity has an interval, its inertia none, and that is said."""
    body = from_inertia(0.1, np.array([0.4, 0.0, 0.0]), np.zeros((3, 3)))
    load = found_with(rubbing, body, Terms(), 1.0, seed=20)[2]
    terms = by_name(load)
    half = (terms["mass"].high - terms["mass"].low) / 2
    assert 0.25 * terms["mass"].value < half < terms["mass"].value
    assert terms["cog x"].low <= 0 <= terms["cog x"].high
    assert terms["Iyy"].value is None
    assert "too roughly to tell Iyy." in "\n".join(load_text(load))


@pytest.mark.parametrize("name", ["two in a plane", "one that turns", "one that slides"])
def test_recordings_the_wrong_way_round_are_a_fault(chain, name):
    """A load of less than nothing, beyond chance: the recording is named, and what was meant."""
    with pytest.raises(InputFaults, match=r"6\.csv: the .* of the load comes out as -") as caught:
        found_with(chain(*CHAINS[name][0]), -0.3 * BODY, noise=0.01)
    assert "without it under recordings" in caught.value.faults[0].expected


def test_too_short_with_a_load_is_a_fault(planar2):
    """Ten samples of two joints for four parameters: the recording with the load is named."""
    bases = base_of(planar2, GRAVITY, LINKS), base_of_load(planar2, GRAVITY)
    both = np.append(bases[0].kept, carried_columns(planar2, bases[1]))
    empty = formula_rows(planar2, planar2, LINKS, bases[0].kept)
    full = formula_rows(planar2, carrying(planar2, BODY), LINKS, both, count=10, seed=9)
    with pytest.raises(InputFaults, match=r"9\.csv.*10 samples after filtering for 4 parameters"):
        identify_with_load(planar2, LINKS, bases, [empty], [full], 0.3)


def practised(seed: int, load: Case, mismatch: Mismatch) -> Identification:
    """planar2 on the rig under noise of 0.001 deg and 0.2 N m, with a load and without."""
    machine = Simulated(mismatch, mismatch.sources, seed, 0.001, 0.2, load)
    settings = Settings(LINKS)
    empty, truth = record(PLANAR2, settings, machine, MOTION, "empty", 0)
    full, laden = record(PLANAR2, settings, machine, MOTION, "full", 2, loaded=True)
    return identify(PLANAR2, settings, [empty], None, truth, [full], laden)


def covered(repetitions: int) -> tuple[int, int]:
    """How many of the four terms' intervals hold the truth, and of how many; a machine and load for each."""
    hits = []
    for seed in range(repetitions):
        rng = np.random.default_rng(seed)
        offset = tuple(rng.uniform(-60, 60, 3).tolist())
        load = Case(payload_kg=float(rng.uniform(0.5, 3)), payload_cog_mm=offset)
        done = practised(seed, load, Mismatch(link_mass_percent=Spread(10)))
        assert done.load is not None
        hits += [term.low <= term.truth <= term.high for term in done.load.terms if term.told]
    return sum(hits), len(hits)


def test_the_truth_lies_in_the_intervals_on_the_rig():
    """Four repetitions: 11 or more of 16 intervals (by the binomial law, fewer are one in 100,000 at 95 %)."""
    held, count = covered(4)
    assert count == 16
    assert binom.cdf(10, 16, 0.95) < 1e-4
    assert held >= 11


@pytest.mark.evidence
def test_intervals_cover_the_truth_as_often_as_they_say():
    """60 repetitions, 240 intervals: as many as 95 % leave likely (either tail of the binomial law 1 in 1000;
    the four of a repetition hang together, so that is strict)."""
    held, count = covered(60)
    print(f"{held} of {count} intervals hold the truth")
    assert count == 240
    assert binom.cdf(held, count, 0.95) > 1e-3
    assert binom.sf(held - 1, count, 0.95) > 1e-3


def test_the_true_load_is_the_machines_own():
    """What the hidden machine carries: mass and place as stated, no inertia; found on the rig to 1 mm and 0.5 %."""
    done = practised(1, Case(payload_kg=2.3, payload_cog_mm=(10, 0, 40)), Mismatch())
    assert done.load is not None
    terms = by_name(done.load)
    assert terms["mass"].truth == pytest.approx(2.3)
    assert [terms[f"cog {axis}"].truth for axis in "xyz"] == pytest.approx([10, 0, 40], abs=1e-9)
    assert terms["Iyy"].truth == 0
    assert terms["mass"].value == pytest.approx(2.3, rel=5e-3)
    assert terms["cog z"].value == pytest.approx(40, abs=1)


def test_the_loaded_arm_reads_back(tmp_path):
    """Both files read back as the arm, and as the arm whose last link holds the load too, to rounding."""
    done = practised(2, Case(payload_kg=1.5, payload_cog_mm=(0, 0, 30)), Mismatch())
    assert done.load is not None
    assert done.loaded_arm is not None
    path, urdf = write_loaded(tmp_path, "a-loaded", PLANAR2, LINKS, done.loaded_arm)
    assert (path.name, urdf.name) == ("a-loaded.yaml", "a-loaded.urdf")
    alone = ArmFiles.read(write_identified(tmp_path, "a", PLANAR2, LINKS, done.found, done.result)[0]).arm()
    back = ArmFiles.read(path).arm()
    assert np.allclose(back.parameters, done.loaded_arm.parameters, rtol=1e-12, atol=1e-14)
    assert np.allclose(back.parameters[0], alone.parameters[0], rtol=1e-12, atol=1e-14)
    added = back.parameters[-1] - alone.parameters[-1]
    assert np.allclose(added, done.load.parameters, rtol=1e-12, atol=1e-14)
    with pytest.raises(ValueError, match="no arm file"):
        write_loaded(tmp_path, "b", PLANAR2.with_drives([("all", "viscous", 1.0)]), LINKS, done.loaded_arm)


@pytest.fixture
def said_of(tmp_path, tray6_motion):
    """What is said of a recording with a load, of ``true`` after ``change``, beside the believed arm."""

    def said(true, believed, change=lambda recording: recording):
        motion = MOTION if true.n == 2 else tray6_motion
        t = np.arange(0, motion.duration_s, 1 / 500)
        q, v, a = motion.reference(t)
        torque = formula_torque(true, q, v, a) + 0.1 * np.random.default_rng(0).normal(size=q.shape)
        write_recording(tmp_path / "full.csv", believed, change(Recording("made", t, q, None, torque)))
        recording, table = read_recording(tmp_path / "full.csv", believed)
        return [str(fault) for fault in implausible(believed, GRAVITY, recording, table)]

    return said


def test_a_load_makes_no_good_log_implausible(said_of, planar2, tray6):
    """4 kg at the tool of an arm of 6 kg, whose elbow then needs several times the torque; and 3 kg at that of
    tray6, whose masses are 1.4 times and whose friction is not in the model at all."""
    heavy = carrying(planar2, from_inertia(4.0, np.array([0.4, 0, 0.1]), np.zeros((3, 3))))
    assert said_of(heavy, planar2) == []
    assert said_of(heavy.replaced(1.4 * heavy.parameters), planar2) == []
    nothing = {name: np.zeros(6) for name in ("viscous", "coulomb", "static")}
    poor = tray6.replaced(drives=replace(tray6.drives, **nothing))
    laden = carrying(tray6.replaced(1.4 * tray6.parameters), 1.3 * BODY)
    assert said_of(laden, poor) == []


SLIPS = {
    "torques in N mm": (lambda r: replace(r, torque=1e3 * r.torque), "tau_nm.*: looks 1000 times too large"),
    "torques swapped": (lambda r: replace(r, torque=r.torque[:, [1, 0, *range(2, r.q.shape[1])]]), "look swapped"),
    "positions in rad": (lambda r: replace(r, q=r.q / 57.29578), "q_deg.j1: looks 57.3 times too small"),
}  # fmt: skip


@pytest.mark.parametrize(
    ("arm", "slip"),
    [("planar2", "torques in N mm"), ("planar2", "torques swapped"), *(("tray6", s) for s in SLIPS)],
)
def test_slips_are_still_named_with_a_load(request, said_of, arm, slip):
    """A load is no excuse for a wrong unit: no load that the arm might carry explains it."""
    believed, (change, expected) = request.getfixturevalue(arm), SLIPS[slip]
    assert re.search(expected, "\n".join(said_of(carrying(believed, BODY), believed, change)))


def test_a_load_is_hardly_held_to_its_first_guess(tray6):
    """A slab, no ball of water, in 0.2 N m of noise: each entry of its inertia is as measured, to its deviation."""
    slab = from_inertia(2.3, np.array([0.12, -0.03, 0.05]), np.diag([0.05, 0.15, 0.19]))
    terms = by_name(found_with(tray6, slab, Terms(), noise=0.2)[2])
    for name in ("mass", "cog x", "cog y", "cog z", "Ixx", "Iyy", "Izz"):
        deviation = (terms[name].high - terms[name].value) / 2
        assert abs(terms[name].identified - terms[name].value) < deviation, name
