import numpy as np
import pytest
from sklearn.cross_decomposition import PLSRegression

from unmix.kernels.pls import cross_validate, fit, permuted_errors


def problem(rng, n, p, m=1, sources=8, noise=1e-3):
    axis = np.linspace(0, 1, p)
    pure = np.array([np.exp(-(((axis - at) / 0.08) ** 2)) for at in np.linspace(0.05, 0.95, sources)])
    amounts = rng.random((n, sources))
    x = 1.5 + amounts @ pure + noise * rng.normal(size=(n, p))
    y = 20 + amounts @ rng.normal(size=(sources, m)) + 0.01 * rng.normal(size=(n, m))
    return x, y


def every_fifth(n):
    return [(np.setdiff1d(np.arange(n), np.arange(k, n, 5)), np.arange(k, n, 5)) for k in range(5)]


def reference(x, y, a):
    # scikit-learn iterates for several properties; without a tight tolerance it stops at 1e-6
    return PLSRegression(a, scale=False, tol=1e-30, max_iter=5000).fit(x, y)


@pytest.mark.parametrize(("n", "p"), [(40, 150), (150, 40), (25, 25)])
@pytest.mark.parametrize("m", [1, 3])
def test_coefficients_equal_scikit_learn_refitted(rng, n, p, m):
    x, y = problem(rng, n, p, m)
    model = fit(x, y, 8)
    coefficients = model.coefficients()
    for a in range(1, 9):
        expected = reference(x, y, a).coef_.T
        np.testing.assert_allclose(coefficients[a - 1], expected, rtol=0, atol=1e-9 * np.abs(expected).max())


@pytest.mark.parametrize(("n", "p"), [(40, 150), (150, 40)])
@pytest.mark.parametrize("m", [1, 2])
def test_cross_validation_equals_scikit_learn_refitted(rng, n, p, m):
    x, y = problem(rng, n, p, m)
    found = cross_validate(x, y, 8, every_fifth(n))
    for a in range(1, 9):
        for train, test in every_fifth(n):
            expected = reference(x[train], y[train], a).predict(x[test]).reshape(-1, m)
            np.testing.assert_allclose(found[a - 1, test], expected, rtol=1e-9)


def test_the_reduced_table_gives_the_same_as_the_whole_one(rng):
    x, y = problem(rng, 30, 300)
    folds = [(np.delete(np.arange(30), i), np.array([i])) for i in range(30)]
    many = cross_validate(x, y, 6, folds)
    one_by_one = np.concatenate([cross_validate(x, y, 6, [fold])[:, fold[1]] for fold in folds], axis=1)
    np.testing.assert_allclose(many, one_by_one, rtol=1e-11)


def test_weights_of_two_are_rows_given_twice(rng):
    x, y = problem(rng, 20, 50, 2)
    twice = np.arange(20) < 7
    weighted = fit(x, y, 5, np.where(twice, 2.0, 1.0))
    doubled = fit(np.vstack([x, x[twice]]), np.vstack([y, y[twice]]), 5)
    np.testing.assert_allclose(weighted.coefficients(), doubled.coefficients(), rtol=1e-8, atol=1e-10)
    np.testing.assert_allclose(weighted.y_mean, doubled.y_mean)


def test_a_weight_of_zero_is_a_row_left_out(rng):
    x, y = problem(rng, 20, 50)
    kept = np.arange(20) > 3
    np.testing.assert_allclose(fit(x, y, 4, kept.astype(float)).coefficients(), fit(x[kept], y[kept], 4).coefficients(),
                               rtol=1e-9, atol=1e-11)  # fmt: skip


def test_scores_are_orthogonal_and_belong_to_the_rotations(rng):
    x, y = problem(rng, 40, 100)
    model = fit(x, y, 6)
    np.testing.assert_allclose(model.scores, (x - model.x_mean) @ model.rotations, atol=1e-10)
    gram = model.scores.T @ model.scores
    np.testing.assert_allclose(gram, np.diag(model.score_squares), atol=1e-9 * gram.max())
    np.testing.assert_allclose(np.linalg.norm(model.weights, axis=0), 1.0)


def test_more_latent_variables_than_the_rank_change_nothing(rng):
    x = rng.normal(size=(30, 3)) @ rng.normal(size=(3, 40))
    y = x[:, :1] - 2 * x[:, 5:6]
    model = fit(x, y, 10)
    assert model.rank == 3
    coefficients = model.coefficients()
    np.testing.assert_array_equal(coefficients[3:], np.broadcast_to(coefficients[2], coefficients[3:].shape))
    np.testing.assert_allclose((x - model.x_mean) @ coefficients[-1] + model.y_mean, y, atol=1e-10)


def test_a_constant_property_and_constant_spectra_give_the_mean(rng):
    x, y = problem(rng, 12, 20)
    assert fit(x, np.full((12, 1), 3.3), 4).rank == 0
    assert fit(np.ones((12, 20)), y, 4).rank == 0
    found = cross_validate(x, np.full((12, 1), 3.3), 4, every_fifth(12))
    np.testing.assert_allclose(found, 3.3)


def test_a_large_offset_and_scale_do_no_harm(rng):
    x, y = problem(rng, 30, 60)
    plain = cross_validate(x, y, 5, every_fifth(30))
    np.testing.assert_allclose(
        cross_validate(1e3 * x + 1e4, 1e-6 * y, 5, every_fifth(30)), 1e-6 * plain, rtol=1e-8
    )


def test_samples_never_tested_are_missing_and_those_tested_twice_averaged(rng):
    x, y = problem(rng, 20, 30)
    folds = [(np.arange(5, 20), np.arange(5)), (np.arange(8, 20), np.arange(8))]
    both = cross_validate(x, y, 3, folds)
    assert np.isnan(both[:, 8:]).all()
    one, other = (cross_validate(x, y, 3, [fold]) for fold in folds)
    np.testing.assert_allclose(both[:, :5], (one[:, :5] + other[:, :5]) / 2)


def test_permuted_errors_are_those_of_permuted_values(rng):
    x, y = problem(rng, 24, 60, 2)
    orders = np.array([np.arange(24), rng.permutation(24), rng.permutation(24)])
    found = permuted_errors(x, y, 4, every_fifth(24), orders)
    for k, order in enumerate(orders):
        wrong = cross_validate(x, y[order], 4, every_fifth(24)) - y[order]
        np.testing.assert_allclose(found[k], np.mean(wrong**2, axis=(1, 2)), rtol=1e-9)


def test_inputs_are_not_overwritten(rng):
    x, y = problem(rng, 12, 20)
    before = x.copy(), y.copy()
    fit(x, y, 3)
    cross_validate(x, y, 3, every_fifth(12))
    np.testing.assert_array_equal(x, before[0])
    np.testing.assert_array_equal(y, before[1])
