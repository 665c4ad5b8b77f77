"""The keys of conditions: the columns of the matrix, and the cases that state how the plant departs."""

from __future__ import annotations

from typing import Annotated

from pydantic import ConfigDict, Field

from rigbench.experiment.mismatch_keys import MOST_MM, MOST_OFFSET
from rigbench.yamlfile import Declared

__all__ = ["CaseKeys", "ConditionsKeys", "StatedKeys"]

Stated = Annotated[float, Field(gt=-100, le=1_000_000)]
Offset = Annotated[float, Field(ge=-MOST_MM, le=MOST_MM)]
Triple = Annotated[list[Offset], Field(min_length=3, max_length=3)]
StatedBias = Annotated[float, Field(ge=-100, le=100)]
StatedZero = Annotated[float, Field(ge=-MOST_OFFSET, le=MOST_OFFSET)]
StatedTilt = Annotated[float, Field(ge=-180, le=180)]


class StatedKeys(Declared):
    """A stated departure by name: a link or joint, and its percent; 'all' is that of those not named."""

    model_config = ConfigDict(extra="allow")
    __pydantic_extra__: dict[str, Stated]

    all: Stated = Field(default=0.0, description="of the links or joints not named [percent]; default 0")


class StatedBiasKeys(StatedKeys):
    """A stated torque by name, in percent of the torque limit; 'all' is that of the joints not named."""

    __pydantic_extra__: dict[str, StatedBias]

    all: StatedBias = Field(default=0.0, description="of the joints not named [percent]; default 0")


class StatedZeroKeys(StatedKeys):
    """A stated offset by name, in deg (mm for a prismatic joint); 'all' is that of the joints not named."""

    __pydantic_extra__: dict[str, StatedZero]

    all: StatedZero = Field(default=0.0, description="of the joints not named [deg or mm]; default 0")


EXACT = "[percent]: p multiplies by exactly 1 + p/100; a number, or one for each by name: {all: 5, NAME: 25}"


class CaseKeys(Declared):
    """A case: what is stated of the plant, exactly, on top of level 0 or of the level given."""

    level: float = Field(
        default=0.0,
        ge=0,
        le=100,
        description="level of the mismatch, all sources at once, on top of which this is stated; default 0: "
        "nothing is random, and the case is one exact run",
    )
    payload_kg: float | None = Field(
        default=None,
        ge=0,
        le=1e6,
        description="mass of the load at the tool point [kg], in place of the believed or drawn one",
    )
    payload_cog_mm: Triple | None = Field(
        default=None, description="offset of the load from the tool point, in the tool frame [mm]"
    )
    link_mass_percent: Stated | StatedKeys | None = Field(default=None, description=f"mass of links {EXACT}")
    link_cog_mm: Annotated[dict[str, Triple], Field(min_length=1)] | None = Field(
        default=None,
        description="shift of centres of gravity, by link, in the link's frame [mm]: {LINK: [x, y, z]}",
    )
    link_inertia_percent: Stated | StatedKeys | None = Field(
        default=None, description=f"second moments of mass of links, about their centres of gravity {EXACT}"
    )
    coulomb_percent: Stated | StatedKeys | None = Field(
        default=None, description=f"Coulomb friction of joints {EXACT}"
    )
    viscous_percent: Stated | StatedKeys | None = Field(
        default=None, description=f"viscous friction of joints {EXACT}"
    )
    rotor_inertia_percent: Stated | StatedKeys | None = Field(
        default=None, description=f"rotor inertia of drives {EXACT}"
    )
    torque_constant_percent: Stated | StatedKeys | None = Field(
        default=None, description=f"torque that drives give over what is asked of them {EXACT}"
    )
    torque_bias_percent: StatedBias | StatedBiasKeys | None = Field(
        default=None,
        description="torque that drives give without being asked, on top of what is drawn [percent of the "
        "torque limit]; a number, or one for each joint by name",
    )
    encoder_offset_deg: StatedZero | StatedZeroKeys | None = Field(
        default=None,
        description="by how much encoders read too much, on top of what is drawn [deg; mm for a prismatic "
        "joint]; a number, or one for each joint by name",
    )
    stiffness_percent: Stated | StatedKeys | None = Field(
        default=None, description=f"stiffness of elastic transmissions {EXACT}"
    )
    delay_ms: Annotated[float, Field(ge=0, le=1000)] | None = Field(
        default=None,
        description="the whole delay from control tick to torque [ms], in place of that declared or drawn",
    )
    base_tilt_deg: Annotated[list[StatedTilt], Field(min_length=2, max_length=2)] | None = Field(
        default=None,
        description="the whole tilt of the base about its x, then its y axis [deg], in place of that "
        "declared or drawn",
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
    cases: dict[str, CaseKeys] | None = Field(
        default=None,
        min_length=1,
        description="stated departures, one column each, under a name of yours",
    )
