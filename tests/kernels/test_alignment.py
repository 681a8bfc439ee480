"""Shift and stretch: found again when they were put in, and against scipy's general least squares."""

import numpy as np
import pytest
from scipy.interpolate import CubicSpline
from scipy.optimize import least_squares

from unmix.kernels.alignment import fit_moves

AXIS = np.arange(400.0, 700.0)


def band_pattern(x):
    return (
        np.exp(-(((x - 480) / 15) ** 2))
        + 0.7 * np.exp(-(((x - 610) / 20) ** 2))
        + 0.2 * np.exp(-(((x - 560) / 8) ** 2))
    )


def moved(shift, stretch):
    lever = 2 * (AXIS - AXIS[0]) / (AXIS[-1] - AXIS[0]) - 1
    return band_pattern(AXIS - shift - stretch * lever)


@pytest.mark.parametrize(
    ("shift", "stretch"), [(0.0, 0.0), (0.37, 0.0), (-2.6, 0.0), (1.1, 0.8), (-3.0, -1.5), (7.5, 0.0)]
)
def test_moves_are_found_whatever_offset_and_height(shift, stretch):
    y = np.stack([moved(shift, stretch), 40 + 0.003 * moved(shift, stretch)])
    y[1, 200:230] = np.nan
    found, settled = fit_moves(y, AXIS, band_pattern(AXIS), 10.0, 2.0)
    assert settled.all()
    np.testing.assert_allclose(found, [[shift, stretch]] * 2, atol=2e-3)


def test_equals_general_least_squares_under_noise():
    rng = np.random.default_rng(4)
    y = moved(1.3, 0.0) * 2 + 0.5 + 0.05 * rng.normal(size=AXIS.size)
    spline = CubicSpline(AXIS, band_pattern(AXIS))

    def rest(p):
        return p[0] + p[1] * spline(np.clip(AXIS - p[2], AXIS[0], AXIS[-1])) - y

    expected = least_squares(rest, [0, 1, 0], xtol=1e-14, ftol=1e-14, gtol=1e-14).x[2]
    found, settled = fit_moves(y[None], AXIS, band_pattern(AXIS), 5.0, 0.0)
    assert settled.all()
    assert found[0, 0] == pytest.approx(expected, abs=1e-3)
    assert found[0, 1] == 0


def test_bounds_hold_and_nothing_to_go_by_is_said():
    y = np.stack([moved(6.0, 0.0), np.full(AXIS.size, 3.0), np.full(AXIS.size, np.nan)])
    found, _ = fit_moves(y, AXIS, band_pattern(AXIS), 4.0, 0.0)
    assert found[0, 0] == 4.0
    assert np.isnan(found[1:]).all()


def test_each_spectrum_is_treated_alone():
    rng = np.random.default_rng(0)
    y = np.stack([moved(s, 0.0) for s in rng.uniform(-3, 3, 600)]) + 0.01 * rng.normal(size=(600, AXIS.size))
    together, _ = fit_moves(y, AXIS, band_pattern(AXIS), 5.0, 1.0)
    alone, _ = fit_moves(y[500:501], AXIS, band_pattern(AXIS), 5.0, 1.0)
    np.testing.assert_allclose(alone[0], together[500], atol=1e-9)
