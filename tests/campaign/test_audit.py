"""The audit of an arm: that what it measures is so, and that it is told so that one can read it."""

from __future__ import annotations

import json
import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pybullet_data
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_ivp
from typer.testing import CliRunner

from rigbench.arm.files import ArmFiles, load_arm
from rigbench.campaign.audit import audit, friction
from rigbench.campaign.audit.accelerations import compare_accelerations
from rigbench.campaign.audit.friction import at_rest, closed_stop, sliding
from rigbench.campaign.audit.result import ACCELERATION_LIMIT, Convergence, Rest, Slide, order_of
from rigbench.campaign.audit.states import reference_motion
from rigbench.campaign.audit.swing import free_swing
from rigbench.cli import app
from rigbench.errors import InputFaults, StoreError
from rigbench.report.audit_picture import audit_figure, audit_picture
from rigbench.report.audit_text import audit_text
from rigbench.report.paper import steady_settings, text_boxes
from rigbench.rig.engine import Engine

ROOT = Path(__file__).resolve().parents[2]
DATA = Path(pybullet_data.getDataPath())
PLANAR2 = ROOT / "robots_demo" / "planar2" / "arm.yaml"
TRAY6 = ROOT / "robots_demo" / "tray6" / "arm.yaml"


@pytest.fixture(scope="module")
def engine():
    made = Engine()
    yield made
    made.close()


@pytest.fixture(scope="module")
def planar(engine):
    """The audit of planar2, which takes seconds."""
    return audit(ArmFiles.read(PLANAR2), engine)


def test_an_arm_that_is_what_it_says(planar):
    """planar2: engine and model agree, errors fall with the square of the step, energy lasts; momentum
    and dry friction, which it lacks, are said not to apply; the rate named is that of the hardest run."""
    assert planar.agrees
    assert planar.accelerations.worst < 1e-9
    assert planar.residual < 1e-9
    assert planar.swing.order == pytest.approx(2, abs=0.1)
    assert planar.swing.drifts[1] < 1e-4
    assert not planar.momentum.applies
    assert (planar.rest.drift, planar.slides) == (None, ())
    smooth = [course for course in planar.convergences if not course.dry]
    assert len(smooth) == 2
    for course in smooth:
        assert course.against == "ode"
        assert course.order == pytest.approx(2, abs=0.05)
        assert course.errors[1] < 1e-5
    assert planar.physics_hz == max(course.needed_hz for course in planar.convergences)
    assert "engine and model agree" in planar.verdict
    assert f"physics_hz {planar.physics_hz:g}" in planar.verdict


def test_a_declared_arm_without_dry_friction_is_the_smooth_one(planar):
    """planar2 has no dry friction and stays within its limits: then the engine's own finest run serves as
    the ODE solution does, up to that run's own error, a sixteenth squared of the error at 1 kHz."""
    for smooth, declared in zip(planar.convergences[::2], planar.convergences[1::2], strict=True):
        assert (smooth.law, smooth.dry, declared.dry) == (declared.law, False, True)
        assert declared.errors[1] == pytest.approx(smooth.errors[1], rel=0.01)


class HeavierEngine(Engine):
    """An engine whose last link is heavier than the model has it, by a thousandth."""

    def load(self, arm, *others):
        parameters = arm.parameters.copy()
        parameters[-1] *= 1.001
        super().load(arm.replaced(parameters=parameters), *others)


def test_an_engine_that_plays_another_machine_is_found_out(planar):
    """A link a thousandth too heavy in the engine alone: accelerations differ, and the verdict says so."""
    wrong = HeavierEngine()
    try:
        found = compare_accelerations(wrong, load_arm(PLANAR2))
    finally:
        wrong.close()
    assert found.worst > 100 * ACCELERATION_LIMIT
    told = replace(planar, accelerations=found)
    assert not told.agrees
    assert "do NOT agree" in told.verdict
    assert not replace(planar, residual=1e-5).agrees
    assert not replace(planar, residual=math.nan).agrees


@settings(max_examples=30, deadline=None)
@given(
    inertia=st.floats(1e-3, 10),
    viscous=st.floats(0, 10),
    coulomb=st.floats(0.01, 10),
    speed=st.floats(0.01, 5),
)
def test_the_closed_form_of_a_stop_is_that_of_the_equation(inertia, viscous, coulomb, speed):
    """J dv/dt = -F - B v, integrated by scipy until its event v = 0."""

    def stopped(_, x):
        return x[1]

    stopped.terminal = True
    solved = solve_ivp(
        lambda _, x: [x[1], -(coulomb + viscous * x[1]) / inertia],
        (0, 2 * inertia * speed / coulomb), [0, speed], "DOP853", events=stopped, rtol=1e-11, atol=1e-14,
    )  # fmt: skip
    np.testing.assert_allclose(
        closed_stop(inertia, viscous, coulomb, speed), [solved.t[-1], solved.y[0, -1]], rtol=1e-6
    )


def test_stops_without_viscous_friction_join_on():
    """As B goes to 0 the closed form goes over into J v0/F and J v0^2/2F without a step."""
    for viscous in (0.0, 1e-9, 9.9e-7, 1.1e-6):
        expected = 1 - viscous / 2, 0.5 * (1 - 2 * viscous / 3)
        np.testing.assert_allclose(closed_stop(1.0, viscous, 1.0, 1.0), expected, rtol=1e-9)


def test_tray6_at_rest_and_sliding(engine, monkeypatch):
    """tray6 below breakaway stays where it is to 1e-9 rad, and above it goes; each joint slides to a stop
    within 1 % of the time and 0.1 % of the way that the closed form gives."""
    arm = load_arm(TRAY6)
    rest, residual = at_rest(engine, arm)
    assert rest.seconds == 10
    assert "every joint" in rest.how
    assert rest.drift < 1e-9
    assert residual < 1e-9
    monkeypatch.setattr(friction, "LOAD", 1.05)
    monkeypatch.setattr(friction, "SECONDS", 0.5)
    assert at_rest(engine, arm)[0].drift > 1e-3
    slides = [slide for slide, _ in sliding(engine, arm)]
    assert [slide.joint for slide in slides] == list(arm.joints)
    assert max(slide.stop_off for slide in slides) < 1e-2
    assert max(slide.travel_off for slide in slides) < 1e-3


def test_tray6_keeps_the_momentum_of_its_first_joint(engine):
    """j1 turns about gravity's axis: free swing keeps its momentum as it keeps energy; and a joint across
    gravity, or about another axis, is told apart."""
    swing, momentum, _ = free_swing(engine, load_arm(TRAY6))
    assert momentum.applies
    assert "j1" in momentum.why
    assert momentum.drifts[1] < 1e-4
    assert momentum.drifts[0] / momentum.drifts[2] == pytest.approx(16, rel=0.2)
    assert swing.order == pytest.approx(2, abs=0.05)
    gantry = load_arm(ROOT / "tests" / "arm" / "gantry" / "arm.yaml")
    assert not free_swing(engine, gantry)[1].applies


@settings(max_examples=50, deadline=None)
@given(seed=st.integers(0, 2**32))
def test_the_reference_stays_within_the_limits(seed):
    """Whatever the limits of position and speed, the motion keeps them, and it moves every joint."""
    rng, arm = np.random.default_rng(seed), load_arm(TRAY6)
    lower = np.where(rng.random(6) < 0.3, -np.inf, rng.uniform(-8, 3, 6))
    upper = np.where(rng.random(6) < 0.3, np.inf, np.maximum(lower, -8) + 10 ** rng.uniform(-3, 1, 6))
    speed = np.where(rng.random(6) < 0.3, np.inf, 10 ** rng.uniform(-3, 1, 6))
    kinds = rng.integers(0, 2, 6).astype(float)
    arm = replace(arm, lower=lower, upper=upper, kinds=kinds, drives=replace(arm.drives, speed_limit=speed))
    motion = reference_motion(arm)
    q, v, _ = motion.reference(np.linspace(0, motion.duration_s, 200))
    assert np.all((q >= lower) & (q <= upper))
    assert np.all(np.abs(v) <= speed)
    assert np.all(np.ptp(q, axis=0) > 0)


def test_needed_is_the_first_of_an_unbroken_row():
    """A rate that happens to be good while a finer one is not does not count."""
    course = Convergence("law", 5, False, "ode", (500.0, 1000.0, 2000.0), (), (), (), None)
    assert replace(course, used=(0.5, 1.2, 0.3)).needed_hz == 2000
    assert replace(course, used=(0.5, 0.2, 0.1)).needed_hz == 500
    assert replace(course, used=(0.5, 0.2, 1.1)).needed_hz is None
    assert replace(course, used=(math.inf, 0.2, 0.1)).needed_hz == 1000


def test_order_is_the_slope_of_the_logarithms():
    """Errors of 4^-k at doubled rates are of order 2; rounding and what is infinite is left out."""
    assert order_of((1.0, 2.0, 4.0), (16.0, 4.0, 1.0)) == pytest.approx(2)
    assert order_of((1.0, 2.0, 4.0), (math.inf, 4.0, 1e-15), floor=1e-12) is None


@pytest.fixture
def crowded(planar):
    """An audit with all that can make a page full: seven joints of long names, each sliding, long words."""
    joints = tuple(f"a_joint_with_quite_a_long_name_{k}" for k in range(7))
    return replace(
        planar,
        name="an arm whose name has no end and hardly a blank " * 2,
        joints=joints,
        unit="rad or m",
        accelerations=replace(planar.accelerations, joints=joints, differences=(0.0, 1e-16, *[1e-9] * 4, math.inf)),
        momentum=replace(planar.momentum, applies=True, physics_hz=(1000.0, 2000.0), drifts=(1e-3, 2.5e-4)),
        rest=Rest(", ".join(joints) + " at 90 % of breakaway, weightless", 10.0, 0.0),
        slides=tuple(Slide(joint, 1.5, 0.1, 0.101, 0.05, 0.0501) for joint in joints),
    )  # fmt: skip


def unjudged(planar):
    """An audit in which no run got to its end."""
    lost = (math.inf,) * 5
    return replace(
        planar,
        convergences=tuple(
            replace(course, errors=lost, used=lost, worst=("",) * 5, order=None, note="no run gets to its end")
            for course in planar.convergences
        ),
    )  # fmt: skip


def test_an_audit_without_a_run_can_t_name_a_rate(planar):
    """Then there is no rate, and the verdict says why."""
    lost = unjudged(planar)
    assert lost.physics_hz is None
    assert "can't be told" in lost.verdict


def test_the_document_is_json(planar, crowded):
    """It holds both answers and what they rest on, in JSON's own numbers, infinities as null."""
    for each in (planar, crowded, unjudged(planar)):
        document = json.loads(json.dumps(each.document(), allow_nan=False))
        assert document["agrees"] is each.agrees
        assert document["physics_hz"] == each.physics_hz
        assert [c["needed_hz"] for c in document["convergences"]] == [c.needed_hz for c in each.convergences]
    assert document["convergences"][0]["errors"] == [None] * 5
    assert crowded.document()["accelerations"]["differences"][-1] is None
    assert crowded.document()["slides"][0]["stop_off"] == pytest.approx(1 - 0.1 / 0.101)


@pytest.mark.parametrize("width", [80, 100, 160])
def test_the_text_is_a_page_that_fits(planar, crowded, width):
    """No line is wider than asked, no number is cut, and all six parts are there."""
    for each in (planar, crowded, unjudged(planar)):
        text = audit_text(each, width)
        assert max(map(len, text.splitlines())) <= width
        assert all(f"\n{part}. " in text for part in range(1, 7))
        assert each.verdict[1:] in " ".join(text.split())
        assert len(text.splitlines()) < 75


def drawn_texts(figure):
    """The texts that are drawn, with their extents [pt]: labels of ticks beyond an axis's ends are not."""
    with steady_settings():
        figure.canvas.draw()
    beyond = set()
    for axes in figure.axes:
        for axis in (axes.xaxis, axes.yaxis):
            low, high = sorted(axis.get_view_interval())
            ticks = [*axis.get_major_ticks(), *axis.get_minor_ticks()]
            beyond |= {tick.label1 for tick in ticks if not low <= tick.get_loc() <= high or not axes.axison}
    return [(text, box) for text, box in text_boxes(figure) if text.get_visible() and text not in beyond]


def test_nothing_on_the_page_overlaps(planar, crowded):
    """No two texts of the picture meet, none leaves the page, and none is under 7 pt."""
    for each in (planar, crowded, unjudged(planar)):
        figure = audit_figure(each)
        width, height = figure.get_size_inches() * 72
        boxes = drawn_texts(figure)
        assert len(boxes) > 20
        for number, (text, box) in enumerate(boxes):
            assert text.get_fontsize() >= 7
            assert box.x0 >= 0, text
            assert box.y0 >= 0, text
            assert box.x1 <= width, text
            assert box.y1 <= height, text
            for other, there in boxes[number + 1 :]:
                assert not box.overlaps(there), (text.get_text(), other.get_text())


@pytest.mark.parametrize("kind", ["png", "svg"])
def test_the_picture_is_the_same_each_time(planar, tmp_path, kind):
    """The same audit makes the same bytes, in a folder that need not be there."""
    for name in ("one", "other"):
        audit_picture(planar, tmp_path / name / f"a.{kind}")
    assert (tmp_path / "one" / f"a.{kind}").read_bytes() == (tmp_path / "other" / f"a.{kind}").read_bytes()


def test_a_picture_that_can_t_be_drawn_is_told(planar, tmp_path):
    """Another format is the user's fault, a folder that can't be is the disk's."""
    with pytest.raises(InputFaults, match=r"'\.jpeg' is no format"):
        audit_picture(planar, tmp_path / "a.jpeg")
    (tmp_path / "file").write_text("")
    with pytest.raises(StoreError, match="can't be written"):
        audit_picture(planar, tmp_path / "file" / "a.png")


@pytest.fixture
def measured(planar, monkeypatch):
    """The command with its measuring done before."""
    monkeypatch.setattr("rigbench.campaign.audit.audit", lambda files: planar)


def test_the_command_tells_all(measured, tmp_path):
    """Text on standard output, or one JSON document; the picture where -o says; exit code 0."""
    plain = CliRunner().invoke(app, ["audit", str(PLANAR2)])
    assert plain.exit_code == 0
    assert "Engine and model agree" in plain.stdout
    picture = tmp_path / "audit.pdf"
    done = CliRunner().invoke(app, ["audit", str(PLANAR2), "-o", str(picture), "--json"])
    assert done.exit_code == 0
    document = json.loads(done.stdout)
    assert (document["agrees"], document["picture"]) == (True, str(picture))
    assert picture.read_bytes().startswith(b"%PDF")


def test_disagreement_is_a_result_too(planar, monkeypatch):
    """An engine that disagrees is told, in words and as 'agrees': false, and the command has done its job."""
    told = replace(planar, residual=1e-3)
    monkeypatch.setattr("rigbench.campaign.audit.audit", lambda files: told)
    done = CliRunner().invoke(app, ["audit", str(PLANAR2), "--json"])
    assert done.exit_code == 0
    assert json.loads(done.stdout)["agrees"] is False


def test_faults_of_the_arm_file_come_first(tmp_path):
    """A faulty arm, a missing one and a picture of no format end with code 2 and without measuring."""
    faulty = ROOT / "tests" / "arm" / "gantry" / "faults.yaml"
    for arguments in ([str(faulty)], [str(tmp_path / "none.yaml")], [str(PLANAR2), "-o", "a.jpeg"]):
        done = CliRunner().invoke(app, ["audit", *arguments, "--json"])
        assert done.exit_code == 2
        assert json.loads(done.stdout)["faults"]


DRIVE = "{gear_ratio: 100, rotor_inertia: 2.0e-5, coulomb: 2, viscous: 3%s}"
SEVEN = [f"lbr_iiwa_joint_{i}" for i in range(1, 8)]
SHIPPED = {
    "seven axes": ("kuka_iiwa/model.urdf", "lbr_iiwa_link_7", SEVEN, DRIVE % ""),
    "seven elastic axes": (
        "kuka_iiwa/model.urdf", "lbr_iiwa_link_7", SEVEN, DRIVE % ", stiffness: 2.0e4, spring_damping: 5",
    ),
    "seven axes without drives": ("kuka_iiwa/model.urdf", "lbr_iiwa_link_7", SEVEN, "{}"),
    "a slide and a turn": ("cartpole.urdf", "pole", ["slider_to_cart", "cart_to_pole"], DRIVE % ""),
    "five parallel axes": ("pendulum5.urdf", "link4", [f"joint{i}" for i in range(5)], DRIVE % ""),
}  # fmt: skip


@pytest.mark.evidence
@pytest.mark.parametrize("name", SHIPPED)
def test_arms_that_nobody_here_wrote(tmp_path, engine, name):
    """Seven axes, elastic ones, none with a drive, a slide: each gets its verdict, and engine and model agree."""
    file, tool, joints, drive = SHIPPED[name]
    drives = "".join(f"  {joint}: {drive}\n" for joint in joints)
    (tmp_path / "arm.yaml").write_text(f"urdf: {DATA / file}\ntool: {tool}\ndrives:\n{drives}")
    found = audit(ArmFiles.read(tmp_path / "arm.yaml"), engine)
    assert found.agrees
    assert found.physics_hz is not None, found.verdict
    assert all(not course.note for course in found.convergences)
    assert found.rest.drift is None or found.rest.drift < 1e-9
    assert found.swing.order == pytest.approx(2, abs=0.1)
