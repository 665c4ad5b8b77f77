"""The interval that holds at any time, against its theorem: exactly, and in simulated campaigns."""

from __future__ import annotations

from collections.abc import Callable
from functools import cache

import numpy as np
import pytest
from scipy import integrate

from rigbench.scores.anytime import anytime_interval, draws_to_settle, evidence_against, settled
from rigbench.scores.cell import verdict_of
from rigbench.scores.intervals import wilson


@cache
def bounds(rule: Callable[[int, int], str], longest: int) -> tuple[np.ndarray, np.ndarray]:
    """The fewest passes that settle 'keeps' after each number of draws, and the most that settle 'misses'."""
    keeps, misses = np.empty(longest + 1, dtype=int), np.empty(longest + 1, dtype=int)
    k, m = 0, -1
    for n in range(longest + 1):
        while k <= n and rule(k, n) != "keeps":
            k += 1
        while m + 1 <= n and rule(m + 1, n) == "misses":
            m += 1
        keeps[n], misses[n] = k, m
    return keeps, misses


def ours(passed: int, draws: int) -> str:
    return settled(passed, draws, 0.95)


def at_every_look(passed: int, draws: int) -> str:
    """What the fixed interval would say if one looked after each draw."""
    return verdict_of(*wilson(passed, draws), 0.95) if draws else "open"


def chance_to_settle(rule: Callable[[int, int], str], longest: int, share: float = 0.95) -> float:
    """The exact probability that a campaign of that true share is ever settled, draw by draw."""
    keeps, misses = bounds(rule, longest)
    open_still = np.zeros(longest + 2)
    open_still[0] = 1.0
    for n in range(1, longest + 1):
        open_still[1:] = (1 - share) * open_still[1:] + share * open_still[:-1]
        open_still[0] *= 1 - share
        open_still[keeps[n] :] = 0.0
        open_still[: misses[n] + 1] = 0.0
    return 1.0 - float(open_still.sum())


def test_the_evidence_is_an_integral_of_likelihoods() -> None:
    """Over all shares alike, against the one: numerical quadrature of q^k (1 - q)^(n - k)."""
    for passed, draws, share in ((0, 0, 0.5), (3, 3, 0.9), (7, 10, 0.95), (1, 30, 0.5)):
        missed = draws - passed
        mixed, _ = integrate.quad(lambda q, k=passed, m=missed: q**k * (1 - q) ** m, 0, 1)
        expected = mixed / (share**passed * (1 - share) ** missed)
        assert np.exp(evidence_against(share, passed, draws)) == pytest.approx(expected, rel=1e-9)


def test_the_evidence_against_the_truth_is_a_martingale_of_mean_1() -> None:
    """One more draw leaves its mean where it was, whatever was drawn before."""
    for passed, draws, share in ((0, 0, 0.95), (19, 20, 0.95), (3, 9, 0.4)):
        now = np.exp(evidence_against(share, passed, draws))
        then = share * np.exp(evidence_against(share, passed + 1, draws + 1))
        then += (1 - share) * np.exp(evidence_against(share, passed, draws + 1))
        assert then == pytest.approx(now, rel=1e-12)


@pytest.mark.parametrize("required", [0.5, 0.9, 0.95, 0.99])
def test_settled_is_the_verdict_of_the_anytime_interval(required: float) -> None:
    """Keeps if its low end reaches the share, misses if its high end lies below."""
    verdicts = set()
    for draws in (0, 1, 5, 20, 100, 300, 1000):
        for passed in range(0, draws + 1, max(1, draws // 100)):
            verdict = verdict_of(*anytime_interval(passed, draws), required)
            verdicts.add(verdict)
            assert settled(passed, draws, required) == verdict, (passed, draws)
    assert verdicts >= {"misses", "open"}


def test_the_interval_holds_the_share_and_is_wider_than_a_single_look_s() -> None:
    """At every count; its ends are where the evidence is 20, to 1e-6; both are 0 or 1 where it has no end."""
    assert anytime_interval(0, 0) == (0.0, 1.0)
    for draws in (1, 10, 73, 500):
        for passed in range(0, draws + 1, max(1, draws // 20)):
            low, high = anytime_interval(passed, draws)
            once = wilson(passed, draws)
            assert low < once[0] or passed == low == 0
            assert high > once[1] or (passed == draws and high == 1.0)
            for end, sharp in ((low, passed > 0), (high, passed < draws)):
                if sharp:
                    assert evidence_against(end, passed, draws) == pytest.approx(np.log(20), abs=1e-6)


def test_the_shares_0_and_1_are_settled_by_what_they_exclude() -> None:
    """One miss refutes 1, nothing proves it; 0 is kept without asking."""
    assert settled(1000, 1000, 1.0) == "open"
    assert settled(999, 1000, 1.0) == "misses"
    assert settled(0, 0, 0.0) == settled(0, 9, 0.0) == "keeps"
    assert draws_to_settle(1.0) is None


def test_the_numbers_of_draws_that_the_documentation_states() -> None:
    """Without a miss 0.95 is settled after 158 draws: the first n with 0.95^-n >= 20 (n + 1)."""
    first = next(n for n in range(1, 1000) if 0.95**-n >= 20 * (n + 1))
    assert draws_to_settle(0.95) == first == 158


def test_a_campaign_at_the_required_share_is_settled_in_5_percent_at_most() -> None:
    """Exactly, over up to 2000 looks; looking with a Wilson interval as often is wrong in more than 5 %."""
    assert chance_to_settle(ours, 2000) <= 0.05
    assert chance_to_settle(at_every_look, 2000) > 0.05


def test_of_2000_campaigns_at_the_required_share_100_are_settled_at_most() -> None:
    """True share 0.95, required 0.95, up to 2000 draws each, a look after every one."""
    keeps, misses = bounds(ours, 2000)
    passed = np.cumsum(np.random.default_rng(2026).random((2000, 2000), dtype=np.float32) < 0.95, axis=1)
    wrong = np.any((passed >= keeps[1:]) | (passed <= misses[1:]), axis=1)
    assert np.mean(wrong) <= 0.05


def test_clear_laws_are_settled_soon() -> None:
    """A law that passes half the draws is settled after some ten, one that always passes after 158."""
    assert chance_to_settle(ours, 20, share=0.5) > 0.99
    assert [chance_to_settle(ours, n, share=1.0) for n in (157, 158)] == [0.0, 1.0]
