"""Intervals, against scipy, exact binomial sums and simulation."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from rigbench.scores.intervals import (
    MEDIAN,
    P95,
    draws_needed,
    draws_to_decide,
    misses_allowed,
    quantile_interval,
    quantiles,
    sign_test,
    wilson,
)


@pytest.mark.parametrize("draws", [1, 2, 7, 73, 128, 1000])
def test_wilson_is_scipy_s(draws: int) -> None:
    """For every count; both solve the same quadratic, so to rounding."""
    for passed in range(0, draws + 1, max(1, draws // 50)):
        theirs = stats.binomtest(passed, draws).proportion_ci(0.95, method="wilson")
        assert wilson(passed, draws) == pytest.approx((theirs.low, theirs.high), abs=1e-14)


def test_wilson_touches_its_ends_exactly() -> None:
    """No draw fails: up to 1, not 1 less a rounding error; and nothing is known of no draws."""
    for draws in range(1, 50):
        assert wilson(draws, draws)[1] == 1.0
        assert wilson(0, draws)[0] == 0.0
    assert wilson(0, 0) == (0.0, 1.0)


@pytest.mark.parametrize("share", [0.5, 0.8, 0.9, 0.95, 0.99])
@pytest.mark.parametrize("misses", [0, 1, 5, 16])
def test_draws_needed_is_the_first_number_that_suffices(share: float, misses: int) -> None:
    """As counting up finds it; without a miss it is share z^2 / (1 - share), rounded up."""
    needed = draws_needed(share, misses)
    first = next(n for n in range(max(1, misses), 5000) if wilson(n - misses, n)[0] >= share)
    assert needed == first
    if misses == 0:
        assert needed == np.ceil(share * stats.norm.ppf(0.975) ** 2 / (1 - share))


def test_the_numbers_that_the_documentation_states() -> None:
    """0.95 takes 73 draws without a miss; 128 allow one, 256 five, 512 fifteen."""
    assert draws_needed(0.95) == 73
    assert [misses_allowed(0.95, n) for n in (0, 72, 73, 128, 256, 512)] == [None, None, 0, 1, 5, 15]


def test_a_share_of_one_can_never_be_shown() -> None:
    """However many draws there are; a share of 0 needs but one."""
    assert draws_needed(1.0) is None
    assert misses_allowed(1.0, 10**6) is None
    assert draws_to_decide(1.0, 1.0) is None
    assert draws_needed(0.0) == 1


@pytest.mark.parametrize(("share", "required"), [(1.0, 0.95), (0.98, 0.95), (0.9, 0.95), (0.5, 0.9)])
def test_draws_to_decide_is_where_the_interval_meets_the_required_share(
    share: float, required: float
) -> None:
    """With that many draws at this share Wilson decides, with one less it doesn't (shares as reals)."""
    n = draws_to_decide(share, required)
    assert n is not None

    def decides(draws: int) -> bool:
        z = stats.norm.ppf(0.975)
        return abs(share - required) >= z * np.sqrt(required * (1 - required) / draws)

    assert decides(n)
    assert not decides(n - 1)


def test_an_undecidable_share_takes_no_number_of_draws() -> None:
    """A share exactly at the required one stays open for ever."""
    assert draws_to_decide(0.95, 0.95) is None


def test_the_sign_test_is_scipy_s_and_clopper_pearson_s() -> None:
    """One-sided binomial test at 0.025; equally, Clopper-Pearson's lower end lies above one half."""
    for total in range(40):
        for ahead in range(total + 1):
            exact = stats.binomtest(ahead, total, 0.5, alternative="greater").pvalue if total else 1.0
            assert sign_test(ahead, total - ahead) == (exact <= 0.025), (ahead, total)
            low = stats.binomtest(ahead, total, 0.5).proportion_ci(0.95, "exact").low if total else 0.0
            assert sign_test(ahead, total - ahead) == (low >= 0.5)


@pytest.mark.parametrize("share", [MEDIAN, P95])
def test_quantile_intervals_are_scipy_s_order_statistics(share: float) -> None:
    """scipy.stats.quantile_test picks the same ranks, for all n but the 72 of the next test."""
    for n in [*range(1, 72), *range(73, 200), 256, 512, 1000]:
        values = np.arange(1.0, n + 1)
        theirs = stats.quantile_test(values, q=0.0, p=share).confidence_interval(0.95)
        expected = np.nan_to_num(theirs.low, nan=0.0), np.nan_to_num(theirs.high, nan=np.inf)
        assert quantile_interval(values, share)[1:] == expected, n


def test_p95_is_bounded_from_73_draws_on_and_the_median_from_six() -> None:
    """By the binomial alone 72 would do (0.95^72 = 0.0249), but 72 draws can't show a pass share of 0.95."""
    for n, bounded in ((72, False), (73, True)):
        assert np.isfinite(quantile_interval(np.arange(1.0, n + 1), P95)[2]) == bounded
    for n, bounded in ((5, False), (6, True)):
        _, low, high = quantile_interval(np.arange(1.0, n + 1), MEDIAN)
        assert (low > 0.0, np.isfinite(high)) == (bounded, bounded)


@pytest.mark.parametrize("share", [MEDIAN, P95])
def test_coverage_is_at_least_95_percent_whatever_the_distribution(share: float) -> None:
    """Exact: the quantile lies between ranks r and s with probability P(r <= B < s), B binomial."""
    for n in range(1, 700):
        _, low, high = quantile_interval(np.arange(1.0, n + 1), share)
        s = n + 1 if np.isinf(high) else int(high)
        assert stats.binom.cdf(s - 1, n, share) - stats.binom.cdf(low - 1, n, share) >= 0.95 - 1e-12, n


def test_a_bounded_p95_means_a_shown_share() -> None:
    """If the whole interval of the 95th percentile keeps a limit, so does the pass share's, at 0.95."""
    for n in range(1, 700):
        high = quantile_interval(np.arange(1.0, n + 1), P95)[2]
        if np.isfinite(high):
            assert wilson(int(high), n)[0] >= 0.95, n


def test_the_point_is_the_smallest_value_that_the_share_does_not_exceed() -> None:
    """numpy's inverted distribution function, also where share times n is whole."""
    random = np.random.default_rng(1)
    for n in [*range(1, 50), 60, 100, 140, 1000]:
        values = random.normal(size=n)
        for share in (MEDIAN, P95):
            expected = np.quantile(values, share, method="inverted_cdf")
            assert quantile_interval(values, share)[0] == expected, (n, share)


def test_infinite_values_are_values() -> None:
    """A quantile is infinite once too many draws are; the others keep their numbers."""
    values = np.array([*range(1, 81), *[np.inf] * 20], float)
    assert quantile_interval(values, P95)[0] == np.inf
    point, low, high = quantile_interval(values, MEDIAN)
    assert (point, low, high) == (50.0, 40.0, 61.0)
    assert quantile_interval(np.full(100, np.inf), MEDIAN) == (np.inf, np.inf, np.inf)


def test_what_can_not_be_bounded_from_below_ends_at_the_least_there_is() -> None:
    """0 for scores, minus infinity for differences."""
    assert quantile_interval(np.array([3.0]), MEDIAN) == (3.0, 0.0, np.inf)
    assert quantile_interval(np.array([3.0]), MEDIAN, least=-np.inf)[1] == -np.inf


def test_columns_are_done_at_once_as_one_by_one_and_absent_values_do_not_count() -> None:
    """Whatever number of values each column lacks; one without any has no quantile."""
    random = np.random.default_rng(2)
    table = random.normal(10, 1, size=(90, 6))
    table[random.random(table.shape) < 0.2] = np.nan
    table[:, 1], table[:, 4] = np.nan, random.normal(10, 1, size=90)
    found = quantiles(table)
    assert np.all(np.isnan(found[1]))
    for column in (0, 2, 3, 4, 5):
        values = table[:, column][~np.isnan(table[:, column])]
        expected = (*quantile_interval(values, MEDIAN), *quantile_interval(values, P95))
        assert tuple(found[column]) == expected


@pytest.mark.evidence
@pytest.mark.parametrize("draws", [16, 73, 128])
def test_intervals_cover_the_truth_in_simulated_campaigns(draws: int) -> None:
    """20000 campaigns with heavy-tailed errors: the quantile's interval covers in 95 % at least.

    Wilson's is approximate: its exact coverage of 0.95 is known from binomial sums, and the simulation
    has to meet that within five standard errors.
    """
    campaigns, random = 20000, np.random.default_rng(draws)
    values = np.exp(1.5 * random.normal(size=(draws, campaigns)))
    table = quantiles(values)
    error = np.sqrt(0.05 * 0.95 / campaigns)
    for column, truth in ((1, 1.0), (4, np.exp(1.5 * stats.norm.ppf(0.95)))):
        covered = np.mean((table[:, column] <= truth) & (truth <= table[:, column + 1]))
        assert covered >= 0.95 - 5 * error
    passed = np.sum(values <= np.exp(1.5 * stats.norm.ppf(0.95)), axis=0)
    ends = np.array([wilson(k, draws) for k in range(draws + 1)])
    inside = (ends[:, 0] <= 0.95) & (ends[:, 1] >= 0.95)
    exact = stats.binom.pmf(np.arange(draws + 1), draws, 0.95) @ inside
    assert abs(np.mean(inside[passed]) - exact) <= 5 * error
