"""Pictures against approved ones: every word in its place, every box and line there.

An approved picture is a list in ``approved/``: of each text its place [pt], size and words, of each kind of box,
line and polygon how many there are. Where a change is meant: look at the picture that the failure names, then
``RIGBENCH_APPROVE=1 pytest tests/report/test_approved.py``.
"""

from __future__ import annotations

import datetime
import math
import os
import re
from collections import Counter
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from matplotlib.figure import Figure

from rigbench.report.driver_data import DriverStrip, SourceStrip
from rigbench.report.driver_picture import driver_figure
from rigbench.report.level_curves import level_curves_figure
from rigbench.report.matrix import matrix_figure, text_boxes
from rigbench.report.view import View
from rigbench.scores.changes import changes_since
from rigbench.scores.drivers import Driver
from rigbench.scores.results import Results

DATE = datetime.date(2026, 12, 1)
APPROVED = Path(__file__).with_name("approved")
SLACK = 1.5  # pt: another version of a font renderer may move a word by a pixel
LONG = "a law whose name_has_no_end_and_hardly_a_blank_in_it_whatever_one_does number"
RING = {"value": 0.75, "low": 0.5, "high": math.inf}


def ringed(results: Results) -> Results:
    one, other = results.laws[:2]
    found = {"sheet": "", "laws": [one, other], "score": "tool_peak_mm", "level": RING, "better_below": one}
    return replace(results, break_even=(found,))


def changed(results: Results) -> Figure:
    counted = {key: replace(here, worst=1.1 * here.worst) for key, here in results.counted.items()}
    before = replace(results, counted=counted, laws=(*results.laws, "gone"))
    return matrix_figure(results, DATE, View(), changes_since(before, results), "old.sqlite")


def strip(results: Results) -> Figure:
    draws = np.arange(40)
    sources = []
    for name, strength, chance in (
        ("payload", 0.91, 0.001),
        ("coulomb_percent", 0.12, 0.3),
        ("base_tilt_deg", None, 1.0),
    ):
        driver = Driver(name, strength, chance, f"{name}.j1" if strength else None, 0.5, name == "payload")
        sources.append(SourceStrip(driver, None, np.linspace(-1, 1, 40)))
    worst = np.append(np.linspace(0.5, 5.0, 38), [math.inf, math.inf])
    shown = DriverStrip(
        ("", "joint pd", "all at 1"), "tool_peak_mm", draws, worst, worst <= 3.0, tuple(sources)
    )
    return driver_figure(results, shown, DATE)


PICTURES: dict[str, Callable[[Callable[..., Results]], Figure]] = {
    "matrix": lambda make: matrix_figure(make(4, 9, incomplete=3), DATE),
    "matrix-20-columns": lambda make: matrix_figure(make(3, 20, incomplete=12, unstable=True), DATE),
    "matrix-all-failed": lambda make: matrix_figure(make(1, 5, unstable=True), DATE),
    "matrix-one-draw": lambda make: matrix_figure(make(3, 5, draws=1), DATE),
    "matrix-no-finished-run": lambda make: matrix_figure(make(3, 5, draws=0, incomplete=4), DATE),
    "matrix-long-names": lambda make: matrix_figure(make([f"{LONG} {k}" for k in range(3)], 4), DATE),
    "matrix-ratio": lambda make: matrix_figure(make(4, 5), DATE, View("ratio")),
    "matrix-sheets": lambda make: matrix_figure(
        make(2, 4, sheets=("gear 50", "gear 100"), impossible=[("gear 50", "computed torque")]), DATE
    ),
    "changes": lambda make: changed(make(3, 5)),
    "curves": lambda make: level_curves_figure(ringed(make(4, 8, unstable=True)), DATE, View("median")),
    "curves-of-shares": lambda make: level_curves_figure(make(4, 6), DATE),
    "curves-no-finished-run": lambda make: level_curves_figure(make(3, 5, draws=0, incomplete=4), DATE),
    "curves-long-names": lambda make: level_curves_figure(make([f"{LONG} {k}" for k in range(12)], 5), DATE),
    "drivers": lambda make: strip(make(2, 2)),
}


def described(figure: Figure) -> list[str]:
    """What is on a figure: its size, its texts as they were drawn, and the named shapes by kind."""
    width, height = figure.get_size_inches() * 72
    lines = [f"size {width:.1f} {height:.1f}"]
    lines += [
        f"{box.x0:.1f} {height - box.y1:.1f} {text.get_fontsize():g} {text.get_text()}"
        for text, box in text_boxes(figure)
    ]
    named = (artist for artist in figure.findobj(lambda artist: bool(artist.get_gid())))
    kinds = Counter(f"{type(one).__name__} {re.sub('[0-9]+', '#', str(one.get_gid()))}" for one in named)
    return lines + [f"{count} {kind}" for kind, count in sorted(kinds.items())]


def numbers_and_words(line: str) -> tuple[list[float], str]:
    """A line's leading places, and what is to be the same to the letter."""
    found = re.match(r"(size )?(-?[\d.]+) (-?[\d.]+) ?(.*)", line)
    return ([float(found[2]), float(found[3])], found[4]) if found else ([], line)


@pytest.mark.parametrize("name", PICTURES)
def test_pictures_are_as_approved(
    look: Any, make_results: Callable[..., Results], tmp_path: Path, name: str
) -> None:
    """The same words and shapes, at the same places within 1.5 pt, and nothing overlaps."""
    figure = PICTURES[name](make_results)
    look.clear(figure)
    found, file = described(figure), APPROVED / f"{name}.txt"
    if os.environ.get("RIGBENCH_APPROVE"):
        file.parent.mkdir(exist_ok=True)
        file.write_text("\n".join(found) + "\n", encoding="utf-8")
    expected = file.read_text(encoding="utf-8").splitlines()
    pairs = [
        (numbers_and_words(one), numbers_and_words(other))
        for one, other in zip(found, expected, strict=False)
    ]
    moved = [
        (one, other)
        for one, other in pairs
        if one[1] != other[1] or not np.allclose(one[0], other[0], rtol=0, atol=SLACK)
    ]
    if moved or len(found) != len(expected):
        figure.savefig(tmp_path / f"{name}.png")
    assert not moved, f"see {tmp_path / name}.png"
    assert len(found) == len(expected), f"see {tmp_path / name}.png"


def test_every_approved_picture_is_drawn() -> None:
    """No list is left behind."""
    assert {path.stem for path in APPROVED.iterdir()} == set(PICTURES)
