"""The search for members against trying all sets."""

import itertools

import numpy as np
import pytest
from scipy.optimize import nnls

from unmix.kernels.search import Pursuit, penalties, screened, search


def made(rng, n=12, d=60):
    x = np.abs(rng.normal(size=(n, d))) ** 3
    return x / np.linalg.norm(x, axis=1, keepdims=True)


def best_of_all(x, y, most, penalty, sigma2):
    """The best set by trying all, with positive amounts."""
    best = (y @ y / sigma2 + penalty[0], ())
    for size in range(1, most + 1):
        for members in itertools.combinations(range(len(x)), size):
            amounts, left = nnls(x[list(members)].T, y)
            if (amounts > 0).all():
                best = min(best, (left**2 / sigma2 + penalty[size], members))
    return best


@pytest.mark.parametrize("size", [1, 2, 3])
def test_the_best_set_is_that_of_trying_all(rng, size):
    for _ in range(6):
        x = made(rng)
        members = rng.choice(len(x), size, replace=False)
        y = rng.uniform(0.2, 1, size) @ x[members] + 0.01 * rng.normal(size=60)
        penalty = penalties(3, len(x), 60)
        found = search(Pursuit(x, y, np.ones(len(x), dtype=bool)), penalty, 1e-4)
        criterion, expected = best_of_all(x, y, 3, penalty, 1e-4)
        assert found.members[0] == expected
        assert found.criterion[0] == pytest.approx(criterion, rel=1e-6)
        assert (np.diff(found.criterion) >= 0).all()


def test_required_members_are_in_every_set_and_excluded_ones_in_none(rng):
    x = made(rng)
    y = x[0] + 0.5 * x[3] + 0.01 * rng.normal(size=60)
    allowed = np.ones(len(x), dtype=bool)
    allowed[3] = False
    found = search(Pursuit(x, y, allowed), penalties(4, len(x), 60), 1e-4, required=(5,))
    assert all(5 in members and 3 not in members for members in found.members)


def test_like_members_never_meet(rng):
    x = made(rng)
    x[7] = x[2]
    y = x[2] + 0.01 * rng.normal(size=60)
    found = search(Pursuit(x, y, np.ones(len(x), dtype=bool)), penalties(3, len(x), 60), 1e-4)
    assert found.members[0] in ((2,), (7,))
    assert not any({2, 7} <= set(members) for members in found.members)


def test_no_member_is_in_a_set_twice_however_small_the_noise(rng):
    x = made(rng)
    y = x[2] + 1e-8 * rng.normal(size=60)
    found = search(Pursuit(x, y, np.ones(len(x), dtype=bool)), penalties(4, len(x), 60), 1e-18)
    assert all(len(set(members)) == len(members) for members in found.members)


def test_amounts_are_least_squares(rng):
    x = made(rng)
    y = rng.normal(size=60)
    pursuit = Pursuit(x, y, np.ones(len(x), dtype=bool))
    sets = np.array([[0, 4, 5], [1, 2, 9]])
    amounts, squares = pursuit.amounts(sets)
    for row, a, left in zip(sets, amounts, squares, strict=True):
        expected, rest, *_ = np.linalg.lstsq(x[row].T, y, rcond=None)
        np.testing.assert_allclose(a, expected, rtol=1e-6)
        assert left == pytest.approx(rest[0], rel=1e-6)
    gains = pursuit.gains(sets)
    joined = [
        left - np.linalg.lstsq(x[[*row, 7]].T, y, rcond=None)[1][0] for row, left in zip(sets, squares, strict=True)
    ]
    for gain, expected in zip(gains[:, 7], joined, strict=True):
        assert gain == pytest.approx(expected, rel=1e-5) or gain == 0.0


def test_screening_keeps_the_members(rng):
    x = made(rng, 500, 200)
    members = [3, 77, 401]
    y = np.array([1.0, 0.6, 0.3]) @ x[members] + 0.01 * rng.normal(size=200)
    kept = screened(x.astype(np.float32), y, np.ones(500, dtype=bool), 4, 20, (9,))
    assert {*members, 9} <= set(kept.tolist())
    assert kept.size < 300
