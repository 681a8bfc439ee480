"""The penalised solver: both of its ways against dense algebra, and what must hold at any penalty."""

import importlib.util
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from unmix.kernels import whittaker
from unmix.kernels.reweight import RULES
from unmix.kernels.whittaker import (
    Differences,
    cutoff_of_penalty,
    leverages,
    penalty_of_cutoff,
    reweighted,
    smooth,
)

_spec = importlib.util.spec_from_file_location("twin", Path(__file__).parents[1] / "twins" / "whittaker.py")
twin = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(twin)

WAYS = {"few": whittaker._one_by_one, "many": whittaker._compiled}


@pytest.fixture(params=WAYS)
def solve(request):
    return WAYS[request.param]


def axis_of(kind, channels):
    if kind == "even":
        return 400.0 + 1.93 * np.arange(channels)
    return np.cumsum(np.random.default_rng(3).uniform(0.4, 2.0, channels))


def some_spectra(axis, count=6, seed=0):
    rng = np.random.default_rng(seed)
    x = (axis - axis[0]) / (axis[-1] - axis[0])
    band = np.exp(-(((x[None] - rng.uniform(0.2, 0.8, (count, 1))) / 0.04) ** 2))
    return band + np.sin(3 * x) + 0.02 * rng.normal(size=(count, axis.size))


@pytest.mark.parametrize("order", [1, 2, 3])
def test_even_spacing_gives_the_usual_matrix(order):
    differences = Differences(axis_of("even", 40), order)
    dense = np.column_stack([differences.penalty_gradient(unit) for unit in np.eye(40)])
    np.testing.assert_allclose(dense, twin.even_penalty(40, order), atol=1e-9)


@pytest.mark.parametrize("order", [1, 2, 3])
def test_bands_and_successive_differences_and_dense_form_agree_on_an_uneven_axis(order):
    axis = axis_of("uneven", 40)
    differences = Differences(axis, order)
    expected = twin.uneven_penalty(axis, order)
    dense = np.column_stack([differences.penalty_gradient(unit) for unit in np.eye(40)])
    bands = differences.bands()
    banded = sum(np.diag(bands[order - k, k:], k) for k in range(order + 1))
    banded = banded + np.triu(banded, 1).T
    scale = np.abs(expected).max()
    np.testing.assert_allclose(dense, expected.astype(float), atol=1e-12 * scale)
    np.testing.assert_allclose(banded, expected.astype(float), atol=1e-12 * scale)


@pytest.mark.parametrize("order", [1, 2, 3])
@pytest.mark.parametrize("kind", ["even", "uneven"])
@pytest.mark.parametrize("penalty", [1e-3, 1.0, 1e4, 1e9])
def test_curves_equal_dense_algebra(solve, order, kind, penalty):
    axis = axis_of(kind, 60)
    y = some_spectra(axis)
    rng = np.random.default_rng(1)
    v = rng.uniform(0.1, 2.0, axis.size)
    missing = rng.uniform(size=y.shape) < 0.2
    z, _, _ = solve(np.where(missing, np.nan, y), v, Differences(axis, order), penalty, ("none", 0.0), 1, 0.0)
    matrix = twin.uneven_penalty(axis, order)
    weights = np.where(missing, 0.0, v)
    expected = np.array([twin.smooth(row, w, matrix, penalty) for row, w in zip(y, weights, strict=True)])
    # at 1e9 and third differences elimination loses 1e-9 even in extended precision; the kernels agree to 1e-12
    np.testing.assert_allclose(z, expected, atol=1e-8 if penalty > 1e6 else 1e-11)


@pytest.mark.parametrize("order", [1, 2, 3])
@pytest.mark.parametrize("kind", ["even", "uneven"])
def test_polynomials_below_the_order_pass_unchanged_at_any_penalty(solve, order, kind):
    axis = axis_of(kind, 200)
    x = (axis - axis[0]) / (axis[-1] - axis[0])
    y = np.array([1.0 + 0 * x, 2 - 3 * x, 1 + x - 4 * x**2][:order])
    holed = y.copy()
    holed[:, 50:80] = np.nan
    for penalty in (1e2, 1e6, 1e10):
        z, _, _ = solve(holed, np.ones(200), Differences(axis, order), penalty, ("none", 0.0), 1, 0.0)
        np.testing.assert_allclose(z, y, atol=1e-8)


def test_both_ways_agree_far_beyond_the_digits_of_the_banded_matrix():
    axis = axis_of("even", 1000)
    y = some_spectra(axis)
    for order, penalty in ((1, 1e7), (2, 1e8), (2, 1e10), (3, 1e10)):
        few, many = (
            WAYS[way](y, np.ones(1000), Differences(axis, order), penalty, ("none", 0.0), 1, 0.0)[0]
            for way in ("few", "many")
        )
        np.testing.assert_allclose(few, many, atol=1e-11)


def test_a_penalty_beyond_the_banded_matrix_is_handed_on_and_still_right():
    axis = axis_of("even", 4000)
    x = np.linspace(0, 1, 4000)
    y = (np.sin(40 * x) + 0.5 + 0.3 * x)[None]
    z = smooth(y, np.ones(4000), axis, 1e17, 2)
    line = np.polynomial.Polynomial.fit(x, y[0], 1)(x)
    np.testing.assert_allclose(z[0], line, atol=1e-3)
    np.testing.assert_allclose(np.polynomial.Polynomial.fit(x, z[0] - line, 1).coef, 0, atol=1e-9)


SETTINGS = {"asymmetric": (0.02, 0.0), "adaptive": (0.0, 1e-3), "logistic": (0.0, 1e-3)}


@pytest.mark.parametrize("name", SETTINGS)
@pytest.mark.parametrize("kind", ["even", "uneven"])
@pytest.mark.parametrize("order", [1, 2, 3])
def test_baselines_equal_the_plain_twin(solve, name, kind, order):
    axis = axis_of(kind, 80)
    y = some_spectra(axis, 4, seed=order)
    setting, tolerance = SETTINGS[name]
    # the logistic rule may end in a cycle: then both are at the same turn of it after as many turns
    z, _, settled = solve(y, np.ones(80), Differences(axis, order), 1e3, (name, setting), 25, tolerance)
    matrix = twin.uneven_penalty(axis, order)
    argument = setting if name == "asymmetric" else tolerance
    expected = [getattr(twin, name)(row, matrix, 1e3, argument, 25) for row in y]
    assert settled.all() or name == "logistic"
    np.testing.assert_allclose(z, expected, atol=1e-8)


@pytest.mark.parametrize("name", RULES)
def test_few_and_many_agree_with_weights_and_missing_channels(name):
    axis = axis_of("uneven", 300)
    y = some_spectra(axis, 70)
    rng = np.random.default_rng(9)
    v = rng.uniform(0.5, 1.5, axis.size)
    v[20:25] = 0.0
    y[rng.uniform(size=y.shape) < 0.1] = np.nan
    y[3, :40] = y[4, -40:] = y[5, 2:] = np.nan
    setting, tolerance = SETTINGS.get(name, (0.0, 0.0))
    args = (y, v, Differences(axis, 2), 1e5, (name, setting), 60, tolerance)
    (z, count, settled), (z2, count2, settled2) = (way(*args) for way in WAYS.values())
    np.testing.assert_allclose(z, z2, atol=1e-9)
    np.testing.assert_array_equal(count, count2)
    np.testing.assert_array_equal(settled, settled2)


@pytest.mark.parametrize("name", ["asymmetric", "logistic"])
def test_an_answer_does_not_depend_on_its_company(name):
    axis = axis_of("even", 200)
    y = some_spectra(axis, 3)
    crowd = np.concatenate([y[:1], 100 * some_spectra(axis, 10_000, seed=2), y[1:]])
    setting, tolerance = SETTINGS[name]
    args = (np.ones(axis.size), axis, 1e5, 2, (name, setting), 60, tolerance)
    alone = np.concatenate([reweighted(one[None], *args)[0] for one in y])
    together, _, _ = reweighted(crowd, *args)
    np.testing.assert_allclose(together[[0, -2, -1]], alone, atol=1e-9)


def test_caps_are_reported():
    axis = axis_of("even", 100)
    y = some_spectra(axis, 2)
    _, count, settled = reweighted(y, np.ones(100), axis, 1e4, 2, ("asymmetric", 0.01), 2, 0.0)
    assert count.tolist() == [2, 2]
    assert not settled.any()


def test_spectra_with_too_few_channels_have_no_curve():
    axis = axis_of("even", 50)
    y = np.full((3, 50), np.nan)
    y[1, [4, 20]] = 1.0
    y[2, [4, 20, 40]] = [1.0, 2.0, 3.0]
    z, count, settled = reweighted(y, np.ones(50), axis, 1.0, 2, ("none", 0.0), 1, 0.0)
    assert np.isnan(z[:2]).all()
    assert np.isfinite(z[2]).all()
    assert count.tolist() == [0, 0, 1]
    assert settled.tolist() == [False, False, True]


@pytest.mark.parametrize("kind", ["even", "uneven"])
def test_leverages_are_the_diagonal_of_the_smoother(kind):
    axis = axis_of(kind, 70)
    v = np.random.default_rng(0).uniform(0.2, 2, 70)
    v[10:14] = 0
    dense = np.linalg.solve(np.diag(v) + 30.0 * twin.uneven_penalty(axis, 2).astype(float), np.diag(v))
    np.testing.assert_allclose(leverages(v, axis, 30.0, 2), np.diag(dense), atol=1e-10)


@pytest.mark.parametrize("order", [1, 2, 3])
def test_a_wave_at_the_cutoff_keeps_half_its_height(order):
    channels, cutoff = 4000, 50.0
    penalty = penalty_of_cutoff(cutoff, order)
    assert cutoff_of_penalty(penalty, order) == pytest.approx(cutoff)
    wave = np.sin(2 * np.pi * np.arange(channels) / cutoff)
    z = smooth(wave[None], np.ones(channels), np.arange(float(channels)), penalty, order)[0]
    middle = slice(1000, 3000)
    assert np.ptp(z[middle]) / np.ptp(wave[middle]) == pytest.approx(0.5, abs=1e-3)


def test_one_spectrum_loads_no_compiler():
    program = (
        "import sys, numpy as np\n"
        "from unmix.kernels.whittaker import reweighted\n"
        "y = np.sin(np.arange(1000.0))[None]\n"
        "reweighted(y, np.ones(1000), np.arange(1000.0), 1e6, 2, ('asymmetric', 0.01), 10, 0.0)\n"
        "assert 'numba' not in sys.modules\n"
    )
    subprocess.run([sys.executable, "-c", program], check=True)
