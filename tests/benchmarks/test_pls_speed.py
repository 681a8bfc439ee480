"""Timings of partial least squares, side by side in one run on the same data."""

import time

import numpy as np
import pytest
from sklearn.cross_decomposition import PLSRegression

from unmix.kernels.pls import cross_validate


@pytest.mark.benchmark
def test_cross_validation_of_all_numbers_of_latent_variables_is_sixty_times_faster():
    rng = np.random.default_rng(0)
    n, p, most, parts = 500, 1000, 20, 10
    axis = np.linspace(0, 1, p)
    pure = np.array([np.exp(-(((axis - at) / 0.05) ** 2)) for at in np.linspace(0.05, 0.95, 25)])
    amounts = rng.random((n, 25))
    x = amounts @ pure + 1e-3 * rng.normal(size=(n, p))
    y = amounts[:, :1] + 0.3 * amounts[:, 1:2] + 0.01 * rng.normal(size=(n, 1))
    folds = [
        (np.setdiff1d(np.arange(n), np.arange(k, n, parts)), np.arange(k, n, parts)) for k in range(parts)
    ]

    cross_validate(x[:, :50], y, 2, folds)
    ours = min(_seconds(lambda: cross_validate(x, y, most, folds)) for _ in range(15))
    expected = np.empty((most, n, 1))

    def refitted():
        for a in range(1, most + 1):
            for train, test in folds:
                model = PLSRegression(a, scale=False).fit(x[train], y[train])
                expected[a - 1, test] = model.predict(x[test]).reshape(-1, 1)

    theirs = _seconds(refitted)
    np.testing.assert_allclose(cross_validate(x, y, most, folds), expected, rtol=0, atol=1e-9)
    print(
        f"\nall numbers in one pass {ours * 1e3:.1f} ms, refitted {theirs:.2f} s: {theirs / ours:.0f} times"
    )
    assert theirs / ours >= 60


def _seconds(work):
    start = time.perf_counter()
    work()
    return time.perf_counter() - start
