"""Choosing samples against plain searches."""

import numpy as np
import pytest
from scipy.spatial.distance import cdist

from unmix.kernels.selection import distances, duplex, kennard_stone


def test_distances(rng):
    x = rng.normal(size=(30, 5))
    np.testing.assert_allclose(distances(x), cdist(x, x), atol=1e-7)


def test_kennard_stone_takes_the_farthest_each_time(rng):
    d = cdist(x := rng.normal(size=(25, 3)), x)
    taken = kennard_stone(d, 25).tolist()
    assert sorted(taken) == list(range(25))
    assert d[taken[0], taken[1]] == d.max()
    for i in range(2, 25):
        rest = [j for j in range(25) if j not in taken[:i]]
        near = {j: min(d[j, t] for t in taken[:i]) for j in rest}
        assert near[taken[i]] == pytest.approx(max(near.values()))


def test_a_line_of_points():
    x = np.array([0.0, 1, 2, 3, 4, 5, 6, 7, 8.0])[:, None]
    assert kennard_stone(distances(x), 3).tolist() == [0, 8, 4]
    assert kennard_stone(distances(x), 4, np.array([4]))[0] == 4


def test_duplex_gives_two_sets_that_span_alike(rng):
    d = cdist(x := rng.normal(size=(40, 2)), x)
    first, second = duplex(d, 15)
    assert sorted([*first, *second]) == list(range(40))
    assert second.size == 15
    assert d[first[0], first[1]] == d.max()
    left = [i for i in range(40) if i not in first[:2]]
    assert d[second[0], second[1]] == max(d[i, j] for i in left for j in left)
    spread = [np.ptp(x[rows], axis=0) for rows in (first, second)]
    assert (spread[1] > 0.6 * spread[0]).all()
