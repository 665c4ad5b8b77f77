"""How far a campaign is: a bar on a terminal, a line every few seconds elsewhere."""

from __future__ import annotations

import contextlib
import sys
import time
from collections.abc import Callable, Iterator

from rigbench.campaign.campaign import Progress
from rigbench.cli.output import say

__all__ = ["duration_words", "progress_shown"]

EVERY_S = 5.0

OnProgress = Callable[[Progress], None]


@contextlib.contextmanager
def progress_shown() -> Iterator[OnProgress]:
    """Yield what to call with the progress after each run."""
    if sys.stderr.isatty():
        with _bar() as on_progress:
            yield on_progress
    else:
        yield _Lines().take


def duration_words(seconds: float) -> str:
    """Return a time to two parts: '40 s', '12 min', '3 h 20 min'."""
    if seconds < 1:
        return "less than 1 s"
    if seconds < 120:
        return f"{seconds:.0f} s"
    minutes = round(seconds / 60)
    if minutes < 120:
        return f"{minutes} min"
    return f"{minutes // 60} h {minutes % 60} min"


def _words(progress: Progress) -> str:
    parts = []
    if progress.rate is not None and progress.seconds_left is not None:
        parts += [f"{progress.rate:.3g} runs a second", f"{duration_words(progress.seconds_left)} left"]
    parts.append(f"{progress.failed} failed")
    return ", ".join(parts)


class _Lines:
    """Prints a line when the last one is old enough."""

    def __init__(self) -> None:
        self._last = time.monotonic()

    def take(self, progress: Progress) -> None:
        now = time.monotonic()
        if now - self._last >= EVERY_S:
            self._last = now
            say(f"{progress.done} of {progress.planned} runs done, {_words(progress)}")


@contextlib.contextmanager
def _bar() -> Iterator[OnProgress]:
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, TextColumn
    from rich.progress import Progress as Bar

    columns = (TextColumn("runs"), BarColumn(), MofNCompleteColumn(), TextColumn("{task.fields[words]}"))
    with Bar(*columns, console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task("runs", total=None, words="")

        def take(progress: Progress) -> None:
            ended = progress.done + progress.failed
            bar.update(task, total=progress.planned, completed=ended, words=_words(progress))

        yield take
