"""Asymmetric least squares on 20,000 spectra of 1,000 channels, 10 reweightings, against the two usual ways."""

import subprocess
import sys
import time

import numpy as np
import pytest
from scipy import sparse
from scipy.linalg import solveh_banded
from scipy.sparse.linalg import spsolve

from unmix.kernels.whittaker import reweighted
from unmix.prepare import SavitzkyGolay, StandardNormalVariate

CHANNELS, SPECTRA, REWEIGHTINGS = 1_000, 20_000, 10
PENALTY, ASYMMETRY = 1e6, 0.01


def some_spectra(count):
    rng = np.random.default_rng(0)
    x = np.linspace(0, 1, CHANNELS)
    bands = sum(np.exp(-(((x - at) / 0.02) ** 2)) for at in (0.2, 0.45, 0.5, 0.8))
    return rng.uniform(0.5, 2, (count, 1)) * bands + np.sin(6 * x) + 0.01 * rng.normal(size=(count, CHANNELS))


def by_sparse_solve(y):
    """As printed by Eilers and Boelens (2005), in Python's usual translation."""
    d = sparse.diags_array([1.0, -2.0, 1.0], offsets=[0, 1, 2], shape=(CHANNELS - 2, CHANNELS))
    roughness = PENALTY * (d.T @ d)
    w = np.ones(CHANNELS)
    for _ in range(REWEIGHTINGS):
        z = spsolve((sparse.diags_array(w) + roughness).tocsc(), w * y)
        w = ASYMMETRY * (y > z) + (1 - ASYMMETRY) * (y <= z)
    return z


def by_banded_solve(y):
    bands = np.zeros((3, CHANNELS))
    bands[0, 2:] = PENALTY
    bands[1, 1:] = -4 * PENALTY
    bands[1, [1, -1]] = -2 * PENALTY
    diagonal = np.full(CHANNELS, 6 * PENALTY)
    diagonal[[0, -1]], diagonal[[1, -2]] = PENALTY, 5 * PENALTY
    w = np.ones(CHANNELS)
    for _ in range(REWEIGHTINGS):
        bands[2] = diagonal + w
        z = solveh_banded(bands, w * y, check_finite=False)
        w = ASYMMETRY * (y > z) + (1 - ASYMMETRY) * (y <= z)
    return z


def together(y):
    axis = np.arange(float(CHANNELS))
    # a tolerance below zero never settles, so that all three do the same number of solutions
    rule = ("asymmetric", ASYMMETRY)
    return reweighted(y, np.ones(CHANNELS), axis, PENALTY, 2, rule, REWEIGHTINGS, -1.0)[0]


def microseconds(work, count):
    start = time.perf_counter()
    answer = work()
    return (time.perf_counter() - start) / count * 1e6, answer


@pytest.mark.benchmark
def test_many_baselines_against_the_usual_ways():
    y = some_spectra(SPECTRA)
    together(y[:300])
    few = y[:40]
    usual, expected = microseconds(lambda: np.array([by_sparse_solve(row) for row in few]), len(few))
    banded, _ = microseconds(lambda: np.array([by_banded_solve(row) for row in few]), len(few))
    ours, curves = min((microseconds(lambda: together(y), SPECTRA) for _ in range(3)), key=lambda found: found[0])
    np.testing.assert_allclose(curves[:40], expected, atol=1e-6)
    print(f"\nspsolve {usual:.0f} us, solveh_banded {banded:.0f} us, unmix {ours:.1f} us a spectrum: "
          f"{usual / ours:.0f} and {banded / ours:.0f} times")  # fmt: skip
    assert usual / ours >= 250
    assert banded / ours >= 30


@pytest.mark.benchmark
def test_one_spectrum_costs_no_compilation_and_compiled_code_is_cached():
    program = (
        "import sys, time, numpy as np\n"
        "from unmix.prepare import AsymmetricLeastSquares\n"
        "y = np.random.default_rng(0).normal(size=({count}, 1000)) + np.sin(np.arange(1000) / 100)\n"
        "start = time.perf_counter()\n"
        "AsymmetricLeastSquares().fit_transform(y)\n"
        "print(time.perf_counter() - start)\n"
    )

    def seconds(count):
        done = subprocess.run(
            [sys.executable, "-c", program.format(count=count)], check=True, capture_output=True, text=True
        )
        return float(done.stdout)

    seconds(1_000)
    single, cached = seconds(1), seconds(1_000)
    print(
        f"\none spectrum in a fresh process {1e3 * single:.1f} ms, 1,000 with the compiled code cached {cached:.2f} s"
    )
    assert single < 0.2
    assert cached < 3.0


@pytest.mark.benchmark
def test_linear_steps_cost_little_more_than_a_look_at_the_data():
    y = some_spectra(SPECTRA)
    look, _ = microseconds(y.sum, SPECTRA)
    for step in (SavitzkyGolay(15, 3), StandardNormalVariate()):
        step.fit(y)
        cost, _ = microseconds(lambda step=step: step.transform(y), SPECTRA)
        print(f"\n{type(step).__name__} {cost:.1f} us a spectrum, one sum over the data {look:.1f} us")
        assert cost < 500
