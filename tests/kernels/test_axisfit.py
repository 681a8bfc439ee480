"""Moved spectra against closed forms, and the fit against a general solver of all parameters."""

import numpy as np
import pytest
from scipy.optimize import least_squares

from unmix.kernels.axisfit import PARAMETERS, WIDTH, Warp, fit_axis, reach_of

AXIS = np.arange(0.0, 400.0, 2.0)
CENTRES, SIGMAS = np.array([90.0, 140, 180, 260, 310]), np.array([9.0, 12, 8, 15, 10])
SHARES = np.array([[1.0, 0.5, 0, 0.3, 0], [0, 0.4, 1.0, 0, 0.6]])


def bands(axis, shift=0.0, stretch=0.0, variance=0.0):
    """Two spectra of Gaussians, moved exactly: convolution with a Gaussian adds its variance."""
    at = (axis - shift - stretch * (axis - 0.5 * (AXIS[0] + AXIS[-1])))[:, None]
    wide = np.sqrt(SIGMAS**2 + variance)
    return (SIGMAS / wide * np.exp(-0.5 * ((at - CENTRES) / wide) ** 2)) @ SHARES.T


@pytest.mark.parametrize("theta", [(0, 0, 0), (1.3, 0, 0), (0, 0.004, 0), (0, 0, 20.0), (-2.1, -0.003, 9.0)])
def test_moved_spectra_and_derivatives_equal_closed_forms(theta):
    inner = slice(15, -15)
    # stretch and broadening commute to first order only, so both at once are compared at the order used
    shift, stretch, variance = theta
    found, derivative = Warp(bands(AXIS), AXIS).moved(np.tile(np.array(theta)[:, None], (1, 2)))
    at = AXIS - shift - stretch * (AXIS - 0.5 * (AXIS[0] + AXIS[-1]))
    expected = bands(at, variance=variance)
    np.testing.assert_allclose(found[inner], expected[inner], atol=2e-4)
    step = (1e-4, 1e-7, 1e-3)
    for p in range(3):
        more = [np.array(theta, dtype=float) for _ in range(2)]
        more[0][p] -= step[p]
        more[1][p] += step[p]
        low, high = (bands(AXIS - t[0] - t[1] * (AXIS - 199.0), variance=t[2])
                     for t in ((more[0]), (more[1])))  # fmt: skip
        if theta[2] == 0 and p == 2:
            continue
        size = np.abs(high - low).max() / (2 * step[p])
        np.testing.assert_allclose(derivative[p][inner], ((high - low) / (2 * step[p]))[inner], atol=4e-3 * size)


def test_the_fit_equals_a_general_solver_of_all_parameters(rng):
    truth, moved = np.array([1.2, 0.7]), (1.4, 0.002, 16.0)
    y = (
        bands(AXIS - moved[0] - moved[1] * (AXIS - 199.0), variance=moved[2]) @ truth
        + 0.02
        + 1e-3 * rng.normal(size=200)
    )
    warp = Warp(bands(AXIS), AXIS)
    groups = np.zeros((3, 3, 2), dtype=bool)
    groups[np.arange(3), np.arange(3)] = True
    bounds = np.array([[-6, 6], [-0.02, 0.02], [0, 60.0]])
    weight = reach_of(AXIS, 12.0).astype(float)
    free = np.ones((200, 1))
    found = fit_axis(y, weight, free, warp, groups, bounds)

    def residual(p):
        signal = warp.moved(np.tile(p[:3, None], (1, 2)))[0]
        return (y - signal @ p[3:5] - p[5]) * weight

    whole = least_squares(residual, [0, 0, 1.0, 1, 1, 0], x_scale=[1, 1e-3, 10, 1, 1, 0.1], xtol=1e-12, ftol=1e-14)
    np.testing.assert_allclose(found.theta[:, 0], whole.x[:3], rtol=2e-3, atol=1e-5)
    np.testing.assert_allclose(found.theta[:, 0], moved, rtol=0.2, atol=0.0005)


def test_groups_move_components_apart(rng):
    y = bands(AXIS + 1.0)[:, 0] + 2.0 * bands(AXIS - 1.5)[:, 1] + 1e-4 * rng.normal(size=200)
    groups = np.zeros((2, 3, 2), dtype=bool)
    groups[0, 0, 0] = groups[1, 0, 1] = True
    found = fit_axis(y, np.ones(200), np.empty((200, 0)), Warp(bands(AXIS), AXIS), groups, np.array([[-4.0, 4]] * 2))
    np.testing.assert_allclose(found.theta[0], [-1.0, 1.5], atol=0.01)


def test_uneven_axes_and_missing_channels(rng):
    axis = np.sort(rng.uniform(0, 398, 260))
    pure = bands(axis)
    pure[100:103] = np.nan
    found, _ = Warp(pure, axis).moved(np.array([[1.0, 1.0], [0, 0], [0, 0]]))
    keep = reach_of(axis, 12.0) & (np.abs(axis - axis[101]) > 15)
    np.testing.assert_allclose(found[keep], bands(axis - 1.0)[keep], atol=0.02)


def test_reach_leaves_ends_and_gaps_out():
    axis = np.concatenate([np.arange(0.0, 20), np.arange(50.0, 60)])
    keep = reach_of(axis, 3.0)
    assert axis[keep].tolist() == [*range(3, 17), 53, 54, 55, 56]


def test_names_and_width():
    assert PARAMETERS == ("shift", "stretch", "broadening")
    assert pytest.approx(2.3548, abs=1e-4) == WIDTH
