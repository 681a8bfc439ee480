"""Between-sample variation against dense algebra."""

import numpy as np
import pytest
from scipy.linalg import sqrtm
from scipy.optimize import nnls

from unmix.kernels.variation import apply, choose_floor, in_own_space, learn, leave_out, like_groups, metric, predict


@pytest.fixture
def standards(rng):
    axis = np.arange(60.0)
    pure = np.exp(-(((axis - np.array([[15.0], [30], [45]])) / 8) ** 2))
    c = rng.uniform(0, 3, (18, 3)) * (rng.random((18, 3)) < 0.8)
    drift = 0.05 * rng.normal(size=(18, 2)) @ np.vstack([np.ones(60), np.linspace(-1, 1, 60)])
    return c @ pure + drift + 1e-3 * rng.normal(size=(18, 60)), c, pure


def covariance(a, c, floor):
    pure = np.linalg.lstsq(c, a, rcond=None)[0]
    rest = a - c @ pure
    return pure, rest.T @ rest / (len(c) - c.shape[1]) + floor**2 * np.eye(a.shape[1])


def test_the_metric_is_the_root_of_the_inverse_covariance(standards, rng):
    a, c, _ = standards
    floor = 5e-3
    learnt = learn(a, c, floor)
    pure, dense = covariance(a, c, floor)
    np.testing.assert_allclose(learnt.pure, pure, atol=1e-12)
    x = rng.normal(size=(4, 60))
    expected = x @ np.real(sqrtm(np.linalg.inv(dense))) * floor
    np.testing.assert_allclose(apply(metric(learnt, np.ones(60, dtype=bool)), x), expected, atol=1e-8)
    # on part of the channels it is that of the part
    used = np.arange(60) % 3 > 0
    part = x[:, used] @ np.real(sqrtm(np.linalg.inv(dense[np.ix_(used, used)]))) * floor
    np.testing.assert_allclose(apply(metric(learnt, used), x[:, used]), part, atol=1e-8)


def test_amounts_are_generalised_least_squares(standards, rng):
    a, c, pure = standards
    floor = 5e-3
    y = rng.uniform(0, 2, (3, 3)) @ pure + 0.05 + 1e-3 * rng.normal(size=(3, 60))
    found = predict(learn(a, c, floor), y)
    known, dense = covariance(a, c, floor)
    factor = np.linalg.cholesky(np.linalg.inv(dense)).T
    expected = [nnls(factor @ known.T, factor @ row)[0] for row in y]
    np.testing.assert_allclose(found, expected, rtol=1e-7, atol=1e-9)


def test_leaving_out_is_learning_without(standards):
    a, c, _ = standards
    groups = [np.array([0, 3]), np.setdiff1d(np.arange(18), [0, 3])]
    found = leave_out(a, c, 5e-3, [groups[0]] + [np.array([i]) for i in groups[1]])
    rest = groups[1]
    np.testing.assert_allclose(found[groups[0]], predict(learn(a[rest], c[rest], 5e-3), a[groups[0]]), rtol=1e-12)


def test_short_rows_give_the_same_answers(standards):
    a, c, _ = standards
    short = in_own_space(a)
    assert short.shape[1] <= 18
    groups = [np.array([i]) for i in range(18)]
    np.testing.assert_allclose(leave_out(short, c, 5e-3, groups), leave_out(a, c, 5e-3, groups), atol=1e-8)


def test_groups_are_of_like_composition_and_leave_every_component():
    c = np.array([[1.0, 0], [2, 0], [3, 0], [1, 1], [2, 2], [0, 1], [0, 2], [0, 3.0]])
    groups = [rows.tolist() for rows in like_groups(c)]
    assert sorted(groups) == [[0, 1, 2], [3, 4], [5, 6, 7]]
    for rows in groups:
        assert np.linalg.matrix_rank(np.delete(c, rows, axis=0)) == 2
    # without its only holders a component would be lost: they go one by one
    lonely = like_groups(np.array([[1.0, 0], [2, 0], [3, 0], [0, 1], [0, 2], [0, 3.0]]))
    assert sorted(rows.tolist() for rows in lonely) == [[0], [1], [2], [3], [4], [5]]


def test_the_floor_is_chosen_by_what_left_out_standards_show(standards):
    a, c, _ = standards
    short = in_own_space(a)
    floor, grouped = choose_floor(short, c, 1e-3, 60, [np.array([i]) for i in range(18)])
    error = np.sqrt(np.mean((grouped - c) ** 2))
    # a drift much larger than the noise: plain least squares, which is an endless floor, is worse
    plain = leave_out(short, c, 1e3, [np.array([i]) for i in range(18)])
    assert error < 0.7 * np.sqrt(np.mean((plain - c) ** 2))
    assert floor < 0.1
