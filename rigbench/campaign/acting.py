"""Which parameters are drawn in the runs of a place: sheets of a sweep may have parameters of their own."""

from __future__ import annotations

import json
from collections.abc import Callable

from rigbench.campaign.kept import NotKept, restored
from rigbench.campaign.places import Place

__all__ = ["Acting"]

DECIDING = ("arm", "mismatch", "sources")
"""The fields of a run that decide it."""


class Acting:
    """The parameters of places, worked out once for all that are alike; ``text_of`` finds a digest's text."""

    def __init__(self, text_of: Callable[[str], str]) -> None:
        self._text_of = text_of
        self._by_run: dict[str, frozenset[str] | None] = {}
        self._alike: dict[str, frozenset[str]] = {}

    def of(self, place: Place, name: str) -> bool:
        """Tell whether a parameter, by its name, is drawn in the runs of a place.

        Where the store is older than the texts of runs, or holds what can't be kept: whether its source is.
        """
        if name.partition(".")[0] not in place.sources.split(","):
            return False
        if place.run is None:
            return True
        if place.run not in self._by_run:
            self._by_run[place.run] = self._names(place.run)
        names = self._by_run[place.run]
        return names is None or name in names

    def _names(self, run: str) -> frozenset[str] | None:
        """Return what is drawn in a run of this text; None where that can't be told."""
        try:
            text = self._text_of(run)
            fields = json.loads(text)["fields"]
            mark = json.dumps([fields.get(name) for name in DECIDING])
            if mark not in self._alike:
                self._alike[mark] = frozenset(restored(text, self._text_of, 0).run.factors())
        except NotKept:
            return None
        return self._alike[mark]
