"""How far a campaign is: a bar on a terminal, a line every few seconds elsewhere."""

from __future__ import annotations

import contextlib
import os
import sys
import time
from collections.abc import Callable, Iterator

from rigbench.campaign.progress import Progress
from rigbench.campaign.tally import Standing
from rigbench.cli.output import say
from rigbench.cli.spans import duration_words
from rigbench.errors import counted

__all__ = ["OnProgress", "progress_shown", "standing_words", "tell_stopping"]

LINE_EVERY_S = 10.0
BAR_EVERY_S = 0.5

MOST = 4
"""Laws in the standing; of the others the number is given."""

OnProgress = Callable[[Progress], None]


@contextlib.contextmanager
def progress_shown() -> Iterator[OnProgress]:
    """Yield what to call with the progress after each run."""
    if sys.stderr.isatty():
        with _bar() as show:
            yield _Seldom(BAR_EVERY_S, show, at_once=True).take
    else:
        yield _Seldom(LINE_EVERY_S, _say_line).take


def tell_stopping() -> None:
    """Say that a stop was asked for; from within a signal's handler, where nothing else may be printed."""
    with contextlib.suppress(OSError):
        os.write(2, b"\nstopping after the runs in hand; asked once more, it drops them\n")


def standing_words(standing: Standing | None) -> str:
    """Say how the laws stand, those first that keep most; '' if nothing is known."""
    if standing is None:
        return ""
    laws = [law for law in standing.laws if law.draws]
    laws.sort(key=lambda law: -law.passed / law.draws)
    told = [f"{law.law} {law.passed} of {law.draws}" for law in laws[:MOST]]
    if len(laws) > MOST:
        told.append(f"{len(laws) - MOST} more")
    sheets = "both" if standing.sheets == 2 else f"all {standing.sheets}"
    where = f", {sheets} sheets" if standing.sheets > 1 else ""
    return f"draws that keep under '{standing.condition}'{where}: {', '.join(told)}"


def _words(progress: Progress) -> str:
    parts = []
    if progress.rate is not None and progress.seconds_left is not None:
        parts += [f"{progress.rate:.3g} runs a second", f"{duration_words(progress.seconds_left)} left"]
    if progress.ends_in is not None and progress.ends_in < (progress.seconds_left or float("inf")):
        parts.append(f"stops in {duration_words(progress.ends_in)}")
    if progress.settled:
        parts.append(f"{counted(progress.settled, 'column')} settled")
    parts.append(f"{progress.failed} failed")
    return ", ".join(parts)


class _Seldom:
    """Shows the progress when what was shown last is old enough."""

    def __init__(self, every_s: float, show: OnProgress, at_once: bool = False) -> None:
        self._every_s, self._show = every_s, show
        self._last = -every_s if at_once else time.monotonic()

    def take(self, progress: Progress) -> None:
        now = time.monotonic()
        if now - self._last >= self._every_s:
            self._last = now
            self._show(progress)


def _say_line(progress: Progress) -> None:
    standing = standing_words(progress.standing)
    of = f" that {progress.study} has asked for so far" if progress.study else ""
    line = f"{progress.done} of {counted(progress.planned, 'run')}{of} done, {_words(progress)}"
    say(f"{line}; {standing}" if standing else line)


@contextlib.contextmanager
def _bar() -> Iterator[OnProgress]:
    from rich.console import Console, Group
    from rich.live import Live
    from rich.progress import BarColumn, MofNCompleteColumn, TextColumn
    from rich.progress import Progress as Bar
    from rich.text import Text

    words = TextColumn("{task.fields[words]}", markup=False)
    bar = Bar(TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn(), words)
    task = bar.add_task("runs", total=None, words="")
    standing = Text(no_wrap=True, overflow="ellipsis")

    def show(progress: Progress) -> None:
        ended = progress.done + progress.failed
        bar.update(task, total=progress.planned, completed=ended, words=_words(progress))
        bar.update(task, description=progress.study or "runs")
        standing.plain = standing_words(progress.standing)

    with Live(Group(bar, standing), console=Console(stderr=True), transient=True):
        yield show
