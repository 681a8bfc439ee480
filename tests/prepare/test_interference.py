"""Interference: against projections by hand, and taken out of samples while components stay measurable."""

import numpy as np
import pytest
from sklearn.decomposition import PCA

from unmix.errors import InputError
from unmix.prepare import ExternalParameterOrthogonalisation, GeneralisedLeastSquaresWeighting, VapourRemoval

X = np.linspace(0, 1, 120)


def band(at, width):
    return np.exp(-(((X - at) / width) ** 2))


@pytest.fixture
def temperatures():
    """Five samples, each at six temperatures that move two directions of the spectrum."""
    rng = np.random.default_rng(0)
    samples = rng.uniform(0.2, 1, (5, 2)) @ np.stack([band(0.3, 0.1), band(0.7, 0.08)])
    effect = np.stack([band(0.35, 0.05) - band(0.25, 0.05), band(0.6, 0.2)])
    heat = rng.normal(size=(5, 6, 2)) * [0.3, 0.05]
    rows = samples[:, None] + heat @ effect + 1e-4 * rng.normal(size=(5, 6, 120))
    return rows.reshape(30, 120), np.repeat(list("vwxyz"), 6), samples, effect


def within(rows, names):
    return np.concatenate([rows[names == name] - rows[names == name].mean(axis=0) for name in np.unique(names)])


def test_orthogonalisation_is_the_projection_off_the_first_components(temperatures):
    rows, names, _, _ = temperatures
    step = ExternalParameterOrthogonalisation(components=2).fit(rows, names)
    directions = PCA(2).fit(within(rows, names)).components_
    expected = rows - rows @ directions.T @ directions
    np.testing.assert_allclose(step.transform(rows), expected, atol=1e-10)


def test_the_effect_vanishes_and_equal_samples_become_equal(temperatures):
    rows, names, _, effect = temperatures
    step = ExternalParameterOrthogonalisation(components=2).fit(rows, names)
    assert np.abs(step.transform(effect)).max() < 0.02
    assert np.abs(within(step.transform(rows), names)).max() < 1e-3
    assert np.abs(within(rows, names)).max() > 0.1


def test_amounts_survive_when_pure_spectra_pass_the_same_filter(temperatures):
    rows, names, samples, _ = temperatures
    pure = np.stack([band(0.3, 0.1), band(0.7, 0.08)])
    true = np.repeat(np.linalg.lstsq(pure.T, samples.T, rcond=None)[0].T, 6, axis=0)
    for step in (ExternalParameterOrthogonalisation(components=2), GeneralisedLeastSquaresWeighting(floor=1e-4)):
        step.fit(rows, names)
        found = np.linalg.lstsq(step.transform(pure).T, step.transform(rows).T, rcond=None)[0].T
        plain = np.linalg.lstsq(pure.T, rows.T, rcond=None)[0].T
        assert np.abs(found - true).max() < 0.03
        assert np.abs(plain - true).max() > 0.1


def test_weighting_is_the_inverse_root_of_the_covariance(temperatures):
    rows, names, _, _ = temperatures
    step = GeneralisedLeastSquaresWeighting(floor=0.01).fit(rows, names)
    differences = within(rows, names)
    variance, directions = np.linalg.eigh(differences.T @ differences / (len(rows) - 1))
    variance = np.maximum(variance, 0)
    weights = 1 / np.sqrt(variance / (0.01 * variance.max()) + 1)
    expected = rows @ (directions * weights) @ directions.T
    np.testing.assert_allclose(step.transform(rows), expected, atol=1e-9)


def test_without_names_all_spectra_are_one_sample(temperatures):
    rows, _, _, _ = temperatures
    one = ExternalParameterOrthogonalisation().fit(rows[:6])
    same = ExternalParameterOrthogonalisation().fit(rows[:6], ["a"] * 6)
    np.testing.assert_allclose(np.abs(one.basis_), np.abs(same.basis_), atol=1e-12)


def test_missing_channels_are_left_out_of_the_fit_to_the_directions(temperatures):
    rows, names, _, effect = temperatures
    step = ExternalParameterOrthogonalisation(components=2).fit(rows, names)
    spoiled = effect.copy()
    spoiled[:, 20:50] = np.nan
    got = step.transform(spoiled)
    assert np.isnan(got[:, 20:50]).all()
    assert np.nanmax(np.abs(got)) < 0.03


@pytest.mark.parametrize("kind", [ExternalParameterOrthogonalisation, GeneralisedLeastSquaresWeighting])
def test_what_cannot_teach_is_refused(kind, temperatures):
    rows, _, _, _ = temperatures
    with pytest.raises(InputError, match="nothing can be learned from 30 sample spectra of which none differ"):
        kind().fit(rows, np.arange(30))
    with pytest.raises(InputError, match=r"y has shape \(3,\) for 30 spectra"):
        kind().fit(rows, [1, 2, 3])
    rows[0, 0] = np.nan
    with pytest.raises(InputError, match="learns from spectra with a missing channel"):
        kind().fit(rows)


def lines(shift, seed):
    rng = np.random.default_rng(seed)
    return sum(rng.uniform(0.3, 1) * np.exp(-(((X - at - shift) / 0.006) ** 2)) for at in np.arange(0.1, 0.9, 0.045))


def test_vapour_amounts_are_least_squares_on_second_differences():
    water, dioxide = lines(0, 1), lines(0.02, 2)
    rng = np.random.default_rng(0)
    sample = np.stack([band(0.4, 0.1) + 0.2 * water - 0.05 * dioxide, band(0.6, 0.15) + 0.01 * water])
    sample += 1e-3 * rng.normal(size=sample.shape)
    step = VapourRemoval([water, dioxide], regions=[(10, 100)]).fit(sample)
    inside = slice(10, 101)
    rough = np.diff(np.stack([water, dioxide])[:, inside], 2, axis=1)
    amounts = np.linalg.lstsq(rough.T, np.diff(sample[:, inside], 2, axis=1).T, rcond=None)[0].T
    np.testing.assert_allclose(step.transform(sample), sample - amounts @ [water, dioxide], atol=1e-10)


def test_vapour_goes_and_the_sample_stays():
    water = lines(0, 1)
    clean = np.stack([band(0.4, 0.1), band(0.6, 0.15)])
    rng = np.random.default_rng(0)
    measured = clean + np.array([[0.3], [-0.2]]) * water + 1e-3 * rng.normal(size=clean.shape)
    rest = VapourRemoval(water).fit_transform(measured) - clean
    assert np.sqrt(np.mean(rest**2)) < 0.01
    assert np.sqrt(np.mean((measured - clean) ** 2)) > 0.05
