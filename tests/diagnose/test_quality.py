"""Facts about one spectrum: each is found where it was put in, and nowhere else."""

import numpy as np
import pytest

from unmix.diagnose.atmosphere import _CO2, _WATER, atmosphere
from unmix.diagnose.quality import channel_noise, quality
from unmix.spectra import make_spectra

AXIS = np.arange(600.0, 4001.0, 2.0)


def bands(rng, axis=AXIS, n=25, apart_from=None):
    """Condensed-phase bands; ``apart_from`` keeps their centres out of a window."""
    places, widths, heights = rng.uniform(650, 3950, n), rng.uniform(6, 40, n), rng.uniform(0.05, 0.8, n)
    if apart_from:
        places[(places > apart_from[0]) & (places < apart_from[1])] -= apart_from[1] - apart_from[0]
    return sum(h / (1 + ((axis - at) / w) ** 2) for at, w, h in zip(places, widths, heights, strict=True))


def spectra(values, *, dim="wavenumber", quantity="absorbance", axis=AXIS):
    return make_spectra(values, axis, dim=dim, quantity=quantity)


def test_noise_is_found_beneath_bands(rng):
    # From 2 parts in a thousand of the bands up; below, narrow bands add to it
    for sigma in (1e-3, 1e-2):
        rows = np.array([bands(rng) + rng.normal(0, sigma, AXIS.size) for _ in range(40)])
        ratio = channel_noise(rows) / sigma
        assert 0.95 < np.median(ratio) < 1.15
        assert ratio.min() > 0.8
        assert ratio.max() < 1.4


def test_noise_of_few_or_missing_channels():
    assert np.isnan(channel_noise(np.ones((2, 5)))).all()
    assert np.isnan(channel_noise(np.full((1, 50), np.nan))).all()
    assert channel_noise(np.ones((1, 50)))[0] == 0


def test_clean_spectrum_has_no_remark(rng):
    found = quality(spectra([bands(rng) + rng.normal(0, 1e-3, AXIS.size)]))
    assert found.remark.values.tolist() == [""]
    for name in ("missing", "saturated", "negative", "impossible", "carbon_dioxide", "water_vapour"):
        assert found[name].values.tolist() == [0]
    assert found.noise.attrs["units"] == "1"


def test_missing_and_infinite_channels(rng):
    row = bands(rng)
    row[10:13] = np.nan
    row[20] = np.inf
    found = quality(spectra([row]))
    assert found.missing.item() == 3
    assert found.impossible.item() == 1
    assert found.remark.item() == "3 channels missing between 620 and 624 cm-1; 1 channel infinite"


@pytest.mark.parametrize(("quantity", "row", "remark"), [
    ("absorbance", [0.1, 0.2, -0.3, 0.1], "1 channel below zero, down to -0.3 at 502 nm"),
    ("absorbance", [0.1, 0.2, -0.01, 0.1], ""),
    ("transmittance", [0.9, 1.01, 0.5, 0.4], ""),
    ("transmittance", [0.9, 1.3, 0.5, 1.1], "2 channels above full transmittance, up to 1.3 at 501 nm"),
    ("transmittance", [0.9, -0.1, 0.5, 0.4], "1 channel below zero, down to -0.1 at 501 nm"),
    ("reflectance", [0.9, 1.2, 0.5, 0.4], "1 channel above full reflectance, up to 1.2 at 501 nm"),
    ("absorptivity", [900, -100, 500, 40], "1 channel below zero, down to -100 at 501 nm"),
    ("absorptivity", [900, -10, 500, 40], ""),
    ("intensity", [-5, 3, 900, 4], ""),
    ("GLOW", [-5, 3, 900, 4], ""),
])  # fmt: skip
def test_impossible_values(quantity, row, remark):
    one = spectra([row], dim="wavelength", axis=np.arange(500.0, 504.0)).assign_attrs(quantity=quantity)
    assert quality(one).remark.item() == remark


def test_flat_tops(rng):
    clean = 8 * np.exp(-(((AXIS - 1700) / 60) ** 2)) + 0.3 * np.exp(-(((AXIS - 1200) / 20) ** 2))
    clean = clean + rng.normal(0, 2e-4, AXIS.size)
    transmitted = 10**-clean + 0.005
    for quantity, values in (("absorbance", -np.log10(transmitted)), ("transmittance", transmitted)):
        found = quality(spectra([values], quantity=quantity))
        assert found.plateau.item() == pytest.approx(2.3, abs=0.05)
        assert found.saturated.item() > 20
        assert found.remark.item().startswith("flat top at absorbance 2.3")
    assert quality(spectra([clean])).saturated.item() == 0


def test_clipped_signal():
    row = np.minimum(50 + 80 * np.exp(-(((AXIS - 1700) / 60) ** 2)), 100)
    found = quality(spectra([row, row / 2 + np.arange(row.size) * 1e-6], dim="raman_shift", quantity="intensity"))
    assert found.saturated.values[0] > 10
    assert found.saturated.values[1] == 0
    assert found.remark.values[0].startswith("clipped signal")


def with_air(rng, carbon_dioxide=0.0, water=0.0, sigma=3e-4):
    lines = np.concatenate([np.array(lines) for _, _, lines in _WATER])
    air = carbon_dioxide * sum(h * np.exp(-(((AXIS - at) / w) ** 2)) for at, w, h in _CO2)
    # Lines that stand up to half a wavenumber from where they are said to, and differ in height
    at = lines + rng.uniform(-0.5, 0.5, lines.size)
    vapour = sum(h * np.exp(-(((AXIS - a) / 2.5) ** 2)) for a, h in zip(at, rng.uniform(0.3, 1, at.size), strict=True))
    return bands(rng, n=12, apart_from=(2150, 2550)) + air + water * vapour + rng.normal(0, sigma, AXIS.size)


@pytest.mark.parametrize("sign", [1, -1])
def test_air_is_found_with_its_sign(rng, sign):
    rows = np.array([with_air(rng, sign * 0.05, sign * 0.01) for _ in range(40)])
    found = atmosphere(AXIS, rows, channel_noise(rows))
    assert np.mean(sign * found.carbon_dioxide > 0) > 0.85
    assert np.mean(sign * found.water_vapour > 0) > 0.7
    seen = found.carbon_dioxide[found.carbon_dioxide != 0]
    assert np.median(sign * seen) == pytest.approx(0.05, rel=0.2)


def test_no_air_is_found_where_there_is_none(rng):
    rows = np.array([with_air(rng) for _ in range(300)])
    found = atmosphere(AXIS, rows, channel_noise(rows))
    assert np.mean(found.carbon_dioxide != 0) < 0.02
    assert np.mean(found.water_vapour != 0) < 0.02


def test_air_needs_an_axis_that_shows_it():
    rows = np.ones((1, 300))
    assert np.isnan(atmosphere(np.linspace(600, 1300, 300), rows, np.ones(1))).all()
    assert np.isnan(atmosphere(np.linspace(600, 4000, 300), rows, np.ones(1))).all()
    assert np.isnan(quality(spectra(rows, dim="wavelength", axis=np.linspace(600, 4000, 300))).water_vapour.item())
    flat = atmosphere(AXIS, np.full((1, AXIS.size), np.nan), np.ones(1))
    assert (flat.carbon_dioxide.item(), flat.water_vapour.item()) == (0, 0)
