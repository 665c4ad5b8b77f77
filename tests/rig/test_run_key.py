"""What a run's key covers, and what it leaves alone."""

from __future__ import annotations

from dataclasses import fields, replace
from pathlib import Path

import pytest

from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Case, Mismatch, Payload
from rigbench.laws.registry import LawChoice
from rigbench.motion.via import ViaMotion
from rigbench.rig import Rates, Run
from rigbench.rig.sampled import Sensing, Timing
from rigbench.rig.scene import SceneChoice

ROOT = Path(__file__).resolve().parents[2]
ARM = ArmFiles.read(ROOT / "robots_demo" / "planar2" / "arm.yaml")
TRAY6 = ArmFiles.read(ROOT / "robots_demo" / "tray6" / "arm.yaml")
MISMATCH = Mismatch(link_mass_percent=5, coulomb_percent=30, payload=Payload(1, 0, 2))
BASE = Run(
    arm=ARM,
    law=LawChoice("computed-torque", (("natural_hz", 5.0),)),
    motion=ViaMotion(points=((0.0, 0.0), (1.0, 0.5)), leg_s=1.0, rest_s=0.2),
    rates=Rates(1000, 2000),
    gain_pose=(0.0, 0.0),
    settle_band_mm=0.5,
    seed=4,
    mismatch=MISMATCH,
    level=1.0,
    sources=("link_mass_percent",),
    draw=3,
)

CHANGES = {
    "arm": TRAY6,
    "law": LawChoice("computed-torque", (("natural_hz", 6.0),)),
    "motion": ViaMotion(points=((0.0, 0.0), (1.0, 0.5)), leg_s=1.1, rest_s=0.2),
    "rates": Rates(1000, 4000),
    "gain_pose": (0.1, 0.0),
    "settle_band_mm": 0.4,
    "seed": 5,
    "model": TRAY6,
    "mismatch": replace(MISMATCH, link_mass_percent=6),
    "level": 0.5,
    "sources": ("coulomb_percent",),
    "draw": 4,
    "start_offset": (0.01, 0.0),
    "gravity": (0.0, 0.0, -1.6),
    "case": Case(payload_kg=2.0),
    "sensing": Sensing(noise_deg=0.1),
    "timing": Timing(delay_ms=1.0),
    "base_tilt": (0.01, 0.0),
    "directions": (("link_mass_percent.link1", 0.5), ("link_mass_percent.link2", -0.5)),
    "scene": SceneChoice("scene.py:build", (("scene.py", "def build(client, body, arm): pass"),)),
}


def test_every_field_of_a_run_is_covered_here():
    """A field more in Run needs a line in this file."""
    assert {field.name for field in fields(Run)} == CHANGES.keys()


@pytest.mark.parametrize("name", CHANGES)
def test_a_change_of_any_input_changes_the_key(name):
    """Whatever a run depends on is in its key."""
    assert replace(BASE, **{name: CHANGES[name]}).key() != BASE.key()


def test_the_believed_payload_counts_even_where_it_does_not_spread():
    """Model and plant carry it in every condition."""
    other = replace(MISMATCH, payload=Payload(1.5, 0, 2))
    assert replace(BASE, mismatch=other).key() != BASE.key()


def test_what_does_not_act_does_not_count():
    """Sources that are declared but not active, seed and draw where nothing is random, and the paths of
    files leave the key alone."""
    idle = replace(MISMATCH, coulomb_percent=99, viscous_percent=10)
    assert replace(BASE, mismatch=idle).key() == BASE.key()
    nominal = replace(BASE, level=0.0, sources=(), draw=None)
    assert replace(nominal, seed=77, draw=9, sources=("coulomb_percent",)).key() == nominal.key()
    assert replace(BASE, arm=replace(ARM, path="elsewhere.yaml")).key() == BASE.key()
    assert replace(BASE, sensing=Sensing()).key() == BASE.key()


def test_link_names_are_in_the_key():
    """A draw's streams are keyed by link names, so another name is another machine."""
    renamed = ARM.urdf_text.replace('"upper"', '"above"')
    assert renamed != ARM.urdf_text
    assert replace(BASE, arm=replace(ARM, urdf_text=renamed)).key() != BASE.key()
