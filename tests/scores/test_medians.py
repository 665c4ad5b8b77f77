"""The interval of a median, against exact probabilities, order statistics and simulation."""

from __future__ import annotations

from math import comb, inf

import numpy as np
import pytest
from scipy import stats

from rigbench.scores.medians import median_bounds

DISTRIBUTIONS = {
    "normal": (lambda random, size: random.normal(size=size), 0.0),
    "heavy": (lambda random, size: random.standard_t(2, size=size), 0.0),
    "skew": (lambda random, size: np.exp(1.5 * random.normal(size=size)), 1.0),
    "uniform": (lambda random, size: random.uniform(size=size), 0.5),
}


def coverage(name: str, draws: int, campaigns: int, seed: int) -> float:
    sample, truth = DISTRIBUTIONS[name]
    _, low, high = median_bounds(sample(np.random.default_rng(seed), (draws, campaigns)))
    return float(np.mean((low <= truth) & (truth <= high)))


def test_the_ends_lie_between_neighbouring_order_statistics() -> None:
    """Those whose binomial coverage embraces 95 %; by hand for ten values: ranks 2 and 3, 97.9 and 89.1 %.

    With I = (0.9785 - 0.95) / (0.9785 - 0.8906) the way from rank 2 to 3 is 8 I / (2 + 6 I).
    """
    c2, c3 = (1 - 2 * sum(comb(10, k) for k in range(d)) / 2**10 for d in (2, 3))
    part = (c2 - 0.95) / (c2 - c3)
    point, low, high = median_bounds(np.arange(1.0, 11.0)[::-1, None])
    way = 8 * part / (2 + 6 * part)
    assert (point[0], low[0], high[0]) == pytest.approx((5.5, 2 + way, 9 - way))
    for n in range(6, 300):
        _, low, high = median_bounds(np.arange(1.0, n + 1)[:, None])
        for rank, enough in ((np.floor(low[0]), True), (np.floor(low[0]) + 1, False)):
            assert (stats.binom.cdf(rank - 1, n, 0.5) <= 0.025) == enough, n
        assert low[0] + high[0] == pytest.approx(n + 1)


@pytest.mark.parametrize("n", range(1, 6))
def test_fewer_than_six_values_bound_nothing(n: int) -> None:
    """All lie on one side of the median too often: 2 / 2^5 is above 5 %."""
    point, low, high = median_bounds(np.ones((n, 2)))
    assert (point.tolist(), low.tolist(), high.tolist()) == ([1.0, 1.0], [-inf, -inf], [inf, inf])


def test_no_values_have_no_median() -> None:
    """NaN, as nothing is known."""
    assert all(np.all(np.isnan(end)) for end in median_bounds(np.empty((0, 3))))


def test_the_point_is_numpys_median_wherever_that_is_a_number() -> None:
    """Infinities included; of -inf and inf in the middle the tie is 0."""
    random = np.random.default_rng(1)
    for n in range(1, 40):
        values = random.normal(size=(n, 20))
        point, low, high = median_bounds(values)
        assert point == pytest.approx(np.median(values, axis=0))
        assert np.all((low <= point) & (point <= high))
    assert median_bounds(np.array([[-inf], [inf]]))[0] == 0.0
    assert median_bounds(np.array([[1.0], [inf]]))[0] == inf


def test_an_end_between_a_number_and_an_infinity_is_the_infinity() -> None:
    """Nothing lies between them that the values could name; equal infinities stay what they are."""
    values = np.array([*range(1, 9), inf, inf])[:, None]  # ranks 8 and 9 hold 8 and inf
    _, low, high = median_bounds(values)
    assert (2.0 < low[0] < 3.0, high[0]) == (True, inf)
    _, low, high = median_bounds(-values)
    assert (low[0], -3.0 < high[0] < -2.0) == (-inf, True)
    most = np.array([1.0, 2.0, *[inf] * 8])[:, None]  # ranks 2 and 3 hold 2 and inf: the outer end is 2
    assert [float(end[0]) for end in median_bounds(most)] == [inf, 2.0, inf]
    assert [float(end[0]) for end in median_bounds(-most)] == [-inf, -inf, -2.0]
    assert [float(end[0]) for end in median_bounds(np.full((10, 1), inf))] == [inf, inf, inf]
    # One law ran away on two draws, the other on eight: ranks 2 and 3 hold -inf and inf.
    torn = np.array([*[-inf] * 2, *[inf] * 8])[:, None]
    assert [float(end[0]) for end in median_bounds(torn)] == [inf, -inf, inf]
    assert [float(end[0]) for end in median_bounds(-torn)] == [-inf, -inf, inf]


@pytest.mark.parametrize("name", DISTRIBUTIONS)
@pytest.mark.parametrize("draws", [8, 16, 64])
def test_it_covers_93_to_97_percent(name: str, draws: int) -> None:
    """20000 samples: 95 %, two off at most by the method, three standard errors (0.5 %) by chance."""
    assert abs(coverage(name, draws, 20000, draws) - 0.95) <= 0.02 + 0.005


@pytest.mark.evidence
@pytest.mark.parametrize("name", DISTRIBUTIONS)
@pytest.mark.parametrize("draws", [6, 7, 10, 12, 20, 32, 73, 100, 128, 256])
def test_it_covers_93_to_97_percent_of_many_campaigns(name: str, draws: int) -> None:
    """100000 samples; three standard errors are 0.2 %."""
    assert abs(coverage(name, draws, 100000, draws) - 0.95) <= 0.02
