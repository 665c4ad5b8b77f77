"""The keys of mismatch: in which ways the plant departs from the model at random, and how far."""

from __future__ import annotations

from typing import Annotated

from pydantic import ConfigDict, Field

from rigbench.yamlfile import Declared

__all__ = ["MOST_MM", "MOST_OFFSET", "MismatchKeys", "PayloadKeys", "ShiftKeys", "SpreadKeys"]

MOST_PERCENT = 1000
MOST_MM = 10_000
MOST_OFFSET = 1000

Percent = Annotated[float, Field(gt=0, le=MOST_PERCENT)]
Millimetres = Annotated[float, Field(gt=0, le=MOST_MM)]
Spreading = Annotated[float, Field(ge=0, le=MOST_PERCENT)]
Shift = Annotated[float, Field(ge=0, le=MOST_MM)]
Bias = Annotated[float, Field(gt=0, le=100)]
Biasing = Annotated[float, Field(ge=0, le=100)]
Zero = Annotated[float, Field(gt=0, le=MOST_OFFSET)]
Zeroing = Annotated[float, Field(ge=0, le=MOST_OFFSET)]
Milliseconds = Annotated[float, Field(gt=0, le=1000)]
Tilt = Annotated[float, Field(gt=0, le=90)]


class SpreadKeys(Declared):
    """A spread by name: a link or joint, and its number; 'all' is the number of those not named."""

    model_config = ConfigDict(extra="allow")
    __pydantic_extra__: dict[str, Spreading]

    all: Spreading = Field(default=0.0, description="of the links or joints that are not named; default 0")
    shared: bool = Field(
        default=False, description="true: one random factor for all instead of one for each; default false"
    )


class ShiftKeys(SpreadKeys):
    """A spread in mm by name; 'all' is the number of the links not named."""

    __pydantic_extra__: dict[str, Shift]

    all: Shift = Field(default=0.0, description="of the links that are not named [mm]; default 0")


class BiasKeys(SpreadKeys):
    """A spread in percent of torque limits by name; 'all' is the number of the joints not named."""

    __pydantic_extra__: dict[str, Biasing]

    all: Biasing = Field(default=0.0, description="of the joints that are not named [percent]; default 0")


class ZeroKeys(SpreadKeys):
    """A spread in deg (mm for a prismatic joint) by name; 'all' is the number of the joints not named."""

    __pydantic_extra__: dict[str, Zeroing]

    all: Zeroing = Field(default=0.0, description="of the joints that are not named [deg or mm]; default 0")


class PayloadKeys(Declared):
    """The load at the tool point; the plant's never leaves the range declared, whatever the level."""

    believed_kg: float = Field(ge=0, description="mass that the controllers believe in [kg]")
    least_kg: float = Field(ge=0, description="least mass of the plant's load [kg]")
    most_kg: float = Field(ge=0, description="greatest mass of the plant's load [kg]")
    cog_mm: float = Field(
        default=0.0,
        ge=0,
        le=MOST_MM,
        description="farthest that the load's centre of gravity lies from the tool point at level 1, in each "
        "direction of the tool frame [mm]; default 0",
    )


MEASURED = "Armstrong, Khatib, Burdick 1986"
TWICE = "as two identifications of one seven-axis arm differ, quoted second-hand"
SPREAD = (
    "at level 1 [percent]; p percent multiplies by a factor from 1 / (1 + p/100) to 1 + p/100; a number, or "
    "one for each by name: {all: 5, NAME: 25, shared: false}"
)


class MismatchKeys(Declared):
    """In which ways, and how far at level 1, the plant departs from the model; none acts unless declared."""

    link_mass_percent: Percent | SpreadKeys | None = Field(
        default=None,
        description=f"mass of each link, {SPREAD}; typical: 1 weighed, 25 from dimensions ({MEASURED})",
    )
    link_cog_mm: Millimetres | ShiftKeys | None = Field(
        default=None,
        description="shift of each link's centre of gravity at level 1, in each direction [mm]; a number, or "
        f"one for each link by name; typical: 3 ({MEASURED})",
    )
    link_inertia_percent: Percent | SpreadKeys | None = Field(
        default=None,
        description=f"principal second moments of mass of each link, {SPREAD}; typical: 3 to 5, of wrist "
        f"links 50 ({MEASURED})",
    )
    payload: PayloadKeys | None = Field(default=None, description="the load at the tool point")
    coulomb_percent: Percent | SpreadKeys | None = Field(
        default=None, description=f"Coulomb friction of each joint, {SPREAD}; typical: 30 to 40 ({TWICE})"
    )
    viscous_percent: Percent | SpreadKeys | None = Field(
        default=None, description=f"viscous friction of each joint, {SPREAD}; typical: 20 to 50 ({TWICE})"
    )
    rotor_inertia_percent: Percent | SpreadKeys | None = Field(
        default=None, description=f"rotor inertia of each drive, {SPREAD}; typical: 8 to 24 ({MEASURED})"
    )
    torque_constant_percent: Percent | SpreadKeys | None = Field(
        default=None,
        description=f"torque that a drive gives over what is asked of it, {SPREAD}; typical: 5 (common "
        "practice: magnets and current sensors)",
    )
    torque_bias_percent: Bias | BiasKeys | None = Field(
        default=None,
        description="torque that each drive gives without being asked, either way, at level 1 [percent of "
        "its torque limit; none where it has no limit]; a number, or one for each joint by name; typical: 1 "
        "(our choice)",
    )
    encoder_offset_deg: Zero | ZeroKeys | None = Field(
        default=None,
        description="error of each encoder's zero, either way, at level 1 [deg; mm for a prismatic joint]; a "
        "number, or one for each joint by name; typical: 0.05 (our choice)",
    )
    stiffness_percent: Percent | SpreadKeys | None = Field(
        default=None,
        description=f"stiffness of each elastic transmission, {SPREAD}; rigid ones stay rigid; typical: 30 "
        "(our choice)",
    )
    delay_ms: Milliseconds | None = Field(
        default=None,
        description="delay on top of timing.delay_ms, either way, at level 1 [ms]; the whole never falls "
        "below 0; typical: half a control period (our choice)",
    )
    base_tilt_deg: Tilt | None = Field(
        default=None,
        description="tilt of the base on top of base_tilt_deg, about its x and y axes, each either way, at "
        "level 1 [deg]; typical: 0.2 (our choice)",
    )
    identification: Annotated[str, Field(min_length=1)] | None = Field(
        default=None,
        alias="from",
        description="the covariance file of the identified arm: at level 1 the plant departs from it as "
        "far as was left open, at level 2 by twice as many standard deviations",
    )
