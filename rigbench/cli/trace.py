"""``rigbench trace``: one stored run, done again and looked at closely."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

from rigbench.campaign.find import main_score_of, run_by_key, worst_run
from rigbench.campaign.reading import Reader, Record
from rigbench.campaign.replay import Difference, Replay, replay
from rigbench.campaign.store import Store
from rigbench.cli.output import print_json, say, show
from rigbench.cli.stored import CAUTION
from rigbench.errors import InputFaults
from rigbench.scores.names import in_display_order, score_words

__all__ = ["trace_run"]

ENDINGS = {"data": ".npz", "picture": ".png"}
KEY_DIGITS = 8
SHOWN_DIFFERENCES = 6


def trace_run(
    path: str,
    run: str | None,
    worst: tuple[str, str] | None,
    motion: str | None,
    sheet: str | None,
    output: str | None,
    animation: str | None,
    as_json: bool,
) -> None:
    """Replay a run, write its data and its page of plots, and say whether it is the stored one."""
    choose = _choice(path, run, worst, motion, sheet)
    if animation is not None and Path(animation).suffix.lower() != ".gif":
        raise InputFaults.one(animation, "--animate", "is no format of a moving picture", "a .gif file")
    with Store.open_for_reading(path) as store:
        record = choose(store)
        files = _files(Path(path), record.key, output, animation)
        again = replay(store, record)
        _write(again, store, files)
        if as_json:
            print_json(_document(path, again, files))
        else:
            show("\n".join(_lines(again, store, files)))
    say(CAUTION)


def _choice(
    path: str, run: str | None, worst: tuple[str, str] | None, motion: str | None, sheet: str | None
) -> Callable[[Reader], Record]:
    """Return what finds the run that is meant."""
    for option, name in (("--motion", motion), ("--sheet", sheet)):
        if worst is None and name is not None:
            raise InputFaults.one(path, option, "narrows --worst, which is not given", "RUN alone")
    if run is not None and worst is None:
        return lambda store: run_by_key(store, run)
    if run is None and worst is not None:
        return lambda store: worst_run(store, *worst, motion, sheet)
    problem = "both RUN and --worst are given" if run else "neither RUN nor --worst is given"
    raise InputFaults.one(path, "", problem, "one of them")


def _files(store: Path, key: str, output: str | None, animation: str | None) -> dict[str, Path]:
    """Return where data, picture and animation go, by what they are."""
    base = store.with_name(f"{store.stem}-trace-{key[:KEY_DIGITS]}") if output is None else Path(output)
    if base.suffix.lower() in ENDINGS.values():
        base = base.with_suffix("")
    if not base.name:
        raise InputFaults.one(output or "", "-o", "is not the beginning of a file's name")
    files = {what: base.with_name(base.name + end) for what, end in ENDINGS.items()}
    if animation is not None:
        files["animation"] = Path(animation)
    for file in files.values():
        if file.resolve() == store.resolve():
            raise InputFaults.one(file, "-o", "is the store itself", "another file")
    return files


def _write(again: Replay, store: Reader, files: dict[str, Path]) -> None:
    from rigbench.report.trace_data import write_trace
    from rigbench.report.trace_plot import trace_picture

    labels = store.labels
    write_trace(again, labels, files["data"])
    trace_picture(again, labels, files["picture"])
    if "animation" in files:
        from rigbench.report.animation import animate

        animate(again, files["animation"])


def _lines(again: Replay, store: Reader, files: dict[str, Path]) -> Iterator[str]:
    from rigbench.report.words import quantity

    labels, log = store.labels, again.log
    yield f"{_names(again.record)}; run {again.record.key}"
    if log.outcome == "finished":
        limited = {} if labels.tolerance is None else labels.tolerance.limits_for(again.record.row.motion)
        shown = [n for n in in_display_order([main_score_of(labels), *limited]) if n in again.scores]
        yield "finished: " + ", ".join(f"{score_words(n)[0]} {quantity(again.scores[n], n)}" for n in shown)
    else:
        yield f"{log.outcome}: {log.reason}"
    if again.identical:
        yield "replayed bit for bit: outcome and scores are the stored ones"
    else:
        yield "NOT the stored run:"
        yield from (f"  {_difference(one)}" for one in again.differences[:SHOWN_DIFFERENCES])
        more = len(again.differences) - SHOWN_DIFFERENCES
        if more > 0:
            yield f"  and {more} more"
        yield from (f"why: {reason}" for reason in again.reasons)
    yield from (f"{what}: {file}" for what, file in files.items())


def _names(record: Record) -> str:
    row = record.row
    parts = [f"'{row.law}' on '{row.motion}' under '{row.condition}'"]
    parts += [f"sheet '{row.sheet}'"] if row.sheet else []
    parts += [f"draw {row.draw}"] if row.draw is not None else []
    return ", ".join(parts)


def _difference(one: Difference) -> str:
    said = f"{one.name}: stored {one.stored}, replayed {one.replayed}"
    off = _off(one)
    return f"{said} (off by {off:.2g})" if off is not None else said


def _off(one: Difference) -> float | None:
    """Return by how much a number came out otherwise, if it is one on both sides and finite."""
    if not (isinstance(one.stored, float | int) and isinstance(one.replayed, float | int)):
        return None
    off = float(one.replayed) - float(one.stored)
    return off if math.isfinite(off) else None


def _document(path: str, again: Replay, files: dict[str, Path]) -> dict[str, Any]:
    row = again.record.row
    return {
        "store": path,
        "run": {
            "key": again.record.key,
            "sheet": row.sheet,
            "law": row.law,
            "motion": row.motion,
            "condition": row.condition,
            "level": row.level,
            "draw": row.draw,
        },
        "outcome": {"stored": row.outcome, "replayed": again.log.outcome, "reason": again.log.reason},
        "scores": {
            name: {"stored": _plain(stored), "replayed": _plain(replayed)}
            for name, (stored, replayed) in again.pairs().items()
        },
        "identical": again.identical,
        "differences": [
            {
                "name": one.name,
                "stored": _plain(one.stored),
                "replayed": _plain(one.replayed),
                "off": _off(one),
            }
            for one in again.differences
        ],
        "reasons": list(again.reasons),
        "files": {what: str(file) for what, file in files.items()},
    }


def _plain(value: float | str | None) -> float | str | None:
    """Return a value as JSON has it: None for what is infinite."""
    return None if isinstance(value, float) and not math.isfinite(value) else value
