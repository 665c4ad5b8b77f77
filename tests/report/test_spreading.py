"""Labels moved apart, and lanes for lines that coincide."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import minimize

from rigbench.report.spreading import lanes, spread

BOXES = st.lists(st.tuples(st.floats(0, 200), st.floats(5, 30)), min_size=1, max_size=12)


@given(BOXES)
def test_no_box_lies_over_another_nor_outside(boxes: list[tuple[float, float]]) -> None:
    """Whatever is wanted, if there is room for all; and in the order in which they are wanted."""
    wanted, heights = zip(*boxes, strict=True)
    bottom = max(250.0, sum(heights))
    places = np.array(spread(wanted, heights, 0.0, bottom))
    order = np.argsort(wanted, kind="stable")
    high = np.array(heights)[order]
    assert np.all(np.diff(places[order]) >= (high[1:] + high[:-1]) / 2 - 1e-9)
    assert places[order[0]] >= high[0] / 2 - 1e-9
    assert places[order[-1]] <= bottom - high[-1] / 2 + 1e-9


def test_boxes_apart_stay_where_they_are() -> None:
    """And two that want the same place stand evenly about it, the first above."""
    assert spread([50.0, 10.0, 90.0], [12.0, 12.0, 12.0], 0.0, 100.0) == pytest.approx([50, 10, 90])
    assert spread([50.0, 50.0], [12.0, 20.0], 0.0, 100.0) == pytest.approx([42.0, 58.0])
    assert spread([], [], 0.0, 100.0) == []


def test_the_moves_are_the_least_there_are() -> None:
    """As a general optimiser finds them (SLSQP of scipy, to its own accuracy of some 1e-6)."""
    wanted, heights = np.array([30.0, 34.0, 36.0, 80.0, 83.0]), np.array([10.0, 14.0, 10.0, 12.0, 12.0])
    apart = (heights[1:] + heights[:-1]) / 2
    found = minimize(
        lambda p: np.sum((p - wanted) ** 2),
        np.cumsum(heights),
        constraints={"type": "ineq", "fun": lambda p: np.diff(p) - apart},
        method="SLSQP",
        options={"ftol": 1e-12},
    )
    assert spread(list(wanted), list(heights), -100.0, 300.0) == pytest.approx(found.x, abs=1e-4)


def test_lines_that_coincide_get_lanes_and_others_none() -> None:
    """Evenly to both sides, and many of them closer together than few."""
    shifts = lanes([(10.0, 20.0), (10.4, 20.1), (10.0, 40.0)])
    assert shifts[0] == -shifts[1] < 0
    assert shifts[2] == 0
    many = lanes([(5.0, 5.0)] * 12)
    assert sum(many) == pytest.approx(0)
    assert max(many) - min(many) < 9
    assert len(set(many)) == 12
