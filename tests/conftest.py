"""What many tests share: the seed, and three small mixtures as three laboratories would have them."""

from dataclasses import dataclass

import numpy as np
import pytest
import xarray as xr

from unmix.spectra import make_spectra


def pytest_addoption(parser):
    parser.addoption("--seeds", default="0", help="seeds of the tests that take one: '7', '0,3' or '0-99'")


def pytest_generate_tests(metafunc):
    # a test that takes a seed must hold for every one of them; one is tried unless more are asked for
    if "seed" in metafunc.fixturenames:
        metafunc.parametrize("seed", _seeds(metafunc.config.getoption("--seeds")), scope="session")


def _seeds(text):
    found = []
    for part in text.split(","):
        first, _, last = part.partition("-")
        found += range(int(first), int(last or first) + 1)
    return found


@pytest.fixture
def rng(seed):
    return np.random.default_rng(seed)


@dataclass(frozen=True)
class Mixture:
    """Samples whose truth is known: amounts as in ``truth``, white noise of standard deviation ``noise``."""

    spectra: xr.DataArray
    pure: xr.DataArray
    truth: np.ndarray
    noise: float

    def with_values(self, values):
        return self.spectra.copy(data=values)


def gaussians(axis, bands):
    return sum(h * np.exp(-4 * np.log(2) * ((axis - at) / width) ** 2) for at, width, h in bands)


def lorentzians(axis, bands):
    return sum(h / (1 + ((axis - at) / (width / 2)) ** 2) for at, width, h in bands)


@pytest.fixture
def dyes(seed):
    """Visible: three dyes with broad bands in a 1 cm cell, an offset and a drift of the lamp."""
    rng = np.random.default_rng([seed, 1])
    axis = np.arange(400.0, 701.0)
    bands = {
        "crimson": [(518, 62, 0.052), (556, 38, 0.031)],
        "amber": [(455, 70, 0.044)],
        "azure": [(612, 54, 0.081), (440, 55, 0.018)],
    }
    pure = np.array([gaussians(axis, one) for one in bands.values()])
    truth = np.array([[9.0, 4.0, 6.0], [0.0, 11.0, 2.0], [5.0, 0.0, 0.0], [3.0, 2.0, 8.0]])
    drift = 0.02 + 0.01 * np.linspace(-1, 1, axis.size)
    values = truth @ pure + drift + 5e-4 * rng.normal(size=(4, axis.size))
    spectra = make_spectra(
        values, axis, dim="wavelength", quantity="absorbance", labels=["vat 1", "vat 2", "vat 3", "vat 4"],
        coords={"batch": ["A", "A", "B", "B"]},
    )  # fmt: skip
    known = make_spectra(pure, axis, dim="wavelength", quantity="absorptivity", leading="component",
                         labels=list(bands), attrs={"per": "mg/L"})  # fmt: skip
    return Mixture(spectra, known, truth, 5e-4)


@pytest.fixture
def solvents(seed):
    """Infrared: three solvents with sharp bands, as one spectrum each in a thin cell (25 um)."""
    rng = np.random.default_rng([seed, 2])
    axis = np.arange(800.0, 1852.0, 2.0)
    bands = {
        "alcohol": [(952, 14, 1.4), (1130, 20, 1.1), (1380, 18, 0.8)],
        "ketone": [(1222, 14, 1.2), (1363, 12, 1.1), (1715, 14, 2.2)],
        "ester": [(1047, 16, 0.9), (1241, 18, 2.0), (1742, 13, 2.1)],
    }
    pure = np.array([lorentzians(axis, one) for one in bands.values()])
    truth = np.array([[300.0, 120.0, 80.0], [520.0, 0.0, 30.0], [90.0, 260.0, 0.0]])
    values = 0.0025 * truth @ pure + 0.01 + 1e-3 * rng.normal(size=(3, axis.size))
    spectra = make_spectra(values, axis, dim="wavenumber", quantity="absorbance", labels=["drum 1", "drum 2", "drum 3"],
                           attrs={"path_length": 0.0025})  # fmt: skip
    known = make_spectra(pure, axis, dim="wavenumber", quantity="absorptivity", leading="component",
                         labels=list(bands), attrs={"per": "g/L"})  # fmt: skip
    return Mixture(spectra, known, truth, 1e-3)


@pytest.fixture
def gases(seed):
    """Process gas: transmittance along time in a 10 m cell, on the uneven wavenumber axis of a grating."""
    rng = np.random.default_rng([seed, 3])
    axis = np.sort(1e7 / np.linspace(3300.0, 4800.0, 600))
    bands = {
        "propane": [(2870, 30, 2.0e-4), (2968, 34, 5.0e-4)],
        "formaldehyde": [(2780, 40, 1.2e-4), (2843, 30, 1.5e-4)],
    }
    pure = np.array([gaussians(axis, one) for one in bands.values()])
    truth = np.array([[120.0, 40.0], [80.0, 60.0], [40.0, 90.0], [0.0, 120.0], [0.0, 0.0]])
    light = 10.0 ** -(10.0 * truth @ pure) + 3e-4 * rng.normal(size=(5, axis.size))
    time = np.datetime64("2021-03-04T08:00", "ns") + np.arange(5) * np.timedelta64(10, "m")
    along = {"time": time, "batch": ["A"] * 3 + ["B"] * 2, "path_length": [1000.0] * 5}
    spectra = make_spectra(light, axis, dim="wavenumber", quantity="transmittance", leading="time", coords=along)
    known = make_spectra(pure, axis, dim="wavenumber", quantity="absorptivity", leading="component",
                         labels=list(bands), attrs={"per": "umol/mol m"})  # fmt: skip
    return Mixture(spectra, known, truth, 3e-4)
