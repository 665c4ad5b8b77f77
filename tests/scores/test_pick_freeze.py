"""The design behind the variance shares."""

from __future__ import annotations

import numpy as np
import pytest

from rigbench.scores.pick_freeze import pick_freeze

GROUPS = {"mass": ["m1", "m2"], "friction": ["f1"], "cog": ["c1", "c2", "c3"]}


def test_a_group_is_swapped_as_one() -> None:
    """Each page is a, but for its own group, which is b's."""
    design = pick_freeze(GROUPS, 8, seed=1)
    assert design.parameters == ("m1", "m2", "f1", "c1", "c2", "c3")
    assert design.groups == tuple(GROUPS)
    assert design.mixed.shape == (3, 8, 6)
    for page, own in zip(design.mixed, ([0, 1], [2], [3, 4, 5]), strict=True):
        others = [k for k in range(6) if k not in own]
        assert np.array_equal(page[:, own], design.b[:, own])
        assert np.array_equal(page[:, others], design.a[:, others])


def test_values_are_uniform_and_balanced() -> None:
    """Of 64 points of a Sobol' sequence one lies in each 64th of the range, of a and b alike."""
    design = pick_freeze({"all": [f"p{k}" for k in range(40)]}, 64, seed=2)
    for values in (design.a, design.b):
        assert np.all((values >= -1.0) & (values < 1.0))
        cells = np.sort(np.floor((values + 1.0) * 32), axis=0)
        assert np.array_equal(cells, np.tile(np.arange(64.0)[:, None], 40))
    assert not np.any(np.all(design.a == design.b, axis=0))


def test_the_seed_decides() -> None:
    """The same points again, others with another."""
    one, same, other = (pick_freeze(GROUPS, 16, seed) for seed in (1, 1, 2))
    assert np.array_equal(one.mixed, same.mixed)
    assert not np.array_equal(one.mixed, other.mixed)


@pytest.mark.parametrize("points", [0, 3, 100, -4])
def test_other_than_powers_of_2_are_refused(points: int) -> None:
    """They would lose the sequence's balance."""
    with pytest.raises(ValueError, match="powers of 2"):
        pick_freeze(GROUPS, points, 1)


def test_a_parameter_has_one_group_and_no_group_is_no_fault() -> None:
    """One that stood twice would be swapped half; nothing random has nothing to swap."""
    with pytest.raises(ValueError, match="one group"):
        pick_freeze({"one": ["p"], "other": ["p"]}, 8, 1)
    assert pick_freeze({}, 8, 1).mixed.shape == (0, 8, 0)
    assert pick_freeze({"none": []}, 8, 1).mixed.shape == (1, 8, 0)
