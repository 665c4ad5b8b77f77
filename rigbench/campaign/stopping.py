"""Stopping a campaign before its end: by signals, or because its time is up."""

from __future__ import annotations

import signal
import threading
import time
from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager
from types import FrameType

from rigbench.campaign.plan import Entry

__all__ = ["Stop", "stop_signals"]


class Stop:
    """Whether a campaign is to stop: as ``asked``, ``at_once``, or as its ``time_is_up``.

    ``ends`` [s, time.monotonic()] is when its time is up, None for never. ``on_asked`` is called from within
    a signal handler when somebody asks for the first time.
    """

    def __init__(self, ends: float | None, on_asked: Callable[[], None]) -> None:
        self.asked = self.at_once = self.time_is_up = False
        self._ends, self._on_asked = ends, on_asked

    def until(self, entries: Iterable[Entry]) -> Iterator[Entry]:
        """Yield the entries for as long as nobody has asked and there is time.

        What was yielded is finished, so of entries in fair order a stopped campaign has done the first
        ones, without a gap.
        """
        for entry in entries:
            if self.asked:
                return
            if self._ends is not None and time.monotonic() >= self._ends:
                self.time_is_up = True
                return
            yield entry

    @property
    def why(self) -> str:
        """Why the campaign stopped before its end; '' if nothing made it."""
        if self.asked:
            return "as asked"
        return "as its time is up" if self.time_is_up else ""

    def on_signal(self, number: int, frame: FrameType | None) -> None:
        """Take a signal: the first asks, the second interrupts what is being done."""
        if self.asked:
            signal.signal(number, signal.SIG_IGN)  # a third one must not break the tidying up
            self.at_once = True
            raise KeyboardInterrupt
        self.asked = True
        self._on_asked()


@contextmanager
def stop_signals(ends: float | None, on_asked: Callable[[], None]) -> Iterator[Stop]:
    """Take SIGINT and SIGTERM in here, where signals can be taken: in a program's main thread.

    What the second one interrupts is left there, wherever it was.
    """
    stop = Stop(ends, on_asked)
    if threading.current_thread() is not threading.main_thread():
        yield stop
        return
    before = {number: signal.signal(number, stop.on_signal) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        yield stop
    except KeyboardInterrupt:
        if not stop.at_once:
            raise
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
