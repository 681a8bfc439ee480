"""How fast files are read, and in how much memory; run with one core as DEVELOPERS.md says."""

import subprocess
import sys
import time

import numpy as np
import pytest

import unmix
from unmix.spectra import make_spectra

pytestmark = pytest.mark.benchmark


def test_a_thousand_packed_files(tmp_path):
    """1,000 JCAMP-DX files of 3,500 points in DIFDUP form in under 4 s on one core."""
    rng = np.random.default_rng(0)
    axis = np.linspace(400, 4000, 3500)
    for i in range(1000):
        bands = zip(rng.uniform(500, 3900, 12), rng.uniform(5, 60, 12), rng.uniform(0.1, 1, 12), strict=True)
        values = sum(h * np.exp(-(((axis - at) / w) ** 2)) for at, w, h in bands) + rng.normal(0, 5e-4, axis.size)
        one = make_spectra([values.round(5)], axis, dim="wavenumber", quantity="absorbance", labels=[f"s{i}"])
        unmix.write(one, tmp_path / f"{i:04d}.jdx", form="DIFDUP")
    unmix.read(tmp_path / "0000.jdx")  # nothing is compiled, but packages are loaded
    start = time.perf_counter()
    spectra = unmix.read(tmp_path)
    seconds = time.perf_counter() - start
    print(f"1,000 DIFDUP files of 3,500 points: {seconds:.2f} s")
    assert spectra.shape == (1000, 3500)
    assert seconds < 4


MEASURE = """
import re, sys, time, unmix, xarray
def kilobytes(name):  # getrusage would count the memory of the parent, too
    return int(re.search(name + r":\\s+(\\d+)", open("/proc/self/status").read()).group(1))
before = kilobytes("VmRSS")
start = time.perf_counter()
spectra = unmix.read(sys.argv[1])
seconds = time.perf_counter() - start
grown = (kilobytes("VmHWM") - before) * 1024
print(spectra.shape[0], spectra.shape[1], seconds, grown / spectra.nbytes)
"""


@pytest.mark.parametrize("orientation", ["columns", "rows"])
def test_a_big_table(tmp_path, orientation):
    """A CSV of 200 MB, without holding more than four times its numbers."""
    rng = np.random.default_rng(0)
    path = tmp_path / "big.csv"
    n, channels = 2100, 12000
    with path.open("w") as file:
        if orientation == "columns":
            file.write("Wavelength (nm)," + ",".join(f"s{i} (A)" for i in range(n)) + "\n")
            heads, width = (f"{400 + k * 0.1:.1f}" for k in range(channels)), n
        else:
            file.write("# quantity: absorbance\nname," + ",".join(f"{400 + k * 0.1:.1f} nm" for k in range(channels)))
            file.write("\n")
            heads, width = (f"s{i}" for i in range(n)), channels
        for head in heads:
            file.write(head + "," + ",".join(map("{:.5f}".format, rng.uniform(0, 2, width))) + "\n")
    size = path.stat().st_size
    run = subprocess.run([sys.executable, "-c", MEASURE, path], capture_output=True, text=True, check=True)
    spectra, points, seconds, multiple = map(float, run.stdout.split())
    print(f"{size / 1e6:.0f} MB, {orientation}: {seconds:.1f} s, {multiple:.2f} times its numbers")
    assert (spectra, points) == (n, channels)
    assert size > 200e6
    assert multiple < 4
