"""Sources and cases of torque path, encoders, transmission, delay and base tilt: what they make of a plant."""

from __future__ import annotations

import dataclasses
import inspect
import json
from pathlib import Path

import numpy as np
import pytest
from scipy import stats

from rigbench.arm.arm import Arm
from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import (
    Case,
    Mismatch,
    Payload,
    Spread,
    believed,
    delay_of,
    draw_values,
    parameter_names,
    plant,
    tilt_of,
    uniform,
)
from rigbench.errors import InputFaults

TRAY6 = ArmFiles.read(Path(__file__).resolve().parents[2] / "robots_demo" / "tray6" / "arm.yaml").arm()
STIFF = np.array([np.inf, 4e4, 4e4, np.inf, 1e4, 1e4])
LIMIT = np.array([180.0, 180.0, 100.0, 40.0, np.inf, 20.0])
ARM = dataclasses.replace(
    TRAY6,
    kinds=np.array([0.0, 0, 0, 0, 0, 1]),  # the last joint prismatic, for units' sake
    drives=dataclasses.replace(TRAY6.drives, stiffness=STIFF, torque_limit=LIMIT),
)
OLD = Mismatch(5, 5, 15, Payload(1.5, 0, 3, 30), 30, 30, 15)
NEW = Mismatch(
    torque_constant_percent=5,
    torque_bias_percent=2,
    encoder_offset_deg=0.1,
    stiffness_percent=40,
    delay_ms=1.5,
    base_tilt_deg=0.5,
)
BOTH = dataclasses.replace(OLD, **{name: getattr(NEW, name) for name in NEW.sources})
SEED, DRAW = 7, 3


def u_of(source: str, arm: Arm = ARM) -> np.ndarray:
    """The factors u of a source in the draw that these tests use."""
    return np.array([uniform(SEED, name, DRAW) for name in parameter_names(arm, source)])


def drawn(source: str, level: float = 1.0, mismatch: Mismatch = NEW, case: Case | None = None) -> Arm:
    return plant(ARM, mismatch, level, (source,), SEED, DRAW, case)


def changed(one: Arm, other: Arm) -> set[str]:
    """Names of the arrays in which two arms differ in any bit."""
    mine, theirs = ({**vars(arm), **vars(arm.drives)} for arm in (one, other))
    return {
        name
        for name, value in mine.items()
        if isinstance(value, np.ndarray) and value.tobytes() != theirs[name].tobytes()
    }


# --- streams


def test_each_parameter_has_a_stream_under_its_name():
    """Joints' sources have a factor a joint, delay one, tilt two, all told apart by name."""
    names = list(draw_values(ARM, NEW, NEW.sources, SEED, DRAW))
    by_joint = [f"{source}.{joint}" for source in NEW.sources[:4] for joint in ARM.joints]
    assert names == [*by_joint, "delay_ms", "base_tilt_deg.x", "base_tilt_deg.y"]


def test_what_existed_draws_as_before():
    """Beside the new sources the old ones draw the same factors, build the same plant and have the same inputs."""
    old = draw_values(ARM, OLD, OLD.sources, SEED, DRAW)
    both = draw_values(ARM, BOTH, BOTH.sources, SEED, DRAW)
    assert old.items() <= both.items()
    one, other = (plant(ARM, m, 2, OLD.sources, SEED, DRAW) for m in (OLD, BOTH))
    assert changed(one, other) == set()
    assert json.dumps(OLD.inputs(OLD.sources)) == json.dumps(BOTH.inputs(OLD.sources))


def test_all_together_is_each_alone():
    """The sources touch different numbers, so all at once are the union of each by itself, bit for bit."""
    whole = plant(ARM, NEW, 1, NEW.sources, SEED, DRAW)
    arrays = {
        "torque_constant_percent": "torque_gain",
        "torque_bias_percent": "torque_bias",
        "encoder_offset_deg": "encoder_offset",
        "stiffness_percent": "stiffness",
    }
    for source, name in arrays.items():
        alone = drawn(source)
        assert changed(alone, believed(ARM, NEW)) == {name}
        assert getattr(alone.drives, name).tobytes() == getattr(whole.drives, name).tobytes()
    for source in ("delay_ms", "base_tilt_deg"):
        assert changed(drawn(source), believed(ARM, NEW)) == set()


def test_the_model_never_knows():
    """What the controllers believe is the arm with its declared numbers, whatever mismatch is declared."""
    assert believed(ARM, NEW) is ARM
    assert changed(believed(ARM, BOTH), believed(ARM, OLD)) == set()


# --- the drives, source by source


@pytest.mark.parametrize("level", [1.0, 2.5])
def test_torque_constants_are_drawn_as_percent_are(level):
    """Torque given over torque asked for: 1.05^(level u), a factor of its own for each joint."""
    got = drawn("torque_constant_percent", level).drives.torque_gain
    np.testing.assert_allclose(got, 1.05 ** (level * u_of("torque_constant_percent")), rtol=1e-14)
    assert len(set(got)) == ARM.n


def test_a_torque_bias_is_a_share_of_the_torque_limit():
    """level u 2 % of each limit, either sign; nothing where there is no limit."""
    got = drawn("torque_bias_percent", 2.0).drives.torque_bias
    limit = np.array([180.0, 180.0, 100.0, 40.0, 0.0, 20.0])
    np.testing.assert_allclose(got, 2.0 * u_of("torque_bias_percent") * 0.02 * limit, rtol=1e-14)
    assert got[4] == 0.0


def test_an_encoder_offset_is_in_degrees_or_millimetres():
    """level u 0.1 degrees, and 0.1 mm on the prismatic joint."""
    got = drawn("encoder_offset_deg", 2.0).drives.encoder_offset
    unit = np.array([*[np.pi / 180] * 5, 1e-3])
    np.testing.assert_allclose(got, 2.0 * 0.1 * u_of("encoder_offset_deg") * unit, rtol=1e-14)


def test_stiffness_is_that_of_elastic_joints_alone():
    """Elastic joints: times 1.4^(level u); a rigid one stays rigid."""
    got = drawn("stiffness_percent", 1.5).drives.stiffness
    np.testing.assert_array_equal(np.isinf(got), np.isinf(STIFF))
    elastic = np.isfinite(STIFF)
    factor = 1.4 ** (1.5 * u_of("stiffness_percent")[elastic])
    np.testing.assert_allclose(got[elastic], STIFF[elastic] * factor, rtol=1e-14)


def test_spreads_by_name_and_shared_factors():
    """{j2: 3} moves joint 2 alone; a shared factor is one for all, from the stream called 'all'."""
    one = drawn("encoder_offset_deg", mismatch=Mismatch(encoder_offset_deg=Spread(0, (("j2", 3),))))
    assert np.flatnonzero(one.drives.encoder_offset).tolist() == [1]
    shared = drawn(
        "torque_constant_percent", mismatch=Mismatch(torque_constant_percent=Spread(5, shared=True))
    )
    u = uniform(SEED, "torque_constant_percent.all", DRAW)
    np.testing.assert_allclose(shared.drives.torque_gain, np.full(6, 1.05**u), rtol=1e-14)


# --- delay and tilt


def test_the_delay_is_added_and_never_below_0():
    """Over 4,000 draws declared 1 + 2 u is uniform in -1 to 3, with the quarter below 0 held at 0."""
    mismatch = Mismatch(delay_ms=1.0)
    got = np.array([delay_of(1.0, mismatch, 2.0, ("delay_ms",), SEED, draw) for draw in range(4000)])
    assert got.min() == 0.0
    assert got.max() < 3.0
    # standard deviation of a share of 1/4 over 4,000 draws: 0.0068
    assert np.mean(got == 0.0) == pytest.approx(0.25, abs=3 * 0.0068)
    assert stats.kstest(got[got > 0], stats.uniform(0, 3).cdf).pvalue > 0.001
    u = uniform(SEED, "delay_ms", 17)
    assert delay_of(5.0, mismatch, 2.0, ("delay_ms",), SEED, 17) == pytest.approx(5.0 + 2.0 * u, rel=1e-14)


def test_the_tilt_is_added_about_each_axis():
    """declared + level u 0.5 degrees, about x and about y by streams of their own."""
    got = tilt_of((0.01, -0.02), NEW, 2.0, ("base_tilt_deg",), SEED, DRAW)
    u, w = u_of("base_tilt_deg")
    expected = 0.01 + np.deg2rad(1.0) * u, -0.02 + np.deg2rad(1.0) * w
    np.testing.assert_allclose(got, expected, rtol=1e-14)
    assert u != w


@pytest.mark.parametrize(("level", "sources"), [(0.0, NEW.sources), (1.0, ("stiffness_percent",)), (1.0, ())])
def test_where_they_do_not_act_the_declared_ones_stay(level, sources):
    """At level 0, or where other sources act, no draw is needed and nothing changes."""
    draw = None if level == 0 or not sources else DRAW
    assert delay_of(0.7, NEW, level, sources, SEED, draw) == 0.7
    assert tilt_of((0.1, 0.2), NEW, level, sources, SEED, draw) == (0.1, 0.2)


def test_random_ones_need_the_number_of_a_draw():
    """As for the plant, what is random can't be had without a draw."""
    for call in (
        lambda: delay_of(0.7, NEW, 1.0, NEW.sources, SEED, None),
        lambda: tilt_of((0, 0), NEW, 1.0, NEW.sources, SEED, None),
    ):
        with pytest.raises(ValueError, match="number of a draw"):
            call()


# --- cases


@pytest.mark.parametrize("level", [0.0, 1.0])
def test_what_a_case_states_of_the_drives_comes_on_top(level):
    """Percent of torque constant and stiffness multiply, bias and offset are added, on top of any draw."""
    case = Case(
        torque_constant_percent=-10,
        torque_bias_percent=Spread(0, (("j1", -5),)),
        encoder_offset_deg=0.2,
        stiffness_percent=25,
    )
    draw = DRAW if level else None
    sources = NEW.sources if level else ()
    got, without = (plant(ARM, NEW, level, sources, SEED, draw, c).drives for c in (case, None))
    np.testing.assert_allclose(got.torque_gain, 0.9 * without.torque_gain, rtol=1e-14)
    np.testing.assert_allclose(got.torque_bias - without.torque_bias, [-9, 0, 0, 0, 0, 0], atol=1e-14)
    offset = [*[np.deg2rad(0.2)] * 5, 2e-4]
    np.testing.assert_allclose(got.encoder_offset - without.encoder_offset, offset, rtol=1e-12)
    np.testing.assert_array_equal(got.stiffness, 1.25 * without.stiffness)
    assert np.isinf(got.stiffness[0])


@pytest.mark.parametrize("level", [0.0, 1.0])
def test_a_case_states_the_whole_delay_and_tilt(level):
    """In place of what is declared and drawn: 0 is no delay, and [1, 0] no tilt about y."""
    case = Case(delay_ms=0, base_tilt_deg=(1, 0))
    assert delay_of(2.0, NEW, level, NEW.sources, SEED, DRAW, case) == 0.0
    assert tilt_of((0.1, 0.2), NEW, level, NEW.sources, SEED, DRAW, case) == (np.deg2rad(1.0), 0.0)
    other = Case(stiffness_percent=5)
    assert delay_of(2.0, NEW, 0.0, (), SEED, None, other) == 2.0
    assert tilt_of((0.1, 0.2), NEW, 0.0, (), SEED, None, other) == (0.1, 0.2)


def test_case_and_sources_as_json():
    """Inputs are plain numbers, and each thing stated or spread shows."""
    case = Case(delay_ms=0, base_tilt_deg=(1, 0), encoder_offset_deg=Spread(0, (("j2", -1),)))
    assert json.loads(json.dumps(case.inputs())) == {
        "encoder_offset_deg": {"all": 0.0, "each": {"j2": -1.0}, "shared": False},
        "delay_ms": 0.0,
        "base_tilt_deg": [1.0, 0.0],
    }
    assert NEW.inputs(("delay_ms", "base_tilt_deg", "stiffness_percent")) == {
        "believed_kg": 0.0,
        "stiffness_percent": 40.0,
        "delay_ms": 1.5,
        "base_tilt_deg": 0.5,
    }


@pytest.mark.parametrize(
    "nonsense",
    [
        lambda: Mismatch(torque_constant_percent=-100),
        lambda: Mismatch(stiffness_percent=float("nan")),
        lambda: Mismatch(torque_bias_percent=-1),
        lambda: Mismatch(encoder_offset_deg=-0.1),
        lambda: Mismatch(delay_ms=-1),
        lambda: Mismatch(delay_ms=float("nan")),
        lambda: Mismatch(base_tilt_deg=float("inf")),
        lambda: Case(torque_constant_percent=-100),
        lambda: Case(stiffness_percent=-150),
        lambda: Case(torque_bias_percent=float("inf")),
        lambda: Case(encoder_offset_deg=Spread(1, shared=True)),
        lambda: Case(delay_ms=-0.1),
        lambda: Case(base_tilt_deg=(1, float("nan"))),
        lambda: Case(base_tilt_deg=(1, 2, 3)),
    ],
)
def test_nonsense_is_refused(nonsense):
    """Negative delays, factors that leave nothing, numbers that are none."""
    with pytest.raises(ValueError):  # noqa: PT011 - the classes say it in their own words
        nonsense()


def test_what_overflows_names_its_source():
    """At a level past all numbers the fault names the source."""
    with pytest.raises(InputFaults) as caught:
        drawn("torque_constant_percent", 1e6)
    assert caught.value.faults[0].key == "mismatch.torque_constant_percent"


def test_every_source_that_is_drawn_can_be_stated():
    """A case may state each source of mismatch, by the same key; the payload in its two parts.

    What an identification left unknown is sums of parameters: a case states parameters, not these.
    """
    stated = set(inspect.signature(Case).parameters)
    drawn_too = {field.name for field in dataclasses.fields(Mismatch)} - {"payload", "identification"}
    assert stated == drawn_too | {"payload_kg", "payload_cog_mm"}
