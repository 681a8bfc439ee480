"""The rubber band: against scipy's convex hull, its compiled twin, and what a hull must be."""

import numpy as np
import pytest
from scipy.spatial import ConvexHull

from unmix.kernels import hull, hull_compiled
from unmix.kernels.hull import bands_below


def lower_hull_by_qhull(x, y):
    points = np.column_stack([np.r_[x, x[0], x[-1]], np.r_[y, np.abs(y).max() * 9 + 9, np.abs(y).max() * 9 + 9]])
    corners = np.sort([i for i in ConvexHull(points).vertices if i < x.size])
    return np.interp(x, x[corners], y[corners])


@pytest.mark.parametrize("number", range(10))
def test_equals_the_lower_part_of_scipys_hull(rng, number):
    rng = np.random.default_rng(rng.integers(1 << 30, size=2) + number)
    x = np.cumsum(rng.uniform(0.1, 2, 60))
    y = rng.normal(size=60) + 0.001 * (x - 30) ** 2
    np.testing.assert_allclose(bands_below(x, y[None])[0], lower_hull_by_qhull(x, y), atol=1e-10)


def test_compiled_and_plain_are_the_same_code_with_the_same_answer():
    rng = np.random.default_rng(0)
    x, y = np.cumsum(rng.uniform(0.1, 2, 300)), rng.normal(size=(90, 300))
    y[rng.uniform(size=y.shape) < 0.05] = np.nan
    y[5] = np.nan
    y[6, 1:] = np.nan
    np.testing.assert_allclose(hull_compiled.bands_below(x, y), bands_below(x, y), atol=1e-12)


def test_many_go_to_the_compiled_twin(monkeypatch):
    x, y = np.arange(50.0), np.random.default_rng(0).normal(size=(20, 50))
    plain = bands_below(x, y)
    monkeypatch.setattr(hull, "MANY", 10)
    np.testing.assert_allclose(bands_below(x, y), plain, atol=1e-12)


def test_missing_channels_are_passed_over_and_the_ends_stay_open():
    y = np.array([[np.nan, 1.0, np.nan, 0.0, 5.0, 1.0, np.nan]])
    np.testing.assert_allclose(bands_below(np.arange(7.0), y), [[np.nan, 1, 0.5, 0, 0.5, 1, np.nan]])


def test_a_convex_spectrum_is_its_own_hull():
    x = np.linspace(0, 1, 30)
    np.testing.assert_allclose(bands_below(x, (x**2)[None])[0], x**2, atol=1e-12)
