"""Scaling: sizes by numpy and by hand, and channels by scikit-learn's own scaler."""

import numpy as np
import pytest
from scipy.integrate import trapezoid
from sklearn.preprocessing import StandardScaler, normalize

from unmix.errors import UnmixWarning
from unmix.prepare import AutoScale, MeanCentre, Normalise, ParetoScale
from unmix.spectra import make_spectra

AXIS = np.cumsum(np.random.default_rng(5).uniform(0.5, 2.0, 160)) + 600


@pytest.fixture
def spectra(rows):
    return make_spectra(rows, AXIS, dim="wavenumber", quantity="absorbance")


def test_sizes_by_the_book(spectra):
    rows = spectra.values
    expected = {
        "area": trapezoid(rows, AXIS, axis=1),
        "maximum": rows.max(axis=1),
        "length": np.linalg.norm(rows, axis=1),
    }
    for by, size in expected.items():
        np.testing.assert_allclose(Normalise(by).fit_transform(spectra), rows / size[:, None], rtol=1e-12)
    np.testing.assert_allclose(Normalise("length").fit_transform(rows), normalize(rows), rtol=1e-12)


def test_band_and_internal_standard(spectra):
    low, high = 650.0, 700.0
    part = (low <= AXIS) & (high >= AXIS)
    rows, x = spectra.values, AXIS[part]
    band = trapezoid(rows[:, part], x, axis=1)
    line = np.stack([np.interp(x, x[[0, -1]], row[part][[0, -1]]) for row in rows])
    above = trapezoid(rows[:, part] - line, x, axis=1)
    got = Normalise("band", region=(low, high)).fit_transform(spectra)
    np.testing.assert_allclose(got, rows / band[:, None], rtol=1e-10)
    got = Normalise("standard", region=(low, high), to=2.5).fit_transform(spectra)
    np.testing.assert_allclose(got, 2.5 * rows / above[:, None], rtol=1e-10)


def test_the_internal_standard_ignores_a_sloping_baseline(spectra):
    step = Normalise("standard", region=(650.0, 700.0))
    slope = 0.003 * (AXIS - 640)
    shifted = step.fit_transform(spectra + slope) - slope / step_size(spectra)
    np.testing.assert_allclose(shifted, step.fit_transform(spectra), atol=1e-9)


def step_size(spectra):
    return spectra.values[:, :1] / Normalise("standard", region=(650.0, 700.0)).fit_transform(spectra).values[:, :1]


@pytest.mark.parametrize("by", ["area", "maximum", "length"])
def test_the_size_is_what_was_asked_for(by, spectra):
    once = Normalise(by, to=4.0).fit_transform(spectra)
    np.testing.assert_allclose(Normalise(by, to=4.0).fit_transform(7 * once), once, rtol=1e-12)


def test_missing_channels_are_bridged(spectra):
    rows = spectra.values
    holed = spectra.copy(deep=True)
    holed.values[:, 40] = np.nan
    kept = np.delete(np.arange(160), 40)
    size = trapezoid(rows[:, kept], AXIS[kept], axis=1)
    np.testing.assert_allclose(Normalise().fit_transform(holed).values[:, kept], rows[:, kept] / size[:, None])


def test_spectra_of_size_zero_are_named(labelled):
    labelled.values[2] = 0.0
    labelled.values[5] = np.tile([1.0, -1.0], 80)
    with pytest.warns(UnmixWarning, match="no answer for spectra of size zero: 's2', 's5'"):
        prepared = Normalise("area").fit_transform(labelled)
    assert np.isnan(prepared.values[[2, 5]]).all()


def test_a_band_of_which_nothing_is_left(labelled):
    labelled.values[3, 50:76] = np.nan
    with pytest.warns(UnmixWarning, match="of size zero: 's3'"):
        prepared = Normalise("band", region=(50.0, 75.0)).fit_transform(labelled)
    assert np.isnan(prepared.values[3]).all()


def test_centring_and_scaling_equal_scikit_learns(rows):
    plain = StandardScaler(with_std=False).fit_transform(rows)
    np.testing.assert_allclose(MeanCentre().fit_transform(rows), plain, atol=1e-12)
    n = rows.shape[0]
    scaled = StandardScaler().fit_transform(rows) * np.sqrt((n - 1) / n)
    np.testing.assert_allclose(AutoScale().fit_transform(rows), scaled, atol=1e-9)
    pareto = plain / np.sqrt(rows.std(axis=0, ddof=1))
    np.testing.assert_allclose(ParetoScale().fit_transform(rows), pareto, atol=1e-9)


def test_what_was_learned_serves_later_spectra(rows, make_rows):
    later = make_rows(3, seed=8)
    step = AutoScale().fit(rows)
    np.testing.assert_allclose(step.transform(later), (later - rows.mean(axis=0)) / rows.std(axis=0, ddof=1))


@pytest.mark.parametrize("kind", [AutoScale, ParetoScale])
def test_a_constant_channel_is_centred_only_and_missing_values_are_left_out(kind, rows):
    rows[:, 3] = 5.0
    rows[0, 7] = np.nan
    got = kind().fit_transform(rows)
    np.testing.assert_array_equal(got[:, 3], 0.0)
    assert np.isnan(got[0, 7])
    assert np.nanmean(got[:, 7]) == pytest.approx(0, abs=1e-12)
