"""The test for one more band: scores against plain least squares, its false alarms, and what it finds."""

import numpy as np
import pytest
from scipy.linalg import toeplitz

from unmix.diagnose.residual import (
    FilterPair,
    Whitened,
    band_at,
    correlate,
    denominators,
    largest,
    null_limit,
    placed,
    template_energy,
    templates,
    unexplained_bands,
)
from unmix.kernels.linalg import polynomial_terms

N = 300


def all_templates(t):
    """Twin of the transforms: every template at every place, as rows."""
    rows = []
    for place in range(t.places[-1].stop):
        w, channel = band_at(place, t)
        rows.append(placed(t, w, channel))
    return np.array(rows)


def whitened(y, a, coefficients=(1.0,), weight=None):
    """A fit by plain algebra, in the form that the search takes."""
    weight = np.ones(y.size) if weight is None else weight
    filters = FilterPair(np.array([coefficients]), weight)
    data, columns = filters.forward(y[None, None])[0, 0], filters.forward(a.T[None])[0]
    q, r = np.linalg.qr(columns.T)
    residual = data - q @ (q.T @ data)
    t = templates(y.size)
    precision = [sum(coefficients[i] * coefficients[i + d] for i in range(len(coefficients) - d))
                 for d in range(len(coefficients))]  # fmt: skip
    energy = np.array(precision) @ template_energy(weight, t, len(coefficients))
    return Whitened(residual, q.T, np.linalg.inv(r), filters, energy, float((weight != 0).sum() - a.shape[1]))


def design(n=N):
    axis = np.linspace(-1, 1, n)
    pure = [np.exp(-(((axis - at) / width) ** 2)) for at, width in ((0.0, 0.15), (0.4, 0.1))]
    return np.column_stack([polynomial_terms(axis, 1), *pure])


def gaussian(at, width, n=N):
    return np.exp(-4 * np.log(2) * ((np.arange(n) - at) / width) ** 2)


@pytest.mark.parametrize("n", [1, 2, 9, 40, 301, 2001])
def test_templates_have_unit_length_and_cover_the_axis(n):
    t = templates(n)
    assert t.widths[0] == 3.0
    assert t.widths[-1] <= max(n / 8, 3.0)
    assert [np.linalg.norm(shape) for shape in t.shapes] == pytest.approx([1.0] * len(t.shapes))
    for place, stride in zip(t.places, t.strides, strict=True):
        assert [band_at(p, t)[1] for p in range(place.start, place.stop)] == list(range(0, n, stride))


def test_correlation_is_the_inner_product_with_every_template(rng):
    t = templates(N)
    x = rng.normal(size=(3, N))
    # scores are of order one; the coarser grids of the wider templates cost the third digit
    assert correlate(x, t) == pytest.approx(x @ all_templates(t).T, abs=0.01)
    assert correlate(x, t)[:, t.places[0]] == pytest.approx(x @ all_templates(t)[t.places[0]].T, abs=1e-5)


def test_energy_is_that_of_the_whitened_templates_away_from_gaps(rng):
    t = templates(N)
    weight = rng.uniform(0.5, 2.0, N)
    weight[120:123] = 0.0
    assert template_energy(weight, t, 1)[0] == pytest.approx((all_templates(t) * weight) ** 2 @ np.ones(N), abs=1e-10)
    coefficients = np.array([1.0, -0.7, 0.2])
    precision = [1.0 + 0.49 + 0.04, -0.7 - 0.14, 0.2]
    found = np.array(precision) @ template_energy(np.ones(N), t, 3)
    filtered = FilterPair(coefficients[None], np.ones(N)).forward(all_templates(t)[None])[0]
    middle = np.array([20 * 1.3 < band_at(p, t)[1] < N - 20 * 1.3 and band_at(p, t)[0] < 2 for p in range(found.size)])
    assert found[middle] == pytest.approx((filtered**2).sum(axis=1)[middle], rel=1e-6)


def test_filters_and_their_transposes_are_adjoint(rng):
    weight = rng.uniform(0.5, 2.0, N)
    weight[50:60] = 0.0
    filters = FilterPair(np.array([[1.0, -0.5, 0.1]]), weight)
    x, y = rng.normal(size=(1, 1, N)), np.where(weight != 0, rng.normal(size=(1, 1, N)), 0.0)
    assert np.sum(filters.forward(x) * y) == pytest.approx(np.sum(x * filters.transpose(y)))


def test_score_is_that_of_one_more_column_in_least_squares(rng):
    a, y = design(), rng.normal(size=N)
    fit = whitened(y, a)
    t = templates(N)
    sigma = np.sqrt(np.sum(fit.residual**2) / fit.freedom)
    projected = np.sum(correlate(fit.basis, t) ** 2, axis=0)
    score = correlate(fit.residual[None], t)[0] / denominators(fit.energy, projected, t) / sigma
    for place in (40, 333, 500, t.places[-1].stop - 5):
        g = placed(t, *band_at(place, t))
        b, rss = np.linalg.lstsq(np.column_stack([a, g]), y, rcond=None)[:2]
        # one more column takes z^2 sigma^2 from the sum of squares, and has the sign of z
        assert abs(score[place] * sigma) == pytest.approx(np.sqrt(np.sum(fit.residual**2) - rss[0]), abs=0.01)
        assert np.sign(score[place]) == np.sign(b[-1])


def test_a_band_that_the_design_holds_already_has_no_score():
    t = templates(N)
    a = np.column_stack([np.ones(N), placed(t, 3, 96)])
    fit = whitened(np.zeros(N), a)
    below = denominators(fit.energy, np.sum(correlate(fit.basis, t) ** 2, axis=0), t)
    assert np.isnan(below[t.places[3].start + 96 // t.strides[3]])
    assert np.isfinite(below[t.places[3].start : t.places[3].stop]).sum() > 20


def test_largest_keeps_the_sign_and_passes_over_what_is_not_known():
    score, place = largest(np.array([[1.0, -3.0, np.nan], [np.nan, np.nan, np.nan]]))
    assert score.tolist() == [-3.0, 0.0]
    assert place[0] == 1


def test_limit_grows_with_the_number_of_channels():
    limits = [null_limit(n, 4) for n in (32, 128, 512, 2048)]
    assert (np.diff(limits) > 0).all()
    assert limits[0] > 3.0
    assert limits[-1] < 5.5


def test_limit_is_exceeded_by_chance_in_at_most_one_of_a_hundred(rng):
    # 3000 right models: standard error 0.18%; the tail of the Gumbel distribution is on the careful side (0.6% here)
    a, t = design(), templates(N)
    q = np.linalg.qr(a)[0]
    r = rng.normal(size=(3000, N))
    r -= (r @ q) @ q.T
    sigma = np.sqrt((r**2).sum(axis=1) / (N - 4))
    below = denominators(template_energy(np.ones(N), t, 1)[0], np.sum(correlate(q.T, t) ** 2, axis=0), t)
    found = np.abs(largest(correlate(r, t) / below / sigma[:, None])[0])
    assert 0.0005 < np.mean(found > null_limit(N, 4)) < 0.014
    # and a limit for one place alone would not do
    assert np.mean(found > 2.58) > 0.3


@pytest.mark.parametrize(("at", "width", "height"), [(60, 12, 0.2), (60, 12, -0.2), (230, 5, 0.3), (60, 30, 0.3)])
def test_a_hidden_band_is_found_where_it_is(rng, at, width, height):
    noise = 0.01
    y = design() @ [0.1, 0.05, 1.0, 0.7] + height * gaussian(at, width) + noise * rng.normal(size=N)
    found = unexplained_bands(whitened(y, design()), templates(N), null_limit(N, 4))
    assert abs(found.channel[0] - at) <= width / 3
    assert width / 2 <= found.width[0] <= width * 2
    assert found.height[0] == pytest.approx(height, rel=0.5)
    assert np.sign(found.score[0]) == np.sign(height)
    assert np.abs(found.score[0]) > null_limit(N, 4)


def test_shift_is_what_the_hidden_band_does_to_the_terms(rng):
    t = templates(N)
    hidden = placed(t, 2, 180) / placed(t, 2, 180).max()
    a = design()
    clean = a @ [0.1, 0.05, 1.0, 0.7] + 1e-4 * rng.normal(size=N)
    found = unexplained_bands(whitened(clean + 0.3 * hidden, a), t, null_limit(N, 4))
    actual = np.linalg.lstsq(a, 0.3 * hidden, rcond=None)[0]
    assert found.shift.sum(axis=0) == pytest.approx(actual, abs=0.02 * np.abs(actual).max())


def test_noise_alone_shows_no_band():
    # fixed seeds: one in a hundred would show one
    noise = [np.random.default_rng(s).normal(size=N) for s in range(20)]
    shown = [unexplained_bands(whitened(y, design()), templates(N), 4.5).channel.size for y in noise]
    assert np.count_nonzero(shown) <= 1


def test_bands_are_told_apart_and_counted(rng):
    y = design() @ [0.1, 0.05, 1.0, 0.7] + 0.01 * rng.normal(size=N)
    y = y + 0.3 * gaussian(40, 6) - 0.2 * gaussian(100, 6) + 0.1 * gaussian(260, 6)
    found = unexplained_bands(whitened(y, design()), templates(N), null_limit(N, 4))
    assert np.abs(found.channel[:3] - [40, 100, 260]).max() <= 2
    assert np.sign(found.height[:3]).tolist() == [1.0, -1.0, 1.0]
    many = y + sum(0.3 * gaussian(10 + 20 * i, 4) for i in range(14))
    assert unexplained_bands(whitened(many, design()), templates(N), null_limit(N, 4)).channel.size == 8


def test_a_residual_of_zeros_shows_nothing():
    found = unexplained_bands(whitened(np.zeros(N), design()), templates(N), 4.0)
    assert found.channel.size == 0
    assert found.shift.shape == (0, 4)


def test_correlated_noise_is_no_band_once_it_is_filtered(rng):
    # whitened by the right filter the score is that of the dense generalised problem
    phi = 0.6
    a, y = design(), rng.normal(size=N)
    fit = whitened(y, a, (1.0, -phi))
    t = templates(N)
    place = t.places[1].start + 100 // t.strides[1]
    g = placed(t, *band_at(place, t))
    inverse = toeplitz([1 + phi**2, -phi] + [0.0] * (N - 2))
    inverse[-1, -1] = 1.0  # nothing follows the last channel
    full = np.column_stack([a, g])
    covariance = np.linalg.inv(full.T @ inverse @ full)
    b = covariance @ full.T @ inverse @ y
    projected = np.sum(correlate(fit.filters.transpose(fit.basis[None])[0], t) ** 2, axis=0)
    score = correlate(fit.filters.transpose(fit.residual[None, None])[0, 0], t) / denominators(fit.energy, projected, t)
    assert score[place] == pytest.approx(b[-1] / np.sqrt(covariance[-1, -1]), abs=0.02)
