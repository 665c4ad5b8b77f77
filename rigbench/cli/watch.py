"""``rigbench status --watch``: the status of a campaign, again and again while it runs."""

from __future__ import annotations

import contextlib
import time
from collections.abc import Callable, Iterator, Sequence
from datetime import datetime

from rigbench.campaign.reading import Counts
from rigbench.campaign.store import Store
from rigbench.cli.output import height, interrupts_alike, put, say, show, to_terminal
from rigbench.cli.stored import CAUTION, status_text, store_notes
from rigbench.errors import counted
from rigbench.scores.results import Results

__all__ = ["watch_status"]

REDRAWN_EVERY_S, LINE_EVERY_S = 3.0, 10.0

Draw = Callable[[Results, Sequence[str]], None]
"""Shows results, and the notes beneath them."""

SHARE = 0.05
"""The most of one core that looking may take from the campaign."""

OTHER_SCREEN, BACK, FROM_THE_TOP = "\x1b[?1049h", "\x1b[?1049l", "\x1b[H\x1b[J"
"""Control sequences of a terminal: DECSET and DECRST 1049 (xterm), CUP and ED (ECMA-48)."""


def watch_status(path: str) -> None:
    """Show the status until the campaign is complete, its studies included, then print it whole.

    A terminal is redrawn in place, and left with the last status; elsewhere there is a line whenever runs
    were stored.
    """
    every_s = REDRAWN_EVERY_S if to_terminal() else LINE_EVERY_S
    seen: tuple[Counts, Sequence[str]] | None = None
    with interrupts_alike(), _screen() if to_terminal() else _lines() as draw:
        while True:
            began = time.monotonic()
            with Store.open_for_reading(path) as store:
                counts, unfinished = store.counts(), store.unfinished()
                results = store.results(brief=True) if (counts, unfinished) != seen else None
                notes = list(store_notes(store))
            if results is not None:
                draw(results, notes)
            if counts.done + counts.failed >= counts.planned and not unfinished:
                break
            seen = counts, unfinished
            time.sleep(max(every_s, (time.monotonic() - began) / SHARE))
    say(CAUTION)


@contextlib.contextmanager
def _screen() -> Iterator[Draw]:
    last = ""

    def draw(results: Results, notes: Sequence[str]) -> None:
        nonlocal last
        last = status_text(results, notes)
        told = f"as of {datetime.now():%H:%M:%S}, Ctrl-C ends this"
        lines = last.splitlines()
        room = max(height() - 2, 2)
        if len(lines) > room:
            lines = [*lines[: room - 1], f"({len(lines) - room + 1} lines more)"]
        put(FROM_THE_TOP + "\n".join([*lines, told]))

    put(OTHER_SCREEN)
    try:
        yield draw
    finally:
        put(BACK)
        if last:
            show(last)


@contextlib.contextmanager
def _lines() -> Iterator[Draw]:
    last = ""

    def draw(results: Results, notes: Sequence[str]) -> None:
        nonlocal last
        last = status_text(results, notes)
        runs = f"{results.done} of {counted(results.planned, 'run')} done, {results.failed} failed"
        show(" ".join([f"{runs}.", results.advice, *notes]))

    yield draw
    if last:
        show(f"\n{last}")
