"""Bounded least squares against scipy's and against trying every set of active bounds."""

from itertools import product

import numpy as np
import pytest
from scipy.optimize import lsq_linear

from unmix.kernels.bounded import between, shortest


def problem(rng, m=20, k=4, scale=1.0):
    a = rng.normal(size=(m, k)) * scale
    y = rng.normal(size=m) * 3
    q, r = np.linalg.qr(a)
    factor = np.linalg.inv(r)
    return a, y, factor @ (q.T @ y), factor


@pytest.mark.parametrize("number", range(40))
def test_agrees_with_scipy_between_two_bounds(rng, number):
    rng = np.random.default_rng([number, 7])
    k = 1 + number % 7
    a, y, terms, factor = problem(rng, 20, k, 10.0 ** rng.uniform(-3, 3, k))
    size = np.abs(terms)
    low, high = -0.3 * size * rng.random(k), 0.6 * size * rng.random(k)
    low[rng.random(k) < 0.3] = -np.inf
    high[rng.random(k) < 0.3] = np.inf
    ours, _, feasible = between(terms, factor, low, high)
    theirs = lsq_linear(a, y, bounds=(low, high), method="bvls", tol=1e-14).x
    assert feasible
    np.testing.assert_allclose(ours, theirs, rtol=1e-8, atol=1e-9 * size.max())


def test_a_factor_of_lower_rank_keeps_its_equality():
    # c sums to 1: F's columns sum to zero; every set of active bounds tried by hand
    rng = np.random.default_rng(3)
    for _ in range(30):
        null = np.linalg.qr(np.ones((4, 1)), mode="complete")[0][:, 1:]
        factor = null @ rng.normal(size=(3, 3))
        start = 0.25 + null @ rng.normal(size=3)
        ours, _, feasible = between(start, factor, np.zeros(4), np.full(4, 0.6))
        assert feasible
        assert ours.sum() == pytest.approx(1.0, abs=1e-10)
        best = np.inf
        for held in product((None, 0.0, 0.6), repeat=4):
            at = [i for i, h in enumerate(held) if h is not None]
            want = np.array([held[i] - start[i] for i in at])
            u = np.linalg.lstsq(factor[at], want, rcond=None)[0] if at else np.zeros(3)
            c = start + factor @ u
            if (c > -1e-9).all() and (c < 0.6 + 1e-9).all() and best > u @ u:
                best, other = u @ u, c
        np.testing.assert_allclose(ours, other, atol=1e-7)


def test_bounds_that_exclude_each_other_are_said_to():
    factor = np.array([[1.0], [-1.0]])  # the two sum to a constant
    terms, u, feasible = between(np.array([0.5, 0.5]), factor, np.array([0.7, 0.7]), np.full(2, np.inf))
    assert not feasible
    assert (u == 0).all()
    np.testing.assert_array_equal(terms, [0.7, 0.7])


def test_a_term_that_nothing_moves_is_infeasible_only_when_its_bound_is_missed():
    factor = np.array([[0.0, 0.0], [1.0, 0.0]])
    assert not shortest(factor, np.array([0.1, -1.0]), np.full(2, np.inf))[1]
    u, feasible = shortest(factor, np.array([-0.1, 2.0]), np.full(2, np.inf))
    assert feasible
    np.testing.assert_allclose(u, [2.0, 0.0])


def test_an_answer_inside_stays_where_it_is():
    terms, u, feasible = between(np.array([1.0, 2.0]), np.eye(2), np.zeros(2), np.full(2, 3.0))
    assert feasible
    assert (u == 0).all()
    np.testing.assert_array_equal(terms, [1.0, 2.0])
