"""The studies that an experiment declares, in the order in which they are done."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from rigbench.campaign.study import Study
from rigbench.errors import Fault
from rigbench.experiment.expand import Sheet
from rigbench.experiment.find_level import find_level_study
from rigbench.experiment.needs import needs_size_faults, needs_study
from rigbench.experiment.schema import ExperimentKeys
from rigbench.experiment.worst_case import worst_case_study
from rigbench.scores.results import Tolerance
from rigbench.yamlfile import Document

__all__ = ["studies_of"]


def studies_of(
    document: Document,
    keys: ExperimentKeys,
    sheets: Sequence[Sheet],
    variants: Mapping[str, str],
    tolerance: Tolerance | None,
) -> tuple[tuple[Study, ...], tuple[Fault, ...]]:
    """Return the studies of an experiment whose sheets are in order, and what is at fault with their sizes.

    ``variants`` maps each row of the matrix that is a variant of a law to the law's own name.
    """
    needs = needs_study(keys.needs, sheets, variants, tolerance)
    faults = needs_size_faults(document, keys.needs, needs)
    worst_case = worst_case_study(keys, sheets, variants, tolerance)
    found = (find_level_study(keys, sheets, tolerance), needs, worst_case)
    return tuple(study for study in found if study is not None), tuple(faults)
