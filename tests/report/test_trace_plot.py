"""The page of a replayed run and its data file: whole, true to the arrays, and readable whatever the run."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from matplotlib.collections import PolyCollection
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Rectangle
from matplotlib.transforms import Affine2D, Bbox

from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Case, Mismatch, Payload, Spread, believed
from rigbench.campaign.labels import Labels
from rigbench.campaign.reading import Record
from rigbench.campaign.replay import Difference, Replay
from rigbench.errors import StoreError
from rigbench.laws.options import options_model
from rigbench.laws.registry import LawChoice, choose, registered
from rigbench.motion.via import ViaMotion
from rigbench.report import time_axes
from rigbench.report.drawn import case_words, drawn_of
from rigbench.report.matrix import text_boxes
from rigbench.report.trace_data import ARRAYS, trace_arrays, write_trace
from rigbench.report.trace_plot import trace_figure, trace_picture
from rigbench.rig import Rates, Run, simulate
from rigbench.scores.of_run import score_run
from rigbench.scores.results import Tolerance
from rigbench.scores.row import Row

ARMS = Path(__file__).resolve().parents[2] / "robots_demo"

ALL_SOURCES = Mismatch(
    link_mass_percent=10,
    link_cog_mm=5,
    link_inertia_percent=15,
    payload=Payload(1.5, 0.0, 3.0, 30.0),
    coulomb_percent=Spread(30, (("j1", 50),)),
    viscous_percent=Spread(30, shared=True),
    rotor_inertia_percent=15,
    torque_bias_percent=2,
    encoder_offset_deg=0.01,
    delay_ms=0.5,
    base_tilt_deg=0.2,
)

PUSH = """\
from rigbench.laws import Law, option


class Push(Law):
    after_s: float = option(0.2)

    def start(self, setup):
        self.limit = setup.torque_limit

    def torque(self, t, q, v, ref, held):
        return 1.5 * self.limit if t > self.after_s else 0 * q
"""

SLIDE = """\
<robot name="slide"><link name="base"/>
<link name="{beam}"><inertial><mass value="2"/><inertia ixx="1" ixy="0" ixz="0" iyy="1" iyz="0" izz="1"/></inertial></link>
<link name="tip"/>
<joint name="{rail}" type="prismatic"><parent link="base"/><child link="{beam}"/><axis xyz="1 0 0"/>
<limit lower="-0.5" upper="0.38" effort="0" velocity="0"/></joint>
<joint name="end" type="fixed"><parent link="{beam}"/><child link="tip"/></joint></robot>
"""


def planar(law: LawChoice | None = None, **given: Any) -> Run:
    values: dict[str, Any] = {
        "arm": ArmFiles.read(ARMS / "planar2" / "arm.yaml"),
        "law": law or registered_law("independent-joint", natural_hz=3.0),
        "motion": ViaMotion(((0.0, 0.0), (0.5, -0.4)), leg_s=0.4, rest_s=0.2),
        "rates": Rates(500.0, 1000.0),
        "gain_pose": (0.0, 0.0),
        "settle_band_mm": 0.5,
    }
    return Run(**(values | given))


def tray(law: LawChoice | None = None, **given: Any) -> Run:
    pose = (0.0, -1.0, 1.5, 0.0, 1.0, 0.0)
    values: dict[str, Any] = {
        "arm": ArmFiles.read(ARMS / "tray6" / "arm.yaml"),
        "motion": ViaMotion((pose, (0.6, -0.6, 1.2, 0.1, 0.8, 0.2)), leg_s=0.5, rest_s=0.1),
        "gain_pose": pose,
    }
    return planar(law, **(values | given))


def slide(rail: str = "rail", beam: str = "beam") -> Run:
    """One prismatic joint that comes near its limit of 380 mm."""
    text = f"urdf: a.urdf\ntool: tip\ndrives: {{'{rail}': {{torque_limit: 40}}}}\n"
    arm = ArmFiles("arm.yaml", text, "a.urdf", SLIDE.format(rail=rail, beam=beam))
    return planar(arm=arm, motion=ViaMotion(((0.0,), (0.3,)), 0.4, 0.1), gain_pose=(0.0,))


def registered_law(name: str, **options: Any) -> LawChoice:
    return choose(name, options_model(registered().laws[name].cls)(**options))


def push(after_s: float = 0.2) -> LawChoice:
    return LawChoice("push.py:Push", (("after_s", after_s),), (("push.py", PUSH),))


def drawn(run: Run, level: float = 1.0, mismatch: Mismatch = ALL_SOURCES, draw: int = 4) -> Run:
    return replace(run, mismatch=mismatch, level=level, sources=mismatch.sources, draw=draw, seed=11)


def replayed(run: Run, law: str = "pd", differences: tuple[Difference, ...] = (), **names: str) -> Replay:
    log = simulate(run)
    scores = score_run(log, run.motion, run.settle_band_mm)
    scores = {name: value for name, value in scores.items() if not name.startswith("law_")}
    row = Row(
        names.get("sheet", ""), law, names.get("motion", "swing"), names.get("condition", "all at 1"),
        run.level, run.draw, log.outcome, scores, log.reason,
    )  # fmt: skip
    record = Record(row, run.key(), "", run.sources, log.residual, 0.1)
    reasons = ("it was done with numpy 1.0 (here 2.0)",) if differences else ()
    return Replay(record, run, log, scores, differences, reasons)


def labels(**limits: float) -> Labels:
    tolerance = (
        Tolerance({name.replace("__", "."): limit for name, limit in limits.items()}) if limits else None
    )
    return Labels("Trays", "an arm", ("",), ("pd",), ("swing",), (), 4, tolerance, "rigbench run a.yaml")


def named(figure: Figure, gid: str, kind: type = Line2D) -> list[Any]:
    return [artist for artist in figure.findobj(kind) if artist.get_gid() == gid]


def words(figure: Figure) -> str:
    return "\n".join(text.get_text() for text, _ in text_boxes(figure))


RUNS: dict[str, Callable[[], tuple[Replay, Labels]]] = {
    "planar, nominal": lambda: (replayed(planar()), labels()),
    "planar, a draw": lambda: (
        replayed(drawn(planar(), mismatch=Mismatch(link_mass_percent=10))), labels(tool_peak_mm=30.0)
    ),
    "tray, every source": lambda: (
        replayed(drawn(tray(case=Case(viscous_percent=60, link_cog_mm=(("wrist", (1, 2, 3)),))), 2.0)),
        labels(tool_peak_mm=3.0, tool_angle_peak_deg=0.5, joint_peak_deg__j1=0.05, joint_peak_deg=5.0),
    ),
    "hit-stop": lambda: (replayed(tray(push())), labels(tool_peak_mm=3.0)),
    "diverged": lambda: (
        replayed(planar(push(), arm=planar().arm.with_drives([("all", "torque_limit", 1e9)]))), labels()
    ),
    "ended at its first tick": lambda: (replayed(tray(start_offset=(9.0,) * 6)), labels(tool_peak_mm=3.0)),
    "ended at its second tick": lambda: (
        replayed(planar(push(-1.0), rates=Rates(500.0, 500.0), arm=planar().arm.with_drives([("all", "torque_limit", 1e9)]))), labels()
    ),
    "prismatic": lambda: (replayed(slide()), labels(joint_peak_mm=500.0)),
    "not the stored run": lambda: (
        replayed(
            drawn(planar(), mismatch=Mismatch(link_cog_mm=5)),
            differences=tuple(Difference(name, 1.0, 2.0) for name in ("tool_peak_mm", "joint_rms_deg.j1") * 4),
        ), labels(tool_peak_mm=3.0)
    ),
    "long names": lambda: (
        replayed(
            slide("a_rail_whose_name_goes_on_and_on_and_on", "b" * 60), "computed torque (natural_hz 8, damping 0.7)",
            motion="a motion with a long name " * 4, condition="a condition " * 8, sheet="control_hz 500, " * 9,
        ), labels(tool_peak_mm=3.0)
    ),
}  # fmt: skip


def placed(figure: Figure) -> list[tuple[str, float, Bbox]]:
    """Every text that is seen, with its size and where it stands [pt]: ticks out of view are not drawn."""
    figure.draw_without_rendering()
    unseen = set()
    for axes in figure.axes:
        for axis in (axes.xaxis, axes.yaxis):
            low, high = sorted(axis.get_view_interval())
            room = 1e-9 * (high - low)
            for tick in (*axis.get_major_ticks(), *axis.get_minor_ticks()):
                inside = low - room <= tick.get_loc() <= high + room
                unseen |= {
                    label for label in (tick.label1, tick.label2) if not (inside and label.get_visible())
                }
    return [
        (text.get_text(), text.get_fontsize(), box.padded(-0.6))
        for text, box in text_boxes(figure)
        if text.get_visible() and text not in unseen
    ]


@pytest.mark.parametrize("name", RUNS)
def test_nothing_overlaps_and_all_is_on_the_page(name: str) -> None:
    """No two texts touch, none is under 7 pt, off the page or over a curve; panels stand apart from each other."""
    page = trace_figure(*RUNS[name]())
    texts = placed(page)
    width, height = page.get_size_inches() * 72
    assert sum(said == "t [s]" for said, _, _ in texts) >= 4
    for number, (said, size, box) in enumerate(texts):
        assert size >= 7, said
        assert min(box.x0, box.y0) > 0, said
        assert box.x1 < width, said
        assert box.y1 < height, said
        for other, _, beside in texts[number + 1 :]:
            assert not box.overlaps(beside), (said, other)
    frames = [axes.get_position().transformed(Affine2D().scale(width, height)) for axes in page.axes]
    for number, frame in enumerate(frames):
        assert not any(frame.overlaps(other) for other in frames[number + 1 :])
        assert not [said for said, _, box in texts if box.overlaps(frame)]


def test_curves_are_those_of_the_log() -> None:
    """Reference, true position, error and torque of every joint, then the tool's distance."""
    replay = replayed(drawn(tray()))
    page, log = trace_figure(replay, labels()), replay.log
    n = log.plant.n
    assert len(page.axes) == 3 * n + 2  # the tool, and the bars
    for i in range(n):
        position, error, torque = page.axes[3 * i : 3 * i + 3]
        lines = {line.get_gid(): line.get_ydata() for line in position.lines if line.get_gid()}
        assert np.array_equal(lines["actual"], np.degrees(log.q[:, i]))
        assert np.array_equal(lines["reference"], np.degrees(log.q_ref[:, i]))
        assert np.allclose(error.lines[0].get_ydata(), np.degrees(log.q_ref[:, i] - log.q[:, i]), atol=1e-12)
        assert np.array_equal(torque.lines[0].get_ydata(), log.torque[:, i])
        for axes in (position, error, torque):
            low, high = axes.get_ylim()
            drawn_values = np.concatenate(
                [line.get_ydata() for line in axes.lines if line.get_gid() == "actual"]
            )
            assert low < drawn_values.min()
            assert drawn_values.max() < high
            assert axes.get_xlim() == (0.0, replay.run.motion.duration_s)
    tool = page.axes[3 * n].lines[0].get_ydata()
    assert tool.max() == pytest.approx(replay.scores["tool_peak_mm"], rel=1e-12)


def test_limits_are_drawn_where_they_are_near_and_else_written() -> None:
    """Joint limit, torque limit and tolerances; one that is far would flatten the curve."""
    replay = replayed(slide())
    page = trace_figure(replay, labels(tool_peak_mm=1e6, joint_peak_mm=1.2 * replay.scores["joint_peak_mm"]))
    at = [
        [float(line.get_ydata()[0]) for line in axes.lines if line.get_gid() == "limit"] for axes in page.axes
    ]
    limit = 1.2 * replay.scores["joint_peak_mm"]
    assert at == [
        [380.0],
        [-limit, limit],
        [] if np.abs(replay.log.torque).max() < 40 / 1.8 else [-40, 40],
        [],
    ]
    assert "limit 40" in words(page)
    assert "at most 1e+06" in words(page)


def test_the_tools_angle_is_shown_where_it_is_limited() -> None:
    """With a panel of its own and its limit; not otherwise."""
    replay = replayed(drawn(tray()))
    assert "tool angle error" not in words(trace_figure(replay, labels(tool_peak_mm=3.0)))
    page = trace_figure(replay, labels(tool_angle_peak_deg=replay.scores["tool_angle_peak_deg"] * 0.9))
    assert "tool angle error" in words(page)
    angle = page.axes[3 * 6 + 1].lines[0].get_ydata()
    assert angle.max() == pytest.approx(replay.scores["tool_angle_peak_deg"], rel=1e-9)


def test_an_early_end_is_marked_in_every_panel() -> None:
    """At the time that the reason says; the axis goes on to the motion's end, and limited stretches have bars."""
    replay = replayed(tray(push()))
    assert replay.log.outcome == "hit-stop"
    page = trace_figure(replay, labels(tool_peak_mm=3.0))
    marks = named(page, "ended")
    assert len(marks) == 3 * 6 + 1
    (said,) = {round(float(mark.get_xdata()[0]), 3) for mark in marks}
    assert f"{said:.3f} s" in replay.log.reason
    assert replay.log.reason in words(page)
    assert all(axes.get_xlim()[1] == replay.run.motion.duration_s for axes in page.axes[: 3 * 6 + 1])
    limited = named(page, "limited", PolyCollection)
    assert len(limited) == int(replay.log.limited.any(axis=0).sum()) > 0


def test_a_run_that_finished_has_no_such_marks() -> None:
    """Neither an end nor limited stretches, nor their samples in the key."""
    page = trace_figure(*RUNS["planar, nominal"]())
    assert not named(page, "ended")
    assert not named(page, "limited", PolyCollection)
    assert "less than asked" not in words(page)
    assert "nothing is random" in words(page)


def test_what_differs_is_said_on_the_page() -> None:
    """A page of a run that is not the stored one says so, and why."""
    said = words(trace_figure(*RUNS["not the stored run"]()))
    assert "NOT the stored run" in said
    assert "numpy 1.0" in said
    assert "bit for bit" not in said


# --- the drawn parameters


def test_bars_show_the_largest_departures_first() -> None:
    """Bars are the u of the parameters named beside them, from the largest abs(u) down."""
    replay = replayed(drawn(tray()))
    page = trace_figure(replay, labels())
    widths = [bar.get_width() for bar in page.axes[-1].findobj(Rectangle) if bar.get_gid() == "bar"]
    expected = drawn_of(replay.run)
    assert widths == [one.u for one in expected[: len(widths)]]
    assert [abs(one.u) for one in expected] == sorted((abs(one.u) for one in expected), reverse=True)
    names = [
        text.get_text() for text, _ in text_boxes(page) if (text.get_gid() or "").startswith("parameter")
    ]
    assert names == [one.words for one in expected[: len(widths)]]
    assert f"{len(widths)} of {len(expected)} drawn" in words(page)


def test_amounts_are_those_of_the_plant() -> None:
    """What is written beside a bar is the ratio, shift or mass that the plant has, to two digits."""
    run = drawn(tray(), 2.0)
    log, arm = simulate(run), run.arm.arm()
    model = believed(arm, run.mismatch)
    amounts = {one.name: one.amount for one in drawn_of(run)}
    j1 = arm.joints.index("j1")
    for source, field in (("coulomb_percent", "coulomb"), ("rotor_inertia_percent", "rotor_inertia")):
        ratio = getattr(log.plant.drives, field)[j1] / getattr(model.drives, field)[j1]
        assert amounts[f"{source}.j1"] == f"{100 * (ratio - 1):+.2g} %"
    ratio = log.plant.drives.viscous / model.drives.viscous
    assert np.ptp(ratio) < 1e-12
    assert amounts["viscous_percent.all"] == f"{100 * (ratio[0] - 1):+.2g} %"
    mass = log.plant.parameters[0, 0] / model.parameters[0, 0]
    assert amounts[f"link_mass_percent.{arm.links[0]}"] == f"{100 * (mass - 1):+.2g} %"
    cog = [p[1] / p[0] for p in (log.plant.parameters[0], model.parameters[0])]
    assert amounts[f"link_cog_mm.{arm.links[0]}.x"] == f"{1e3 * (cog[0] - cog[1]):+.2g} mm"
    bias = log.plant.drives.torque_bias[j1] / log.plant.drives.torque_limit[j1]
    assert amounts["torque_bias_percent.j1"] == f"{100 * bias:+.2g} %"
    offset = log.plant.drives.encoder_offset[j1]
    assert amounts["encoder_offset_deg.j1"] == f"{np.degrees(offset):+.2g} deg"
    last = Mismatch(payload=ALL_SOURCES.payload)
    alone = simulate(replace(run, mismatch=last, sources=("payload",))).plant
    assert amounts["payload.mass"] == f"{alone.parameters[-1, 0] - arm.parameters[-1, 0]:.3g} kg"
    assert amounts["delay_ms"] == f"{run.plant_delay_ms:+.2g} ms" or run.plant_delay_ms == 0


def test_parameters_that_can_not_depart_are_left_out() -> None:
    """A spread of 0, a payload known for certain, and what the case states in its place."""
    still = Mismatch(link_mass_percent=Spread(0, (("fore", 25),)), payload=Payload(1.0, 1.0, 1.0, 0.0))
    assert [one.name for one in drawn_of(drawn(planar(), mismatch=still))] == ["link_mass_percent.fore"]
    run = drawn(
        planar(case=Case(payload_kg=2.0, delay_ms=1.0)),
        mismatch=Mismatch(payload=Payload(1, 0, 3, 5), delay_ms=1),
    )
    assert {one.name for one in drawn_of(run)} == {"payload.cog.x", "payload.cog.y", "payload.cog.z"}
    assert drawn_of(planar()) == ()
    assert drawn_of(replace(run, level=0.0)) == ()


def test_what_a_case_states_in_words() -> None:
    """Numbers for all, by name, and vectors."""
    case = Case(
        payload_kg=3, viscous_percent=Spread(60, (("j1", 20),)), link_cog_mm=(("wrist", (1, 2, 0.5)),)
    )
    said = case_words(tray(case=case))
    assert (
        said == "payload_kg 3, link_cog_mm 1 2 0.5 (wrist), viscous_percent 60 (all), viscous_percent 20 (j1)"
    )
    assert case_words(tray(case=Case(viscous_percent=Spread(0, (("j2", -5),))))) == "viscous_percent -5 (j2)"
    assert case_words(tray()) == ""


# --- the data file


def test_the_data_file_holds_the_arrays_it_documents(tmp_path: Path) -> None:
    """Read by numpy alone, without pickle: every array with the documented shape, the log's values to the bit."""
    replay = replayed(drawn(tray()))
    write_trace(replay, labels(tool_peak_mm=3.0), tmp_path / "new" / "trace.npz")
    with np.load(tmp_path / "new" / "trace.npz") as data:
        arrays = {name: data[name] for name in data.files}
    assert list(arrays) == list(ARRAYS)
    log, n = replay.log, 6
    sizes = {"N": len(log.t), "n": n, "R": 1, "P": len(drawn_of(replay.run))}
    for name, doc in ARRAYS.items():
        if doc.startswith("("):
            wanted = tuple(
                int(size) if size.isdigit() else sizes[size]
                for size in doc[1 : doc.index(")")].replace(",", " ").split()
            )
            assert arrays[name].shape == wanted, name
    for name, values in (
        ("t_s", log.t),
        ("q_rad", log.q),
        ("v_rad_s", log.v),
        ("torque_nm", log.torque),
        ("limited", log.limited),
    ):
        assert np.array_equal(arrays[name], values)
    assert tuple(arrays["joint"]) == log.plant.joints
    distance = np.linalg.norm(arrays["tool_m"] - arrays["tool_ref_m"], axis=1)
    assert 1e3 * distance.max() == pytest.approx(replay.scores["tool_peak_mm"], rel=1e-12)
    about = json.loads(str(arrays["about"]))
    assert (about["key"], about["outcome"], about["identical"]) == (replay.run.key(), "finished", True)
    assert about["scores"]["tool_peak_mm"]["replayed"] == replay.scores["tool_peak_mm"]


def test_the_same_run_gives_the_same_files(tmp_path: Path) -> None:
    """Byte for byte, data and picture, whatever the user's matplotlibrc says."""
    import matplotlib

    replay = replayed(drawn(planar(), mismatch=Mismatch(link_mass_percent=10)))
    for name in ("one", "other"):
        write_trace(replay, labels(), tmp_path / f"{name}.npz")
        with matplotlib.rc_context({"font.size": 30, "axes.grid": name == "other"}):
            trace_picture(replay, labels(), tmp_path / f"{name}.png")
    for kind in ("npz", "png"):
        assert (tmp_path / f"one.{kind}").read_bytes() == (tmp_path / f"other.{kind}").read_bytes()
    assert not list(tmp_path.glob("*.part"))


def test_a_disk_that_refuses_is_a_store_error(tmp_path: Path) -> None:
    """A file in the way of a folder: told with its name, nothing left behind."""
    (tmp_path / "file").touch()
    for write in (write_trace, trace_picture):
        with pytest.raises(StoreError, match="can't be written"):
            write(*RUNS["planar, nominal"](), tmp_path / "file" / "trace.out")
    assert [path.name for path in tmp_path.iterdir()] == ["file"]


@pytest.mark.parametrize(
    ("name", "ticks"), [("ended at its first tick", 0), ("ended at its second tick", 1), ("diverged", 102)]
)
def test_short_and_wild_runs_have_data_too(name: str, ticks: int) -> None:
    """Arrays of no or few rows, all finite; JSON without infinities."""
    replay, shown = RUNS[name]()
    assert len(replay.log.t) == ticks
    arrays = trace_arrays(replay, shown)
    assert len(arrays["t_s"]) == len(replay.log.t) == len(arrays["tool_angle_deg"])
    assert all(np.isfinite(arrays[each]).all() for each in ("q_rad", "v_rad_s", "torque_nm", "tool_m"))
    assert json.loads(str(arrays["about"]))["outcome"] == replay.log.outcome


# --- curves and stretches


def test_a_long_curve_is_thinned_and_keeps_its_extremes() -> None:
    """Fewer points, each one of the curve's, in order, with both extremes and both ends."""
    random = np.random.default_rng(1)
    t = np.arange(100_003) / 1000.0
    values = random.standard_normal(len(t)).cumsum()
    thin_t, thin = time_axes._thinned(t, values)
    assert len(thin) <= 1.1 * time_axes.MOST_POINTS
    assert (np.diff(thin_t) > 0).all()
    assert np.array_equal(np.interp(thin_t, t, values), thin)
    assert (thin.min(), thin.max(), thin[0], thin[-1]) == (values.min(), values.max(), values[0], values[-1])
    assert time_axes._thinned(t[:50], values[:50])[1] is not thin


def test_stretches_are_where_the_flags_are() -> None:
    """Start and length in seconds; gaps that can't be seen are closed, single ticks stay visible."""
    flags = np.array([0, 1, 1, 0, 0, 0, 1, 0, 1, 1], bool)
    spans = list(time_axes._spans(flags, 0.1, 0.15))
    assert np.allclose(spans, [(0.1, 0.2), (0.6, 0.4)])
    assert np.allclose(list(time_axes._spans(flags, 0.1, 0.01)), [(0.1, 0.2), (0.6, 0.1), (0.8, 0.2)])
    assert list(time_axes._spans(np.zeros(5, bool), 0.1, 0.0)) == []
    assert np.allclose(list(time_axes._spans(np.array([1], bool), 0.001, 0.05)), [(0.0, 0.05)])
