"""Sobol indices against closed forms and scipy."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from math import inf, nan, pi

import numpy as np
import pytest
from scipy import stats

from rigbench.scores.pick_freeze import PickFreeze, pick_freeze
from rigbench.scores.variance_shares import VarianceShares, variance_shares

Function = Callable[[np.ndarray], np.ndarray]


def ishigami(u: np.ndarray) -> np.ndarray:
    """Ishigami and Homma 1990: sin x1 + 7 sin^2 x2 + 0.1 x3^4 sin x1, x = pi u."""
    x1, x2, x3 = np.moveaxis(pi * u, -1, 0)
    return np.sin(x1) + 7 * np.sin(x2) ** 2 + 0.1 * x3**4 * np.sin(x1)


ISHIGAMI_1, ISHIGAMI_2 = 0.5 * (1 + 0.1 * pi**4 / 5) ** 2, 49 / 8
ISHIGAMI_13 = 0.01 * pi**8 * (1 / 18 - 1 / 50)
ISHIGAMI = ISHIGAMI_1 + ISHIGAMI_2 + ISHIGAMI_13
"""Its variance in parts, closed form (from memory; they add up to 13.8446)."""

WEIGHTS = np.array([0.0, 1.0, 4.5, 9.0, 99.0])


def g_function(u: np.ndarray) -> np.ndarray:
    """Sobol' 1993, Saltelli and Sobol' 1995: product of (abs(4 x - 2) + a) / (1 + a), x = (u + 1) / 2."""
    return np.prod((np.abs(2.0 * u) + WEIGHTS) / (1.0 + WEIGHTS), axis=-1)


def g_shares(groups: Sequence[Sequence[int]]) -> tuple[list[float], list[float]]:
    """Closed form (from memory): V_i = 1 / (3 (1 + a_i)^2), V = product of (1 + V_i), less 1."""
    parts = 1.0 + 1.0 / (3.0 * (1.0 + WEIGHTS) ** 2)
    whole = np.prod(parts) - 1.0
    first = [(np.prod(parts[list(own)]) - 1.0) / whole for own in groups]
    total = [(np.prod(parts) - np.prod(np.delete(parts, list(own)))) / whole for own in groups]
    return first, total


def shares(function: Function, design: PickFreeze) -> VarianceShares:
    return variance_shares(function(design.a), function(design.b), function(design.mixed))


def independent(groups: Mapping[str, Sequence[str]], points: int, seed: int) -> PickFreeze:
    """The design with independent rows in place of a Sobol' sequence."""
    like = pick_freeze(groups, 1, 0)
    random, d = np.random.default_rng(seed), len(like.parameters)
    a, b = random.uniform(-1, 1, size=(2, points, d))
    mixed, first = np.repeat(a[None], len(like.groups), axis=0), 0
    for page, names in zip(mixed, groups.values(), strict=True):
        page[:, first : first + len(names)] = b[:, first : first + len(names)]
        first += len(names)
    return PickFreeze(like.parameters, like.groups, a, b, mixed)


ALONE = {"one": ["x1"], "two": ["x2"], "three": ["x3"]}
ALONE_SHARES = (
    np.array([ISHIGAMI_1, ISHIGAMI_2, 0.0]) / ISHIGAMI,
    np.array([ISHIGAMI_1 + ISHIGAMI_13, ISHIGAMI_2, ISHIGAMI_13]) / ISHIGAMI,
)


def test_ishigamis_indices() -> None:
    """With 4096 points of a Sobol' sequence within 0.01: about n^(-2/3), where chance alone would give 0.03."""
    assert pytest.approx(13.8446, abs=1e-4) == ISHIGAMI
    found = shares(ishigami, pick_freeze(ALONE, 4096, seed=3))
    assert found.first[:, 0] == pytest.approx(ALONE_SHARES[0], abs=0.01)
    assert found.total[:, 0] == pytest.approx(ALONE_SHARES[1], abs=0.01)
    assert (found.scale, found.points) == ("score", 4096)


def test_a_group_has_the_share_of_its_interactions_too() -> None:
    """Ishigami's x1 and x3 together: nothing is left between the groups, so first is total and all add up to 1.

    x1 and x3 are no neighbours, so the function's columns are put in another order.
    """
    found = shares(
        lambda u: ishigami(u[..., [0, 2, 1]]), pick_freeze({"13": ["x1", "x3"], "2": ["x2"]}, 4096, 4)
    )
    together = np.array([ISHIGAMI_1 + ISHIGAMI_13, ISHIGAMI_2]) / ISHIGAMI
    assert found.first[:, 0] == pytest.approx(together, abs=0.01)
    assert found.total[:, 0] == pytest.approx(together, abs=0.01)


@pytest.mark.parametrize("groups", [[[0], [1], [2], [3], [4]], [[0, 1], [2, 3, 4]], [[0], [1, 2, 3, 4]]])
def test_the_g_functions_indices(groups: list[list[int]]) -> None:
    """A product, so that all parameters interact; alone and in groups."""
    design = pick_freeze({str(k): [f"x{i}" for i in own] for k, own in enumerate(groups)}, 4096, 5)
    found, (first, total) = shares(g_function, design), g_shares(groups)
    assert found.first[:, 0] == pytest.approx(first, abs=0.01)
    assert found.total[:, 0] == pytest.approx(total, abs=0.01)


def test_the_values_are_scipys() -> None:
    """scipy.stats.sobol_indices takes outputs as well; same estimators, to rounding."""
    design = pick_freeze(ALONE, 256, 6)
    a, b, mixed = ishigami(design.a), ishigami(design.b), ishigami(design.mixed)
    theirs = stats.sobol_indices(func={"f_A": a[None], "f_B": b[None], "f_AB": mixed[:, None]}, n=256)
    ours = variance_shares(a, b, mixed)
    assert ours.first[:, 0] == pytest.approx(theirs.first_order.ravel(), abs=1e-12)
    assert ours.total[:, 0] == pytest.approx(theirs.total_order.ravel(), abs=1e-12)


def test_unit_and_offset_of_the_score_do_not_matter() -> None:
    """Micrometres on top of a kilometre: to the rounding of that sum."""
    design = pick_freeze(ALONE, 256, 7)
    plain, scaled = shares(ishigami, design), shares(lambda u: 1e3 + 1e-6 * ishigami(u), design)
    assert scaled.first == pytest.approx(plain.first, abs=1e-5)
    assert scaled.total == pytest.approx(plain.total, abs=1e-5)


def test_a_lone_group_has_it_all_and_one_without_effect_nothing() -> None:
    """First and total: 1 and 1 to chance, 0 and 0 exactly (its outputs do not change)."""
    design = pick_freeze({"all": ["x"], "idle": ["y"]}, 1024, 8)
    found = shares(lambda u: u[..., 0], design)
    assert found.first[0, 0] == pytest.approx(1.0, abs=0.01)
    assert found.total[0, 0] == pytest.approx(1.0, abs=0.01)
    assert np.all(found.first[1] == 0.0)
    assert np.all(found.total[1] == 0.0)


def test_infinite_outputs_are_ranked() -> None:
    """Any large number in their place gives the same shares, and it is said that these are of the rank."""
    design = pick_freeze(ALONE, 512, 9)

    def failing(u: np.ndarray, worst: float) -> np.ndarray:
        return np.where(ishigami(u) > 9.0, worst, ishigami(u))

    found = shares(lambda u: failing(u, inf), design)
    ranked = [
        np.array(f) for f in (failing(design.a, 1e9), failing(design.b, 1e9), failing(design.mixed, 1e9))
    ]
    order = stats.rankdata(np.vstack((ranked[0][None], ranked[1][None], ranked[2])), axis=None).reshape(5, -1)
    expected = variance_shares(order[0], order[1], order[2:])
    assert (found.scale, expected.scale) == ("rank", "score")
    assert found.first == pytest.approx(expected.first)
    assert found.total == pytest.approx(expected.total)


def test_pass_and_fail_have_a_variance_to_share() -> None:
    """Pass if both of two equal parameters are above 0: first 1/3, total 2/3 each (by hand)."""
    design = pick_freeze({"one": ["x"], "two": ["y"]}, 4096, 10)
    found = shares(lambda u: np.all(u > 0.0, axis=-1).astype(float), design)
    assert found.first[:, 0] == pytest.approx([1 / 3, 1 / 3], abs=0.02)
    assert found.total[:, 0] == pytest.approx([2 / 3, 2 / 3], abs=0.02)


def test_rows_without_a_verdict_do_not_count() -> None:
    """Whichever of a row's runs lacks it, the whole row is left out."""
    design = pick_freeze(ALONE, 64, 11)
    a, b, mixed = ishigami(design.a), ishigami(design.b), ishigami(design.mixed)
    kept = np.ones(64, bool)
    kept[[3, 10, 20]] = False
    expected = variance_shares(a[kept], b[kept], mixed[:, kept])
    a[3], b[10], mixed[1, 20] = nan, nan, nan
    found = variance_shares(a, b, mixed)
    assert found.points == 61
    assert np.array_equal(found.first, expected.first)
    assert np.array_equal(found.total, expected.total)


def test_nothing_to_share() -> None:
    """Outputs that are all the same, all infinite or not there have no shares; no group has no rows."""
    same = np.ones(16)
    for values in (same, same * inf, same * nan, same[:0], same[:1]):
        found = variance_shares(values, values, np.tile(values, (3, 1)))
        assert np.all(np.isnan(found.first))
        assert np.all(np.isnan(found.total))
        assert found.first.shape == (3, 3)
    assert variance_shares(np.arange(4.0), np.arange(4.0), np.empty((0, 4))).first.shape == (0, 3)
    rounding = variance_shares(1.0 + 1e-12 * np.arange(4.0), np.ones(4), np.full((3, 4), 1e9))
    assert np.all(np.isnan(rounding.total))


def coverage(
    function: Function, points: int, campaigns: int, truth: tuple[np.ndarray, np.ndarray]
) -> np.ndarray:
    """The part of campaigns whose intervals hold the truth: (2, groups)."""
    hits = np.zeros((2, len(truth[0])))
    names = {str(k): [f"x{k}"] for k in range(len(truth[0]))}
    for seed in range(campaigns):
        found = shares(function, independent(names, points, seed))
        for kind, (values, true) in enumerate(zip((found.first, found.total), truth, strict=True)):
            hits[kind] += (values[:, 1] <= true) & (true <= values[:, 2])
    return hits / campaigns


def test_intervals_hold_the_truth_for_independent_rows() -> None:
    """200 campaigns of 256 rows: 95 %, two off by the bootstrap, three standard errors are 4.6 %."""
    assert np.all(np.abs(coverage(ishigami, 256, 200, ALONE_SHARES) - 0.95) <= 0.02 + 0.046)


@pytest.mark.evidence
@pytest.mark.parametrize("points", [256, 1024])
def test_intervals_cover_93_to_97_percent(points: int) -> None:
    """2000 campaigns of independent rows."""
    assert np.all(np.abs(coverage(ishigami, points, 2000, ALONE_SHARES) - 0.95) <= 0.02)
