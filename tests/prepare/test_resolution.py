"""Another axis and another resolution: values, ends, and areas that broadening must keep."""

import numpy as np
import pytest

from unmix.prepare import Resample
from unmix.spectra import make_spectra

AXIS = np.arange(1000.0, 1400.0, 0.5)


def band(x, width, at=1200.0, height=1.0):
    return height * np.exp(-4 * np.log(2) * ((x - at) / width) ** 2)


def labelled(values, axis=AXIS):
    return make_spectra(np.atleast_2d(values), axis, dim="wavenumber", quantity="absorbance")


def test_new_channels_stand_at_whole_multiples_inside_the_range():
    spectra = labelled(band(AXIS + 0.3, 20), AXIS + 0.3).assign_coords(scan=("wavenumber", np.arange(800)))
    got = Resample(spacing=4.0).fit_transform(spectra)
    assert got.wavenumber.values.tolist() == list(np.arange(1004.0, 1400.0, 4.0))
    np.testing.assert_allclose(got.values[0], band(got.wavenumber.values, 20), atol=1e-9)
    assert "scan" not in got.coords


def test_gaussian_widths_add_in_squares_and_the_area_stays():
    sharp = labelled(band(AXIS, 4.0))
    got = Resample(spacing=1.0, resolution=8.0, from_resolution=3.0).fit_transform(sharp)
    kernel = np.sqrt(8.0**2 - 3.0**2)
    wide = np.hypot(4.0, kernel)
    np.testing.assert_allclose(got.values[0], band(got.wavenumber.values, wide, height=4.0 / wide), atol=1e-3)
    assert np.trapezoid(got.values[0]) == pytest.approx(np.trapezoid(sharp.values[0], AXIS), rel=1e-3)


def test_broadening_in_two_steps_is_broadening_in_one():
    sharp = labelled(band(AXIS, 5.0) + band(AXIS, 3.0, 1230.0, 0.6))
    once = Resample(resolution=8.0, from_resolution=2.0).fit_transform(sharp)
    half = Resample(resolution=5.0, from_resolution=2.0).fit_transform(sharp)
    twice = Resample(resolution=8.0, from_resolution=5.0).fit_transform(half)
    shared = np.intersect1d(once.wavenumber, twice.wavenumber)
    np.testing.assert_allclose(once.sel(wavenumber=shared), twice.sel(wavenumber=shared), atol=1e-3)


def test_a_triangle_has_the_second_moment_of_the_slit():
    narrow = labelled(band(AXIS, 2.0))
    got = Resample(resolution=10.0, line_shape="triangle").fit_transform(narrow)
    x, y = got.wavenumber.values, got.values[0] / got.values[0].sum()
    moment = (y * (x - 1200) ** 2).sum()
    assert moment == pytest.approx(2.0**2 / (8 * np.log(2)) + 10.0**2 / 6, rel=5e-3)


def test_channels_that_the_line_shape_cannot_reach_are_left_out():
    got = Resample(resolution=10.0).fit_transform(labelled(np.ones(800)))
    assert got.wavenumber.values[[0, -1]].tolist() == [1015.0, 1384.5]
    np.testing.assert_allclose(got.values, 1.0, rtol=1e-12)


def test_unresolved_bands_lose_absorbance_when_light_is_broadened():
    weak, strong = (labelled(band(AXIS, 2.0, height=h)) for h in (1e-4, 3.0))
    by_light, by_absorbance = (
        Resample(resolution=12.0, through=through) for through in ("transmittance", "absorbance")
    )
    np.testing.assert_allclose(by_light.fit_transform(weak), by_absorbance.fit_transform(weak), atol=1e-7)
    assert by_light.fit_transform(strong).max() < 0.5 * by_absorbance.fit_transform(strong).max()
    x = by_light.fit_transform(strong).wavenumber.values
    fine = np.arange(1150, 1250, 0.05)
    line = np.exp(-4 * np.log(2) * ((x[:, None] - fine) / 12) ** 2)
    expected = -np.log10((line * 10 ** -band(fine, 2.0, height=3.0)).sum(axis=1) / line.sum(axis=1))
    near = np.abs(x - 1200) < 25
    np.testing.assert_allclose(by_light.fit_transform(strong).values[0, near], expected[near], atol=2e-3)


def test_a_hole_in_the_axis_is_not_crossed():
    axis = AXIS[(AXIS < 1150) | (AXIS > 1250)]
    got = Resample(spacing=1.0).fit_transform(labelled(np.ones(axis.size), axis))
    assert np.isnan(got.sel(wavenumber=slice(1150, 1250))).all()
    broad = Resample(resolution=4.0).fit_transform(labelled(np.ones(axis.size), axis))
    assert not ((broad.wavenumber > 1144) & (broad.wavenumber < 1256)).any()
