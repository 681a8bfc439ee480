"""Timings of known-spectra analysis, side by side in one run."""

import cProfile
import pstats
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import nnls as one_by_one
from threadpoolctl import threadpool_limits

import unmix
from unmix.kernels.nnls import nnls
from unmix.spectra import make_spectra

pytestmark = pytest.mark.benchmark

DRUMS = Path(__file__).parents[2] / "demo_sets" / "recovered_solvent"


def bands(rng, k, p):
    at, width = rng.uniform(0, p, (k, 8, 1)), rng.uniform(p / 200, p / 20, (k, 8, 1))
    return np.sum(rng.uniform(0.1, 1, (k, 8, 1)) * np.exp(-(((np.arange(p) - at) / width) ** 2)), axis=1)


def seconds(work, times=5):
    found = []
    for _ in range(times):
        start = time.perf_counter()
        work()
        found.append(time.perf_counter() - start)
    return min(found)


def test_batched_nonnegative_least_squares_against_a_loop():
    rng = np.random.default_rng(0)
    n, p, k = 20_000, 1000, 5
    a = bands(rng, k, p).T
    y = (rng.random((n, k)) * (rng.random((n, k)) < 0.7)) @ a.T + 0.01 * rng.normal(size=(n, p))
    few = 500
    expected = np.array([one_by_one(a, row)[0] for row in y[:few]])
    np.testing.assert_allclose(nnls(a, y)[:few], expected, rtol=0, atol=1e-10)
    loop = seconds(lambda: [one_by_one(a, row) for row in y[:few]]) / few
    ours = seconds(lambda: nnls(a, y)) / n
    product = seconds(lambda: y @ a) / n
    print(f"\nloop {loop * 1e6:.1f} us, unmix {ours * 1e6:.2f} us, bare product {product * 1e6:.2f} us a spectrum: "
          f"{loop / ours:.0f} times faster than the loop, {ours / product:.2f} times the product")  # fmt: skip
    assert loop / ours >= 15


def test_everything_included():
    rng = np.random.default_rng(1)
    n, p, k = 1000, 2400, 6
    axis = np.linspace(650, 4000, p)
    pure = make_spectra(bands(rng, k, p), axis, dim="wavenumber", quantity="absorptivity", leading="component",
                        labels=[f"c{i}" for i in range(k)], attrs={"per": "g/L"})  # fmt: skip
    y = (rng.random((n, k)) * (rng.random((n, k)) < 0.7)) @ pure.values + 1e-3 * rng.normal(size=(n, p))
    spectra = make_spectra(y, axis, dim="wavenumber", quantity="absorbance")
    unmix.quantify(spectra[:50], pure)
    with threadpool_limits(1):
        each = seconds(lambda: unmix.quantify(spectra, pure), 3) / n
        profile = cProfile.Profile()
        profile.runcall(unmix.quantify, spectra, pure)
    print(f"\n{p} channels, {k} components: {each * 1e3:.2f} ms a spectrum on one core; where the time goes:")
    stats = pstats.Stats(profile)
    stats.sort_stats("tottime").print_stats(8)
    assert each < 3e-3


def test_import_is_light():
    code = "import time; t = time.perf_counter(); import unmix; print(time.perf_counter() - t)"
    found = min(float(subprocess.run([sys.executable, "-c", code], capture_output=True, check=True).stdout)
                for _ in range(5))  # fmt: skip
    print(f"\nimport unmix: {found:.3f} s")
    assert found < 0.3


def test_the_drums_with_a_page(tmp_path):
    command = [sys.executable, "-m", "unmix", "quantify", str(DRUMS / "drums"), "--pure", str(DRUMS / "pure"),
               "--report", str(tmp_path / "page.html"), "--overwrite", "--quiet"]  # fmt: skip
    found = seconds(lambda: subprocess.run(command, capture_output=True, check=False), 4)
    print(f"\nquantify the drums, with a page: {found:.2f} s")
    assert (tmp_path / "page.html").exists()
    assert found < 3.0
