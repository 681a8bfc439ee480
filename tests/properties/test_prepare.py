"""Preparation under random input: exactness, invariances, and two ways that must agree."""

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from unmix import prepare
from unmix.kernels import whittaker
from unmix.kernels.hull import bands_below
from unmix.kernels.localfit import polynomial_weights
from unmix.kernels.resample import interpolate
from unmix.kernels.stencil import weighted_sums
from unmix.kernels.whittaker import Differences
from unmix.method import Method
from unmix.prepare.axis import common_axis
from unmix.spectra import make_spectra

seeds = st.integers(0, 2**32 - 1)


@st.composite
def axes(draw, least=12, most=60):
    """Increasing positions, neighbours' spacing within a factor of four."""
    rng = np.random.default_rng(draw(seeds))
    steps = rng.uniform(1, 4, draw(st.integers(least, most)))
    return draw(st.floats(1e-3, 1e3)) * np.cumsum(steps) + draw(st.floats(0, 1e4))


def polynomial_on(axis, degree, rng):
    """A polynomial of moderate size over the axis, and its derivative per unit of the axis."""
    found = np.polynomial.Polynomial(rng.normal(size=degree + 1), domain=[axis[0], axis[-1]])
    return found, found.deriv()


@given(axes(), seeds, st.integers(0, 5))
def test_interpolation_is_exact_for_polynomials_to_degree_five(axis, seed, degree):
    rng = np.random.default_rng(seed)
    value, _ = polynomial_on(axis, degree, rng)
    targets = rng.uniform(axis[0], axis[-1], 20)
    np.testing.assert_allclose(interpolate(axis, value(axis), targets), value(targets), atol=1e-9)


@given(axes(), seeds, st.integers(1, 4), st.integers(0, 3))
def test_local_slopes_of_polynomials_are_exact_to_the_ends(axis, seed, order, extra):
    rng = np.random.default_rng(seed)
    value, slope = polynomial_on(axis, order, rng)
    window = 2 * ((order + 2) // 2 + extra) + 1
    if window > axis.size:
        return
    first, weights = polynomial_weights(axis, window, order, 1)
    scale = np.ptp(value(axis)) / np.diff(axis).min() + 1
    np.testing.assert_allclose(weighted_sums(value(axis)[None], first, weights)[0], slope(axis), atol=1e-9 * scale)


@settings(max_examples=60)
@given(axes(30, 60), seeds, st.integers(1, 3), st.floats(-3, 12))
def test_both_ways_of_smoothing_agree_at_any_penalty(axis, seed, order, log_penalty):
    rng = np.random.default_rng(seed)
    y = rng.normal(size=(3, axis.size)) + np.linspace(0, 5, axis.size)
    v = rng.uniform(0.1, 1, axis.size)
    missing = rng.uniform(size=y.shape) < 0.3
    missing[:, [3, 9, 15, 21]] = False
    problem = (np.where(missing, np.nan, y), v, Differences(axis, order), 10.0**log_penalty, ("none", 0.0), 1, 0.0)
    try:
        few, _, _ = whittaker._one_by_one(*problem)
    except np.linalg.LinAlgError:
        return
    many, _, _ = whittaker._compiled(*problem)
    np.testing.assert_allclose(few, many, atol=1e-7)


@given(seeds, st.floats(-1e3, 1e3), st.floats(1e-3, 1e3))
def test_variates_ignore_offset_and_factor(seed, offset, factor):
    rows = np.random.default_rng(seed).normal(size=(3, 40))
    for step in (prepare.StandardNormalVariate(), prepare.RobustNormalVariate()):
        np.testing.assert_allclose(
            step.fit_transform(factor * rows + offset),
            step.fit_transform(rows),
            atol=1e-10 * (1 + abs(offset) / factor),
        )


@given(seeds, st.lists(st.floats(-5, 5), min_size=4, max_size=4), st.floats(0.01, 50))
def test_extended_correction_ignores_what_it_models(seed, amounts, factor):
    rng = np.random.default_rng(seed)
    x = np.linspace(-1, 1, 60)
    reference, interferent = rng.normal(size=(2, 60))
    rows = reference + 0.3 * rng.normal(size=(4, 60))
    step = prepare.ExtendedScatterCorrection(2, reference, interferent).fit(rows)
    changed = factor * rows + np.array(amounts) @ np.stack([np.ones(60), x, x**2, interferent])
    np.testing.assert_allclose(step.transform(changed), step.transform(rows), atol=1e-7)


@given(axes(), seeds)
def test_a_rubber_band_lies_below_touches_the_ends_and_is_convex(axis, seed):
    y = np.random.default_rng(seed).normal(size=(2, axis.size))
    band = bands_below(axis, y)
    assert (band <= y + 1e-9).all()
    np.testing.assert_allclose(band[:, [0, -1]], y[:, [0, -1]], atol=1e-12)
    slope = np.diff(band, axis=1) / np.diff(axis)
    assert (np.diff(slope, axis=1) >= -1e-9 * np.abs(slope).max()).all()


@given(axes(), st.floats(-1e3, 1e3))
def test_smoothing_keeps_a_constant_and_derivatives_lose_it(axis, level):
    spectra = make_spectra(np.full((2, axis.size), level), axis, dim="wavelength", quantity="absorbance")
    size = 1e-9 * (1 + abs(level))
    for step in (prepare.SavitzkyGolay(5, 2), prepare.WhittakerSmoother(1e3)):
        np.testing.assert_allclose(step.fit_transform(spectra).values, level, atol=size)
    slope = size / np.diff(axis).min()
    for step in (prepare.SavitzkyGolay(5, 2, 1), prepare.GapDerivative(segment=1, gap=3)):
        np.testing.assert_allclose(step.fit_transform(spectra).values, 0, atol=slope)


@given(axes(), axes(), seeds)
def test_samples_keep_their_values_wherever_both_axes_reach(own, other, seed):
    rng = np.random.default_rng(seed)
    # bring the second axis over the first so that they overlap in part
    other = own[0] + (other - other[0]) / np.ptp(other) * np.ptp(own) * rng.uniform(0.3, 1.5) + rng.normal() * own[1]
    samples = make_spectra(rng.normal(size=(2, own.size)), own, dim="wavelength", quantity="absorbance")
    pure = make_spectra(np.stack([other, 2 - other]), other, dim="wavelength", quantity="absorbance",
                        leading="component", labels=["a", "b"])  # fmt: skip
    inside = (own >= other[0]) & (own <= other[-1])
    if np.count_nonzero(inside) < 2:
        return
    kept, known, _ = common_axis(samples, pure)
    np.testing.assert_array_equal(kept.values, samples.sel(wavelength=kept.wavelength).values)
    assert abs(kept.sizes["wavelength"] - np.count_nonzero(inside)) <= 2
    scale = np.abs(other).max()
    np.testing.assert_allclose(known.sel(component="a").values, kept.wavelength.values, atol=1e-9 * scale)


@given(
    st.text(st.characters(exclude_categories=["Cs"]), max_size=40),
    st.integers(0, 20).map(lambda n: 2 * n + 1),
    st.floats(1e-300, 1e300),
    st.lists(st.tuples(st.floats(-1e6, 1e6), st.floats(0, 1e6)).map(lambda p: (p[0], p[0] + p[1])), max_size=3),
    st.dictionaries(st.from_regex(r"[a-z_]{1,8}", fullmatch=True).filter(lambda key: key != "use"),
                    st.one_of(st.booleans(), st.integers(-(2**60), 2**60), st.floats(allow_nan=False), st.text(
                        st.characters(exclude_categories=["Cs"]), max_size=10))),
)  # fmt: skip
def test_a_method_comes_back_from_its_text(name, window, penalty, regions, options):
    steps = [prepare.SavitzkyGolay(window, 0), prepare.AsymmetricLeastSquares(penalty), prepare.Regions(drop=regions)]
    method = Method(steps, name, "quantify", options)
    back = Method.from_text(method.to_text())
    assert (back.name, back.settings) == (name, options)
    assert back.steps[0].window == window
    assert back.steps[1].penalty == penalty
    assert [tuple(pair) for pair in back.steps[2].drop] == regions
