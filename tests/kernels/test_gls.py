"""Generalised least squares of many spectra against dense algebra, spectrum by spectrum."""

import numpy as np
import pytest
from scipy.linalg import toeplitz
from scipy.optimize import lsq_linear
from scipy.signal import lfilter

from unmix.kernels.gls import fit, independent_stride, make_design
from unmix.kernels.linalg import polynomial_terms

P = 400
AXIS = np.linspace(0.0, 1.0, P)


def bands(k=3):
    return np.exp(-(((AXIS[:, None] - np.linspace(0.25, 0.75, k)) / 0.12) ** 2))


def problem(rng, n, *, phi=0.0, weight=None, nonnegative=True):
    signal, free = bands(), polynomial_terms(AXIS, 1)
    weight = np.ones(P) if weight is None else weight
    truth = rng.uniform(0, 1, (n, 3)) * (rng.random((n, 3)) < 0.6)
    noise = lfilter([1.0], [1.0, -phi], rng.normal(size=(n, P + 200)), axis=1)[:, 200:]
    y = truth @ signal.T + rng.normal(size=(n, 2)) @ free.T + 0.01 * noise
    return y * weight, make_design(signal, free, weight, nonnegative=nonnegative), truth


def assembled(groups, n):
    """The groups' terms, solutions and standard deviations in the order of the spectra."""
    rows = np.concatenate([rows for rows, _ in groups])
    assert np.sort(rows).tolist() == list(range(n))
    back = np.argsort(rows)
    spread = [one.sigma[:, None] * np.linalg.norm(one.factor, axis=2) for _, one in groups]
    return tuple(np.concatenate(part)[back] for part in (
        [one.terms for _, one in groups], [one.solution for _, one in groups], spread))  # fmt: skip


def test_white_noise_is_ordinary_least_squares(rng):
    y, design, _ = problem(rng, 20)
    terms, _, spread = assembled(fit(y, design, correlated=False), 20)
    expected, residual, *_ = np.linalg.lstsq(design.a, y.T, rcond=None)
    assert terms == pytest.approx(expected.T, rel=1e-10, abs=1e-12)
    variance = np.diag(np.linalg.inv(design.a.T @ design.a))
    assert spread**2 == pytest.approx(residual[:, None] / (P - 5) * variance, rel=1e-8)


def test_bounded_solution_is_the_bounded_optimum(rng):
    y, design, _ = problem(rng, 40)
    terms, solution, _ = assembled(fit(y, design, correlated=False), 40)
    lowest = np.r_[-np.inf, -np.inf, 0.0, 0.0, 0.0]
    expected = np.array([lsq_linear(design.a, row, (lowest, np.inf), tol=1e-14).x for row in y])
    assert (terms[:, 2:] < 0).any()
    assert (solution[:, 2:] >= 0).all()
    assert solution == pytest.approx(expected, abs=1e-6)


def test_signed_solution_is_the_unbounded_one(rng):
    y, design, _ = problem(rng, 10, nonnegative=False)
    terms, solution, _ = assembled(fit(y, design), 10)
    assert (terms == solution).all()


def test_unused_channels_do_not_count(rng):
    weight = np.ones(P)
    weight[100:160] = 0.0
    y, design, _ = problem(rng, 10, weight=weight)
    assert design.freedom == P - 60 - 5
    terms, _, _ = assembled(fit(y, design, correlated=False), 10)
    used = weight > 0
    assert terms == pytest.approx(np.linalg.lstsq(design.a[used], y[:, used].T, rcond=None)[0].T, abs=1e-10)


def test_weights_are_weighted_least_squares(rng):
    weight = rng.uniform(0.2, 3.0, P)
    y, design, _ = problem(rng, 5, weight=weight)
    signal = np.hstack([polynomial_terms(AXIS, 1), bands()])
    w = np.diag(weight**2)
    expected = np.linalg.solve(signal.T @ w @ signal, signal.T @ w @ (y / weight).T).T
    assert assembled(fit(y, design, correlated=False), 5)[0] == pytest.approx(expected, rel=1e-7, abs=1e-9)


def test_correlated_noise_is_dense_generalised_least_squares(rng):
    y, design, _ = problem(rng, 5, phi=0.8)
    groups = fit(y, design)
    assert any(one.filter.shape[1] > 1 for _, one in groups)
    for rows, one in groups:
        for i, row in enumerate(rows):
            # the covariance that belongs to the filter found, from its impulse response
            impulse = lfilter([1.0], one.filter[i], np.r_[1.0, np.zeros(4000)])
            rho = np.array([impulse[: impulse.size - d] @ impulse[d:] for d in range(P)])
            inverse = np.linalg.inv(toeplitz(rho))
            normal = design.a.T @ inverse @ design.a
            assert one.terms[i] == pytest.approx(np.linalg.solve(normal, design.a.T @ inverse @ y[row]), abs=1e-7)
            factor = one.factor[min(i, one.factor.shape[0] - 1)]
            assert factor @ factor.T == pytest.approx(np.linalg.inv(normal), rel=1e-5)


def test_bounded_solution_in_correlated_noise_is_the_bounded_optimum(rng):
    y, design, _ = problem(rng, 15, phi=0.8)
    lowest = np.r_[-np.inf, -np.inf, 0.0, 0.0, 0.0]
    active = 0
    for rows, one in fit(y, design):
        for i, row in enumerate(rows):
            impulse = lfilter([1.0], one.filter[i], np.r_[1.0, np.zeros(4000)])
            rho = np.array([impulse[: impulse.size - d] @ impulse[d:] for d in range(P)])
            whitener = np.linalg.inv(np.linalg.cholesky(toeplitz(rho)))
            expected = lsq_linear(whitener @ design.a, whitener @ y[row], (lowest, np.inf), tol=1e-14).x
            assert one.solution[i] == pytest.approx(expected, abs=1e-5)
            active += (one.terms[i, 2:] < 0).any()
    assert active > 1


@pytest.mark.parametrize(("phi", "margin"), [(0.0, 0.15), (0.8, 0.3)])
def test_spread_is_how_far_amounts_scatter(rng, phi, margin):
    # 400 spectra give a standard deviation to 3.5%; a correlation over 9 of 400 channels is itself known to a tenth
    y, design, truth = problem(rng, 400, phi=phi, nonnegative=False)
    terms, _, spread = assembled(fit(y, design), 400)
    score = (terms[:, 2:] - truth) / spread[:, 2:]
    assert score.std(axis=0) == pytest.approx([1.0] * 3, rel=margin)


def test_ignoring_correlation_is_caught(rng):
    y, design, truth = problem(rng, 400, phi=0.8, nonnegative=False)
    terms, _, spread = assembled(fit(y, design, correlated=False), 400)
    assert ((terms[:, 2:] - truth) / spread[:, 2:]).std(axis=0).min() > 1.8


def test_dependent_components_have_no_finite_spread_and_the_rest_keeps_its(rng):
    signal = np.hstack([bands(), 2.0 * bands()[:, :1]])
    design = make_design(signal, polynomial_terms(AXIS, 0), np.ones(P), nonnegative=True)
    y = bands() @ np.array([0.4, 0.3, 0.2]) + 0.01 * rng.normal(size=(3, P))
    for _, one in fit(y, design):
        spread = np.linalg.norm(one.factor, axis=2)
        assert np.isinf(spread[:, [1, 4]]).all()
        assert np.isfinite(spread[:, [0, 2, 3]]).all()
        assert (one.solution[:, 1:] >= 0).all()
        assert one.solution[:, 1] + 2 * one.solution[:, 4] == pytest.approx(np.full(3, 0.4), abs=0.02)


def test_no_freedom_no_level():
    signal = np.array([[1.0, 0.2], [0.1, 1.0]])
    design = make_design(signal, np.empty((2, 0)), np.ones(2), nonnegative=True)
    ((_, one),) = fit(np.array([[0.5, 0.3]]), design)
    assert one.solution[0] == pytest.approx(np.linalg.solve(signal, [0.5, 0.3]))
    assert np.isnan(one.sigma).all()


@pytest.mark.parametrize("phi", [0.0, 0.8])
def test_a_spectrum_is_solved_as_it_is_alone(rng, phi):
    y, design, _ = problem(rng, 20, phi=phi)
    terms, solution, spread = assembled(fit(y, design), 20)
    for i in (0, 7, 19):
        alone = assembled(fit(y[i : i + 1], design), 1)
        assert alone[0][0] == pytest.approx(terms[i], rel=1e-9, abs=1e-12)
        assert alone[1][0] == pytest.approx(solution[i], rel=1e-9, abs=1e-12)
        assert alone[2][0] == pytest.approx(spread[i], rel=1e-9)


def test_interpolated_channels_are_found_behind_the_signal(rng):
    signal, free = np.vstack([bands()] * 3), polynomial_terms(np.linspace(0, 1, 3 * P), 1)
    design = make_design(signal, free, np.ones(3 * P), nonnegative=True)
    full = np.fft.rfft(rng.normal(size=(20, 3 * P)), axis=1)
    full[:, full.shape[1] // 2 :] = 0
    noise = np.fft.irfft(full, n=3 * P, axis=1)
    y = np.array([0.4, 0.3, 0.2]) @ signal.T + 0.01 * noise
    assert np.mean(independent_stride(y, design) == 2) > 0.8
    y = np.array([0.4, 0.3, 0.2]) @ signal.T + 0.01 * rng.normal(size=(20, 3 * P))
    assert (independent_stride(y, design) == 1).all()
