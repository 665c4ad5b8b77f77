"""The worst cases found, law by law, beside what the draws of the matrix came to at the same levels."""

from __future__ import annotations

from collections.abc import Iterator

from rigbench.campaign.reading import Reader
from rigbench.campaign.studied import Studied
from rigbench.campaign.studies.worst_case import WorstFound, worst_found
from rigbench.campaign.studies.worst_direction import departures
from rigbench.report.drawn import drawn_of
from rigbench.report.worst_words import Departing, LawWorst, by_law
from rigbench.scores.limit_share import limit_share
from rigbench.scores.results import Tolerance, level_name

__all__ = ["worst_laws"]


def worst_laws(store: Reader, study: Studied, tolerance: Tolerance) -> Iterator[LawWorst]:
    """Yield what was found so far of each law in a sheet; StoreError where a run can't be restored."""
    for levels, told in by_law(worst_found(study, tolerance)):
        drawn = {
            one.level: shares
            for one in levels
            if one.searched and (shares := _drawn(store, one, tolerance)) is not None
        }
        departing = tuple(_departing(store, study, told, tolerance))
        yield LawWorst(told.sheet, told.law, levels, told, departing, drawn)


def _departing(store: Reader, study: Studied, told: WorstFound, tolerance: Tolerance) -> Iterator[Departing]:
    """Yield the parameters that depart in the worst machine, those first that make the most difference."""
    if told.record is None:
        return
    amounts = {one.name: one for one in drawn_of(store.kept(told.record.key).run)}
    for one in departures(store, study, told, tolerance):
        if one.parameter in amounts:  # one whose spread is 0 departs by nothing
            yield Departing(amounts[one.parameter], one.difference)


def _drawn(store: Reader, found: WorstFound, tolerance: Tolerance) -> tuple[float, int] | None:
    """Return the largest share of a limit among the draws of the matrix at a level, and of how many."""
    shares = {
        (record.row.draw, record.row.motion): used.share
        for record in store.records_of(found.law, level_name(found.level))
        if record.row.sheet == found.sheet
        and (used := limit_share(record.row, tolerance.limits_for(record.row.motion))) is not None
    }
    return (max(shares.values()), len({draw for draw, _ in shares})) if shares else None
