"""Batched non-negative least squares under random, dependent, nearly collinear and badly scaled designs.

Equal to ``scipy.optimize.nnls`` to 1e-10 of the data's size in the fitted values, always at an optimum, and equal in
the amounts themselves where the problem determines them.
"""

import numpy as np
from hypothesis import HealthCheck, given, note, settings
from hypothesis import strategies as st
from scipy.optimize import nnls as one_by_one

from unmix.kernels.nnls import nnls

TRIES = settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.too_slow])


@st.composite
def problems(draw):
    """A design of one kind and data of one kind; sizes, kinds and random numbers are hypothesis's to shrink."""
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1), label="seed"))
    k = draw(st.integers(1, 8), label="components")
    p = draw(st.integers(1, 40), label="channels")
    n = draw(st.integers(1, 25), label="spectra")
    kind = draw(
        st.sampled_from(["random", "spectra", "dependent", "nearly collinear", "sparse", "signed"]), label="kind"
    )
    a = rng.random((p, k))
    if kind == "spectra":
        a = np.exp(-(((np.arange(p)[:, None] - rng.uniform(0, p, k)) / rng.uniform(1, p, k)) ** 2))
    elif kind == "dependent":
        rank = draw(st.integers(1, k), label="rank")
        a = rng.random((p, rank)) @ rng.random((rank, k))
    elif kind == "nearly collinear":
        a = rng.random((p, 1)) + 10.0 ** -draw(st.integers(2, 12), label="apart") * rng.random((p, k))
    elif kind == "sparse":
        a = a * (rng.random((p, k)) < 0.4)
    elif kind == "signed":
        a = rng.normal(size=(p, k))
    if draw(st.booleans(), label="scaled"):
        a = a * 10.0 ** rng.uniform(-6, 6, k)
    how = draw(st.sampled_from(["mixtures", "noise", "negative", "exact", "zeros"]), label="data")
    size = np.linalg.norm(a, axis=0)
    amounts = rng.random((n, k)) * (rng.random((n, k)) < 0.7) / np.where(size > 0, size, 1.0)
    y = amounts @ a.T
    if how == "mixtures":
        y = y + 0.01 * rng.normal(size=(n, p))
    elif how == "noise":
        y = rng.normal(size=(n, p))
    elif how == "negative":
        y = -y
    elif how == "zeros":
        y[:: draw(st.integers(1, 3), label="every")] = 0.0
    return a, y


def sizes(a, y):
    length = np.linalg.norm(a, axis=0)
    return np.where(length > 0, length, 1.0), np.linalg.norm(y, axis=1) + np.finfo(float).tiny


@TRIES
@given(problems())
def test_every_answer_is_an_optimum(problem):
    a, y = problem
    x = nnls(a, y)
    assert np.isfinite(x).all()
    assert (x >= 0).all()
    length, size = sizes(a, y)
    gradient = (y - x @ a.T) @ a / length / size[:, None]
    note(f"of positive amounts {np.abs(gradient[x > 0]).max(initial=0)}, of zero {gradient[x == 0].max(initial=0)}")
    # relative to the data, per column of unit length; rounding of the product itself is of the order of 1e-15
    assert np.abs(gradient[x > 0]).max(initial=0.0) < 1e-10
    assert gradient[x == 0].max(initial=0.0) < 1e-10


@TRIES
@given(problems())
def test_fitted_values_equal_those_of_the_one_by_one_solver(problem):
    a, y = problem
    length, size = sizes(a, y)
    # the twin gets unit columns and unit data, or its own tolerance would decide
    twin = np.array([one_by_one(a / length, row / s)[0] for row, s in zip(y, size, strict=True)]) * size[:, None]
    fitted, expected = nnls(a, y) @ a.T, twin @ (a / length).T
    assert (np.linalg.norm(fitted - expected, axis=1) <= 1e-10 * size).all()


@TRIES
@given(problems())
def test_amounts_equal_where_the_design_determines_them(problem):
    a, y = problem
    length, size = sizes(a, y)
    unit = a / length
    if np.linalg.matrix_rank(unit) < a.shape[1] or np.linalg.cond(unit) > 1e4:
        return
    x = nnls(a, y) * length
    twin = np.array([one_by_one(unit, row / s)[0] for row, s in zip(y, size, strict=True)]) * size[:, None]
    assert (np.linalg.norm(x - twin, axis=1) <= 1e-10 * size).all()


@TRIES
@given(problems())
def test_no_answer_depends_on_the_rest_of_the_batch(problem):
    a, y = problem
    _, size = sizes(a, y)
    whole = nnls(a, y)
    alone = np.vstack([nnls(a, row[None]) for row in y])
    # fitted values: of dependent columns only the sum is determined
    difference = (whole - alone) @ a.T
    assert (np.linalg.norm(difference, axis=1) <= 1e-10 * size).all()


@TRIES
@given(problems(), st.floats(1e-100, 1e100))
def test_data_scaled_answer_scaled(problem, factor):
    a, y = problem
    _, size = sizes(a, y)
    difference = (nnls(a, y * factor) / factor - nnls(a, y)) @ a.T
    assert (np.linalg.norm(difference, axis=1) <= 1e-10 * size).all()
