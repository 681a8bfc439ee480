"""Polynomials under spectra: against numpy's fits, and the published iteration written out plainly."""

import numpy as np
import pytest

from unmix.kernels.polynomial import fitted, fitted_below


@pytest.fixture
def axis():
    return np.cumsum(np.random.default_rng(2).uniform(0.3, 2.0, 80)) + 900


@pytest.mark.parametrize("order", [0, 1, 3])
def test_equals_numpys_fit_to_the_used_channels(axis, order):
    rng = np.random.default_rng(0)
    rows = rng.normal(size=(6, 80))
    rows[2, 10:20] = np.nan
    used = rng.uniform(size=80) < 0.6
    got = fitted(rows, axis, order, used)
    for row, curve in zip(rows, got, strict=True):
        known = used & np.isfinite(row)
        expected = np.polynomial.Polynomial.fit(axis[known], row[known], order)(axis)
        np.testing.assert_allclose(curve, expected, atol=1e-9)


def test_the_iteration_keeps_the_lower_of_spectrum_and_fit(axis):
    rng = np.random.default_rng(1)
    rows = rng.normal(size=(5, 80)) + 5 * (rng.uniform(size=(5, 80)) > 0.8)
    got, count, settled = fitted_below(rows, axis, 2, np.ones(80, dtype=bool), 40, 1e-12)
    for row, curve in zip(rows, got, strict=True):
        target = row.copy()
        for _ in range(40):
            fit = np.polynomial.Polynomial.fit(axis, target, 2)(axis)
            target = np.minimum(target, fit)
        np.testing.assert_allclose(curve, fit, atol=1e-9)
    assert count.tolist() == [40] * 5
    assert not settled.any()


def test_spectra_settle_each_in_their_own_time(axis):
    x = (axis - axis[0]) / 50
    rows = np.stack([1 + x, 1 + x + np.exp(-(((x - 0.5) / 0.05) ** 2)), np.full(80, np.nan)])
    together, count, settled = fitted_below(rows, axis, 1, np.ones(80, dtype=bool), 500, 1e-6)
    assert count[0] == 2
    assert count[1] > 10
    assert settled.tolist() == [True, True, False]
    assert np.isnan(together[2]).all()
    alone, _, _ = fitted_below(rows[1:2], axis, 1, np.ones(80, dtype=bool), 500, 1e-6)
    np.testing.assert_allclose(alone[0], together[1], rtol=1e-13)
