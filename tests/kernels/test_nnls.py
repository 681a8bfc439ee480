"""Batched non-negative least squares: by hand, against scipy one by one, and where designs are poor."""

import numpy as np
import pytest
from scipy.optimize import nnls as one_by_one

from unmix.kernels.nnls import nnls, nnls_reduced


def optimality(a, y, x):
    """How far a solution is from the Karush-Kuhn-Tucker conditions, relative to the sizes of data and columns."""
    gradient = (y - x @ a.T) @ a
    size = np.linalg.norm(y, axis=1, keepdims=True) * np.linalg.norm(a, axis=0) + np.finfo(float).tiny
    free = np.where(x > 0, np.abs(gradient), np.maximum(gradient, 0.0))
    return float((free / size).max(initial=0.0))


def twin(a, y):
    return np.array([one_by_one(a, row)[0] for row in y])


@pytest.mark.parametrize("k", [1, 2, 5, 9])
def test_equals_scipy_row_by_row(rng, k):
    a = rng.random((40, k))
    y = rng.normal(size=(200, 40)) + rng.random((200, k)) @ a.T
    assert nnls(a, y) == pytest.approx(twin(a, y), rel=1e-10, abs=1e-12)


def test_row_does_not_depend_on_the_others(rng):
    a, y = rng.random((30, 6)), rng.normal(size=(50, 30))
    whole = nnls(a, y)
    alone = np.vstack([nnls(a, row[None]) for row in y])
    assert whole == pytest.approx(alone, rel=1e-12, abs=1e-15)


def test_shapes_of_nothing(rng):
    a = rng.random((10, 3))
    assert nnls(a, np.empty((0, 10))).shape == (0, 3)
    assert nnls(a[:, :0], rng.random((4, 10))).shape == (4, 0)
    assert nnls(a, np.zeros((2, 10))).tolist() == [[0.0] * 3] * 2


def test_inputs_are_not_overwritten(rng):
    a, y = rng.random((10, 3)), rng.normal(size=(5, 10))
    copies = a.copy(), y.copy()
    nnls(a, y)
    assert (a == copies[0]).all()
    assert (y == copies[1]).all()


def test_single_precision_comes_out_double(rng):
    a, y = rng.random((30, 3)).astype(np.float32), rng.random((5, 30)).astype(np.float32)
    found = nnls(a, y)
    assert found.dtype == np.float64
    assert found == pytest.approx(twin(a.astype(float), y.astype(float)), rel=1e-5)


def test_column_scales_that_differ_by_1e12(rng):
    a, y = rng.random((25, 5)), rng.normal(size=(60, 25)) + 1.0
    scale = np.array([1e-6, 1e6, 1.0, 1e-3, 1e3])
    assert nnls(a * scale, y) * scale == pytest.approx(nnls(a, y), rel=1e-10, abs=1e-12)


@pytest.mark.parametrize("size", [1e-300, 1e-150, 1.0, 1e150])
def test_answer_scales_with_the_data(rng, size):
    a, y = rng.random((25, 4)), rng.random((10, 25))
    assert nnls(a, y * size) / size == pytest.approx(nnls(a, y), rel=1e-9, abs=1e-12)


def test_duplicated_columns_and_columns_of_zeros_meet_the_conditions(rng):
    base = rng.random((20, 3))
    a = np.hstack([base, base, np.zeros((20, 1)), base @ rng.random((3, 2))])
    y = rng.normal(size=(100, 20)) + rng.random((100, 3)) @ base.T
    found = nnls(a, y)
    assert (found >= 0).all()
    assert optimality(a, y, found) < 1e-10
    assert found @ a.T == pytest.approx(twin(base, y) @ base.T, rel=1e-9, abs=1e-10)


def test_nearly_collinear_columns_meet_the_conditions(rng):
    base = rng.random((30, 4))
    a = np.hstack([base, base + 1e-9 * rng.random((30, 4))])
    y = rng.normal(size=(100, 30))
    found = nnls(a, y)
    assert (found >= 0).all()
    assert optimality(a, y, found) < 1e-10


def test_more_columns_than_channels(rng):
    a = rng.random((6, 15))
    y = rng.normal(size=(50, 6))
    found = nnls(a, y)
    assert optimality(a, y, found) < 1e-10
    assert np.linalg.norm(y - found @ a.T, axis=1) == pytest.approx(
        [one_by_one(a, row)[1] for row in y], rel=1e-9, abs=1e-10
    )


def test_all_components_absent(rng):
    a, y = rng.random((20, 4)), -rng.random((10, 20))
    assert (nnls(a, y) == 0).all()


def test_answer_at_the_bound_of_a_component_is_exactly_zero():
    a = np.array([[1.0, 0.0], [1.0, 0.0], [0.0, 1.0]])
    found = nnls(a, np.array([[2.0, 1.0, -1.0], [-1.0, -1.0, 3.0]]))
    assert found == pytest.approx(np.array([[1.5, 0.0], [0.0, 3.0]]))
    assert not np.signbit(found).any()


def test_reduced_problem_is_the_same_problem(rng):
    a, y = rng.random((30, 4)), rng.normal(size=(20, 30))
    length = np.linalg.norm(a, axis=0)
    q, r = np.linalg.qr(a / length)
    assert nnls_reduced(r, y @ q) / length == pytest.approx(nnls(a, y), rel=1e-10, abs=1e-13)


def test_a_wrong_answer_is_caught(rng):
    # the check itself must be able to fail: clipping the unconstrained answer is no solution
    a, y = rng.random((20, 5)), rng.normal(size=(50, 20))
    clipped = np.maximum(np.linalg.lstsq(a, y.T, rcond=None)[0].T, 0.0)
    assert optimality(a, y, clipped) > 1e-3
