"""Which source's draws go with a score."""

from __future__ import annotations

from math import inf, nan, sqrt

import numpy as np
import pytest
from scipy import stats

from rigbench.scores.drivers import Driver, drivers

SOURCES = {"mass": ["m1", "m2", "m3"], "friction": ["f1", "f2"], "load": ["l"]}


def drawn(draws: int, seed: int = 1) -> np.ndarray:
    return np.random.default_rng(seed).uniform(-1, 1, size=(draws, 6))


def test_the_source_behind_a_score_is_found_with_its_parameter() -> None:
    """A score that rises with one friction: R 1, Spearman's rho 1; the other sources show nothing."""
    values = drawn(100)
    mass, friction, load = drivers(values, SOURCES, np.exp(values[:, 4]))
    assert (friction.source, friction.parameter, friction.by_size) == ("friction", "f2", False)
    assert (friction.strength, friction.correlation, friction.chance) == pytest.approx((1.0, 1.0, 0.001))
    for other in (mass, load):
        assert other.strength is not None
        assert other.strength < 0.4
        assert other.chance > 0.05


def test_a_departure_to_either_side_counts_by_its_size() -> None:
    """abs(u) drives the score, and u itself shows next to nothing."""
    values = drawn(200)
    load = drivers(values, SOURCES, np.abs(values[:, 5]))[2]
    assert (load.parameter, load.by_size) == ("l", True)
    assert (load.strength, load.correlation) == pytest.approx((1.0, 1.0))
    fewer = drivers(values, SOURCES, -values[:, 1])[0]
    assert (fewer.parameter, fewer.by_size, fewer.correlation) == ("m2", False, pytest.approx(-1.0))


def test_the_correlation_is_scipys_and_strength_that_of_a_regression_of_ranks() -> None:
    """Against spearmanr, ties included, and against least squares with numpy."""
    values, random = drawn(60), np.random.default_rng(2)
    score = np.round(values[:, 0] + np.abs(values[:, 1]) + random.normal(size=60), 1)
    mass = drivers(values, SOURCES, score)[0]
    columns = np.concatenate((values[:, :3], np.abs(values[:, :3])), axis=1)
    rho = [stats.spearmanr(column, score).statistic for column in columns.T]
    assert mass.correlation == pytest.approx(rho[int(np.argmax(np.abs(rho)))])
    ranks, y = stats.rankdata(columns, axis=0), stats.rankdata(score)
    fit = np.column_stack((np.ones(60), ranks))
    left = y - fit @ np.linalg.lstsq(fit, y, rcond=None)[0]
    adjusted = 1 - np.sum(left**2) / 53 / (np.sum((y - y.mean()) ** 2) / 59)
    assert mass.strength == pytest.approx(sqrt(adjusted))


def test_many_small_parameters_add_up() -> None:
    """Twelve equal ones: each alone is weak, the source is strong."""
    values = np.random.default_rng(3).uniform(-1, 1, size=(128, 12))
    (source,) = drivers(values, {"cog": [f"c{k}" for k in range(12)]}, values.sum(axis=1))
    assert source.strength is not None
    assert source.strength > 0.9
    assert abs(source.correlation) < 0.5
    assert source.chance == pytest.approx(0.001)


def test_failures_rank_highest_and_pass_or_fail_will_do() -> None:
    """An infinite score is the largest; any larger number in its place changes nothing; 0 and 1 are scores."""
    values = drawn(80)
    score = np.where(values[:, 3] > 0.5, inf, values[:, 3])
    assert drivers(values, SOURCES, score) == drivers(values, SOURCES, np.where(np.isinf(score), 9.0, score))
    friction = drivers(values, SOURCES, (values[:, 3] > 0.5).astype(float))[1]
    assert (friction.parameter, friction.chance) == ("f1", pytest.approx(0.001))


def test_draws_without_a_score_do_not_count() -> None:
    """NaN: the host's trouble."""
    values = drawn(50)
    score = values[:, 0].copy()
    score[10:20] = nan
    kept = ~np.isnan(score)
    assert drivers(values, SOURCES, score) == drivers(values[kept], SOURCES, score[kept])


def test_what_does_not_vary_drives_nothing() -> None:
    """A constant score, a constant parameter, a source without parameters, no draws at all."""
    values = drawn(30)
    for score in (np.ones(30), np.full(30, inf), np.full(30, nan)):
        assert drivers(values, SOURCES, score) == tuple(
            Driver(source, None, 1.0, None, 0.0, False) for source in SOURCES
        )
    assert drivers(values[:0], SOURCES, np.empty(0))[0] == Driver("mass", None, 1.0, None, 0.0, False)
    assert drivers(values[:1], SOURCES, np.ones(1))[0].strength is None
    values[:, 4], values[:, 5] = 0.3, 0.3
    _, friction, load = drivers(values, {**SOURCES, "none": []}, values[:, 3])[:3]
    assert (friction.parameter, friction.correlation) == ("f1", pytest.approx(1.0))
    assert load == Driver("load", None, 1.0, None, 0.0, False)


def test_columns_that_say_the_same_count_once() -> None:
    """Values of one sign are their own size, and a parameter that another repeats adds nothing."""
    one = np.abs(drawn(40)[:, :1])
    score = np.random.default_rng(6).normal(size=40) + 4.0 * one[:, 0]
    (alone,) = drivers(one, {"load": ["l"]}, score)
    (twice,) = drivers(np.hstack((one, one)), {"load": ["l", "again"]}, score)
    assert (twice.strength, twice.chance) == pytest.approx((alone.strength, alone.chance))
    rho = stats.spearmanr(one[:, 0], score).statistic
    assert alone.strength == pytest.approx(sqrt(1 - (1 - rho**2) * 39 / 38))


@pytest.mark.parametrize("draws", [2, 5, 7])
def test_too_few_draws_show_nothing(draws: int) -> None:
    """Six columns fit up to seven draws perfectly, by chance alone: no strength, and a chance of 1."""
    values = drawn(draws)
    mass = drivers(values, SOURCES, np.arange(draws, dtype=float))[0]
    assert (mass.strength, mass.chance) == (None, 1.0)


def test_the_chance_of_a_source_without_influence_is_uniform() -> None:
    """Of 300 campaigns 5 % fall below 0.05 but for chance: three standard errors are 3.8 %."""
    random, below = np.random.default_rng(4), 0
    for _ in range(300):
        (found,) = drivers(random.uniform(size=(24, 2)), {"idle": ["a", "b"]}, random.normal(size=24))
        below += found.chance < 0.05
    assert abs(below / 300 - 0.05) <= 0.038


@pytest.mark.evidence
def test_the_chance_is_right_in_many_campaigns() -> None:
    """3000 campaigns, with ties and failures: three standard errors are 1.2 %."""
    random, below = np.random.default_rng(5), 0
    for _ in range(3000):
        score = np.where(random.random(32) < 0.3, inf, np.round(random.normal(size=32), 1))
        (found,) = drivers(random.uniform(-1, 1, size=(32, 3)), {"idle": ["a", "b", "c"]}, score)
        below += found.chance <= 0.05
    assert abs(below / 3000 - 0.05) <= 0.012
