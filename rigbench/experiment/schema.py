"""The keys of an experiment file: their types, units, defaults and ranges, one class a section.

What only shows against the arm, the laws or another key (lengths, limits, names) is looked at
afterwards, in :mod:`rigbench.experiment.checks`.
"""

from __future__ import annotations

from typing import Any

from pydantic import ConfigDict, Field

from rigbench.yamlfile import Declared

__all__ = [
    "ConditionsKeys",
    "ExperimentKeys",
    "LawKeys",
    "MismatchKeys",
    "MotionKeys",
    "PayloadKeys",
    "RatesKeys",
]


class RatesKeys(Declared):
    """How often the law is called, and how finely the engine steps."""

    control_hz: float = Field(
        default=1000.0, gt=0, le=1e6, description="calls of the law a second [Hz]; default 1000"
    )
    physics_hz: float | None = Field(
        default=None,
        gt=0,
        le=1e6,
        description="steps of the physics engine a second [Hz], a whole multiple of control_hz; "
        "default 2 x control_hz",
    )


class MotionKeys(Declared):
    """One reference that the arm tracks: through via points, or from a file."""

    via_deg: list[list[float]] | None = Field(
        default=None,
        min_length=2,
        description="points that the motion goes through, each a list with one position a joint [deg; mm for "
        "a prismatic joint]; between two of them the arm moves from rest to rest",
    )
    leg_s: float = Field(
        default=1.0, gt=0, le=3600, description="duration of each leg, from point to point [s]; default 1"
    )
    rest_s: float = Field(
        default=0.3, ge=0, le=3600, description="rest at the end of each leg [s]; default 0.3; 0: no rest"
    )
    file: str | None = Field(
        default=None,
        min_length=1,
        description="CSV file with a column t_s and one column a joint, in deg (mm for a prismatic joint), "
        "relative to this file; a smooth spline goes through its rows",
    )
    pace_percent: float = Field(
        default=100.0,
        gt=0,
        le=1000,
        description="speed of the motion in percent of what is declared; default 100",
    )


class LawKeys(Declared):
    """A law under a name of yours: which law it is, then its options (``rigbench laws NAME`` lists them)."""

    model_config = ConfigDict(extra="allow")

    law: str = Field(
        min_length=1,
        description="a registered law, or FILE.py:CLASS for one of your own, relative to this file",
    )


class PayloadKeys(Declared):
    """The load at the tool point; the plant's never leaves the range declared, whatever the level."""

    believed_kg: float = Field(ge=0, description="mass that the controllers believe in [kg]")
    least_kg: float = Field(ge=0, description="least mass of the plant's load [kg]")
    most_kg: float = Field(ge=0, description="greatest mass of the plant's load [kg]")
    cog_mm: float = Field(
        default=0.0,
        ge=0,
        description="farthest that the load's centre of gravity lies from the tool point at level 1, in each "
        "direction of the tool frame [mm]; default 0",
    )


SPREAD = "at level 1 [percent]; p percent multiplies by a factor from 1 / (1 + p/100) to 1 + p/100"


class MismatchKeys(Declared):
    """In which ways, and how far at level 1, the plant departs from the model; none acts unless declared."""

    link_mass_percent: float | None = Field(
        default=None, gt=0, le=1000, description=f"mass of each link, {SPREAD}"
    )
    link_cog_mm: float | None = Field(
        default=None,
        gt=0,
        le=10_000,
        description="shift of each link's centre of gravity at level 1, in each direction [mm]",
    )
    link_inertia_percent: float | None = Field(
        default=None, gt=0, le=1000, description=f"principal second moments of mass of each link, {SPREAD}"
    )
    payload: PayloadKeys | None = Field(default=None, description="the load at the tool point")
    coulomb_percent: float | None = Field(
        default=None, gt=0, le=1000, description=f"Coulomb friction of each joint, {SPREAD}"
    )
    viscous_percent: float | None = Field(
        default=None, gt=0, le=1000, description=f"viscous friction of each joint, {SPREAD}"
    )
    rotor_inertia_percent: float | None = Field(
        default=None, gt=0, le=1000, description=f"rotor inertia of each drive, {SPREAD}"
    )


class ConditionsKeys(Declared):
    """The columns of the results matrix beside 'nominal', in which the plant equals the model."""

    each_alone: float | None = Field(
        default=None,
        gt=0,
        le=100,
        description="level of one column per source of mismatch, that source alone",
    )
    together: list[float] | None = Field(
        default=None,
        min_length=1,
        description="rising levels, one column each, in which all sources act at once",
    )


class ExperimentKeys(Declared):
    """One experiment: an arm on the rig, its motions, laws, mismatch and tolerance."""

    model_config = ConfigDict(json_schema_extra={"required": ["rigbench", "arm", "motions", "laws"]})

    # What is required is optional to this class, so that a fault in one key leaves the others to be checked.
    rigbench: int | None = Field(default=None, description="version of this file's format: 1")
    title: str | None = Field(
        default=None,
        min_length=1,
        description="title of matrix and report; default: the file's name without its ending",
    )
    arm: str | None = Field(default=None, min_length=1, description="the arm file, relative to this file")
    model: str | None = Field(
        default=None,
        min_length=1,
        description="a second arm file that the controllers believe instead, relative to this file; "
        "default: the arm itself",
    )
    seed: int = Field(default=0, ge=0, lt=2**63, description="seed of the draws; default 0")
    rates: RatesKeys = Field(default_factory=RatesKeys, description="sample rates")
    gravity_m_s2: list[float] = Field(
        default_factory=lambda: [0.0, 0.0, -9.81],
        min_length=3,
        max_length=3,
        description="gravity in the base frame [m/s^2]; default [0, 0, -9.81]",
    )
    gain_pose_deg: list[float] | None = Field(
        default=None,
        description="pose at which natural_hz becomes gains, one position a joint [deg; mm for a prismatic "
        "joint]; default: where the first motion starts",
    )
    start_offset_deg: list[float] | None = Field(
        default=None,
        description="by how much each run starts beside the motion's first point, one value a joint [deg; mm "
        "for a prismatic joint]; default 0",
    )
    motions: dict[str, MotionKeys] | None = Field(
        default=None, min_length=1, description="the motions, each under a name of yours"
    )
    laws: dict[str, LawKeys] | None = Field(
        default=None, min_length=1, description="the laws, each under a name of yours"
    )
    mismatch: MismatchKeys = Field(
        default_factory=MismatchKeys,
        description="how far the plant departs from the model; default: not at all",
    )
    conditions: ConditionsKeys = Field(
        default_factory=ConditionsKeys, description="columns of the matrix beside 'nominal'; default: none"
    )
    draws: int = Field(
        default=128, ge=1, le=1_000_000, description="machines drawn at random a condition; default 128"
    )
    tolerance: dict[str, Any] | None = Field(
        default=None,
        min_length=1,
        description="limits that a run must keep: a score's name and the most that it may be, in the unit "
        "that the name carries; a score of joints takes one number for all or a number per joint. "
        "settle_band_mm (default 0.5) is no limit: it is the band around the target within which settle_ms "
        "and overshoot_mm take the tool to have arrived [mm]",
    )
    required_share: float = Field(
        default=0.95,
        gt=0,
        lt=1,
        description="share of the draws that must keep the tolerance, in every motion; default 0.95",
    )
