"""Interpolation against scipy and polynomials, and what a missing channel may harm."""

import numpy as np
import pytest
from scipy.interpolate import BarycentricInterpolator

from unmix.kernels.resample import STENCIL, broadening_weights, holes, interpolate, locate, stencil_weights
from unmix.kernels.stencil import weighted_sums


@pytest.fixture
def uneven():
    rng = np.random.default_rng(4)
    return np.cumsum(rng.uniform(0.5, 1.5, 80))


def test_exact_for_polynomials_to_degree_five_on_an_uneven_axis(uneven):
    targets = np.linspace(uneven[0], uneven[-1], 333)
    for degree in range(STENCIL):
        coefficients = np.random.default_rng(degree).normal(size=degree + 1)
        centred = lambda x, c=coefficients: np.polynomial.polynomial.polyval((x - 40.0) / 40.0, c)  # noqa: E731
        np.testing.assert_allclose(interpolate(uneven, centred(uneven), targets), centred(targets), atol=1e-12)
    quartic_six = (targets / 40.0) ** 6
    assert np.abs(interpolate(uneven, (uneven / 40.0) ** 6, targets) - quartic_six).max() > 1e-10


def test_every_value_equals_scipys_barycentric_interpolation_through_its_six_channels(uneven):
    rng = np.random.default_rng(5)
    values = rng.normal(size=uneven.size)
    targets = np.sort(rng.uniform(uneven[0], uneven[-1], 50))
    first, _ = stencil_weights(uneven, targets)
    expected = [
        float(BarycentricInterpolator(uneven[i : i + STENCIL], values[i : i + STENCIL])(t))
        for i, t in zip(first, targets, strict=True)
    ]
    np.testing.assert_allclose(interpolate(uneven, values, targets), expected, rtol=1e-9, atol=1e-12)


@pytest.mark.parametrize("channels_a_width", [5, 6, 10, 20])
def test_error_on_a_gaussian_band_stays_below_the_stated_bound(channels_a_width):
    axis = np.arange(101.0)
    targets = np.linspace(0, 100, 3001)
    band = lambda x: np.exp(-4 * np.log(2) * ((x - 50.3) / channels_a_width) ** 2)  # noqa: E731
    error = np.abs(interpolate(axis, band(axis), targets) - band(targets)).max()
    assert 0.3 * 12.5 / channels_a_width**6 < error < 12.5 / channels_a_width**6


def test_nothing_outside_the_range_and_channels_themselves_are_copied(uneven):
    values = np.random.default_rng(1).normal(size=(3, uneven.size))
    np.testing.assert_array_equal(interpolate(uneven, values, uneven), values)
    outside = interpolate(uneven, values, np.array([uneven[0] - 1, uneven[-1] + 1]))
    assert np.isnan(outside).all()


def test_a_missing_channel_harms_only_the_targets_beside_it():
    axis = np.arange(30.0)
    values = np.sin(axis / 8)
    values[12] = np.nan
    targets = np.arange(0, 29.01, 0.5)
    got = interpolate(axis, np.stack([values, np.sin(axis / 8)]), targets)
    np.testing.assert_array_equal(targets[np.isnan(got[0])], [11.5, 12.0, 12.5])
    rest = ~np.isnan(got[0])
    np.testing.assert_allclose(got[0, rest], np.sin(targets[rest] / 8), atol=1e-5)
    np.testing.assert_allclose(got[1], np.sin(targets / 8), atol=1e-6)


def test_rows_with_different_missing_channels_are_each_treated_alone():
    rng = np.random.default_rng(7)
    axis, targets = np.arange(40.0), rng.uniform(0, 39, 60)
    values = rng.normal(size=(5, 4, 40))
    values[rng.uniform(size=values.shape) < 0.1] = np.nan
    together = interpolate(axis, values, targets)
    assert together.shape == (5, 4, 60)
    for index in np.ndindex(5, 4):
        np.testing.assert_array_equal(together[index], interpolate(axis, values[index], targets))


def test_a_hole_between_two_recorded_regions_is_not_filled():
    axis = np.concatenate([np.arange(10.0), np.arange(50.0, 60.0)])
    assert np.flatnonzero(holes(axis)).tolist() == [9]
    got = interpolate(axis, axis.copy(), np.array([8.5, 9.0, 30.0, 50.0, 50.5]))
    np.testing.assert_allclose(got, [8.5, 9.0, np.nan, 50.0, 50.5])


def test_a_change_of_spacing_and_a_single_lost_channel_are_not_holes():
    changing = np.concatenate([np.arange(10.0), np.arange(20.0, 100.0, 10.0)])
    lost = np.delete(np.arange(20.0), 7)
    assert not holes(changing).any()
    assert not holes(lost).any()
    assert not holes(1e7 / np.arange(2500.0, 199.0, -1.0)).any()


def test_short_axes():
    assert interpolate(np.array([5.0]), np.array([2.0]), np.array([5.0, 6.0])).tolist()[0] == 2.0
    np.testing.assert_allclose(interpolate(np.array([1.0, 3.0]), np.array([1.0, 5.0]), np.array([2.0])), [3.0])


def test_positions_that_differ_by_rounding_are_the_same_channel():
    axis = np.arange(650.0, 4000.0, 1.9284)
    left, right = locate(axis, axis + 1e-9)
    np.testing.assert_array_equal(left, right)
    np.testing.assert_array_equal(left, np.arange(axis.size))


def test_float32_stays_and_agrees():
    axis, targets = np.arange(50.0), np.linspace(0, 49, 77)
    values = np.random.default_rng(3).normal(size=(4, 50))
    single = interpolate(axis, values.astype(np.float32), targets)
    assert single.dtype == np.float32
    np.testing.assert_allclose(single, interpolate(axis, values, targets), atol=1e-4)


@pytest.mark.parametrize("shape", ["gaussian", "triangle"])
def test_broadening_weights_equal_a_fine_convolution(shape):
    axis = np.cumsum(np.random.default_rng(0).uniform(0.8, 1.2, 300))
    band = lambda x: np.exp(-4 * np.log(2) * ((x - 150) / 30) ** 2)  # noqa: E731
    targets = np.linspace(axis[0], axis[-1], 50)
    reached, first, weights = broadening_weights(axis, targets, 20.0, shape)
    got = weighted_sums(band(axis)[None], first, weights)[0]
    if shape == "gaussian":
        # Gaussian widths add in squares
        wide = np.hypot(30, 20)
        expected = 30 / wide * np.exp(-4 * np.log(2) * ((targets[reached] - 150) / wide) ** 2)
    else:
        u = np.linspace(-20, 20, 8001)
        line = np.maximum(1 - np.abs(u) / 20, 0) / 20
        expected = np.trapezoid(line * band(targets[reached][:, None] - u), u, axis=1)
    np.testing.assert_allclose(got, expected, atol=2e-3)
    np.testing.assert_allclose(weights.sum(axis=1), 1, rtol=1e-12)


def test_broadening_stops_before_ends_and_holes():
    axis = np.concatenate([np.arange(0.0, 50), np.arange(100.0, 150)])
    reached, first, weights = broadening_weights(axis, axis, 4.0, "gaussian")
    assert axis[reached].tolist() == [*range(6, 44), *range(106, 144)]
    got = weighted_sums(axis[None], first, weights)[0]
    np.testing.assert_allclose(got, axis[reached], atol=1e-9)
