"""Baselines taken away: known baselines recovered, defaults that follow the axis, and what each method is blind to."""

import importlib.util
from pathlib import Path

import numpy as np
import pytest

from unmix import prepare
from unmix.errors import InputError, UnmixWarning
from unmix.prepare import (
    AdaptiveReweighted,
    AsymmetricallyReweighted,
    AsymmetricLeastSquares,
    PolynomialBaseline,
    RubberBand,
    penalty_for,
)
from unmix.spectra import make_spectra

_spec = importlib.util.spec_from_file_location("twin", Path(__file__).parents[1] / "twins" / "whittaker.py")
twin = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(twin)

X = np.linspace(0, 1, 400)


def bands(x=X):
    return sum(h * np.exp(-(((x - at) / 0.015) ** 2)) for at, h in ((0.2, 1.0), (0.33, 0.5), (0.6, 0.8), (0.85, 0.3)))


def test_asymmetric_least_squares_equals_the_plain_twin_to_the_spectrum():
    rng = np.random.default_rng(0)
    y = bands(X[::5]) + np.sin(2 * X[::5]) + 0.01 * rng.normal(size=80)
    expected = twin.asymmetric(y, twin.even_penalty(80, 2), 2e3, 0.02)
    step = AsymmetricLeastSquares(penalty=2e3, asymmetry=0.02)
    np.testing.assert_allclose(step.fit([y]).baseline([y])[0], expected, atol=1e-8)
    np.testing.assert_allclose(step.transform([y])[0], y - expected, atol=1e-8)


@pytest.mark.parametrize(
    ("step", "within"),
    [
        (AsymmetricLeastSquares(), 0.02),
        (AdaptiveReweighted(), 0.02),
        (AsymmetricallyReweighted(), 0.005),
        (PolynomialBaseline(order=3), 0.03),
        (PolynomialBaseline(order=3, regions=[(0, 50), (160, 200), (280, 310), (370, 399)]), 1e-3),
    ],
)
def test_a_smooth_baseline_is_recovered(step, within):
    rng = np.random.default_rng(1)
    true = 0.5 + 0.4 * X - 0.3 * X**3
    y = bands() + true + 0.002 * rng.normal(size=(5, 400))
    error = step.fit(y).baseline(y) - true
    assert np.sqrt(np.mean(error**2)) < within


def test_the_rubber_band_recovers_a_convex_baseline_and_not_a_concave_one():
    convex, concave = (X - 0.5) ** 2, -((X - 0.5) ** 2)
    for true, good in ((convex, True), (concave, False)):
        error = np.abs(RubberBand().fit([bands() + true]).baseline([bands() + true])[0] - true)
        assert (float(error.max()) < 0.01) is good


def test_a_constant_offset_leaves_nothing_and_changes_nothing():
    for step in (AsymmetricLeastSquares(), AsymmetricallyReweighted(), RubberBand(), PolynomialBaseline()):
        np.testing.assert_allclose(step.fit_transform(np.full((2, 100), 3.7)), 0, atol=1e-9)
    y = bands()[None] + 0.01 * np.random.default_rng(0).normal(size=(1, 400))
    for step in (AsymmetricLeastSquares(), AsymmetricallyReweighted(), RubberBand(), PolynomialBaseline(2)):
        np.testing.assert_allclose(step.fit_transform(y + 5.0), step.fit_transform(y), atol=1e-6)
        np.testing.assert_allclose(step.fit_transform(7.0 * y), 7.0 * step.fit_transform(y), atol=1e-6)


def test_a_reversed_axis_gives_the_reversed_baseline():
    y = bands()[None] + np.sin(3 * X) + 0.01 * np.random.default_rng(0).normal(size=(1, 400))
    for step in (AsymmetricLeastSquares(), AsymmetricallyReweighted(), AdaptiveReweighted(), RubberBand()):
        np.testing.assert_allclose(step.fit_transform(y[:, ::-1])[:, ::-1], step.fit_transform(y), atol=1e-8)


def test_the_default_penalty_follows_the_axis_so_that_the_baseline_does_not():
    cutoffs, curves = [], []
    for channels in (200, 400, 1600):
        axis = np.linspace(800, 1800, channels)
        x = np.linspace(0, 1, channels)
        spectra = make_spectra([bands(x) + np.sin(2 * x)], axis, dim="wavenumber", quantity="absorbance")
        step = AsymmetricLeastSquares().fit(spectra)
        cutoffs.append(step.cutoff_)
        curves.append(np.interp(X, x, step.baseline(spectra).values[0]))
    assert cutoffs == pytest.approx([1000 / 6] * 3, rel=0.01)
    np.testing.assert_allclose(curves[0], curves[2], atol=0.02)


def test_an_uneven_axis_gives_the_baseline_of_the_even_one():
    # as many channels a unit everywhere on average, so that the weight of the data is the same
    rng = np.random.default_rng(2)
    axis = np.sort(np.linspace(0, 1, 800) + 3e-4 * rng.normal(size=800))
    even = np.linspace(axis[0], axis[-1], 800)
    curves = [
        AsymmetricLeastSquares(penalty=1e7)
        .fit(spectra)
        .baseline(spectra)
        .values[0]
        for spectra in (
            make_spectra([bands(x) + np.sin(2 * x)], 1000 * x, dim="wavelength", quantity="absorbance")
            for x in (axis, even)
        )
    ]  # fmt: skip
    np.testing.assert_allclose(np.interp(even, axis, curves[0]), curves[1], atol=3e-3)


def test_missing_and_unweighted_channels_do_not_pull():
    y = bands() + 0.3
    spoiled = y.copy()
    spoiled[150:160] = 50.0
    free = np.ones(400)
    free[150:160] = 0.0
    given = np.where(free > 0, spoiled, np.nan)
    weighted = AsymmetricLeastSquares(weights=free).fit([spoiled]).baseline([spoiled])[0]
    missing = AsymmetricLeastSquares().fit([given]).baseline([given])[0]
    np.testing.assert_allclose(weighted, missing, atol=1e-9)
    assert np.abs(missing[150:160] - 0.3).max() < 0.02


def test_what_has_not_settled_is_told():
    y = bands()[None] + 0.01 * np.random.default_rng(0).normal(size=(3, 400))
    with pytest.warns(UnmixWarning, match="3 of 3 spectra had not settled after 2 iterations"):
        AsymmetricLeastSquares(iterations=2).fit_transform(y)
    with pytest.warns(UnmixWarning, match="PolynomialBaseline: the baselines of 3 of 3"):
        PolynomialBaseline(iterations=2).fit_transform(y)


def test_a_spectrum_with_two_channels_has_no_baseline():
    y = np.stack([bands(), np.full(400, np.nan)])
    y[1, [3, 80]] = 1.0
    with pytest.warns(UnmixWarning, match="no answer for spectra with too few channels: '2'"):
        prepared = AsymmetricLeastSquares().fit_transform(y)
    assert np.isnan(prepared[1]).all()


def test_the_baseline_can_be_seen_with_its_labels():
    spectra = make_spectra([bands() + 1.0], 500 + 400 * X, dim="wavelength", quantity="absorbance", labels=["a"])
    step = AsymmetricLeastSquares().fit(spectra)
    seen = step.baseline(spectra)
    assert seen.label.values.tolist() == ["a"]
    assert "preparation" not in seen.attrs
    np.testing.assert_allclose((spectra - seen).values, step.transform(spectra).values, atol=1e-12)


def test_penalty_for_a_wave_is_what_the_step_reports():
    axis = np.arange(650.0, 4000.0, 1.93)
    spectra = make_spectra(np.ones((1, axis.size)), axis, dim="wavenumber", quantity="absorbance")
    step = prepare.AsymmetricLeastSquares(penalty=penalty_for(300.0, axis)).fit(spectra)
    assert step.cutoff_ == pytest.approx(300.0)
    with pytest.raises(InputError, match="cutoff is 3, but a wave needs more than two channels"):
        penalty_for(3.0, axis)
