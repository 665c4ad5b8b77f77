"""The identification file as the user writes it."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from rigbench.experiment.mismatch_keys import MOST_MM, MismatchKeys
from rigbench.experiment.motion_keys import MotionKeys
from rigbench.yamlfile import Declared

__all__ = ["ExcitationKeys", "IdentificationKeys", "LoadedKeys", "SimulateKeys"]

Term = Literal["rotor", "viscous", "coulomb", "offset"]
Name = Annotated[str, Field(min_length=1)]
Offset = Annotated[float, Field(ge=-MOST_MM, le=MOST_MM)]
Offsets = Annotated[list[Offset], Field(min_length=3, max_length=3)]
Point = Annotated[list[float], Field(min_length=3, max_length=3)]


class ExcitationKeys(Declared):
    """The motion that excites the arm: a Fourier series, the best that a search within the limits finds."""

    harmonics: int = Field(default=5, ge=2, le=20, description="harmonics of the series; default 5")
    period_s: float = Field(default=4.0, gt=0, le=1000, description="its period [s]; default 4")
    periods: int = Field(default=5, ge=1, le=1000, description="how often it is run through; default 5")
    criterion: Literal["condition", "determinant"] = Field(
        default="condition",
        description="what the search makes best, of the base regressor; default condition",
    )
    rounds: int = Field(default=60, ge=1, le=10_000, description="rounds of the search at most; default 60")
    seed: int = Field(default=0, ge=0, lt=2**63, description="seed of the search; default 0")
    limit_percent: float = Field(
        default=90.0,
        gt=0,
        le=100,
        description="share of the limits of position, speed and torque that it may use [percent]; default 90",
    )
    tool_least_m: Point | None = Field(
        default=None, description="corner of the box that the tool stays in, base frame [m]; default: no box"
    )
    tool_most_m: Point | None = Field(default=None, description="the opposite corner [m]; default: no box")


class LoadedKeys(Declared):
    """What the hidden machine carries when it is moved a second time."""

    payload_kg: float = Field(
        ge=0, le=1e6, description="mass of the load, a point, in the last link's hold [kg]; 0 for none"
    )
    payload_cog_mm: Offsets | None = Field(
        default=None, description="its offset from the tool point, in the tool frame [mm]; default: none"
    )


class SimulateKeys(Declared):
    """A machine to practise on: the arm with a hidden mismatch, and noisy sensors."""

    mismatch: MismatchKeys = Field(
        default_factory=MismatchKeys,
        description="spreads of the hidden machine, as in an experiment, at level 1",
    )
    seed: int = Field(default=0, ge=0, lt=2**63, description="seed of machine and noise; default 0")
    noise_deg: float = Field(
        default=0.0, ge=0, le=90, description="noise on positions, standard deviation [deg]; default 0"
    )
    torque_noise_nm: float = Field(
        default=0.0,
        ge=0,
        le=1e6,
        description="noise on recorded torques, standard deviation [N m]; default 0",
    )
    loaded: LoadedKeys | None = Field(
        default=None,
        description="a hidden load, with which the same motion is recorded once more; names as in an "
        "experiment's cases",
    )


class IdentificationKeys(Declared):
    """What ``rigbench identify`` does. Paths are relative to the file."""

    rigbench: Literal[1] = Field(description="version of the format")
    arm: Name = Field(description="the arm file: what is known, or believed, beforehand")
    recordings: list[Name] | None = Field(
        default=None, min_length=1, description="recorded motions, CSV or Parquet; instead of simulate"
    )
    loaded: list[Name] | None = Field(
        default=None,
        min_length=1,
        description="recorded motions of the same arm with a load, beside recordings: what it carries there",
    )
    check: Name | None = Field(
        default=None,
        description="a recorded motion, without a load, that is not fitted, to check the result on",
    )
    simulate: SimulateKeys | None = Field(default=None, description="practise on a hidden machine instead")
    motions: dict[str, MotionKeys] | None = Field(
        default=None,
        min_length=1,
        description="beside simulate: motions that the hidden machine tracks under computed torque, with the "
        "declared and with the identified model; as in an experiment",
    )
    excitation: ExcitationKeys | None = Field(
        default=None, description="the motion of simulate; {} or left out for the defaults"
    )
    terms: list[Term] = Field(
        default=["rotor", "viscous", "coulomb"],
        description="what is identified beside the links; default [rotor, viscous, coulomb]",
    )
    gravity_m_s2: Point = Field(
        default_factory=lambda: [0.0, 0.0, -9.81],
        description="gravity in the base frame [m/s^2]; default [0, 0, -9.81]",
    )
    corner_hz: float = Field(
        default=10.0, gt=0, le=1e4, description="corner of the filters on torques [Hz]; default 10"
    )
    declared_percent: float = Field(
        default=30.0,
        gt=0,
        le=1000,
        description="how far off the declared values may be, where torques don't show them [percent]; "
        "default 30 (our choice)",
    )
