"""Flat tops are found, and what merely looks broad is not."""

import numpy as np
import pytest

from unmix.diagnose.saturation import saturated

AXIS = np.arange(650.0, 4000.0, 4.0)


def lorentzian(at, width, height=1.0):
    return height / (1 + ((AXIS - at) / (width / 2)) ** 2)


SPECTRUM = lorentzian(1050, 60, 2.0) + lorentzian(1720, 30, 4.0) + lorentzian(2960, 90, 1.5) + 0.01


def with_stray_light(absorbance, share):
    return -np.log10((10.0**-absorbance + share) / (1 + share))


@pytest.mark.parametrize("share", [0.005, 0.003, 0.001])
def test_stray_light_is_found_with_its_plateau(share):
    measured = with_stray_light(12 * SPECTRUM, share)
    bent, plateau = saturated(measured[None])
    assert plateau[0] == pytest.approx(-np.log10(share / (1 + share)), abs=0.1)
    assert bent[0, np.argmin(np.abs(AXIS - 1720))]
    assert not bent[0, measured < 0.2].any()
    # what is left is straight to a few percent of the light
    left = ~bent[0]
    assert np.abs(10.0 ** -(12 * SPECTRUM[left]) - 10.0 ** -measured[left]).max() < 0.03


def test_a_clipped_recorder_is_found():
    bent, plateau = saturated(np.minimum(3 * SPECTRUM, 2.0)[None])
    assert plateau[0] == pytest.approx(2.0)
    assert bent[0].sum() > 5


def test_a_noisy_plateau_is_found(rng):
    light = 10.0 ** -(12 * SPECTRUM) + 2e-3
    noisy = -np.log10(np.maximum(light + 3e-4 * rng.normal(size=AXIS.size), 1e-9))
    bent, plateau = saturated(noisy[None])
    assert plateau[0] == pytest.approx(2.7, abs=0.2)
    assert bent[0].any()


@pytest.mark.parametrize("height", [0.3, 1.0, 3.0])
def test_unsaturated_bands_stay(rng, height):
    spectra = height * np.vstack([SPECTRUM, lorentzian(1700, 200), np.exp(-(((AXIS - 3300) / 250) ** 2))])
    bent, plateau = saturated(spectra + 5e-4 * rng.normal(size=spectra.shape))
    assert not bent.any()
    assert np.isnan(plateau).all()


def test_bands_that_merge_to_a_broad_top_stay(rng):
    merged = sum(lorentzian(at, 60) for at in (1600, 1650, 1700, 1750)) * 1.5
    bent, _ = saturated((merged + 5e-4 * rng.normal(size=AXIS.size))[None])
    assert not bent.any()


def test_low_flat_tops_are_the_shape_of_the_spectrum():
    assert not saturated(np.minimum(3 * SPECTRUM, 0.8)[None])[0].any()


def test_each_spectrum_by_itself_and_missing_channels_passed_over():
    batch = np.vstack([SPECTRUM * 0.3, np.minimum(3 * SPECTRUM, 2.0), np.full(AXIS.size, np.nan)])
    batch[1, :10] = np.nan
    bent, plateau = saturated(batch)
    assert bent.any(axis=1).tolist() == [False, True, False]
    assert not bent[1, :10].any()
    assert np.isnan(plateau[[0, 2]]).all()


def test_a_constant_spectrum_high_up_does_not_raise():
    bent, _ = saturated(np.full((1, 50), 3.0))
    assert bent.shape == (1, 50)
