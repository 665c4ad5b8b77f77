"""Spans of time as they are given on the command line, and amounts as they are told."""

from __future__ import annotations

import math
import re
from datetime import datetime, timedelta

from rigbench.errors import Fault

__all__ = ["duration_words", "read_clock", "read_span", "size_words"]

SPAN = re.compile(r"(?=\d)(?:(\d{1,6})h)?(?:(\d{1,6})m)?(?:(\d{1,6})s)?")
CLOCK = re.compile(r"([01]?\d|2[0-3]):([0-5]\d)")


def read_span(file: str, text: str, option: str) -> float | Fault:
    """Return what a span such as '8h', '90m', '1h30m' or '45s' is in seconds."""
    found = SPAN.fullmatch(text)
    hours, minutes, seconds = (int(part or 0) for part in found.groups()) if found else (0, 0, 0)
    if not hours + minutes + seconds:
        expected = "hours, minutes and seconds in whole numbers, as in 8h, 90m, 1h30m or 45s"
        return Fault(file, None, option, f"'{text}' is no span of time", expected)
    return 3600.0 * hours + 60.0 * minutes + seconds


def read_clock(file: str, text: str, now: float) -> float | Fault:
    """Return how many seconds after ``now`` (POSIX time) the local clock next shows a time such as '06:30'.

    Where clocks are put forward over that time, it is when they would have shown it; where they are put
    back over it, it comes twice.
    """
    found = CLOCK.fullmatch(text)
    if not found:
        expected = "hours and minutes of the local clock, as in 06:30 or 17:05"
        return Fault(file, None, "--until", f"'{text}' is no time of day", expected)
    hour, minute = map(int, found.groups())
    times = []
    for day in range(3):
        shown = (datetime.fromtimestamp(now) + timedelta(days=day)).replace(
            hour=hour, minute=minute, second=0, microsecond=0, fold=0
        )
        second = shown.replace(fold=1).timestamp()
        times.append(shown.timestamp())
        if (datetime.fromtimestamp(second).hour, datetime.fromtimestamp(second).minute) == (hour, minute):
            times.append(second)
    return min(time - now for time in times if time > now)


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


def size_words(size: float) -> str:
    """Return a number of bytes to two digits: '64 kB', '2.7 MB', '1.2 GB'."""
    scale = min(max(math.floor(math.log10(max(size, 1e3)) / 3), 1), 4)
    value = float(f"{size / 1000**scale:.2g}")
    return f"{value:g} {('kB', 'MB', 'GB', 'TB')[scale - 1]}"
