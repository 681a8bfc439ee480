"""Noise level and correlation: recovered from noise of known kinds, and whitening against dense covariances."""

import numpy as np
import pytest
from scipy.linalg import toeplitz
from scipy.signal import lfilter

from unmix.kernels.noise import (
    ENOUGH,
    Autoregression,
    autoregression,
    block_power,
    correlation_length,
    interpolation_stride,
    local_noise,
    precision_lags,
    runs,
    whiten,
)

ALL = np.ones(1200, dtype=bool)


def ar_noise(rng, shape, *coefficients):
    innovations = rng.normal(size=(shape[0], shape[1] + 300))
    return lfilter([1.0], [1.0, *(-np.array(coefficients))], innovations, axis=1)[:, 300:]


def zero_filled(rng, shape, factor):
    spectrum = np.fft.rfft(rng.normal(size=(shape[0], shape[1] + 200)), axis=1)
    spectrum[:, spectrum.shape[1] // factor :] = 0
    return np.fft.irfft(spectrum, n=shape[1] + 200, axis=1)[:, 100 : 100 + shape[1]]


def model_of(noise, used=ALL):
    return autoregression(block_power(noise, used), np.full(noise.shape[0], int(used.sum())))


def predictors(rho):
    """Twin of the recursion: the normal equations of every order, solved one by one."""
    m = rho.size - 1
    predictor, gain = np.zeros((1, m + 1, m)), np.ones((1, m + 1))
    for order in range(1, m + 1):
        predictor[0, order, :order] = np.linalg.solve(toeplitz(rho[:order]), rho[1 : order + 1])
        gain[0, order] = 1.0 - predictor[0, order, :order] @ rho[1 : order + 1]
    return Autoregression(np.array([m]), predictor, gain)


def test_runs_of_used_channels():
    assert runs(np.array([1, 1, 0, 0, 1, 0, 1], dtype=bool)) == [(0, 2), (4, 5), (6, 7)]
    assert runs(np.zeros(3, dtype=bool)) == []


def test_power_of_white_noise_is_its_variance(rng):
    power = block_power(3.0 * rng.normal(size=(400, 1200)), ALL)
    # the median of about 36 half-independent blocks; 400 spectra leave a relative standard error near 1%
    assert power.mean(axis=0) == pytest.approx(np.full(power.shape[1], 9.0), rel=0.12)


def test_power_ignores_a_missed_band(rng):
    noise = rng.normal(size=(100, 1200))
    band = 50.0 * np.exp(-((np.arange(1200) - 600) ** 2) / 200)
    assert block_power(noise + band, ALL).mean() == pytest.approx(block_power(noise, ALL).mean(), rel=0.15)


def test_power_does_not_see_unused_channels(rng):
    noise, used = rng.normal(size=(5, 1200)), ALL.copy()
    used[300:420] = False
    other = np.where(used, noise, 1e9)
    assert (block_power(noise, used) == block_power(other, used)).all()


def test_too_few_channels_give_no_spectrum(rng):
    assert block_power(rng.normal(size=(3, ENOUGH - 1)), np.ones(ENOUGH - 1, dtype=bool)) is None
    scattered = np.arange(1200) % 10 < 5  # 600 channels, but no unbroken block
    assert block_power(rng.normal(size=(3, 1200)), scattered) is None


@pytest.mark.parametrize("factor", [2, 4, 8])
def test_stride_of_interpolated_spectra(rng, factor):
    stride = interpolation_stride(block_power(zero_filled(rng, (60, 1200), factor), ALL))
    assert np.mean(stride == factor) > 0.9


def test_stride_of_everything_else_is_one(rng):
    for noise in (rng.normal(size=(60, 1200)), ar_noise(rng, (60, 1200), 0.8), ar_noise(rng, (60, 1200), 1.2, -0.5)):
        assert (interpolation_stride(block_power(noise, ALL)) == 1).all()


def test_white_noise_is_mostly_taken_as_white(rng):
    model = model_of(rng.normal(size=(300, 1200)))
    assert np.mean(model.order == 0) > 0.8
    assert np.median(correlation_length(model)) == 1.0


@pytest.mark.parametrize("phi", [0.5, 0.8, -0.5])
def test_first_order_correlation_is_recovered(rng, phi):
    model = model_of(ar_noise(rng, (200, 1200), phi))
    assert (model.order >= 1).mean() > 0.98
    assert np.median(model.predictor[:, 1, 0]) == pytest.approx(phi, abs=0.06)
    assert np.median(correlation_length(model)) == pytest.approx((1 + phi) / (1 - phi), rel=0.25)


def test_correlation_length_of_known_models():
    for phi in (0.0, 0.5, 0.9):
        assert correlation_length(predictors(np.array([1.0, phi]))) == pytest.approx((1 + phi) / (1 - phi), rel=1e-6)


@pytest.mark.parametrize("coefficients", [(0.8,), (1.2, -0.5), (0.3, 0.2, -0.4)])
def test_whitening_turns_the_model_s_own_covariance_into_the_identity(coefficients):
    impulse = lfilter([1.0], [1.0, *(-np.array(coefficients))], np.r_[1.0, np.zeros(2000)])
    rho = np.array([impulse[: impulse.size - d] @ impulse[d:] for d in range(40)])
    rho /= rho[0]
    model = predictors(rho[: len(coefficients) + 1])
    used = np.ones(40, dtype=bool)
    used[[11, 12, 30]] = False
    filtered = whiten(np.eye(40)[None], model, used)[0].T  # column j is the filtered j-th unit spectrum
    covariance = toeplitz(rho)
    # noise does not know about gaps, but the filter must not reach across them: judge run by run
    for start, stop in runs(used):
        part = filtered[start:stop, start:stop]
        level = model.gain[0, -1] * np.eye(stop - start)
        assert part @ covariance[start:stop, start:stop] @ part.T == pytest.approx(level, abs=1e-10)
        outside = np.delete(filtered[start:stop], np.arange(start, stop), axis=1)
        assert (outside == 0).all()
    assert (filtered[~used] == 0).all()


def test_whitened_noise_has_no_correlation_left(rng):
    noise = ar_noise(rng, (100, 1200), 0.8)
    model = model_of(noise)
    left = []
    for order in np.unique(model.order):
        rows = model.order == order
        part = Autoregression(model.order[rows], model.predictor[rows], model.gain[rows])
        white = whiten(noise[rows], part, ALL)
        left += list((white[:, 1:] * white[:, :-1]).sum(axis=1) / (white**2).sum(axis=1))
    # the estimate of one spectrum scatters by about 1 / sqrt(600), the mean of a hundred by a tenth of that
    assert abs(np.mean(left)) < 0.02


def test_precision_by_lag_is_that_of_the_filter():
    # an autoregression of order one: 1 + phi^2 on the diagonal, -phi beside it
    found = precision_lags(predictors(np.array([1.0, 0.6])))
    assert found[0, :2] == pytest.approx([1.36, -0.6])


def test_local_noise_sees_the_noise_and_not_the_bands(rng):
    bands = np.sin(np.linspace(0, 12, 1200)) + np.linspace(0, 3, 1200)
    assert local_noise(bands + 2e-3 * rng.normal(size=(20, 1200))) == pytest.approx(2e-3, rel=0.05)
    assert local_noise(np.zeros((3, 50))) > 0
    assert local_noise(np.ones((3, 2))) > 0
