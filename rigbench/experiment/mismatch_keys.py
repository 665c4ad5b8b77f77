"""The keys of mismatch and conditions: in which ways the plant departs from the model, and by how much."""

from __future__ import annotations

from typing import Annotated

from pydantic import ConfigDict, Field

from rigbench.yamlfile import Declared

__all__ = [
    "CaseKeys",
    "ConditionsKeys",
    "MismatchKeys",
    "PayloadKeys",
    "ShiftKeys",
    "SpreadKeys",
    "StatedKeys",
]

MOST_PERCENT = 1000
MOST_MM = 10_000

Percent = Annotated[float, Field(gt=0, le=MOST_PERCENT)]
Millimetres = Annotated[float, Field(gt=0, le=MOST_MM)]
Spreading = Annotated[float, Field(ge=0, le=MOST_PERCENT)]
Shift = Annotated[float, Field(ge=0, le=MOST_MM)]
Stated = Annotated[float, Field(gt=-100, le=1_000_000)]
Offset = Annotated[float, Field(ge=-MOST_MM, le=MOST_MM)]
Triple = Annotated[list[Offset], Field(min_length=3, max_length=3)]


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


class StatedKeys(Declared):
    """A stated departure by name: a link or joint, and its percent; 'all' is that of those not named."""

    model_config = ConfigDict(extra="allow")
    __pydantic_extra__: dict[str, Stated]

    all: Stated = Field(default=0.0, description="of the links or joints not named [percent]; default 0")


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


SPREAD = (
    "at level 1 [percent]; p percent multiplies by a factor from 1 / (1 + p/100) to 1 + p/100; a number, or "
    "one for each by name: {all: 5, NAME: 25, shared: false}"
)


class MismatchKeys(Declared):
    """In which ways, and how far at level 1, the plant departs from the model; none acts unless declared."""

    link_mass_percent: Percent | SpreadKeys | None = Field(
        default=None, description=f"mass of each link, {SPREAD}"
    )
    link_cog_mm: Millimetres | ShiftKeys | None = Field(
        default=None,
        description="shift of each link's centre of gravity at level 1, in each direction [mm]; a number, or "
        "one for each link by name",
    )
    link_inertia_percent: Percent | SpreadKeys | None = Field(
        default=None, description=f"principal second moments of mass of each link, {SPREAD}"
    )
    payload: PayloadKeys | None = Field(default=None, description="the load at the tool point")
    coulomb_percent: Percent | SpreadKeys | None = Field(
        default=None, description=f"Coulomb friction of each joint, {SPREAD}"
    )
    viscous_percent: Percent | SpreadKeys | None = Field(
        default=None, description=f"viscous friction of each joint, {SPREAD}"
    )
    rotor_inertia_percent: Percent | SpreadKeys | None = Field(
        default=None, description=f"rotor inertia of each drive, {SPREAD}"
    )


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
