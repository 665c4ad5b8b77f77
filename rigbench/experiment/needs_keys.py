"""The keys of needs: which sources of mismatch must be known, and how well."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field

from rigbench.yamlfile import Declared

__all__ = ["POINTS", "NeedsKeys"]

POINTS = 128
"""Rows of the design unless ``runs`` says otherwise: intervals of some 0.1 where one source leads."""


class NeedsKeys(Declared):
    """Which sources of mismatch must be known, and how well: asked after the matrix, by runs of its own."""

    law: str | Annotated[list[str], Field(min_length=1)] = Field(
        description="the law that it is asked of, by its name under laws, or a list of them; of a law that "
        "vary changes, one variant or, by the law's own name, all"
    )
    level: float = Field(
        default=1.0,
        gt=0,
        le=20,
        description="level at which the variance is shared out; spreads are tried from a fifth to five times "
        "this level; default 1",
    )
    runs: int | None = Field(
        default=None,
        ge=1,
        le=1_000_000,
        description="most runs that it may take in all; what the searches may need is set aside, the rest "
        f"goes to the shares; default: what {POINTS} rows of the shares' design and the searches take",
    )
    per_link: bool = Field(
        default=False,
        description="true: ask for each link or joint by itself; false: a source as a whole; default false",
    )
    score: str | None = Field(
        default=None,
        min_length=1,
        description="score whose variance is shared out; default: that by which laws are compared",
    )
