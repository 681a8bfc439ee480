"""Regions, saturation and spikes: what is marked, what is spared, what is never changed."""

import numpy as np
import pytest
import xarray as xr

from unmix.errors import UnmixWarning
from unmix.prepare import MaskSaturated, Regions, SpikeRemoval
from unmix.prepare.axis import select_regions
from unmix.spectra import make_spectra

X = np.arange(300.0)


def band(at, width, height=1.0):
    return height * np.exp(-4 * np.log(2) * ((X - at) / width) ** 2)


def test_regions_equal_the_plain_selection(labelled):
    regions = [(20, 50), (90, 120.5)]
    kept = Regions(keep=regions).fit_transform(labelled)
    xr.testing.assert_identical(kept.drop_attrs(deep=False), select_regions(labelled, regions).drop_attrs(deep=False))
    dropped = Regions(drop=regions).fit_transform(labelled)
    assert sorted([*kept.wavelength.values, *dropped.wavelength.values]) == labelled.wavelength.values.tolist()


def test_coordinates_along_the_axis_go_with_the_channels(labelled):
    spectra = labelled.assign_coords(detector=("wavelength", np.arange(160)))
    assert Regions(keep=[(3, 5)]).fit_transform(spectra).detector.values.tolist() == [3, 4, 5]


def test_absorbance_above_the_limit_is_marked_with_its_margin():
    y = band(100, 40, 4.0)[None]
    got = MaskSaturated(limit=2.0, margin=3).fit_transform(y)[0]
    high = np.flatnonzero(y[0] > 2.0)
    assert np.flatnonzero(np.isnan(got)).tolist() == list(range(high[0] - 3, high[-1] + 4))
    kept = np.isfinite(got)
    np.testing.assert_array_equal(got[kept], y[0, kept])


def test_a_flat_top_is_a_detector_at_its_end_and_a_flat_floor_is_not():
    y = np.minimum(band(100, 40), 0.8)[None]
    got = MaskSaturated().fit_transform(y)[0]
    np.testing.assert_array_equal(np.isnan(got), y[0] == 0.8)
    assert not np.isnan(MaskSaturated().fit_transform(np.maximum(band(100, 40), 0.2)[None])).any()


def test_pure_spectra_as_absorptivity_are_no_detector_readings():
    pure = make_spectra(1e4 * band(100, 40)[None], X, dim="wavelength", quantity="absorptivity")
    np.testing.assert_array_equal(MaskSaturated().fit_transform(pure).values, pure.values)


def test_a_spectrum_that_is_saturated_everywhere_is_named(labelled):
    labelled.values[1] = 9.0
    with pytest.warns(UnmixWarning, match="spectra that are saturated everywhere: 's1'"):
        MaskSaturated().fit_transform(labelled)


@pytest.mark.parametrize("height", [0.3, -0.3, 5.0])
@pytest.mark.parametrize("width", [1, 2, 3])
def test_spikes_are_found_where_they_are(width, height):
    rng = np.random.default_rng(0)
    y = np.tile(band(100, 40) + band(200, 12) + 0.004 * rng.normal(size=300), (40, 1))
    at = rng.integers(4, 290, 40)
    for row, start in zip(y, at, strict=True):
        row[start : start + width] += height
    got = SpikeRemoval(width=3).fit_transform(y)
    found = [
        np.flatnonzero(np.isnan(row)).tolist() == list(range(s, s + width)) for row, s in zip(got, at, strict=True)
    ]
    assert np.mean(found) >= 0.95
    kept = np.isfinite(got)
    np.testing.assert_array_equal(got[kept], y[kept])


def test_bands_and_noise_are_spared():
    rng = np.random.default_rng(1)
    smooth = np.stack([band(100, 30), band(150, 8) + band(160, 9), band(60, 6)])
    assert not np.isnan(SpikeRemoval().fit_transform(smooth)).any()
    noisy = np.repeat(smooth, 300, axis=0) + 0.01 * rng.normal(size=(900, 300))
    assert np.isnan(SpikeRemoval().fit_transform(noisy)).any(axis=1).mean() < 0.01


def test_a_spike_may_be_bridged():
    y = np.linspace(0, 1, 300)[None] + 0.001 * np.random.default_rng(0).normal(size=(1, 300))
    spiked = y.copy()
    spiked[0, 70:72] += 2
    got = SpikeRemoval(fill="interpolate").fit_transform(spiked)
    np.testing.assert_allclose(got[0, 70:72], np.interp([70, 71], [69, 72], y[0, [69, 72]]))
    rest = np.delete(np.arange(300), [70, 71])
    np.testing.assert_array_equal(got[0, rest], y[0, rest])


def test_a_missing_channel_is_no_spike_and_a_short_spectrum_has_none():
    y = band(100, 30)[None].copy()
    y[0, 50] = np.nan
    assert np.flatnonzero(np.isnan(SpikeRemoval().fit_transform(y)[0])).tolist() == [50]
    np.testing.assert_array_equal(SpikeRemoval().fit_transform([[0.0, 9.0, 0.0]]), [[0.0, 9.0, 0.0]])
