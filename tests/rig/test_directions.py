"""A plant in a direction that is given, not drawn."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Mismatch
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose, registered
from rigbench.motion.via import ViaMotion
from rigbench.rig import Rates, Run, simulate
from rigbench.rig.sampled import Timing

MISMATCH = Mismatch(link_mass_percent=20, link_cog_mm=5, coulomb_percent=30, delay_ms=0.4, base_tilt_deg=1.0)
SOURCES = ("link_mass_percent", "link_cog_mm", "coulomb_percent", "delay_ms", "base_tilt_deg")


@pytest.fixture
def drawn():
    """A run in draw 7 of five sources."""
    files = ArmFiles.read(Path(__file__).resolve().parents[2] / "robots_demo/planar2/arm.yaml")
    cls = registered().laws["gravity-compensated"].cls
    motion = ViaMotion(points=((0.0, 0.3), (0.2, -0.2)), leg_s=0.3, rest_s=0.1)
    return Run(
        files, choose("gravity-compensated", options_model(cls)()), motion, Rates(1000, 1000), (0.0, 0.3), 0.5,
        seed=5, timing=Timing(delay_ms=0.5), mismatch=MISMATCH, level=0.8, sources=SOURCES, draw=7,
    )  # fmt: skip


def given(run, **changed):
    """The same run, with the draw's values stated."""
    return replace(run, draw=None, directions=tuple((run.factors() | changed).items()))


def test_a_draw_s_values_as_directions_are_that_draw(drawn):
    """The plant, its delay and its base are the same to the last bit, and so is the run."""
    stated = given(drawn)
    assert stated.factors() == drawn.factors()
    assert stated.plant_delay_ms == drawn.plant_delay_ms not in (0.0, 0.5)
    assert stated.plant_gravity == drawn.plant_gravity != (0.0, 0.0, -9.81)
    np.testing.assert_array_equal(simulate(stated).q, simulate(drawn).q)


def test_the_key_follows_the_directions(drawn):
    """Another value is another run; another order, seed or number of draw is the same one."""
    stated = given(drawn)
    assert stated.key() != drawn.key()
    assert given(drawn, delay_ms=0.123).key() != stated.key()
    for same in ({"directions": stated.directions[::-1]}, {"seed": 6}, {"draw": 3}):
        assert replace(stated, **same).key() == stated.key()


def test_without_mismatch_directions_count_for_nothing(drawn):
    """At level 0 the run is the nominal one."""
    assert replace(given(drawn), level=0.0).key() == replace(drawn, level=0.0, draw=None).key()


def test_a_parameter_without_a_direction_is_refused(drawn):
    """What acts must be given whole: half a machine drawn by chance is nobody's wish."""
    stated = given(drawn)
    short = tuple(pair for pair in stated.directions if not pair[0].startswith("coulomb"))
    with pytest.raises(ValueError, match="no direction is given for coulomb_percent"):
        replace(stated, directions=short).plant()
