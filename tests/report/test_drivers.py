"""The strip of draws: what drives a law, as numbers, as a table and as a picture."""

from __future__ import annotations

import datetime
import json
import math
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from matplotlib.colors import to_rgb

from rigbench.campaign.places import Place
from rigbench.report.driver_data import DriverStrip, driver_strip
from rigbench.report.driver_picture import driver_figure
from rigbench.report.driver_text import driver_json, driver_text, driver_words
from rigbench.report.json_form import plain_values
from rigbench.scores.cell import CountedDraws
from rigbench.scores.results import Results

DATE = datetime.date(2026, 12, 1)
KEY = ("", "computed torque", "together 0.25")
SOURCES = {
    "coulomb_percent": ["coulomb_percent.j1", "coulomb_percent.j2"],
    "payload": ["payload.mass", "payload.cog.x"],
    "torque_bias_percent": ["torque_bias_percent.j1"],
}
LONG = {
    f"a_source_of_a_name_without_an_end_{k}_percent": [f"a_source_of_a_name_without_an_end_{k}_percent.j1"]
    for k in range(20)
}


class Stored:
    """What of a store the strip needs: places and drawn values; 'torque_bias' acts elsewhere alone."""

    def __init__(self, values: dict[int, dict[str, float]], sources: dict[str, list[str]] = SOURCES) -> None:
        self._values = values
        self._acting = [name for name in sources if name != "torque_bias_percent"]

    def places(self) -> dict[int, Any]:
        here = Place("", KEY[1], "swing", KEY[2], 0.25, ",".join(self._acting), None)
        return {0: here, 1: replace(here, condition="other", sources="torque_bias_percent")}

    def text(self, digest: str) -> str:
        raise AssertionError(digest)

    def draw_values(self) -> dict[int, dict[str, float]]:
        return self._values


def drawn(draws: int, sources: dict[str, list[str]] = SOURCES) -> dict[int, dict[str, float]]:
    rng = np.random.default_rng(2)
    names = [name for own in sources.values() for name in own]
    return {
        draw: dict(zip(names, rng.uniform(-1, 1, len(names)).tolist(), strict=True)) for draw in range(draws)
    }


def strip_of(
    results: Results,
    worst: Callable[[dict[str, float]], float],
    draws: int,
    sources: dict[str, list[str]] = SOURCES,
) -> tuple[Results, DriverStrip]:
    values = drawn(draws, sources)
    scores = np.array([worst(values[draw]) for draw in range(draws)]).reshape(draws, 1)
    here = CountedDraws(np.arange(draws), np.isfinite(scores[:, 0]), scores[:, 0] <= 3.0, scores)
    results = replace(results, counted={KEY: here})
    return results, driver_strip(Stored(values, sources), results, KEY, "tool_peak_mm")  # type: ignore[arg-type]


def by_payload(values: dict[str, float]) -> float:
    return 1.0 + 4.0 * abs(values["payload.mass"]) + 0.3 * values["coulomb_percent.j2"]


def test_the_source_that_drives_is_found(make_results: Callable[..., Results]) -> None:
    """The payload's size, of the sources that act; the draws stand by rising score, with their values."""
    _, strip = strip_of(make_results(2, 2), by_payload, 80)
    assert [one.by_score.source for one in strip.sources] == ["payload", "coulomb_percent"]
    first = strip.sources[0]
    assert (first.by_score.parameter, first.by_score.by_size) == ("payload.mass", True)
    assert first.by_score.chance < 0.01
    assert first.by_failing is not None
    assert first.by_failing.chance < 0.01
    assert np.all(np.diff(strip.worst) >= 0)
    values = drawn(80)
    assert first.u == pytest.approx([abs(values[draw]["payload.mass"]) for draw in strip.draws.tolist()])
    assert np.array_equal(strip.passed, strip.worst <= 3.0)


def test_draws_without_values_do_not_count(make_results: Callable[..., Results]) -> None:
    """A draw of which the store has no value, or no score, is left out."""
    results, _ = strip_of(make_results(2, 2), by_payload, 20)
    here = results.counted[KEY]
    worst = here.worst.copy()
    worst[4] = np.nan
    results = replace(results, counted={KEY: replace(here, worst=worst)})
    values = {draw: own for draw, own in drawn(20).items() if draw != 7}
    strip = driver_strip(Stored(values), results, KEY, "tool_peak_mm")  # type: ignore[arg-type]
    assert set(strip.draws.tolist()) == set(range(20)) - {4, 7}


def test_failing_is_asked_only_where_some_fail_and_some_do_not(make_results: Callable[..., Results]) -> None:
    """Nor without a tolerance, where nothing fails."""
    for results, worst in (
        (make_results(2, 2), lambda values: 9.0 + values["payload.mass"]),
        (make_results(2, 2), lambda values: 1.0 + values["payload.mass"]),
        (make_results(2, 2, tolerance=False), by_payload),
    ):
        _, strip = strip_of(results, worst, 40)
        assert all(one.by_failing is None for one in strip.sources)


def test_the_table_says_what_the_numbers_do(make_results: Callable[..., Results]) -> None:
    """Sentence, strengths, 'not shown', the parameter in words; no line is too wide."""
    _, strip = strip_of(make_results(2, 2), by_payload, 80)
    failed = int(np.sum(~strip.passed))
    said = driver_words(strip)
    assert (
        said
        == f"The tool peak of 'computed torque' under 'together 0.25' goes with payload, over 80 draws, of which {failed} fail."
    )
    of_sheet = driver_words(replace(strip, key=("control_hz 500", *strip.key[1:])))
    assert of_sheet == said.replace("0.25' goes", "0.25' (control_hz 500) goes")
    for width in (40, 100):
        text = driver_text(strip, width)
        assert max(map(len, text.splitlines())) <= width
    assert "payload mass, size: +0.9" in text
    assert "not shown" in text.split("0 to 1")[0]


@pytest.mark.parametrize("draws", [0, 1, 2, 5])
def test_few_draws_show_nothing(look: Any, make_results: Callable[..., Results], draws: int) -> None:
    """Table, picture and JSON say so, and none fails."""
    results, strip = strip_of(make_results(2, 2), by_payload, draws)
    look.clear(driver_figure(results, strip, DATE))
    text = driver_text(strip, 80)
    assert ("No draw" if draws == 0 else "No source is shown") in text
    json.dumps(plain_values(driver_json(strip)), allow_nan=False)


@pytest.mark.parametrize("draws", [3, 80, 240, 1000])
def test_the_picture_is_clear(look: Any, make_results: Callable[..., Results], draws: int) -> None:
    """With few draws and with many, of which several then share a column."""
    results, strip = strip_of(make_results(2, 2), by_payload, draws)
    figure = driver_figure(results, strip, DATE)
    look.clear(figure)
    assert len(look.rectangles(figure, "score-")) == min(draws, 240)
    assert ("each column is" in look.said(figure)) == (draws > 240)


def test_shades_follow_the_values(look: Any, make_results: Callable[..., Results]) -> None:
    """A strip's cells are darker where the value is larger; columns are as high as their scores."""
    results, strip = strip_of(make_results(2, 2), by_payload, 60)
    figure = driver_figure(results, strip, DATE)
    for number, source in enumerate(strip.sources):
        cells = look.rectangles(figure, f"draw-{number}-")
        luma = [
            np.dot(to_rgb(cells[f"draw-{number}-{k}"].get_facecolor()), (0.299, 0.587, 0.114))
            for k in range(60)
        ]
        assert np.corrcoef(luma, source.u)[0, 1] < -0.99
    heights = [look.rectangles(figure, "score-")[f"score-{k}"].get_height() for k in range(60)]
    assert np.array(heights) / heights[-1] == pytest.approx(strip.worst / strip.worst[-1], rel=1e-6)
    bars = look.rectangles(figure, "bar-")
    assert to_rgb(bars["bar-0"].get_facecolor()) != (1.0, 1.0, 1.0)


def test_all_failed_and_long_names(look: Any, make_results: Callable[..., Results]) -> None:
    """Runs that did not finish stand hollow; twenty sources with endless names are broken, not cut."""
    results, strip = strip_of(make_results(2, 2), lambda values: math.inf, 40, LONG)
    figure = driver_figure(results, strip, DATE)
    look.clear(figure)
    assert "did not finish" in look.said(figure)
    letters = "".join(look.said(figure).split())
    for source in LONG:
        assert source.removesuffix("_percent").replace("_", "") in letters
    mixed, strip = strip_of(make_results(2, 2), lambda v: math.inf if v["payload.mass"] > 0.5 else 1.0, 40)
    look.clear(driver_figure(mixed, strip, DATE))
    assert strip.sources[0].by_score.source == "payload"


def test_the_document_names_everything(make_results: Callable[..., Results]) -> None:
    """Key by key."""
    _, strip = strip_of(make_results(2, 2), by_payload, 80)
    document = plain_values(driver_json(strip))
    assert list(document) == ["sheet", "law", "condition", "score", "draws", "failed", "sources"]
    first = document["sources"][0]
    assert first["source"] == "payload"
    assert set(first["with_score"]) == {"strength", "chance", "parameter", "correlation", "by_size"}
