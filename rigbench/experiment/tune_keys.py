"""The keys of tune: gains that do best on the nominal machine, found before the matrix."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import Field

from rigbench.yamlfile import Declared

__all__ = ["RANGES", "RUNS", "TuneKeys"]

RUNS = 120

RANGES = {"natural_hz": (1.0, 30.0), "damping": (0.3, 2.0)}
"""Where gains are looked for whose range is not stated (our choice)."""

Bound = Annotated[float, Field(gt=0, le=1e9)]
Name = Annotated[str, Field(min_length=1)]
Range = Annotated[list[Bound], Field(min_length=2, max_length=2)]
Names = Annotated[list[Name], Field(min_length=1)]
Ranges = Annotated[dict[str, Range], Field(min_length=1)]


class TuneKeys(Declared):
    """A search for the gains of each law: before the matrix, by runs of its own."""

    law: str | Annotated[list[str], Field(min_length=1)] | None = Field(
        default=None,
        description="the law whose gains are looked for, by its name under laws, or a list of them; of a law "
        "that vary changes, one variant or, by the law's own name, all; default: every law with these gains",
    )
    runs: int = Field(
        default=RUNS,
        ge=1,
        le=100_000,
        description=f"most runs that it may take, the same for each law in each sheet; default {RUNS}",
    )
    gains: Names | Ranges = Field(
        default=list(RANGES),
        description="the options that are looked for: a list, or a mapping to the lowest and highest value "
        "of each; default [natural_hz, damping], from 1 to 30 Hz and 0.3 to 2 (our choice)",
    )
    score: str | None = Field(
        default=None,
        min_length=1,
        description="score that is to be least in the worst motion; default: that by which laws are compared",
    )
    most: dict[str, Any] | None = Field(
        default=None,
        min_length=1,
        description="limits that the nominal runs must keep besides, as under tolerance; default: none",
    )
    delay_margin_ms: float = Field(
        default=1.0,
        ge=0,
        le=1000,
        description="with this much more delay [ms] each run must still finish, with no more than "
        "delay_factor times its score, or keep the tolerance; 0: not asked; default 1 (our choice)",
    )
    delay_factor: float = Field(
        default=2.0, ge=1, le=1000, description="see delay_margin_ms; default 2 (our choice)"
    )
