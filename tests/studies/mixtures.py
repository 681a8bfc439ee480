"""Invented mixtures with a known answer, for the simulation studies: pure spectra, noise of many kinds, harm."""

from dataclasses import dataclass

import numpy as np
import xarray as xr
from scipy.signal import lfilter, savgol_filter

from unmix.spectra import make_spectra

AXIS = np.arange(650.0, 4000.5, 2.0)


def pure_spectra(rng, n, axis=AXIS, sharp=1.0):
    """Pure spectra of 6 to 20 pseudo-Voigt bands, the strongest of height about 1."""
    spectra = np.zeros((n, axis.size))
    low, high = axis[0], axis[-1]
    for i in range(n):
        row = spectra[i]
        for _ in range(rng.integers(6, 21)):
            center = rng.uniform(low, low + 0.35 * (high - low)) if rng.random() < 0.7 else rng.uniform(low, high)
            width = sharp * rng.lognormal(np.log(0.006), 0.5) * (high - low)
            height = rng.lognormal(-1.5, 0.8)
            u = (axis - center) / width
            row = row + height * (0.5 * np.exp(-4 * np.log(2) * u**2) + 0.5 / (1 + 4 * u**2))
        spectra[i] = row / row.max()
    return spectra


def zero_filled(rng, shape, factor):
    """Noise of an interferogram that was zero filled: nothing above 1/factor of the highest frequency."""
    n, p = shape
    size = p + 200
    spectrum = rng.normal(size=(n, size // 2 + 1)) + 1j * rng.normal(size=(n, size // 2 + 1))
    spectrum[:, int(spectrum.shape[1] / factor) :] = 0
    noise = np.fft.irfft(spectrum, n=size, axis=1)[:, 100 : 100 + p]
    return noise / noise.std()


def noise_of(kind, rng, shape):
    """Noise of standard deviation about 1."""
    n, p = shape
    if kind == "white":
        return rng.normal(size=shape)
    if kind == "smoothed":
        e = rng.normal(size=(n, p + 2))
        return (e[:, :-2] + e[:, 1:-1] + e[:, 2:]) / np.sqrt(3)
    if kind == "savitzky-golay":
        e = savgol_filter(rng.normal(size=(n, p + 40)), 9, 2, axis=1)[:, 20:-20]
        return e / e.std()
    if kind == "ar":
        return lfilter([np.sqrt(1 - 0.64)], [1, -0.8], rng.normal(size=(n, p + 200)), axis=1)[:, 200:]
    if kind.startswith("zero filled"):
        return zero_filled(rng, shape, int(kind.split()[-1]))
    raise ValueError(kind)


@dataclass
class Case:
    """Samples with their truth; ``listed`` is what the solver is told."""

    spectra: xr.DataArray
    pure: xr.DataArray
    truth: np.ndarray
    unlisted: np.ndarray | None = None
    harm: np.ndarray | None = None  # how far the unlisted compound moves each amount
    clean: xr.DataArray | None = None  # the samples without it


def amounts(rng, n, k, present=0.7):
    """Amounts over two decades, some components absent, at least one there."""
    found = 10 ** rng.uniform(-2, 0, size=(n, k)) * (rng.random((n, k)) < present)
    found[np.arange(n), rng.integers(0, k, n)] = 10 ** rng.uniform(-1, 0, n)
    return found


def labelled(values, axis=AXIS, quantity="absorbance"):
    return make_spectra(values, axis, dim="wavenumber", quantity=quantity)


def labelled_pure(values, axis=AXIS, **coords):
    pure = make_spectra(values, axis, dim="wavenumber", quantity="absorptivity", leading="component",
                        labels=[f"component {i + 1}" for i in range(len(values))], attrs={"per": "g/L"})  # fmt: skip
    return pure.assign_coords({name: ("component", entry) for name, entry in coords.items()})


def baseline_of(rng, n, order, axis=AXIS, size=0.02):
    if order is None:
        return np.zeros((n, axis.size))
    at = np.linspace(-1, 1, axis.size)
    return rng.normal(scale=size, size=(n, order + 1)) @ np.polynomial.legendre.legvander(at, order).T


def mixtures(rng, n, k, *, noise="white", level=1e-3, baseline=1, **options):
    """A right model: Beer-Lambert mixtures, a polynomial baseline and noise of one kind."""
    pure = pure_spectra(rng, k)
    truth = amounts(rng, n, k, **options)
    y = truth @ pure + baseline_of(rng, n, baseline) + level * noise_of(noise, rng, (n, AXIS.size))
    return Case(labelled(y), labelled_pure(pure), truth)


def shifted(pure, by, axis=AXIS):
    return np.array([np.interp(axis - by, axis, row) for row in pure])


def broadened(pure, by, rng, k):
    """The same bands, each wider by a factor (areas kept): the rows are made anew from the same numbers."""
    state = rng.bit_generator.state
    narrow = pure_spectra(rng, k)
    rng.bit_generator.state = state
    wide = pure_spectra(rng, k, sharp=by)
    return narrow, wide / by


def with_unlisted(rng, n, k, *, level=1e-3, noise="white", baseline=1, share=0.5):
    """In ``share`` of the samples one more compound, from invisible to dominant."""
    pure = pure_spectra(rng, k + 1)
    truth = amounts(rng, n, k)
    there = rng.random(n) < share
    hidden = 10 ** rng.uniform(np.log10(level) - 0.5, 0, n) * there
    y = truth @ pure[:k] + hidden[:, None] * pure[k] + baseline_of(rng, n, baseline)
    y = y + level * noise_of(noise, rng, y.shape)
    terms = np.vstack([pure[:k], np.polynomial.legendre.legvander(np.linspace(-1, 1, AXIS.size), baseline).T])
    moved = np.linalg.lstsq(terms.T, pure[k], rcond=None)[0][:k]
    clean = labelled(y - hidden[:, None] * pure[k])
    return Case(labelled(y), labelled_pure(pure[:k]), truth, hidden, hidden[:, None] * moved, clean)


def with_shift(rng, n, k, *, level=1e-3, most=2.0):
    """The samples' axis is off by up to one channel."""
    pure = pure_spectra(rng, k)
    truth = amounts(rng, n, k)
    by = rng.uniform(-most, most, n)
    y = np.array([c @ shifted(pure, b) for c, b in zip(truth, by, strict=True)])
    y = y + baseline_of(rng, n, 1) + level * rng.normal(size=y.shape)
    return Case(labelled(y), labelled_pure(pure), truth)


def with_broadening(rng, n, k, *, level=1e-3, by=1.1):
    """The samples' bands are wider than those of the pure spectra, areas kept."""
    pure, wide = broadened(None, by, rng, k)
    truth = amounts(rng, n, k)
    y = truth @ wide + baseline_of(rng, n, 1) + level * rng.normal(size=(n, AXIS.size))
    return Case(labelled(y), labelled_pure(pure), truth)


def with_saturation(rng, n, k, *, level=3e-4, stray=2e-3, path=6.0):
    """Stray light and constant noise in transmittance behind a long path: tops are flat."""
    pure = pure_spectra(rng, k)
    truth = amounts(rng, n, k)
    absorbance = path * truth @ pure
    light = (10.0**-absorbance + stray) / (1 + stray) + level * rng.normal(size=absorbance.shape)
    y = np.where(light > 0, -np.log10(np.where(light > 0, light, 1.0)), np.nan)
    return Case(labelled(y), labelled_pure(pure * path), truth)


def in_transmittance(rng, n, k, *, level=3e-4, path=1.5):
    """Noise constant in transmittance; the samples come as transmittance."""
    pure = pure_spectra(rng, k)
    truth = amounts(rng, n, k)
    light = 10.0 ** -(path * truth @ pure + baseline_of(rng, n, 1)) + level * rng.normal(size=(n, AXIS.size))
    return Case(labelled(light, quantity="transmittance"), labelled_pure(pure * path), truth)


def alike(rng, n, k, *, level=1e-3, cosine=0.99):
    """Two of the pure spectra have a given cosine."""
    pure = pure_spectra(rng, k)
    a, b = pure[0] / np.linalg.norm(pure[0]), pure[1]
    b = b - (a @ b) * a
    pure[1] = (cosine * a + np.sqrt(1 - cosine**2) * b / np.linalg.norm(b)) * np.linalg.norm(pure[0])
    truth = amounts(rng, n, k)
    y = truth @ pure + baseline_of(rng, n, 1) + level * rng.normal(size=(n, AXIS.size))
    return Case(labelled(y), labelled_pure(pure), truth)


def roughly_known(rng, n, k, *, level=1e-3, relative=0.02):
    """Each pure spectrum is wrong by a factor known to 2%, another factor in each sample's truth."""
    pure = pure_spectra(rng, k)
    truth = amounts(rng, n, k)
    factor = 1.0 + relative * rng.normal(size=(n, k))
    y = (truth * factor) @ pure + baseline_of(rng, n, 1) + level * rng.normal(size=(n, AXIS.size))
    return Case(labelled(y), labelled_pure(pure, relative_uncertainty=np.full(k, relative)), truth)
