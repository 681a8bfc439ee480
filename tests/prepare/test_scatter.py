"""Scatter corrections: by hand, by least squares, and blind to exactly what they model."""

import numpy as np
import pytest
from scipy import stats

from unmix.errors import UnmixWarning
from unmix.prepare import (
    ExtendedScatterCorrection,
    MultiplicativeScatterCorrection,
    RobustNormalVariate,
    StandardNormalVariate,
)


def test_standard_normal_variate_is_the_z_score_of_each_spectrum(rows):
    expected = stats.zscore(rows, axis=1, ddof=1)
    np.testing.assert_allclose(StandardNormalVariate().fit_transform(rows), expected, atol=1e-12)


def test_robust_variate_is_median_and_quartiles(rows):
    got = RobustNormalVariate().fit_transform(rows)
    spread = stats.iqr(rows, axis=1, keepdims=True) / 1.349
    np.testing.assert_allclose(got, (rows - np.median(rows, axis=1, keepdims=True)) / spread, atol=1e-12)
    normal = np.random.default_rng(0).normal(size=(1, 100_000))
    difference = RobustNormalVariate().fit_transform(normal) - StandardNormalVariate().fit_transform(normal)
    assert np.abs(difference).max() < 0.05


def test_a_strong_band_moves_only_the_plain_variate():
    rows = np.random.default_rng(0).normal(size=(5, 160))
    spoiled = rows.copy()
    spoiled[:, :8] += 30
    for step, steady in ((StandardNormalVariate(), False), (RobustNormalVariate(), True)):
        shift = np.abs(step.fit_transform(spoiled) - step.fit_transform(rows))[:, 8:].max()
        assert (shift < 0.8) == steady


@pytest.mark.parametrize("step", [StandardNormalVariate(), RobustNormalVariate()])
def test_variates_ignore_offset_and_factor(step, rows):
    np.testing.assert_allclose(step.fit_transform(3.7 * rows - 11), step.fit_transform(rows), atol=1e-9)


def test_scatter_correction_is_a_regression_on_the_reference(rows):
    got = MultiplicativeScatterCorrection().fit_transform(rows)
    reference = rows.mean(axis=0)
    for row, corrected in zip(rows, got, strict=True):
        slope, offset = np.polyfit(reference, row, 1)
        np.testing.assert_allclose(corrected, (row - offset) / slope, atol=1e-10)


def test_scatter_correction_ignores_offset_and_factor(rows, pattern):
    step = MultiplicativeScatterCorrection(reference=pattern)
    np.testing.assert_allclose(step.fit_transform(0.2 * rows + 5), step.fit_transform(rows), atol=1e-9)
    np.testing.assert_allclose(step.fit_transform([7 * pattern - 2])[0], pattern, atol=1e-12)


def test_missing_channels_are_left_out_of_the_regression(rows, pattern):
    holed = rows.copy()
    holed[:, 50:70] = np.nan
    kept = np.r_[0:50, 70:160]
    got = MultiplicativeScatterCorrection(reference=pattern).fit_transform(holed)
    expected = MultiplicativeScatterCorrection(reference=pattern[kept]).fit_transform(rows[:, kept])
    np.testing.assert_allclose(got[:, kept], expected, atol=1e-10)
    extended = ExtendedScatterCorrection(order=0, reference=pattern).fit_transform(holed)
    np.testing.assert_allclose(extended[:, kept], expected, atol=1e-9)


def test_extended_correction_is_least_squares_on_all_terms(rows, pattern, vapour):
    step = ExtendedScatterCorrection(order=2, reference=pattern, interferents=vapour)
    x = np.linspace(-1, 1, 160)
    model = np.column_stack([pattern, np.ones(160), x, x**2, vapour])
    amounts = np.linalg.lstsq(model, rows.T, rcond=None)[0].T
    expected = (rows - amounts[:, 1:] @ model[:, 1:].T) / amounts[:, :1]
    np.testing.assert_allclose(step.fit_transform(rows), expected, atol=1e-9)
    linear = ExtendedScatterCorrection(order=2, reference=pattern, interferents=vapour, scale=False)
    np.testing.assert_allclose(linear.fit_transform(rows), expected * amounts[:, :1], atol=1e-9)


def test_extended_correction_ignores_every_term_it_models(rows, pattern, vapour):
    step = ExtendedScatterCorrection(order=2, reference=pattern, interferents=vapour).fit(rows)
    x = np.linspace(-1, 1, 160)
    changed = 2.5 * rows + 0.7 - 0.3 * x + 4 * x**2 - 1.9 * vapour
    np.testing.assert_allclose(step.transform(changed), step.transform(rows), atol=1e-8)
    assert np.abs(step.transform(rows + x**3) - step.transform(rows)).max() > 1e-2


def test_order_zero_is_the_plain_correction(rows):
    extended = ExtendedScatterCorrection(order=0).fit_transform(rows)
    np.testing.assert_allclose(extended, MultiplicativeScatterCorrection().fit_transform(rows), atol=1e-9)


def test_the_unit_of_the_reference_does_not_matter(rows, pattern):
    small = ExtendedScatterCorrection(reference=1e-14 * pattern).fit_transform(rows)
    np.testing.assert_allclose(
        small, 1e-14 * ExtendedScatterCorrection(reference=pattern).fit_transform(rows), rtol=1e-7
    )


def test_spectra_without_scale_are_named_and_missing(labelled, pattern):
    labelled.values[4] = 0.1
    labelled.values[6] = -3.0
    for step in (StandardNormalVariate(), RobustNormalVariate()):
        with pytest.warns(
            UnmixWarning, match="no answer for spectra that are constant: 's4', 's6'|half of the channels"
        ):
            prepared = step.fit_transform(labelled)
        assert np.isnan(prepared.values[[4, 6]]).all()
        assert np.isfinite(np.delete(prepared.values, [4, 6], axis=0)).all()
    for step in (MultiplicativeScatterCorrection(pattern), ExtendedScatterCorrection(reference=pattern)):
        with pytest.warns(UnmixWarning, match=r"nothing of the reference.*: 's4', 's6'"):
            assert np.isnan(step.fit_transform(labelled).values[[4, 6]]).all()
