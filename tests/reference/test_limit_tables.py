"""Limits of the spectral residual and of Hotelling's T2.

Residual: Jackson and Mudholkar, Technometrics 21 (1979) 341, evaluated to ten digits for given eigenvalues; the last
row has the eigenvalues of Jackson's ballistic-missile data (User's Guide to Principal Components, 1991). T2: Tracy,
Young and Mason, J. Qual. Technol. 24 (1992) 88, with F quantiles to ten digits.
"""

import numpy as np
import pytest
from scipy import stats

from unmix.diagnose.outliers import distance_limit, residual_limit, traces


@pytest.mark.parametrize(
    ("eigenvalues", "level", "expected"),
    [
        ([3, 2, 1], 0.95, 16.557549967),
        ([3, 2, 1], 0.99, 25.535925544),
        ([1, 1, 1, 1, 1], 0.95, 11.043946212),
        ([2], 0.95, 7.493527686),
        ([48.03, 29.33, 16.41], 0.95, 259.597955),
    ],
)
def test_limit_of_the_residual(eigenvalues, level, expected):
    assert residual_limit(traces(np.array(eigenvalues)), level) == pytest.approx(expected, rel=2e-9)


@pytest.mark.parametrize(
    ("samples", "components", "level", "expected"),
    [
        (50, 2, 0.95, 6.644689677),
        (50, 3, 0.95, 8.940109258),
        (50, 3, 0.99, 13.48790231),
        (21, 6, 0.95, 23.38675426),
        (20, 3, 0.95, 11.25453494),
    ],
)
def test_limit_of_the_distance(samples, components, level, expected):
    assert distance_limit(components, samples, level) == pytest.approx(expected, rel=4e-10)


def test_where_the_power_is_not_positive_the_limit_is_that_of_box():
    # one large eigenvalue and many small ones make h0 negative
    eigenvalues = np.array([10.0, *[1.0] * 60])
    one, two, three = (np.sum(eigenvalues**k) for k in (1, 2, 3))
    assert 1 - 2 * one * three / (3 * two**2) < 0
    assert residual_limit(traces(eigenvalues), 0.95) == pytest.approx(two / one * stats.chi2.ppf(0.95, one**2 / two))


def test_nothing_left_has_the_limit_zero():
    assert residual_limit(traces(np.zeros(4)), 0.95) == 0.0


def test_as_many_samples_as_latent_variables_have_no_limit():
    assert distance_limit(5, 5, 0.95) == np.inf
    assert distance_limit(0, 5, 0.95) == 0.0
