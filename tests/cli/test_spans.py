"""Spans and times of day as they are given, and amounts as they are told."""

from __future__ import annotations

import time
from collections.abc import Iterator
from datetime import datetime

import pytest

from rigbench.cli.spans import duration_words, read_clock, read_span, size_words
from rigbench.errors import Fault


@pytest.mark.parametrize(
    ("text", "seconds"),
    [("8h", 28800), ("90m", 5400), ("1h30m", 5400), ("45s", 45), ("1h1s", 3601), ("0h2m", 120)],
)
def test_a_span_is_read(text: str, seconds: float) -> None:
    """Whole hours, minutes and seconds, in this order, each of which may be left out."""
    assert read_span("a.yaml", text, "--for") == seconds


@pytest.mark.parametrize(
    "text", ["", "8", "h", "0s", "-1h", "1.5h", "30m1h", "8 h", "8H", "1e3s", "1h30", "99999999h", "\u0668h2"]
)
def test_what_is_no_span_is_a_fault(text: str) -> None:
    """No unit, nothing at all, another order, a fraction, or no time at all."""
    fault = read_span("a.yaml", text, "--limit")
    assert isinstance(fault, Fault)
    assert (fault.file, fault.key) == ("a.yaml", "--limit")
    assert f"'{text}'" in fault.problem
    assert "1h30m" in fault.expected


@pytest.fixture
def central_european_time(monkeypatch: pytest.MonkeyPatch) -> Iterator[None]:
    """Clocks are put forward on 29 March 2026 from 2 to 3, and back on 25 October from 3 to 2."""
    with monkeypatch.context() as patch:
        patch.setenv("TZ", "CET-1CEST,M3.5.0,M10.5.0/3")
        time.tzset()
        yield
    time.tzset()


@pytest.mark.usefixtures("central_european_time")
@pytest.mark.parametrize(
    ("now", "clock", "hours"),
    [
        ("2026-12-01T22:00", "06:30", 8.5),
        ("2026-12-01T06:29", "6:30", 1 / 60),
        ("2026-12-01T06:30", "06:30", 24.0),
        ("2026-12-31T23:59", "00:00", 1 / 60),
        ("2026-03-28T22:00", "06:30", 7.5),  # an hour is left out
        ("2026-10-24T22:00", "06:30", 9.5),  # an hour comes twice
        (
            "2026-03-28T22:00",
            "02:30",
            4.5,
        ),  # a time that is left out: half an hour after the clocks are changed
        ("2026-10-25T01:30", "02:15", 0.75),  # a time that comes twice: the first
        ("2026-10-25T02:20", "02:15", 55 / 60),  # and then the second
    ],
)
def test_a_time_of_day_is_the_next_one(now: str, clock: str, hours: float) -> None:
    """Tonight, tomorrow, and in nights in which the clocks are changed."""
    assert read_clock("a.yaml", clock, datetime.fromisoformat(now).timestamp()) == pytest.approx(3600 * hours)


@pytest.mark.parametrize("text", ["", "7", "24:00", "06:60", "6:5", "06:30:00", "half past six", "-1:30"])
def test_what_is_no_time_of_day_is_a_fault(text: str) -> None:
    """Hours to 23 and two digits of minutes, nothing else."""
    fault = read_clock("a.yaml", text, 0.0)
    assert isinstance(fault, Fault)
    assert fault.key == "--until"
    assert f"'{text}'" in fault.problem


@pytest.mark.parametrize(
    ("seconds", "words"),
    [(0.2, "less than 1 s"), (45, "45 s"), (150, "2 min"), (7200, "2 h 0 min"), (29000, "8 h 3 min")],
)
def test_durations_in_words(seconds: float, words: str) -> None:
    """Two parts at most."""
    assert duration_words(seconds) == words


@pytest.mark.parametrize(
    ("size", "words"),
    [(0, "0 kB"), (64_400, "64 kB"), (2_670_592, "2.7 MB"), (999_999, "1000 kB"), (1.23e9, "1.2 GB"), (5e15, "5000 TB")],
)  # fmt: skip
def test_sizes_in_words(size: float, words: str) -> None:
    """Two digits, in powers of 1000."""
    assert size_words(size) == words
