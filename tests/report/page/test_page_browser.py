"""The page in a real browser: by keyboard, in light and dark, narrow, on paper, and for those who can't see it."""

from __future__ import annotations

import io
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from PIL import Image

Open = Callable[..., Any]
PANEL = "#panel"


@pytest.fixture(scope="module")
def played(run_store: Path, browser: Any) -> Path:
    """The page of the campaign that was really run, with the traces of all runs that it names."""
    from rigbench.campaign.reading import Reader
    from rigbench.report.page.page import gathered, write_page

    page = run_store.with_name("played.html")
    with Reader.open_for_reading(run_store) as store:
        import datetime

        write_page(gathered(store, "run.sqlite", datetime.date(2026, 5, 4), 50), page)
    return page


def quiet(seen: Any, path: Path) -> None:
    """Nothing on the console, no dialog, and the page itself is all that was asked for."""
    assert seen.said == []
    assert seen.requests == [path.as_uri()]


def focused(page: Any) -> str:
    return str(page.evaluate("document.activeElement.dataset.cell ?? document.activeElement.id"))


def test_a_cell_opens_by_keyboard_and_shows_its_trace(played: Path, opened: Open) -> None:
    """Tab to the matrix, arrows to a cell, Enter; the panel has counts, spread, trace, draws; Escape goes back."""
    seen = opened(played)
    page = seen.page
    page.locator(".cell[tabindex='0']").focus()
    assert focused(page) == "0"
    page.keyboard.press("ArrowRight")
    page.keyboard.press("ArrowDown")
    page.keyboard.press("ArrowDown")  # there is no third law
    at = focused(page)
    assert page.locator(f".cell[data-cell='{at}'] .unseen").inner_text().startswith("s")
    assert page.locator(".cell[tabindex='0']").count() == 1
    page.keyboard.press("Enter")
    assert page.locator(PANEL).is_visible()
    assert focused(page) == "panel-title"
    assert page.locator(f"button.cell[data-cell='{at}']").get_attribute("aria-expanded") == "true"
    words = page.locator(PANEL).inner_text()
    for part in ("5 draws", "Worst run, draw", "Median run, draw", "Drawn values that depart most", "95th"):
        assert part in words
    assert "rigbench trace run.sqlite" in words
    traces = page.locator(f"{PANEL} polyline")
    assert traces.count() == 2
    assert len(traces.first.get_attribute("points").split()) == 200
    page.keyboard.press("Escape")
    assert not page.locator(PANEL).is_visible()
    assert focused(page) == at
    page.keyboard.press("Home")
    page.keyboard.press("End")
    assert page.locator(f".cell[data-cell='{focused(page)}']").is_visible()
    quiet(seen, played)


def test_the_evidence_opens_its_cells_and_closes_by_button(played: Path, opened: Open) -> None:
    """What the decision rests on leads to the cells' own panels."""
    seen = opened(played)
    page = seen.page
    link = page.locator(".evidence button").first
    link.click()
    assert "draws keep" in page.locator(PANEL).inner_text() or "exact run" in page.locator(PANEL).inner_text()
    page.get_by_role("button", name="Close").click()
    assert not page.locator(PANEL).is_visible()
    assert page.evaluate("document.activeElement.className") == "link"
    quiet(seen, played)


@pytest.mark.parametrize("scheme", ["light", "dark"])
@pytest.mark.parametrize("panel", [False, True])
def test_no_rule_of_accessibility_is_broken(played: Path, opened: Open, scheme: str, panel: bool) -> None:
    """By axe's rules (WCAG and best practices), contrast included, with the panel closed and open."""
    axe = pytest.importorskip("axe_playwright_python.sync_playwright")
    page = opened(played, scheme=scheme).page
    if panel:
        page.locator(".cell").nth(2).click()
    result = axe.Axe().run(page)
    assert result.violations_count == 0, result.generate_report()
    assert len(result.response["passes"]) > 20


@pytest.fixture
def with_searches(make_store: Callable[..., Path], make_page: Callable[[Path], Path]) -> Path:
    """The page of a store with laws compared, worst machines and gains found, in two sheets."""
    laws = ["soft", "stiff", "a law of many words (natural_hz 8, damping 0.7)"]
    return make_page(make_store(laws, 4, 6, sheets=("control_hz 500", "control_hz 1000"), rounds=40))


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_what_searches_found_breaks_no_rule_either(with_searches: Path, opened: Open, scheme: str) -> None:
    """By axe's rules with everything unfolded; each table has a caption and heads of rows and columns."""
    axe = pytest.importorskip("axe_playwright_python.sync_playwright")
    seen = opened(with_searches, scheme=scheme)
    page = seen.page
    page.evaluate("for (const one of document.querySelectorAll('details')) one.open = true")
    for section, tables in (("pairs", 2), ("worst", 12), ("gains", 1)):
        assert page.locator(f"nav a[href='#{section}']").is_visible()
        own = page.locator(f"#{section} table")
        assert own.count() == tables
        for part in ("caption", "thead th[scope=col]", "tbody th[scope=row]"):
            assert page.locator(f"#{section} table:has({part})").count() == tables
    quiet(seen, with_searches)  # before axe's own script
    result = axe.Axe().run(page)
    assert result.violations_count == 0, result.generate_report()


def test_what_searches_found_fits_a_phone_and_paper(with_searches: Path, opened: Open) -> None:
    """No wider than the screen; on an upright A4 page, 182 mm within its margins, no table is cut off."""
    page = opened(with_searches, width=390).page
    assert page.evaluate("document.documentElement.scrollWidth") <= 390
    page = opened(with_searches, width=688).page
    page.emulate_media(media="print")
    page.evaluate("for (const one of document.querySelectorAll('details')) one.open = true")
    ends = page.locator("#pairs table, #worst table, #gains table").evaluate_all(
        "all => all.map((one) => one.getBoundingClientRect().right)"
    )
    assert len(ends) == 15
    assert max(ends) <= 688


def brightness(picture: bytes) -> float:
    return float(np.asarray(Image.open(io.BytesIO(picture)).convert("L")).mean()) / 255


def test_light_and_dark_by_system_and_by_switch(played: Path, opened: Open) -> None:
    """The system's choice holds until the switch is pressed, which says so."""
    for scheme, bright in (("light", True), ("dark", False)):
        page = opened(played, scheme=scheme).page
        switch = page.locator("#theme")
        assert (brightness(page.screenshot(caret="initial")) > 0.6) is bright
        assert switch.get_attribute("aria-pressed") == str(not bright).lower()
        switch.click()
        assert (brightness(page.screenshot(caret="initial")) > 0.6) is not bright
        assert switch.get_attribute("aria-pressed") == str(bright).lower()


def test_on_paper_it_is_light_whole_and_not_blank(played: Path, opened: Open) -> None:
    """White ground even from the dark screen, the deciding cells with their details, no controls."""
    seen = opened(played, scheme="dark")
    page = seen.page
    page.emulate_media(media="print", color_scheme="dark")
    picture = Image.open(io.BytesIO(page.screenshot(full_page=True, caret="initial"))).convert("L")
    assert picture.getpixel((2, 2)) == 255
    darkest, lightest = picture.getextrema()
    assert (darkest < 60, lightest) == (True, 255)
    assert sum(picture.histogram()[:128]) > 5000  # pixels of ink
    assert page.locator("#deciding").is_visible()
    assert page.locator("#deciding svg").count() >= 2
    assert not page.locator("#theme").is_visible()
    assert page.pdf().startswith(b"%PDF")


def overlapping(page: Any) -> list[str]:
    """Names of cells of the matrix whose words leave them, and of texts of charts that lie on each other."""
    return page.evaluate(
        """() => {
        const found = [];
        for (const cell of document.querySelectorAll(".cell")) {
          const own = cell.getBoundingClientRect();
          for (const word of cell.querySelectorAll(".head, .figure, .small")) {
            const box = word.getBoundingClientRect();
            if (box.right > own.right + 1 || box.bottom > own.bottom + 1) found.push(word.textContent);
            if (word.scrollWidth > word.clientWidth + 1 && word.clientWidth) found.push(word.textContent);
          }
        }
        for (const chart of document.querySelectorAll(".chart")) {
          const names = [...chart.querySelectorAll(".name, .tick")].map((one) => [one.textContent, one.getBoundingClientRect()]);
          names.forEach(([text, a], k) => names.slice(k + 1).forEach(([other, b]) => {
            if (a.left < b.right - 1 && b.left < a.right - 1 && a.top < b.bottom - 3 && b.top < a.bottom - 3) found.push(`${text} on ${other}`);
          }));
        }
        return found;
      }"""
    )


def fall(entry: Any) -> str:
    return "diverged"


EDGES: dict[str, dict[str, Any]] = {
    "nothing run yet": {"done": 0.0},
    "one draw": {"draws": 1},
    "everything failed": {"ends": fall},
    "no tolerance": {"tolerance": False},
    "nominal alone": {"columns": 1, "draws": 1},
    "twelve by twenty": {"laws": 12, "columns": 20, "draws": 2},
    "long names": {
        "laws": ["x" * 70, "a law of many words, so many that it must be broken (natural_hz 8, damping 0.7)"],
        "title": "A title " * 30,
    },
    "sheets and motions": {
        "sheets": tuple(f"control_hz {hz}, gear_ratio {ratio}" for hz in (500, 1000) for ratio in (60, 100)),
        "motions": ("load tray", "rim"),
        "draws": 3,
    },
}


@pytest.mark.parametrize("case", EDGES)
def test_at_the_edges_nothing_breaks_or_overlaps(
    make_store: Callable[..., Path], make_page: Callable[[Path], Path], opened: Open, case: str
) -> None:
    """Wide and at a phone's width: no error, nothing on top of anything, no page wider than the screen."""
    path = make_page(make_store(**EDGES[case]))
    for width in (1280, 390):
        seen = opened(path, width=width)
        page = seen.page
        assert page.evaluate("document.documentElement.scrollWidth") <= width
        assert overlapping(page) == []
        page.locator(".cell").last.click()
        assert page.locator(PANEL).is_visible()
        assert page.evaluate(f"document.querySelector('{PANEL}').scrollWidth") <= width
        quiet(seen, path)


def test_a_law_that_is_called_a_script_does_nothing(
    make_store: Callable[..., Path], make_page: Callable[[Path], Path], opened: Open
) -> None:
    """Nor do a title, an experiment's text, a reason or a traceback that look like one."""
    evil = "</script><script>alert(1)</script><img src=x onerror=alert(2)>"
    store = make_store([evil, "b"], 2, 3, title=evil, text=evil, ends=lambda entry: "law-error")
    path = make_page(store)
    seen = opened(path)
    seen.page.locator(".cell").nth(1).click()
    assert "alert(3)" in seen.page.locator(PANEL).inner_text()
    assert seen.page.locator("h1").inner_text() == evil
    assert seen.page.locator("img").count() == 0
    quiet(seen, path)
