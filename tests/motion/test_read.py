"""Reading a motion's table."""

from __future__ import annotations

import contextlib
import time
from dataclasses import replace
from math import radians

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigbench.arm.arm import PRISMATIC, REVOLUTE, Arm, Drives
from rigbench.errors import InputFaults
from rigbench.motion.read import read_table
from rigbench.motion.table import TableMotion

INF = np.inf


def make_arm(lower=(-INF, -INF, -INF), upper=(INF, INF, INF), speed=(INF, INF, INF)) -> Arm:
    """An arm of base, elbow and slide (prismatic), of which only names and limits matter."""
    return Arm(
        name="mock",
        joints=("base", "elbow", "slide"),
        links=("a", "b", "c"),
        kinds=np.array([REVOLUTE, REVOLUTE, PRISMATIC]),
        rotation=np.tile(np.eye(3), (3, 1, 1)),
        position=np.zeros((3, 3)),
        axis=np.tile([0.0, 0, 1], (3, 1)),
        parameters=np.zeros((3, 10)),
        tool_rotation=np.eye(3),
        tool_position=np.zeros(3),
        lower=np.array(lower),
        upper=np.array(upper),
        drives=replace(Drives.ideal(3), speed_limit=np.array(speed)),
    )


ARM = make_arm()
HEAD = "t_s,base,elbow,slide\n"
GOOD = HEAD + "0,0,10,100\n0.5,5,11,120\n1,10,12,150\n"


def faults_of(text: str, arm: Arm = ARM, pace: float = 1.0) -> list[str]:
    """The faults of a table, as they are printed."""
    with pytest.raises(InputFaults) as caught:
        read_table("plan.csv", text, arm, pace)
    return str(caught.value).splitlines()


def test_degrees_and_millimetres_become_radians_and_metres():
    """Columns are in deg, or mm for a prismatic joint, and times are seconds."""
    motion = read_table("plan.csv", GOOD, ARM)
    assert motion.times == (0.0, 0.5, 1.0)
    assert motion.rows[2] == (pytest.approx(radians(10)), pytest.approx(radians(12)), pytest.approx(0.15))
    assert motion.pace == 1.0
    assert isinstance(motion, TableMotion)


def test_columns_may_come_in_any_order():
    """The header's names decide, not their order."""
    text = "t_s,slide,base,elbow\n0,100,0,10\n0.5,120,5,11\n1,150,10,12\n"
    assert read_table("plan.csv", text, ARM) == read_table("plan.csv", GOOD, ARM)


@pytest.mark.parametrize(
    "text",
    [
        GOOD.replace("\n", "\r\n"),
        GOOD.replace("\n", "\r"),
        "\ufeff" + GOOD,
        GOOD.replace(",", " , "),
        GOOD.replace("\n", "\n\n") + "\n  \n",
        GOOD.rstrip("\n"),
        GOOD.replace("base", '"base"'),
        GOOD.replace("10,12", "+1.0e1,12."),
    ],
)
def test_ways_of_writing_the_same_table(text):
    """Line ends, a byte order mark, blanks, empty lines, quotes and number forms make no difference."""
    assert read_table("plan.csv", text, ARM) == read_table("plan.csv", GOOD, ARM)


def test_the_first_time_may_be_any():
    """Times are shifted to start at 0."""
    late = HEAD + "-7,0,10,100\n-6.5,5,11,120\n-6,10,12,150\n"
    motion = read_table("plan.csv", late, ARM)
    assert motion.duration_s == 1.0
    np.testing.assert_allclose(
        motion.reference(np.array([0.25]))[0],
        read_table("plan.csv", GOOD, ARM).reference(np.array([0.25]))[0],
    )


@pytest.mark.parametrize("text", ["", "\n \n", "\ufeff"])
def test_an_empty_file(text):
    """Nothing in it is one fault that says what belongs there."""
    (fault,) = faults_of(text)
    assert fault == (
        "plan.csv: no table in it; expected a header 't_s,base,elbow,slide' (joints in any order), "
        "then rows of numbers"
    )


def test_a_header_with_other_names():
    """Unknown names come with the nearest, missing and doubled ones by name, all with the line."""
    assert faults_of("\nt_s,bas,elbow,elbow\n0,1,2,3\n1,1,2,3\n") == [
        "plan.csv:2: no joint 'bas'; expected joints of the arm (did you mean 'base'?)",
        "plan.csv:2: elbow: two columns of this name; expected one",
        "plan.csv:2: base: missing; expected a column for every joint of the arm",
        "plan.csv:2: slide: missing; expected a column for every joint of the arm",
    ]


@pytest.mark.parametrize("head", ["0,1,2,3", "time,base,elbow,slide", "base,elbow,slide,t_s", ""])
def test_a_header_without_time_first(head):
    """The first column is t_s; a table without a header says so."""
    (fault,) = faults_of(head + "\n1,2,3,4\n2,3,4,5\n")
    assert "the header starts with" in fault
    assert "expected a header 't_s,base,elbow,slide'" in fault


@pytest.mark.parametrize("other", [";", "\t"])
def test_other_separators_are_named(other):
    """A table separated by semicolons or tabs is told that commas are meant."""
    assert faults_of(GOOD.replace(",", other)) == [
        "plan.csv:1: no commas in the header; expected cells separated by commas"
    ]


@pytest.mark.parametrize("rows", ["", "0,1,2,3\n"])
def test_fewer_than_two_rows(rows):
    """One row or none is no motion."""
    (fault,) = faults_of(HEAD + rows)
    assert f"{rows.count(',') // 3} row{'' if rows else 's'}; expected 2 or more" in fault


@pytest.mark.parametrize(
    "cell", ["x", "nan", "inf", "-Infinity", "1_0", "0x10", "1,5e", "--1", "5 deg", "\u0661"]
)
def test_cells_that_are_no_number(cell):
    """Text, nan, inf, and what only looks like a number are told by line and column."""
    cell = cell.replace(",", ".")
    assert faults_of(GOOD.replace("0.5,5", f"0.5,{cell}")) == [
        f"plan.csv:3: base: '{cell}' is not a number; expected a finite number"
    ]


def test_numbers_that_are_too_large():
    """A number that no machine has is told as such, though a double could hold it, or not."""
    assert faults_of(GOOD.replace("0.5,5", "1e308,-1e999")) == [
        "plan.csv:3: t_s: 1e308 is too large; expected a finite number",
        "plan.csv:3: base: -1e999 is too large; expected a finite number",
    ]


def test_empty_cells_and_odd_rows():
    """An empty cell, too few and too many cells are told by line, all at once."""
    assert faults_of(HEAD + "0,0,10,100\n0.5,,11,120\n1,10,12\n1.5,1,2,3,4\n2,10,12,150\n") == [
        "plan.csv:3: base: empty; expected a finite number",
        "plan.csv:4: 3 cells; expected 4, as in the header",
        "plan.csv:5: 5 cells; expected 4, as in the header",
    ]


@pytest.mark.parametrize("later", ["0.5", "0.4", "0.5000001", "-3"])
def test_time_that_does_not_rise(later):
    """Equal, falling and barely rising times are told with both times."""
    (fault,) = faults_of(HEAD + f"0,0,0,0\n0.5,0,0,0\n{later},0,0,0\n")
    assert (
        fault == f"plan.csv:4: t_s: {float(later)} s after 0.5 s; expected times that rise by 1e-6 s or more"
    )


def test_times_that_differ_only_far_from_their_start():
    """Two times that become one when shifted to 0 are found, not divided by."""
    faults = faults_of(HEAD + "-1e12,0,0,0\n1e-5,0,0,0\n2e-5,0,0,0\n")
    assert faults[0].startswith("plan.csv:4: t_s: 2e-05 s after 1e-05 s")


def test_a_position_beyond_a_limit():
    """Each joint and side: the first row, its value and the limit in the column's unit, and how many more."""
    arm = make_arm(lower=(-1, -INF, -0.1), upper=(radians(150), INF, 0.2))
    text = HEAD + "0,149,0,0\n1,150,0,0\n2,151.25,0,250\n3,152,0,100\n4,100,0,-101\n"
    assert faults_of(text, arm) == [
        "plan.csv:4: base: 151.2 deg is beyond the joint's limit (and in 1 more row); expected at most 150 deg",
        "plan.csv:4: slide: 250 mm is beyond the joint's limit; expected at most 200 mm",
        "plan.csv:6: slide: -101 mm is beyond the joint's limit; expected at least -100 mm",
    ]


def test_a_position_on_a_limit_is_none_beyond_it():
    """Rows that stand on a limit keep it, whatever the rounding from degrees."""
    for degrees in range(1, 180):
        arm = make_arm(upper=(radians(degrees), INF, INF))
        read_table("plan.csv", HEAD + f"0,{degrees},0,0\n9,{degrees},1,0\n18,{degrees},3,0\n", arm)


def test_a_joint_parked_on_a_limit_of_zero():
    """A limit of 0 is kept by a spline that stands on it to rounding, and passed by one that swings below."""
    arm = make_arm(lower=(-INF, -INF, 0.0))
    # Zero and then a cubic is itself a spline, which the reference finds again to rounding.
    smooth = [f"{0.1 * k},{k},0,{0.4 * max(k - 10, 0) ** 3}" for k in range(14)]
    motion = read_table("plan.csv", HEAD + "\n".join(smooth), arm)
    assert -1e-9 < motion.reference(np.linspace(0, 1.3, 1301))[0][:, 2].min() < 0
    kinked = [f"{0.1 * k},{k},0,{4 * max(k - 10, 0)}" for k in range(14)]
    (fault,) = faults_of(HEAD + "\n".join(kinked), arm)
    assert "slide: the spline passes the lower limit" in fault


def test_a_jump_without_a_speed_limit():
    """A step above 10 rad/s (573 deg/s) or 2 m/s is a jump; one below is not."""
    assert faults_of(HEAD + "0,0,0,0\n0.01,6,0,0\n0.02,6,0,30\n0.03,6,0,0\n") == [
        "plan.csv:3: base: jumps by 6 deg, at 600 deg/s; "
        "expected at most 573 deg/s, for a joint without a speed limit",
        "plan.csv:4: slide: jumps by 30 mm, at 3000 mm/s (and in 1 more row); "
        "expected at most 2000 mm/s, for a joint without a speed limit",
    ]
    slow = np.array([[0.01 * k, 5.6 * k, 0, 19 * k] for k in range(6)])
    read_table("plan.csv", HEAD + "\n".join(",".join(map(str, row)) for row in slow), ARM)


def test_a_step_above_the_speed_limit():
    """A step that needs more than the joint's speed limit is a fault at its row."""
    arm = make_arm(speed=(1.0, INF, INF))
    (fault,) = faults_of(HEAD + "0,0,0,0\n1,30,0,0\n2,90,0,0\n3,100,0,0\n", arm)
    assert fault == (
        "plan.csv:4: base: jumps by 60 deg, at 60 deg/s; expected at most 57.3 deg/s, the joint's speed limit"
    )


def test_speeds_are_judged_at_the_pace():
    """A plan that is too fast as written passes at half the pace, and one that is not may be too fast at twice."""
    arm = make_arm(speed=(radians(50), INF, INF))
    line = HEAD + "0,0,0,0\n1,40,0,0\n2,80,0,0\n"
    read_table("plan.csv", line, arm)
    assert len(faults_of(line, arm, 2.0)) == 1
    steep = HEAD + "0,0,0,0\n1,80,0,0\n2,160,0,0\n"
    assert len(faults_of(steep, arm)) == 1
    assert read_table("plan.csv", steep, arm, 0.5).duration_s == 4.0


STEP = HEAD + "0,0,0,0\n1,0,0,0\n2,1,0,0\n3,1,1,0\n"
"""The base's spline is the cubic 1/2 + 13/12 u - u^3/3 deg with u = t - 3/2."""


def test_a_spline_that_is_too_fast_between_rows():
    """Rows that keep the speed limit may still be joined by a curve that doesn't: row, time and speed."""
    # The same cubic, less its 1/2, at u = -0.75, -0.5, 0.5, 0.75: 13/12 - u^2 passes 1.05 deg/s from
    # u = -0.18 on, while no step between rows needs more than 1 deg/s.
    text = HEAD + "0,-0.671875,0,0\n0.25,-0.5,0,0\n1.25,0.5,0,0\n1.5,0.671875,0,0\n"
    assert faults_of(text, make_arm(speed=(radians(1.05), INF, INF))) == [
        "plan.csv:3: base: the spline passes the speed limit at 0.650 s, after this row, and reaches "
        "1.083 deg/s; expected within 1.05 deg/s"
    ]
    read_table("plan.csv", text, make_arm(speed=(radians(1.09), INF, INF)))


def test_a_plan_that_ends_too_fast():
    """The spline's free ends count: there the cubic runs at 7/6 deg/s, from the first row on."""
    (fault,) = faults_of(STEP, make_arm(speed=(radians(1.1), INF, INF)))
    assert fault.startswith("plan.csv:2: base: the spline passes the speed limit at 0.000 s")
    assert "reaches 1.167 deg/s" in fault


def test_a_spline_that_swings_past_a_limit_between_rows():
    """Rows that keep a position limit may be joined by a curve that doesn't."""
    # The cubic is largest, 1.2517 deg, at u = sqrt(13/12), t = 2.54, and passes 1.2 deg after t = 2.3.
    (fault,) = faults_of(STEP, make_arm(upper=(radians(1.2), INF, INF)))
    assert fault.startswith("plan.csv:4: base: the spline passes the upper limit at 2.400 s")
    assert fault.endswith("expected within 1.2 deg")
    read_table("plan.csv", STEP, make_arm(upper=(radians(1.26), INF, INF)))


def test_all_faults_come_at_once_in_the_order_of_lines():
    """Header, cells, times, limits and jumps of one file are told together."""
    arm = make_arm(upper=(radians(150), INF, INF))
    text = "t_s,base,elbow,slid\n0,0,0,0\n1,x,0,0\n1,160,0,0\n2,0,900,0\n"
    lines = [int(fault.split(":")[1]) for fault in faults_of(text, arm)]
    assert lines == [1, 1, 3, 4, 4, 5]


def test_a_flood_of_faults_is_cut():
    """A file of rubbish gives twenty faults and the number of the rest."""
    faults = faults_of(HEAD + "".join(f"{k},x,y,z\n" for k in range(1000)))
    assert len(faults) == 21
    assert faults[-1] == "plan.csv: and 2980 more faults of cells and times"


def test_a_monstrous_cell_is_cut():
    """A cell of a megabyte is a fault that a person can read."""
    faults = faults_of(GOOD + "9" * 1_000_000 + "z,1,2,3\n")
    assert len(faults) == 1
    assert len(faults[0]) < 200


@given(st.text(alphabet=st.sampled_from('0123456789.,-+eE \n\r\t";xt_sbaelowid\ufeff'), max_size=200))
def test_no_text_escapes_as_another_error(text):
    """Whatever a file holds, it is a motion or a list of faults."""
    for head in ("", HEAD):
        with contextlib.suppress(InputFaults):
            assert isinstance(read_table("plan.csv", head + text, ARM), TableMotion)


@given(
    st.lists(
        st.tuples(st.floats(1e-7, 10), st.floats(-1e5, 1e5), st.floats(-1e5, 1e5)), min_size=2, max_size=8
    )
)
def test_no_numbers_escape_as_another_error(steps):
    """Whatever the rows' numbers, the outcome is a finite motion within its limits, or faults."""
    arm = make_arm(upper=(radians(170), INF, INF), speed=(INF, 3.0, INF))
    times = np.cumsum([step for step, *_ in steps])
    rows = "".join(f"{t!r},{a!r},{b!r},0\n" for t, (_, a, b) in zip(times.tolist(), steps, strict=True))
    try:
        motion = read_table("plan.csv", HEAD + rows, arm)
    except InputFaults:
        return
    q, v, a = motion.reference(motion.row_times)
    assert np.isfinite([q, v, a]).all()
    assert (np.abs(v[:, 1]) <= 3.0 * (1 + 1e-9)).all()


def test_a_long_table_is_read_in_a_second():
    """100 s at 100 Hz and three joints: 10,000 rows in well under a second."""
    t = np.arange(10_000) / 100
    table = np.column_stack([t, 30 * np.sin(t), 20 * np.cos(t), 100 * np.sin(0.5 * t)])
    text = HEAD + "\n".join(",".join(f"{value:.6f}" for value in row) for row in table)
    start = time.perf_counter()
    motion = read_table("plan.csv", text, ARM)
    assert time.perf_counter() - start < 1.0
    assert len(motion.rows) == 10_000
