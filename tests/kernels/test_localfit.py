"""Local polynomials: against numpy's polynomial fits window by window, scipy's filter, and exactness on polynomials."""

from math import factorial

import numpy as np
import pytest
from scipy.signal import savgol_filter

from unmix.kernels.localfit import gap_weights, polynomial_weights
from unmix.kernels.stencil import weighted_sums


@pytest.fixture
def uneven():
    return np.cumsum(np.random.default_rng(2).uniform(0.3, 2.0, 60)) + 500


def sums(weights, rows):
    return weighted_sums(np.atleast_2d(rows), weights[0], weights[1])[0]


@pytest.mark.parametrize(
    ("window", "order", "derivative"), [(5, 2, 0), (7, 3, 1), (11, 4, 2), (9, 2, 2), (3, 0, 0), (1, 0, 0)]
)
def test_each_channel_equals_a_polynomial_fitted_to_its_window(uneven, window, order, derivative):
    y = np.random.default_rng(0).normal(size=uneven.size)
    got = sums(polynomial_weights(uneven, window, order, derivative), y)
    for i in range(uneven.size):
        first = min(max(i - window // 2, 0), uneven.size - window)
        part = slice(first, first + window)
        fit = np.polynomial.Polynomial.fit(uneven[part], y[part], order)
        assert got[i] == pytest.approx(fit.deriv(derivative)(uneven[i]) if derivative else fit(uneven[i]), abs=1e-9)


@pytest.mark.parametrize("derivative", [0, 1, 2])
def test_even_spacing_equals_scipys_filter_with_interpolated_ends(derivative):
    axis = 650 + 1.93 * np.arange(80)
    y = np.random.default_rng(0).normal(size=(3, 80))
    weights = polynomial_weights(axis, 9, 3, derivative)
    expected = savgol_filter(y, 9, 3, deriv=derivative, delta=1.93, mode="interp")
    np.testing.assert_allclose(weighted_sums(y, *weights), expected, atol=1e-11)


@pytest.mark.parametrize("order", [2, 3, 4])
def test_derivatives_of_polynomials_are_exact_inside_and_at_the_ends(uneven, order):
    polynomial = np.polynomial.Polynomial(np.arange(1.0, order + 2), domain=[uneven[0], uneven[-1]])
    for derivative in range(order + 1):
        got = sums(polynomial_weights(uneven, 9, order, derivative), polynomial(uneven))
        expected = (polynomial.deriv(derivative) if derivative else polynomial)(uneven)
        np.testing.assert_allclose(got, expected, rtol=1e-7, atol=1e-9)


@pytest.mark.parametrize(("segment", "gap", "derivative"), [(1, 1, 1), (3, 5, 1), (5, 3, 2), (1, 7, 2)])
def test_gap_derivatives_are_differences_of_segment_means(segment, gap, derivative):
    h = 2.5
    axis = 1100 + h * np.arange(50)
    y = np.random.default_rng(3).normal(size=50)
    first, weights, centre = gap_weights(axis, segment, gap, derivative)
    got = sums((first, weights), y)
    distance = (segment + gap) * h
    half = segment // 2
    mean = lambda at: y[at - half : at + half + 1].mean()  # noqa: E731
    reach = (segment + gap) // 2 if derivative == 1 else segment + gap
    for value, at in zip(got, centre, strict=True):
        left, right = mean(at - reach), mean(at + reach)
        expected = (right - left) / distance if derivative == 1 else (right - 2 * mean(at) + left) / distance**2
        assert value == pytest.approx(expected, abs=1e-12)
    assert centre[0] == reach + half
    assert centre[-1] == 49 - reach - half


@pytest.mark.parametrize("derivative", [1, 2])
def test_gap_derivatives_are_exact_on_uneven_axes(uneven, derivative):
    first, weights, _ = gap_weights(uneven, 3, 3, derivative)
    y = ((uneven - 530) / 10) ** derivative
    np.testing.assert_allclose(sums((first, weights), y), factorial(derivative) / 10**derivative, rtol=1e-9)


def test_sums_skip_what_has_no_weight_and_spread_what_is_missing():
    rows = np.array([[1.0, np.nan, 3.0, 4.0]])
    first, weights = np.array([0, 1, 2]), np.array([[1.0, 0.0], [0.5, 0.5], [0.5, 0.5]])
    np.testing.assert_array_equal(weighted_sums(rows, first, weights), [[1.0, np.nan, 3.5]])


def test_sums_do_not_depend_on_company():
    rng = np.random.default_rng(1)
    rows, first, weights = rng.normal(size=(1300, 40)), np.arange(30), rng.normal(size=(30, 11))
    together = weighted_sums(rows, first, weights)
    for i in (0, 511, 512, 1299):
        np.testing.assert_array_equal(together[i], weighted_sums(rows[i : i + 1], first, weights)[0])
