"""The names and limits under which a store's runs are shown, without the experiment file at hand."""

from __future__ import annotations

import dataclasses
import json
from dataclasses import dataclass

from rigbench.campaign.plan import Plan
from rigbench.scores.results import Column, Tolerance

__all__ = ["Labels"]


@dataclass(frozen=True)
class Labels:
    """What a store says about its campaign; the fields are those of the :class:`Plan` it was given last.

    But for ``settled``: each column that stopped early, as (sheet, condition, after how many draws); and for
    ``studies``: the names of those that are declared, in the order in which they are done.
    """

    title: str
    arm: str
    sheets: tuple[str, ...]
    laws: tuple[str, ...]
    motions: tuple[str, ...]
    columns: tuple[Column, ...]
    draws: int
    tolerance: Tolerance | None
    resume: str
    absent: tuple[tuple[str, str, str], ...] = ()
    stop_early: bool = False
    settled: tuple[tuple[str, str, int], ...] = ()
    studies: tuple[str, ...] = ()
    model: str = ""

    @classmethod
    def of(cls, plan: Plan) -> Labels:
        """Return the labels of a plan of which nothing is known yet."""
        names = {field.name for field in dataclasses.fields(cls)} - {"settled", "studies"}
        studies = (*([] if plan.first is None else [plan.first]), *plan.studies)
        same = {name: getattr(plan, name) for name in names}
        return cls(**same, studies=tuple(study.name for study in studies))

    def to_json(self) -> str:
        """Return the labels as one JSON object."""
        values = {field.name: getattr(self, field.name) for field in dataclasses.fields(self)}
        values["columns"] = [dataclasses.asdict(column) for column in self.columns]
        if self.tolerance is not None:
            values["tolerance"] = {
                "limits": dict(self.tolerance.limits),
                "required_share": self.tolerance.required_share,
                "motions": {motion: dict(limits) for motion, limits in self.tolerance.motions.items()},
            }
        return json.dumps(values)

    @classmethod
    def from_json(cls, text: str) -> Labels:
        """Read what :meth:`to_json` wrote."""
        found = json.loads(text)
        for name in ("sheets", "laws", "motions"):
            found[name] = tuple(found[name])
        found["columns"] = tuple(Column(**column) for column in found["columns"])
        if found["tolerance"] is not None:
            found["tolerance"] = Tolerance(**found["tolerance"])
        for name in ("absent", "settled"):
            found[name] = tuple(tuple(place) for place in found.get(name, ()))
        found["studies"] = tuple(found.get("studies", ()))
        return cls(**found)
