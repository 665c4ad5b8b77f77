"""Which source's draws go with a large score, or with failures, of a law: the strip of draws."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from rigbench.arm.arm import Floats

__all__ = ["Driver", "drivers"]

PERMUTATIONS = 999


@dataclass(frozen=True)
class Driver:
    """How strongly one source's drawn values go with a score.

    ``strength`` is the adjusted multiple correlation R in ranks, 0 to 1; None if the draws are too few for
    the source's parameters, or nothing varies. ``chance`` is the share of random orders of the score that go
    with the values as strongly: below 0.05 a source is shown to matter. ``parameter`` is the single one with
    the largest rank correlation (Spearman's), which is ``correlation``; ``by_size`` says that it is that
    of the size abs(u), not of u.
    """

    source: str
    strength: float | None
    chance: float
    parameter: str | None
    correlation: float
    by_size: bool


def drivers(
    values: Floats, sources: Mapping[str, Sequence[str]], score: Floats, seed: int = 0
) -> tuple[Driver, ...]:
    """Return for each source how strongly its values u go with a score, over n draws.

    ``values`` (n, P) are the drawn factors, their columns in the order of ``sources``, which name each
    source's parameters; ``score`` (n,) may be infinite (a run that did not finish ranks highest), or 0
    and 1 for pass and fail. A draw whose score is NaN does not count.

    A departure to either side may do harm, so both u and abs(u) are ranked (ties share their mean rank), and
    the score's rank is regressed on the ranks of all of a source's: R^2 is the part of its variance that
    they explain, adjusted for the number of columns, 1 - (1 - R^2) (n - 1) / (n - 1 - columns), not below 0.
    The chance is that of a permutation test, 999 random orders: (1 + as strong ones) / 1000, for each source
    by itself. Only what adds up over parameters shows; `needs` sees the rest.
    """
    known = ~np.isnan(score)
    ranks = _centred(score[known, None])[:, 0]
    values = values[known]
    orders = np.random.default_rng(seed).permuted(np.tile(ranks, (PERMUTATIONS, 1)), axis=1)
    found, first = [], 0
    for source, names in sources.items():
        own = values[:, first : first + len(names)]
        first += len(names)
        found.append(_driver(source, names, own, ranks, orders))
    return tuple(found)


def _centred(values: Floats) -> Floats:
    """Return the ranks within each column, less their mean."""
    from scipy.stats import rankdata

    ranks: Floats = rankdata(values, axis=0) if len(values) else values
    return ranks - (len(values) + 1) / 2.0


def _driver(source: str, names: Sequence[str], own: Floats, ranks: Floats, orders: Floats) -> Driver:
    n = len(ranks)
    columns = _centred(np.concatenate((own, np.abs(own)), axis=1))
    varying = np.flatnonzero(np.any(columns != 0.0, axis=0))
    power = float(ranks @ ranks)
    if not varying.size or power == 0.0:
        return Driver(source, None, 1.0, None, 0.0, False)
    columns = columns[:, varying]
    each = columns.T @ ranks / np.sqrt(np.sum(columns**2, axis=0) * power)
    strongest = int(np.argmax(np.abs(each)))
    basis = _basis(columns)
    explained = float(np.sum((basis.T @ ranks) ** 2)) / power
    by_chance = np.sum((orders @ basis) ** 2, axis=1) / power
    chance = (1 + int(np.sum(by_chance >= explained - 1e-9))) / (1 + len(orders))
    free = n - 1 - basis.shape[1]
    strength = None if free < 1 else max(0.0, 1.0 - (1.0 - explained) * (n - 1) / free) ** 0.5
    place = int(varying[strongest])
    name = names[place % len(names)]
    return Driver(source, strength, chance, name, float(each[strongest]), place >= len(names))


def _basis(columns: Floats) -> Floats:
    """Return an orthonormal basis of what the columns span, (n, their rank)."""
    squares, directions = np.linalg.eigh(columns.T @ columns)
    spanning = squares > 1e-10 * squares[-1]
    basis: Floats = columns @ directions[:, spanning] / np.sqrt(squares[spanning])
    return basis
