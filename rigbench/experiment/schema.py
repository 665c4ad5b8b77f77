"""The keys of an experiment file: their types, units, defaults and ranges, one class a section.

Those of motions, mismatch, conditions, and of sensing and timing are in
:mod:`rigbench.experiment.motion_keys`, :mod:`rigbench.experiment.mismatch_keys`,
:mod:`rigbench.experiment.condition_keys` and :mod:`rigbench.experiment.rig_keys`. What only shows against
the arm, the laws or another key (lengths, limits, names) is looked at afterwards.
"""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import ConfigDict, Field, create_model, field_validator
from pydantic_core import PydanticKnownError

from rigbench.arm.declaration import DriveDeclaration
from rigbench.experiment.condition_keys import ConditionsKeys
from rigbench.experiment.find_level_keys import FindLevelKeys
from rigbench.experiment.mismatch_keys import MismatchKeys
from rigbench.experiment.motion_keys import MotionKeys
from rigbench.experiment.needs_keys import NeedsKeys
from rigbench.experiment.rig_keys import SensingKeys, TimingKeys
from rigbench.experiment.tune_keys import TuneKeys
from rigbench.experiment.worst_case_keys import WorstCaseKeys
from rigbench.yamlfile import Declared

__all__ = ["DriveKeys", "ExperimentKeys", "LawKeys", "RatesKeys"]


Tilt = Annotated[float, Field(ge=-180, le=180)]


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


class LawKeys(Declared):
    """A law under a name of yours: which law it is, then its options (``rigbench laws NAME`` lists them)."""

    model_config = ConfigDict(extra="allow")

    law: str = Field(
        min_length=1,
        description="a registered law, or FILE.py:CLASS for one of your own, relative to this file",
    )


def _drive_numbers() -> Any:
    """Return a model of a drive's keys, none of which need be given; together they are judged in the arm."""
    fields: dict[str, Any] = {}
    for name, info in DriveDeclaration.model_fields.items():
        kind: Any = info.annotation
        for bound in info.metadata:
            kind = Annotated[kind, bound]
        fields[name] = (kind, Field(default=None, description=info.description))
    return create_model("DriveNumbers", __base__=Declared, **fields)


class DriveKeys(_drive_numbers()):  # type: ignore[misc]  # its fields follow those of the arm file
    """Numbers of a joint's drive, in place of those in the arm file, in plant and model alike."""


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
    drives: dict[str, DriveKeys] = Field(
        default_factory=dict,
        description="numbers of the drives in place of the arm file's, by joint or under 'all'; a joint's "
        "own go before those of all",
    )
    seed: int = Field(default=0, ge=0, lt=2**63, description="seed of the draws; default 0")
    rates: RatesKeys = Field(default_factory=RatesKeys, description="sample rates")
    gravity_m_s2: list[float] = Field(
        default_factory=lambda: [0.0, 0.0, -9.81],
        min_length=3,
        max_length=3,
        description="gravity in the base frame [m/s^2]; default [0, 0, -9.81]",
    )
    sensing: SensingKeys = Field(
        default_factory=SensingKeys, description="what the law sees of the machine; default: its exact state"
    )
    timing: TimingKeys = Field(
        default_factory=TimingKeys,
        description="when the law is called, and when its torque acts; default: at every tick, at once",
    )
    base_tilt_deg: Annotated[list[Tilt], Field(min_length=2, max_length=2)] = Field(
        default_factory=lambda: [0.0, 0.0],
        description="tilt of the plant's base about its x, then its y axis [deg], of which the controllers "
        "don't know; default [0, 0]; typical: 0.2 (our choice)",
    )
    scene: str | None = Field(
        default=None,
        min_length=1,
        description="what else is in the engine's world: a registered scene, or FILE.py:FUNCTION for one of "
        "your own, relative to this file; contacts are then on; default: the arm alone",
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
    vary: dict[str, Any] | None = Field(
        default=None,
        min_length=1,
        description="the sweep: mirrors this file, and each of its leaves is a list of values to try, in all "
        "combinations; options of a law make further rows of the matrix, all else makes sheets of their own",
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
    stop_early: bool = Field(
        default=False,
        description="true: a random column gets no more draws once each of its laws is shown to keep or to "
        "miss, by intervals that hold however often one looks; default false",
    )
    find_level: FindLevelKeys | None = Field(
        default=None,
        description="find each draw's own limit by runs after the matrix, and from these the tolerated "
        "level; {} for the defaults; default: the tolerated level from the columns",
    )
    needs: NeedsKeys | None = Field(
        default=None,
        description="ask which sources of mismatch must be known, and how well, by runs after the matrix; "
        "default: not asked",
    )
    worst_case: WorstCaseKeys | None = Field(
        default=None,
        description="search for the machine that breaks a law, by runs after the matrix; {} for the "
        "defaults; default: not searched",
    )
    tune: TuneKeys | None = Field(
        default=None,
        description="find the gains of each law that do best on the nominal machine, by runs before the "
        "matrix, which then has them; {} for the defaults; default: the gains as declared",
    )

    @field_validator("tolerance", "vary", "find_level", "needs", "worst_case", "tune", mode="before")
    @classmethod
    def _given(cls, value: Any) -> Any:
        """Refuse a key without a value: left out and ignored are not the same to whoever wrote it."""
        if value is None:
            raise PydanticKnownError("dict_type")
        return value
