"""Smoothing and derivatives: units, ends, uneven axes, and the penalty that cross-validation chooses."""

import numpy as np
import pytest
from scipy.signal import savgol_filter

from unmix.errors import InputError
from unmix.kernels.whittaker import smooth
from unmix.prepare import GapDerivative, SavitzkyGolay, WhittakerSmoother
from unmix.spectra import make_spectra


def labelled(values, axis, dim="wavenumber"):
    return make_spectra(np.atleast_2d(values), axis, dim=dim, quantity="absorbance")


def test_equals_scipys_filter_per_unit_of_the_axis():
    axis = 650 + 1.93 * np.arange(100)
    y = np.random.default_rng(0).normal(size=(3, 100))
    for derivative in (0, 1, 2):
        got = SavitzkyGolay(9, 3, derivative).fit_transform(labelled(y, axis))
        np.testing.assert_allclose(got.values, savgol_filter(y, 9, 3, deriv=derivative, delta=1.93), atol=1e-11)


@pytest.mark.parametrize("step", [SavitzkyGolay(7, 3, 1), GapDerivative(segment=3, gap=3)])
def test_a_slope_is_per_nanometre_and_per_wavenumber_on_any_axis(step):
    axis = np.cumsum(np.random.default_rng(1).uniform(0.5, 3, 60)) + 400
    for dim in ("wavelength", "wavenumber"):
        got = step.fit_transform(labelled(0.25 * axis + 3, axis, dim))
        np.testing.assert_allclose(got.values, 0.25, rtol=1e-9)


def test_quadratic_derivatives_are_exact_to_the_last_channel():
    axis = np.cumsum(np.random.default_rng(1).uniform(0.5, 3, 60)) + 400
    y = 2 - 0.01 * (axis - 450) + 0.003 * (axis - 450) ** 2
    first = SavitzkyGolay(9, 2, 1).fit_transform(labelled(y, axis)).values[0]
    np.testing.assert_allclose(first, -0.01 + 0.006 * (axis - 450), atol=1e-9)
    np.testing.assert_allclose(SavitzkyGolay(9, 2, 2).fit_transform(labelled(y, axis)), 0.006, rtol=1e-7)
    np.testing.assert_allclose(GapDerivative(5, 3, 2).fit_transform(labelled(y, axis)), 0.006, rtol=1e-7)


def test_gap_derivatives_keep_the_positions_of_their_channels():
    axis = np.arange(500.0, 560.0, 2.0)
    spectra = labelled(np.ones(30), axis).assign_coords(detector=("wavenumber", np.arange(30)))
    got = GapDerivative(segment=3, gap=1).fit_transform(spectra)
    assert got.wavenumber.values.tolist() == axis[3:-3].tolist()
    assert got.detector.values.tolist() == list(range(3, 27))
    np.testing.assert_allclose(got.values, 0, atol=1e-14)


def test_a_missing_channel_blanks_its_window_and_no_more():
    y = np.ones((1, 40))
    y[0, 20] = np.nan
    got = SavitzkyGolay(5, 2).fit_transform(y)
    assert np.flatnonzero(np.isnan(got[0])).tolist() == [18, 19, 20, 21, 22]


def test_cross_validation_is_leaving_out_one_by_one():
    rng = np.random.default_rng(0)
    y = np.sin(np.arange(40) / 4) + 0.1 * rng.normal(size=(3, 40))
    step = WhittakerSmoother().fit(y)

    def error(penalty):
        rest = []
        for row in y:
            for i in range(40):
                kept = row.copy()
                kept[i] = np.nan
                curve = smooth(kept[None], np.ones(40), np.arange(40.0), penalty, 2)[0]
                rest.append(row[i] - curve[i])
        return np.mean(np.square(rest))

    best = error(step.penalty_)
    assert best < error(step.penalty_ * 1.5)
    assert best < error(step.penalty_ / 1.5)


def test_the_chosen_penalty_is_near_the_best_against_the_truth():
    rng = np.random.default_rng(3)
    x = np.arange(400.0)
    true = np.exp(-(((x - 130) / 20) ** 2)) + 0.5 * np.exp(-(((x - 260) / 30) ** 2))
    y = true + 0.05 * rng.normal(size=(20, 400))
    step = WhittakerSmoother().fit(y)
    error = {p: np.sqrt(np.mean((WhittakerSmoother(p).fit_transform(y) - true) ** 2)) for p in np.logspace(0, 6, 13)}
    chosen = np.sqrt(np.mean((step.transform(y) - true) ** 2))
    assert chosen < 1.05 * min(error.values())
    assert chosen < 0.4 * 0.05


def test_the_cutoff_is_told_in_units_of_the_axis():
    axis = 400 + 0.5 * np.arange(300)
    y = np.sin(2 * np.pi * axis / 20.0)
    step = WhittakerSmoother(penalty=1e4).fit(labelled(y, axis))
    at_cutoff = np.sin(2 * np.pi * axis / step.cutoff_)
    kept = step.transform(labelled(at_cutoff, axis)).values[0]
    assert np.ptp(kept[100:200]) / 2 == pytest.approx(0.5, abs=0.02)


def test_spectra_that_miss_nearly_everything_choose_no_penalty():
    y = np.full((3, 30), np.nan)
    y[:, 4] = 1.0
    with pytest.raises(InputError, match="miss too many channels to choose a penalty; give penalty"):
        WhittakerSmoother().fit(y)


def test_most_spectra_decide_when_some_miss_channels():
    rng = np.random.default_rng(0)
    y = np.sin(np.arange(60) / 6) + 0.1 * rng.normal(size=(9, 60))
    holed = y.copy()
    holed[:2, 30:35] = np.nan
    assert WhittakerSmoother().fit(holed).penalty_ == WhittakerSmoother().fit(y[2:]).penalty_


def test_hand_worked_three_point_example():
    # minimise (z1-0)^2 + (z2-3)^2 + (z3-0)^2 + 1 (z1 - 2 z2 + z3)^2: z = y - D'D z, D'D z = d (1, -2, 1), d = -6/7
    np.testing.assert_allclose(WhittakerSmoother(1.0).fit_transform([[0.0, 3, 0]]), [[6 / 7, 9 / 7, 6 / 7]], atol=1e-12)
