"""The picture of an identification: clear whatever the arm, what the numbers say, the same bytes each time."""

from __future__ import annotations

import math
from dataclasses import replace
from itertools import combinations
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Rectangle
from matplotlib.text import Text
from matplotlib.transforms import Affine2D, Bbox

from rigbench.arm.arm import Arm
from rigbench.arm.files import ArmFiles
from rigbench.errors import InputFaults, StoreError
from rigbench.identify.base import base_of
from rigbench.identify.consistent import Consistent
from rigbench.identify.estimate import estimate
from rigbench.identify.filtering import Rows
from rigbench.identify.procedure import Identification, Settings
from rigbench.identify.regressor import Terms, parameter_values, regressor
from rigbench.report.cautions import BEFORE_A_REAL_ARM, CAUTION
from rigbench.report.identify_picture import identify_figure, identify_picture
from rigbench.report.identify_text import identify_text
from rigbench.report.paper import text_boxes
from rigbench.report.shortening import fitted

GRAVITY = (0.0, 0.0, -9.81)
DEMO = Path(__file__).resolve().parents[2] / "robots_demo"
LINKS, ALL = Terms(False, False, False), Terms(offset=True)

URDF = """<robot name="{name}"><link name="bed"/>{links}</robot>"""
LINK = """<link name="{link}"><inertial><origin xyz="0.1 0.02 0.03"/><mass value="2"/>
<inertia ixx="0.03" iyy="0.04" izz="0.05" ixy="0.001" ixz="0.002" iyz="0.003"/></inertial></link>
<joint name="{joint}" type="{kind}"><origin xyz="0.2 0.1 0" rpy="{turn} 0 0"/><parent link="{parent}"/>
<child link="{link}"/><axis xyz="0 0 1"/><limit lower="-3" upper="3" effort="100" velocity="5"/></joint>"""


def chain(folder: Path, joints: int, name: str = "joint") -> ArmFiles:
    """An arm of so many joints, each across the one before, the last one a slide."""
    parent, links = "bed", ""
    for k in range(joints):
        link = f"{name}_{k}_link"
        kind, turn = "prismatic" if k == joints - 1 else "revolute", 0.0 if k == 0 else 1.2
        links += LINK.format(link=link, joint=f"{name}_{k}", kind=kind, parent=parent, turn=turn)
        parent = link
    (folder / "arm.urdf").write_text(URDF.format(name="tower", links=links))
    drives = "\n".join(f"  {name}_{k}: {{viscous: 2.0, coulomb: 3.0}}" for k in range(joints))
    (folder / "arm.yaml").write_text(f"urdf: arm.urdf\ntool: {parent}\ndrives:\n{drives}\n")
    return ArmFiles.read(folder / "arm.yaml")


def identified(
    files: ArmFiles, terms: Terms = LINKS, *, count: int = 160, noise: float = 0.1, checked: bool = False,
    known: bool = True, name: str = "a $name_ with & signs.csv",
) -> Identification:  # fmt: skip
    """An identification of an arm 10 % heavier than declared, from random states with some noise.

    The identified arm is the true one: what a solver would find is not the picture's concern.
    """
    arm, rng = files.arm(), np.random.default_rng(0)
    truth = arm.replaced(1.1 * arm.parameters)
    base = base_of(arm, GRAVITY, terms)
    q, v, a = rng.normal(size=(3, count, arm.n))
    y = regressor(arm, GRAVITY, q, v, a, terms)
    torque = y @ parameter_values(truth, terms) + noise * rng.normal(size=(count, arm.n))
    usable = np.ones((count, arm.n), bool)
    usable[[7, 8, 40], 0] = False
    rows = Rows(y[:, :, base.kept], torque, usable, name, 0.2 + np.arange(count) / 17.9, v)
    found = estimate(base, [rows])
    result = Consistent(truth, np.zeros(arm.n), np.zeros((0, 0)), np.zeros(0))
    return Identification(files, Settings(terms), found, result, rows, checked, truth if known else None)


@pytest.fixture(scope="module")
def done() -> Identification:
    """planar2, two links without friction."""
    return identified(ArmFiles.read(DEMO / "planar2" / "arm.yaml"))


def drawn_texts(figure: Figure) -> list[tuple[Text, Bbox]]:
    """The texts that are seen, with their extents [pt]: labels of ticks beyond an axis's ends are not."""
    figure.draw_without_rendering()
    unseen: set[Text] = set()
    for axes in figure.axes:
        for axis in (axes.xaxis, axes.yaxis):
            low, high = sorted(axis.get_view_interval())
            for tick in axis.get_major_ticks():
                if not (low <= tick.get_loc() <= high and tick.label1.get_visible()):
                    unseen.add(tick.label1)
                unseen.add(tick.label2)
    return [(text, box) for text, box in text_boxes(figure) if text.get_visible() and text not in unseen]


def assert_clear(figure: Figure) -> None:
    """No text meets another, a panel or the page's edge; none is under 7 pt; panels stand apart."""
    wide, high = (72 * inches for inches in figure.get_size_inches())
    texts = drawn_texts(figure)
    for text, box in texts:
        assert text.get_fontsize() >= 7
        assert min(box.x0, box.y0) >= 0, text.get_text()
        assert box.x1 <= wide, text.get_text()
        assert box.y1 <= high, text.get_text()
    shrunk = [(text.get_text(), box.padded(-0.5)) for text, box in texts]  # of the line, not of the letters
    for (one, box), (other, beside) in combinations(shrunk, 2):
        assert not box.overlaps(beside), (one, other)
    frames = [axes.get_position().transformed(Affine2D().scale(wide, high)) for axes in figure.axes]
    assert not any(one.overlaps(other) for one, other in combinations(frames, 2))
    assert not [said for said, box in shrunk for frame in frames if box.overlaps(frame)]


def words(figure: Figure) -> str:
    return " ".join(text.get_text() for text, _ in text_boxes(figure))


def curve(axes: Axes, name: str) -> Line2D:
    (line,) = [line for line in axes.lines if line.get_gid() == name]
    return line


LONG = "a_joint_whose_name_is_longer_than_any_that_a_user_may_think_of"


@pytest.mark.parametrize(
    ("joints", "name", "practised"),
    [(2, "a", True), (2, LONG, False), (5, "shoulder", False), (7, LONG, True)],
)
def test_nothing_overlaps(tmp_path: Path, joints: int, name: str, practised: bool) -> None:
    """With few and many joints, short names and long, a slide, every term, a check and a truth or neither."""
    long = "of/a/recording/" * 20
    each = identified(
        chain(tmp_path, joints, name), ALL, count=110, checked=practised, known=practised, name=long
    )
    figure = identify_figure(each)
    assert_clear(figure)
    named = [t.get_text() for t, _ in text_boxes(figure) if str(t.get_gid()).startswith("joint-")]
    assert len(set(named)) == joints
    assert figure.get_size_inches()[1] / figure.get_size_inches()[0] < 1.6  # a sheet's proportions, or nearly


@pytest.mark.parametrize("noise", [0.0, 1e-7, 30.0])
def test_any_noise_is_readable(done: Identification, noise: float) -> None:
    """From none, where numbers have exponents, to one that drowns the torques."""
    for terms in (LINKS, ALL):  # one column of parameters, and two
        assert_clear(identify_figure(identified(done.files, terms, noise=noise)))


def test_curves_and_numbers_are_those_of_the_rows(done: Identification) -> None:
    """Torque, error (a hole where the sample is left out) and what is left, over the recording's time."""
    rows, page = done.rows, identify_figure(done)
    assert len(page.axes) == 6
    torque, error, left = page.axes[:3]
    assert np.array_equal(curve(torque, "measured").get_ydata(), rows.torque[:, 0])
    for whose, values in (("declared", done.declared_values), ("identified", done.identified_values)):
        predicted = rows.y[:, 0] @ values
        assert np.allclose(curve(torque, whose).get_ydata(), predicted, rtol=1e-12)
        rest = np.where(rows.usable[:, 0], rows.torque[:, 0] - predicted, np.nan)
        assert np.allclose(curve(error, whose).get_ydata(), rest, rtol=1e-9, atol=1e-12, equal_nan=True)
        assert np.array_equal(curve(error, whose).get_xdata(), rows.t)
        for i, share in enumerate(done.torque_errors[whose].share):
            numbers = [t.get_text() for t, _ in text_boxes(page) if t.get_gid() == f"share-{i}"]
            said = numbers[1 if whose == "declared" else 2]
            assert float(said.removesuffix(" %")) == pytest.approx(100 * share, rel=0.05)  # two digits
    assert torque.get_xlim() == (rows.t[0], rows.t[-1])
    speeds = np.asarray(curve(left, "left").get_xdata())
    v = rows.v[rows.usable[:, 0], 0]
    assert np.allclose(speeds, v / np.abs(v).max())


def test_what_is_left_out_is_shaded_and_named(done: Identification) -> None:
    """Two stretches, half a sample wider at both ends; where nothing is left out, the key doesn't tell of it."""
    page = identify_figure(done)
    spans = [p for p in page.axes[1].findobj(Rectangle) if p.get_gid() == "left-out"]
    step = 1 / 17.9
    assert [(p.get_x() - 0.2, p.get_width()) for p in spans] == [
        pytest.approx((6.5 * step, 2 * step)), pytest.approx((39.5 * step, step)),
    ]  # fmt: skip
    assert "left out" in words(page)
    whole = replace(done, rows=replace(done.rows, usable=np.ones_like(done.rows.usable)))
    assert "left out" not in words(identify_figure(whole))


def test_an_outlier_does_not_flatten_the_rest(done: Identification) -> None:
    """A sample of 1 MN m leaves the axes as they were, to a fifth, and is an arrowhead at their upper ends."""
    torque = done.rows.torque.copy()
    torque[20, 0] = 1e6
    spoiled = identify_figure(replace(done, rows=replace(done.rows, torque=torque)))
    for before, axes in zip(identify_figure(done).axes[:3], spoiled.axes[:3], strict=True):
        assert axes.get_ylim() == pytest.approx(before.get_ylim(), rel=0.2)
        beyond = [line for line in axes.lines if line.get_gid() == "beyond" and len(line.get_xdata())]
        assert beyond
        for line in beyond:
            assert axes.get_ylim()[0] < line.get_ydata()[0] < axes.get_ylim()[1]


def test_parameters_are_drawn_by_what_they_do_to_torque(done: Identification) -> None:
    """On an axis of logarithms: distances from the estimate times the column's rms, over the torque's own.

    Worked out here sample by sample, and read back from the drawing by way of two of its marks.
    """
    page, rows, found = identify_figure(done), done.rows, done.found
    bars = {p.get_gid(): p for p in page.findobj(Rectangle) if str(p.get_gid()).startswith("interval-")}
    marks = {line.get_gid(): line for line in page.findobj(Line2D) if line.get_gid()}
    low, high = found.interval()
    expected: dict[str, float] = {}
    for k in range(found.base.count):
        effect = []
        for i in range(2):
            used = rows.usable[:, i]
            effect.append(math.sqrt(np.mean(rows.y[used, i, k] ** 2)) / np.std(rows.torque[used, i]))
        name = [t.get_text() for t, _ in text_boxes(page) if t.get_gid() == f"at-{k}"]
        assert name == [done.files.arm().joints[int(np.argmax(effect))]]
        expected[f"interval-{k}"] = max(effect) * (high[k] - low[k]) / 2
        assert done.true_values is not None
        for kind, values in (("declared", done.declared_values), ("true", done.true_values)):
            expected[f"{kind}-{k}"] = max(effect) * abs(values[k] - found.values[k])
    at = {name: bar.get_x() + bar.get_width() for name, bar in bars.items()}
    at |= {name: float(marks[name].get_xdata()[0]) for name in expected if name not in at}
    start = min(bar.get_x() for bar in bars.values())
    seen = {name: x for name, x in at.items() if x > start + 0.01}  # what is nearer stands at the axis's end
    names = sorted(seen, key=lambda name: expected[name])
    first, last = names[0], names[-1]
    assert len(names) >= 1.5 * len(bars)
    each = (seen[last] - seen[first]) / math.log(expected[last] / expected[first])
    for name in names:
        x = seen[first] + each * math.log(expected[name] / expected[first])
        assert seen[name] == pytest.approx(x, abs=0.01), name
    rows_down = sorted(bars, key=lambda name: -bars[name].get_y())[::-1]
    halves = [expected[name] for name in rows_down]
    assert halves == sorted(halves, reverse=True)


def test_the_verdict_counts(done: Identification) -> None:
    """Errors before and after, what was fitted, parameters that are off, intervals that are right."""
    done = identified(done.files, noise=1.0)
    said = words(identify_figure(done))
    shares = 100 * done.torque_errors["declared"].share
    assert f"off by {min(shares):.2g} to {max(shares):.2g} %" in said
    low, high = done.found.interval()
    off = int(((done.declared_values < low) | (done.declared_values > high)).sum())
    right = int(((low <= done.true_values) & (done.true_values <= high)).sum())
    assert 0 < off < len(low)
    assert f"Of {len(low)} parameters, {off} are shown to be off" in said
    assert f"{right} of the {len(low)} intervals hold the true value" in said
    assert "it is no test" in said
    assert CAUTION in said
    bare = words(identify_figure(replace(done, truth=None, checked=True)))
    assert "true value" not in bare
    assert "it is no test" not in bare
    assert CAUTION not in bare
    assert BEFORE_A_REAL_ARM[:60] in bare


def test_more_than_noise_is_told(done: Identification) -> None:
    """On a check with a wave in one joint's torque, that joint is named; a worse arm than declared is, too."""
    wave = done.rows.torque + np.array([0.0, 0.5]) * np.sin(3 * done.rows.t)[:, None]
    checked = replace(done, checked=True)
    assert "at elbow there is more in it" in words(
        identify_figure(replace(checked, rows=replace(done.rows, torque=wave)))
    )
    assert "there is more in it" not in words(identify_figure(checked))
    arm: Arm = done.files.arm()
    worse = replace(done.result, arm=arm.replaced(0.5 * arm.parameters))
    assert "more than before at shoulder, elbow" in words(identify_figure(replace(done, result=worse)))
    printed = " ".join(
        identify_text(replace(checked, rows=replace(done.rows, torque=wave), result=worse)).split()
    )
    assert (
        "more than before at shoulder, elbow: don't use this arm before you know why. What is left" in printed
    )
    assert "there is more in it, which these parameters don't explain." in printed
    assert "more than before" not in " ".join(identify_text(done).split())


def test_long_names_of_joints_are_printed_whole(done: Identification) -> None:
    """Two that begin alike are told apart, and the columns still stand beneath their heads."""
    arm = done.files.arm()
    names = ("a_joint_whose_name_is_long_1", "a_joint_whose_name_is_long_2")
    files = SimpleNamespace(arm=lambda: replace(arm, joints=names))
    printed = identify_text(replace(done, files=files)).splitlines()  # type: ignore[arg-type]
    head, *rows = [line for line in printed if line.startswith(("  joint", "  a_joint"))]
    assert [row.split()[0] for row in rows] == list(names)
    assert {len(row) for row in rows} == {len(head)}


@pytest.mark.parametrize("width", [8, 20, 31, 200])
def test_a_sum_is_cut_at_its_terms(width: int) -> None:
    """No longer than asked; whole terms while they fit; a single one that doesn't keeps both its ends."""
    name = "Ixx.wrist_tube - 0.26 mcy.wrist + m.gripper"
    said = fitted(name, width, len)
    assert len(said) <= width
    assert said == {
        8: "Ixx\u2026be \u2026",
        20: "Ixx.wrist_tube \u2026",
        31: "Ixx.wrist_tube \u2026",
        200: name,
    }.get(width)


def test_the_same_identification_gives_the_same_bytes(tmp_path: Path, done: Identification) -> None:
    """In each format, into folders that are made."""
    for suffix in ("png", "svg", "pdf"):
        for name in ("one", "two"):
            identify_picture(done, tmp_path / name / f"a.{suffix}")
        one, two = (tmp_path / name / f"a.{suffix}" for name in ("one", "two"))
        assert one.read_bytes() == two.read_bytes()


def test_what_cannot_be_drawn_or_written(tmp_path: Path, done: Identification) -> None:
    """Another suffix is the input's fault, a file in place of a folder the disk's."""
    with pytest.raises(InputFaults, match="no format of a picture"):
        identify_picture(done, tmp_path / "a.bmp")
    (tmp_path / "file").write_text("")
    with pytest.raises(StoreError, match="can't be written"):
        identify_picture(done, tmp_path / "file" / "a.png")
