"""The keys of find_level: each draw's own limit, by bisection on the level of all sources together."""

from __future__ import annotations

from pydantic import Field

from rigbench.yamlfile import Declared

__all__ = ["FindLevelKeys"]


class FindLevelKeys(Declared):
    """How the level is found at which each draw stops keeping the tolerance, by runs after the matrix."""

    most: float | None = Field(
        default=None,
        gt=0,
        le=100,
        description="largest level that is run, at least that of the conditions; default: twice the largest "
        "level under together, 4 without one",
    )
    steps: int = Field(
        default=6,
        ge=1,
        le=20,
        description="halvings of the range from 0 to most: limits are found to within most / 2^steps; "
        "default 6",
    )
    draws: int | None = Field(
        default=None,
        ge=1,
        le=1_000_000,
        description="so many draws, the first ones, have their limits found, of each law in each sheet; "
        "default: all",
    )
