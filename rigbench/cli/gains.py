"""``rigbench gains``: what the search for gains found, as YAML to paste back."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from itertools import groupby
from typing import Any

import yaml

from rigbench.campaign.reading import Reader
from rigbench.campaign.store import Store
from rigbench.campaign.studied import asked_study
from rigbench.campaign.studies.tune import NAME, Aim, GainsFound, gains_found
from rigbench.cli.output import print_json, say, show
from rigbench.errors import counted
from rigbench.report import cautions
from rigbench.report.gains_words import aim_words, declared_words, found_words, gains_words, law_words

__all__ = ["gains_notes", "print_gains"]

MOST = 6
"""Laws whose gains are named beneath the matrix; of the others the number is given."""


def gains_notes(store: Reader) -> Iterator[str]:
    """Say beneath a matrix which gains its laws have from the search, and which have none."""
    study = store.study(NAME)
    found = [] if study is None else gains_found(study)
    if study is None or not study.finished or not found:
        return
    told = [f"{law_words(one)} {gains_words(one.gains)}" for one in found if one.within]
    if len(told) > MOST:
        told = [*told[:MOST], f"{len(told) - MOST} more"]
    if told:
        yield f"Gains found by tune on the nominal machine: {'; '.join(told)}."
    kept = [f"'{law_words(one)}'" for one in found if not one.within]
    if kept:
        yield f"Tune found no gains within its limits for {', '.join(kept)}: the declared ones stay."


def print_gains(path: str, as_json: bool) -> None:
    """Print the gains found, law by law and sheet by sheet; those of all laws that were looked at."""
    with Store.open_for_reading(path) as store, store.one_moment():
        study, resume = asked_study(store, NAME, " {}"), store.labels.resume
    found, aim = gains_found(study), Aim(**study.declared["aim"])
    if as_json:
        aimed = {"score": aim.score, "most": aim.most, "delay_margin_ms": aim.delay_margin_ms}
        about = {"store": path, "finished": study.finished} | aimed | {"delay_factor": aim.delay_factor}
        print_json(about | {"laws": [_document(one) for one in found]})
    else:
        show("\n".join(_lines(found, aim)))
    if not study.finished:
        say(f"the search is not finished: '{resume}' goes on with it")
    say(f"{cautions.CAUTION.removesuffix('.')}; see the cautions in the README.")


def _lines(found: Sequence[GainsFound], aim: Aim) -> Iterator[str]:
    """Yield YAML: one document a sheet, with what was found in comments."""
    yield f"# Gains found by tune: {aim_words(aim)}."
    for sheet, own in groupby(found, key=lambda one: one.sheet):
        laws = list(own)
        if sheet:
            yield f"---  # sheet: {sheet}"
        yield "laws:"
        for one in laws:
            before = f"{gains_words(one.declared)}, {declared_words(one, aim)}"
            said = f"declared: {before}; {counted(one.runs, 'run')}"
            if one.within:
                yield f"  # {found_words(one, aim)}; {said}"
            else:
                yield f"  # none found within the limits, so the declared ones stay; {said}"
            gains = one.gains if one.within else {}
            yield f"  {_yaml({one.law: dict(one.given) | dict(gains)})}"


def _yaml(mapping: dict[str, Any]) -> str:
    text: str = yaml.safe_dump(
        mapping, default_flow_style=None, sort_keys=False, allow_unicode=True, width=1_000_000
    )
    return text.rstrip("\n")


def _document(one: GainsFound) -> dict[str, Any]:
    return {
        "sheet": one.sheet,
        "law": one.law,
        "within_limits": one.within,
        "gains": dict(one.gains) if one.within else None,
        "score": one.score if one.within else None,
        "declared": {
            "gains": dict(one.declared),
            "score": one.score_declared,
            "within_limits": one.within_declared,
        },
        "runs": one.runs,
    }
