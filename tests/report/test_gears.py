"""Gear ratios as text and as a picture."""

from __future__ import annotations

from dataclasses import replace
from itertools import combinations

import pytest
from PIL import Image

from rigbench.campaign.gears.result import Course, Geared, Gears, JointGears, Tracked
from rigbench.errors import InputFaults
from rigbench.report.gears_picture import gears_figure, gears_picture
from rigbench.report.gears_text import gears_text
from rigbench.report.gears_words import notes, percent
from rigbench.report.paper import text_boxes

RATIOS = (1.0, 10.0, 100.0)


def geared(ratio, **given):
    usual = Geared(
        ratio=ratio,
        inertia_least=1.0 / ratio**2 + 1e-4,
        inertia_largest=3.0 / ratio**2 + 1e-4,
        damping_least=0.8,
        damping_largest=1.4,
        disturbance=50 / ratio,
        disturbance_share=20 / ratio,
        reflected=1e-4 * ratio**2,
        speed_limit=200 / ratio,
        speed_used=ratio / 200,
        torque_used=30 / ratio,
        error_peak=0.01,
    )
    return replace(usual, **given)


def joint(name="j1", prismatic=False, **given):
    rows = tuple(geared(ratio, **given) for ratio in RATIOS)
    return JointGears(name, prismatic, 50.0, 1e-4, 0.8, 2.5, 200.0, 1.0, 3.0, 0.001, rows)


def made(*joints):
    tracked = (
        Tracked(1.0, "diverged", "joint j1 ran away at 0.100 s", None),
        Tracked(10.0, "finished", "", 7.123),
        Tracked(100.0, "finished", "", 0.5),
    )
    course = Course((0.0,), (1.0,), 2.0, 0.2)
    return Gears(
        "arm.yaml", "mixer", joints or (joint(),), RATIOS, tracked, course, 4096, 1, 5.0, 1.0, 1000.0
    )


def cells(text, ratio, table):
    rows = [line.split() for line in text.splitlines() if line.startswith("  ") and line.split()[0] == ratio]
    return rows[table]


def test_every_number_stands_in_its_row():
    """Gains above, costs beneath, a line for each ratio; degrees for radians, percent for shares."""
    text = gears_text(made())
    head = (
        "j1 (declared ratio 50): links of 1 to 3 kg m^2 about it, a rotor of 0.0001 kg m^2, a gear that hands"
    )
    assert f"{head} on 80 %" in text.replace("\n", " ")
    gain = ["10", "0.0101", "to", "0.0301", "2.98", "0.8", "to", "1.4", "5", "200", "%", "0.573"]
    assert cells(text, "10", 0) == gain
    assert cells(text, "10", 1) == ["10", "0.01", "1.15e+03", "95", "%", "-200", "%"]
    assert cells(text, "100", 1)[-4:] == ["50", "%", "70", "%"]
    assert cells(text, "1", 1)[-3:] == ["<", "-1000", "%"]
    assert "The motion is within its limits at 100." in text
    assert "leaves about 0.057 deg" in text
    assert "1  - (joint j1 ran away at 0.100 s)" in text
    assert "10  7.12 mm" in text


def test_what_is_unknown_is_a_dash():
    """Without limits there is no reserve and no share, and the text says so once."""
    free = joint(speed_used=None, torque_used=None, speed_limit=None, disturbance_share=None, error_peak=None)
    text = gears_text(made(free))
    assert cells(text, "10", 0)[-2:] == ["-", "-"]
    assert cells(text, "10", 1)[-3:] == ["-", "-", "-"]
    assert "No limits are declared, so no reserve is known." in text
    assert [percent(share) for share in (None, 0.5, 37.4823, -30.0, -float("inf"))] == [
        "-", "50 %", "3748 %", "< -1000 %", "< -1000 %",
    ]  # fmt: skip


def test_sliding_joints_have_their_units():
    """mm and kg for deg and kg m^2 at the joint; the motor's side keeps kg m^2."""
    text = gears_text(made(joint("rail", prismatic=True)))
    assert "rail (declared ratio 50 rad/m): links of 1 to 3 kg about it" in text
    assert "[mm/s]" in text
    assert "[deg" not in text
    assert cells(text, "10", 0)[-1] == "10"


def test_notes_name_what_hides_the_price():
    """Joints without limits on the motor's side, and without rotors, are named."""
    assert notes(made()) == []
    bare = replace(joint("j2"), motor_torque_limit=None, motor_speed_limit=None, rotor_inertia=0.0)
    told = notes(made(joint(), bare))
    assert [note.split(" is declared for j2: ")[0] for note in told] == [
        "no limit on the motor's side",
        "no rotor inertia",
    ]


@pytest.mark.parametrize("width", [80, 100, 140])
def test_lines_fit(width):
    """No line is wider than the terminal, however long a joint's name is."""
    long = joint("the second joint of the wrist on the left side of the oven, as seen from the door")
    assert max(map(len, gears_text(made(long, joint()), width).splitlines())) <= width


def test_the_picture_is_the_same_each_time(tmp_path):
    """Bytes alike; another suffix is a fault."""
    for name in ("one.png", "two.png"):
        gears_picture(made(joint(), joint("rail", prismatic=True)), tmp_path / name)
    assert (tmp_path / "one.png").read_bytes() == (tmp_path / "two.png").read_bytes()
    with Image.open(tmp_path / "one.png") as picture:
        assert picture.width > 1500
    with pytest.raises(InputFaults):
        gears_picture(made(), tmp_path / "three.gif")


UNKNOWN = {"speed_used": None, "torque_used": None, "disturbance_share": None, "error_peak": None}


@pytest.mark.parametrize(
    "gears",
    [
        made(),
        made(*(joint(f"j{i}") for i in range(1, 13))),
        made(joint(**UNKNOWN)),
        made(joint("x" * 80), joint("y" * 80)),
        replace(made(replace(joint(), ratios=joint().ratios[:1])), ratios=RATIOS[:1]),
        made(joint(torque_used=float("inf"))),
    ],
    ids=["usual", "twelve joints", "nothing known", "long names", "one ratio", "nothing left"],
)
def test_texts_of_the_picture_stay_apart_and_on_the_page(gears):
    """No two texts overlap, and none leaves the page."""
    figure = gears_figure(gears)
    figure.canvas.draw()
    wide, high = 72 * figure.get_size_inches()
    boxes = [(text.get_text(), box) for text, box in text_boxes(figure) if text.get_visible()]
    for said, box in boxes:
        assert box.x0 >= 0, said
        assert box.y0 >= 0, said
        assert box.x1 <= wide, said
        assert box.y1 <= high, said
    for (one, first), (other, second) in combinations(boxes, 2):
        apart = (
            first.x1 <= second.x0 + 0.5 or second.x1 <= first.x0 + 0.5
            or first.y1 <= second.y0 + 0.5 or second.y1 <= first.y0 + 0.5
        )  # fmt: skip
        assert apart, (one, other)
