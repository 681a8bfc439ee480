"""Options are checked before anything is worked, each in one place, with what would be accepted."""

import numpy as np
import pytest

from unmix.errors import InputError
from unmix.solve.options import check_baseline, check_flag, check_level, check_noise, noise_of_channels
from unmix.spectra import make_spectra


@pytest.fixture
def spectra():
    return make_spectra(np.zeros((2, 4)), [1.0, 2.0, 3.0, 4.0], dim="wavelength", quantity="absorbance")


@pytest.mark.parametrize("baseline", [None, 0, 1, 20, np.int64(3)])
def test_baselines_that_are_taken(baseline):
    check_baseline(baseline)


@pytest.mark.parametrize("baseline", [-1, 21, 1.0, "1", True, np.nan, [1]])
def test_baselines_that_are_refused(baseline):
    with pytest.raises(InputError, match=r"^baseline is .*; give None, or the order of a polynomial from 0 to 20$"):
        check_baseline(baseline)


@pytest.mark.parametrize("level", [0.5, 0.95, 0.999, np.float64(0.9)])
def test_levels_that_are_taken(level):
    check_level(level)


@pytest.mark.parametrize("level", [0, 1, 1.0, 95, -0.5, np.nan, "0.95", True, None])
def test_levels_that_are_refused(level):
    with pytest.raises(InputError, match=r"^level is .*; give a coverage between 0 and 1, such as 0\.95$"):
        check_level(level)


@pytest.mark.parametrize("noise", [None, 1e-3, 1, [1e-3, 2e-3], np.float32(0.1)])
def test_noise_that_is_taken(noise):
    check_noise(noise)


@pytest.mark.parametrize("noise", [0, -1e-3, np.nan, np.inf, "a", [1e-3, 0.0], [1e-3, np.nan], {}])
def test_noise_that_is_refused(noise):
    with pytest.raises(InputError, match=r"^noise is .*; give a standard deviation above zero"):
        check_noise(noise)


@pytest.mark.parametrize("value", ["no", 1, 0, None, "False"])
def test_flags_are_true_or_false(value):
    check_flag("nonnegative", np.True_)
    with pytest.raises(InputError, match=r"^nonnegative is .*; give True or False$"):
        check_flag("nonnegative", value)


def test_noise_is_given_for_all_channels_or_for_each(spectra):
    assert noise_of_channels(None, spectra) is None
    assert noise_of_channels(0.1, spectra).values.tolist() == [0.1] * 4
    assert noise_of_channels([0.1, 0.2, 0.3, 0.4], spectra).sel(wavelength=3.0).item() == 0.3


def test_noise_for_another_number_of_channels_is_refused(spectra):
    with pytest.raises(InputError, match=r"noise has shape \(3,\) but the spectra have 4 channels; give one"):
        noise_of_channels([0.1, 0.2, 0.3], spectra)
