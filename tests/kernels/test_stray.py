"""Stray light against known mixtures and a general solver."""

import numpy as np
import pytest
from scipy.optimize import least_squares

from unmix.kernels.stray import fit_stray

AXIS = np.arange(80.0)
DESIGN = np.column_stack([np.ones(80), *np.exp(-(((AXIS - np.array([[25.0], [50]])) / 9) ** 2))])


def bent(x, share):
    light = 10.0 ** -(DESIGN @ x)
    return -np.log10((light + share) / (1 + share))


@pytest.mark.parametrize("share", [0.002, 0.02, 0.1])
def test_the_share_is_found(share, rng):
    x = np.array([0.02, 2.5, 1.2])
    absorbance = bent(x, share)
    found = fit_stray(absorbance, DESIGN, np.array([0.0, 1.0, 1.0]), 0.5 * share)
    assert found.share == pytest.approx(share, rel=1e-4)
    np.testing.assert_allclose(found.terms, x, rtol=1e-3, atol=1e-4)
    noisy = -np.log10(10.0**-absorbance + 1e-4 * rng.normal(size=80))
    found = fit_stray(noisy, DESIGN, np.array([0.0, 1.0, 1.0]), 0.5 * share)

    def residual(p):
        return 10.0**-noisy - (10.0 ** -(DESIGN @ p[:3]) + p[3]) / (1 + p[3])

    general = least_squares(residual, [0, 1, 1, share], xtol=1e-14, ftol=1e-14, gtol=1e-14).x
    assert found.share == pytest.approx(general[3], rel=1e-3)
    assert found.gain > 2


def test_without_stray_light_little_is_gained(rng):
    noisy = -np.log10(10.0 ** -bent(np.array([0.02, 0.8, 0.5]), 0.0) + 1e-4 * rng.normal(size=80))
    found = fit_stray(noisy, DESIGN, np.array([0.0, 0.5, 0.5]), 0.01)
    assert found.gain < 1.3
    assert found.share < 2e-3


def test_a_zero_column_is_no_obstacle():
    absorbance = bent(np.array([0.0, 1.5, 1.0]), 0.01)
    found = fit_stray(absorbance, np.column_stack([DESIGN, np.zeros(80)]), np.zeros(4), 0.01)
    assert found.share == pytest.approx(0.01, rel=1e-3)
