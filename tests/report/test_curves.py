import base64

import numpy as np
import pytest

from unmix.report import curves
from unmix.report.view import Composition


def unpacked(kept, axis=None):
    if "f" in kept:
        values = np.frombuffer(base64.b64decode(kept["f"]), "<f4").astype(float)
    else:
        codes = np.frombuffer(base64.b64decode(kept["q"]), "<u2")
        values = np.where(codes == 65535, np.nan, kept["low"] + kept["step"] * codes)
    return np.interp(axis, axis[kept["at"]], values) if "at" in kept else values


@pytest.mark.parametrize("n_missing", [0, 3, 200])
def test_packing_loses_less_than_a_sixty_thousandth_of_the_range(n_missing):
    rng = np.random.default_rng(3)
    values = rng.normal(0, 2.0, 200)
    values[rng.permutation(200)[:n_missing]] = np.nan
    back = unpacked(curves.packed(values))
    np.testing.assert_array_equal(np.isnan(back), np.isnan(values))
    if n_missing < 200:
        np.testing.assert_allclose(back, values, atol=np.nanmax(values) / 20_000, equal_nan=True)


def test_a_constant_and_an_empty_curve():
    np.testing.assert_array_equal(unpacked(curves.packed(np.full(5, 0.25))), np.full(5, 0.25))
    assert unpacked(curves.packed(np.empty(0))).size == 0


@pytest.mark.parametrize("order", [0, 1, 2, 5])
def test_a_smooth_curve_is_kept_at_few_channels(order):
    axis = np.sort(np.random.default_rng(4).uniform(600, 4000, 2000))
    values = 0.02 * np.polynomial.chebyshev.chebval((axis - 2300) / 1700, np.ones(order + 1))
    kept = curves.thinned(values, axis, 1e-4)
    assert len(kept["at"]) <= (2 if order < 2 else 510)
    np.testing.assert_allclose(unpacked(kept, axis), values, atol=1.1e-4)


def test_a_rough_curve_is_kept_whole():
    values = np.random.default_rng(5).normal(size=500)
    kept = curves.thinned(values, np.arange(500.0), 1e-6)
    assert "at" not in kept
    np.testing.assert_allclose(unpacked(kept), values, atol=1e-4)


def test_the_fit_is_kept_only_where_it_does_not_follow_from_the_rest(composition):
    assert "fitted" not in curves.of_sample(Composition(composition), 3)
    bent = composition.assign(fitted=composition["fitted"] + 0.01)
    np.testing.assert_allclose(
        unpacked(curves.of_sample(Composition(bent), 0)["fitted"]), bent["fitted"].values[0], atol=1e-6
    )
    assert "fitted" in curves.of_sample(Composition(composition.drop_vars("baseline")), 0)
    assert "fitted" in curves.of_sample(Composition(composition.drop_vars("pure_signal")), 0)


def test_a_fit_over_channels_that_were_left_out_is_kept_apart_from_one_with_gaps(composition):
    assert "gaps" in curves.of_sample(Composition(composition), 2)
    whole = composition["fitted"].copy()
    view = Composition(composition)
    whole[2] = view.contributions(2).sum(axis=0) + view.curve("baseline", 2)
    kept = curves.of_sample(Composition(composition.assign(fitted=whole)), 2)
    assert "gaps" not in kept
    assert "fitted" not in kept


def test_an_amount_that_could_not_be_determined_is_null(composition):
    blank = composition["concentration"].copy()
    blank[0, 2] = np.nan
    kept = curves.of_sample(Composition(composition.assign(concentration=blank)), 0)
    assert kept["amounts"][2] is None
