"""The keys of a motion."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field

from rigbench.yamlfile import Declared

__all__ = ["CircleKeys", "LineKeys", "MotionKeys", "PathKeys"]

Coordinate = Annotated[float, Field(ge=-1000, le=1000)]
Point = Annotated[list[Coordinate], Field(min_length=3, max_length=3)]
Angle = Annotated[float, Field(ge=-360, le=360)]

TIMING = (
    "from rest to rest, its share s of the way s = 10 x^3 - 15 x^4 + 6 x^5, so 15/8 of the mean speed midway"
)


class PathKeys(Declared):
    """What a circle and a line of the tool point have in common."""

    near_deg: list[float] | None = Field(
        default=None,
        description="pose near which the arm starts, one position a joint [deg; mm for a prismatic joint]; "
        "it chooses between elbow up and down; default: gain_pose_deg, else where the first motion through "
        "via points or from a file starts, else the middle of the joints' limits",
    )
    orientation: Literal["held", "free"] | None = Field(
        default=None,
        description="held: the tool doesn't turn along the way; free: it turns as the joints have it; "
        "default: held for an arm of six joints or more, else free",
    )
    tool_rpy_deg: Annotated[list[Angle], Field(min_length=3, max_length=3)] | None = Field(
        default=None,
        description="orientation held: fixed-axis roll, pitch and yaw in the base frame, as in URDF [deg]; "
        "default: that of the pose near_deg",
    )


class CircleKeys(PathKeys):
    """A circle of the tool point."""

    centre_m: Point = Field(description="centre in the base frame [m]")
    radius_m: float = Field(gt=0, le=100, description="radius [m]")
    normal: Point = Field(description="direction about which it turns, right-handed, of any length")
    turn_s: float = Field(gt=0, le=3600, description=f"duration of a turn on the mean [s]; it goes {TIMING}")
    turns: float = Field(default=1.0, gt=0, le=100, description="turns, or parts of one; default 1")
    start_deg: Angle = Field(
        default=0.0,
        description="where it starts, about the normal, from the projection of the base's x on the circle's "
        "plane, or of y where the normal lies within 30 deg of x [deg]; default 0",
    )


class LineKeys(PathKeys):
    """A straight line of the tool point."""

    to_m: Point = Field(description="where it ends, in the base frame [m]")
    from_m: Point | None = Field(
        default=None,
        description="where it starts, in the base frame [m]; default: where the tool is in the pose near_deg",
    )


class MotionKeys(Declared):
    """One reference that the arm tracks: via_deg, file, circle, line or chain says of which kind it is."""

    via_deg: list[list[float]] | None = Field(
        default=None,
        min_length=2,
        description="points that the motion goes through, each a list with one position a joint [deg; mm for "
        "a prismatic joint]; between two of them the arm moves from rest to rest",
    )
    file: str | None = Field(
        default=None,
        min_length=1,
        description="CSV file with a column t_s and one column a joint, in deg (mm for a prismatic joint), "
        "relative to this file; a smooth spline goes through its rows",
    )
    circle: CircleKeys | None = Field(default=None, description="a circle of the tool point")
    line: LineKeys | None = Field(default=None, description="a straight line of the tool point")
    chain: list[str] | None = Field(
        default=None, min_length=1, description="names of other motions, done one after the other"
    )
    leg_s: float = Field(
        default=1.0,
        gt=0,
        le=3600,
        description="with via_deg or line: duration of each leg, from point to point [s]; default 1",
    )
    rest_s: float = Field(
        default=0.3,
        ge=0,
        le=3600,
        description="with via_deg, circle or line: rest at the end of each leg [s]; default 0.3; 0: no rest",
    )
    repeat: int = Field(
        default=1, ge=1, le=1000, description="how many times it is done, one after the other; default 1"
    )
    join_s: float | None = Field(
        default=None,
        gt=0,
        le=3600,
        description="with chain or repeat: duration of a leg straight in joint space from the end of one to "
        "the start of the next, where they differ [s]; default: they must not differ",
    )
    pace_percent: float = Field(
        default=100.0,
        gt=0,
        le=1000,
        description="speed of the motion in percent of what is declared; rests stay as they are; default 100",
    )
    tolerance: dict[str, Any] | None = Field(
        default=None,
        min_length=1,
        description="limits of this motion alone, on top of those of the experiment, and in place of those "
        "on the same score; settle_band_mm may be given here too",
    )
