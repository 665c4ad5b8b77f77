"""The keys of worst_case: which machine within the mismatch breaks a law."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field

from rigbench.yamlfile import Declared

__all__ = ["RUNS", "WorstCaseKeys"]

RUNS = 600

Level = Annotated[float, Field(gt=0, le=100)]


class WorstCaseKeys(Declared):
    """A search for the machine that breaks a law: after the matrix, by runs of its own."""

    law: str | Annotated[list[str], Field(min_length=1)] | None = Field(
        default=None,
        description="the law that is to be broken, by its name under laws, or a list of them; of a law that "
        "vary changes, one variant or, by the law's own name, all; default: every law",
    )
    levels: list[Level] | None = Field(
        default=None,
        min_length=1,
        description="rising levels at which it is searched; default: those under conditions.together, or 1",
    )
    runs: int = Field(
        default=RUNS,
        ge=1,
        le=1_000_000,
        description="most runs that it may take, of each law in each sheet, shared out evenly among the "
        f"levels; default {RUNS}",
    )
