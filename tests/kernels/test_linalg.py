"""Scaling, reduction and collinearity of designs, with dependent and badly scaled columns."""

import numpy as np
import pytest

from unmix.kernels.linalg import collinearity, inverse_factor, polynomial_terms, reduce_design, unit_columns


def test_unit_columns_at_the_ends_of_the_number_range(rng):
    a = rng.normal(size=(20, 4)) * [1e-200, 1.0, 1e200, 0.0]
    scaled, length = unit_columns(a)
    assert np.linalg.norm(scaled, axis=0) == pytest.approx([1.0, 1.0, 1.0, 0.0])
    assert scaled * length == pytest.approx(a, rel=1e-15, abs=0)
    assert length[3] == 1.0


@pytest.mark.parametrize("order", [None, 0, 1, 5, 20])
def test_polynomial_terms_span_the_polynomials_of_the_axis_itself(rng, order):
    axis = np.sort(rng.uniform(400, 4000, 60))  # uneven: a term follows the positions, not the channel numbers
    terms = polynomial_terms(axis, order)
    assert terms.shape == (60, 0 if order is None else order + 1)
    if order:
        straight = 3.0 - 0.002 * axis
        left = straight - terms @ np.linalg.lstsq(terms, straight, rcond=None)[0]
        assert np.abs(left).max() < 1e-10
        assert np.linalg.cond(terms) < 1e3


def test_polynomial_terms_of_one_channel():
    assert polynomial_terms(np.array([500.0]), 2).shape == (1, 3)
    assert np.isfinite(polynomial_terms(np.array([500.0]), 2)).all()


def test_reduced_design_gives_back_the_design(rng):
    signal, free = rng.normal(size=(30, 3)) * [1e-6, 1.0, 1e6], rng.normal(size=(30, 2))
    reduced = reduce_design(signal, free)
    assert reduced.n_free == 2
    assert reduced.rank == 5
    back = reduced.q @ reduced.r * reduced.scale
    assert back == pytest.approx(np.hstack([free, signal]), rel=1e-10, abs=1e-12)
    assert reduced.q.T @ reduced.q == pytest.approx(np.eye(5), abs=1e-14)


def test_inverse_factor_is_the_covariance_of_least_squares(rng):
    signal, free = rng.normal(size=(30, 3)) * [1e-4, 1.0, 1e4], rng.normal(size=(30, 2))
    factor = inverse_factor(reduce_design(signal, free))
    a = np.hstack([free, signal])
    assert factor @ factor.T @ (a.T @ a) == pytest.approx(np.eye(5), abs=1e-6)


def test_inverse_factor_is_infinite_for_what_a_dependence_involves_and_only_there(rng):
    signal = rng.normal(size=(30, 3))
    signal[:, 1] = 5.0 * signal[:, 0]
    reduced = reduce_design(signal, rng.normal(size=(30, 1)))
    assert reduced.rank == 3
    spread = np.linalg.norm(inverse_factor(reduced), axis=1)
    assert np.isinf(spread).tolist() == [False, True, True, False]
    # what is determined is as well determined as if the double were not there
    alone = reduce_design(signal[:, [0, 2]], reduced.q[:, :1])
    assert spread[3] == pytest.approx(np.linalg.norm(inverse_factor(alone), axis=1)[2], rel=1e-8)


def test_fewer_channels_than_terms_is_not_determined(rng):
    reduced = reduce_design(rng.normal(size=(3, 4)), rng.normal(size=(3, 1)))
    assert reduced.rank == 3
    assert reduced.r.shape == (5, 5)
    assert np.isinf(np.linalg.norm(inverse_factor(reduced), axis=1)).any()


def test_collinearity_of_orthogonal_columns_is_none():
    found = collinearity(np.diag([1.0, 5.0, 1e6]))
    assert found.indices == pytest.approx([1.0, 1.0, 1.0])
    assert found.proportion.sum(axis=0) == pytest.approx([1.0, 1.0, 1.0])


def test_collinearity_of_two_columns_is_that_of_their_angle():
    # unit vectors at angle t have singular values sqrt(1 +- cos t), so the index is cot(t / 2)
    for degrees in (60.0, 10.0, 1.0, 0.01):
        t = np.radians(degrees)
        found = collinearity(np.array([[1.0, 7 * np.cos(t)], [0.0, 7 * np.sin(t)]]))
        assert found.indices == pytest.approx([1.0, 1.0 / np.tan(t / 2)], rel=1e-6)
        assert found.proportion[1] == pytest.approx([(1 + np.cos(t)) / 2] * 2, rel=1e-6)


def test_collinearity_does_not_depend_on_column_scales(rng):
    a = rng.random((20, 4))
    plain, scaled = collinearity(a), collinearity(a * [1e-9, 1e9, 3.0, 1e3])
    assert scaled.indices == pytest.approx(plain.indices, rel=1e-10)
    assert scaled.proportion == pytest.approx(plain.proportion, abs=1e-10)


@pytest.mark.parametrize("channels", [20, 2])
def test_exact_dependence_is_a_huge_index_with_all_of_the_variance(rng, channels):
    a = rng.random((channels, 3))
    a[:, 2] = a[:, 0] + a[:, 1]
    found = collinearity(a)
    assert found.indices.shape == (3,)
    assert found.indices[-1] > 1e12
    assert (found.proportion[-1] > 0.99).all()
    assert np.isfinite(found.proportion).all()
