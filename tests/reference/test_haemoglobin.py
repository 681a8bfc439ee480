"""Oxygen saturation of blood: published spectra, invented mixtures, and a measurement that cannot answer.

The spectra are S. Prahl's compilation (1998, after W. B. Gratzer and N. Kollias), molar per tetramer, 2 nm apart; see
``data/README.md``. Its isosbestic wavelengths are well known and depend on the compilation by up to 6 nm.
"""

from pathlib import Path

import numpy as np
import pytest

import unmix
from unmix.spectra import make_spectra

TABLE = np.loadtxt(Path(__file__).parent / "data" / "haemoglobin_molar_absorptivity.csv", delimiter=",", skiprows=1)
AXIS, OXY, DEOXY = TABLE.T

#: crossings of the two spectra by linear interpolation of the table, computed
CROSSINGS = [259.93, 339.54, 390.01, 422.05, 452.36, 500.11, 529.24, 545.26, 570.18, 584.09, 796.80]

#: whole blood, 150 g/L at 64,500 g/mol, in a cell of 0.1 mm, between 480 and 700 nm
TOTAL, PATH = 150.0 / 64_500.0, 0.01
SEEN = (AXIS >= 480) & (AXIS <= 700)
NOISE = 1e-3


def haemoglobin(channels=SEEN):
    return make_spectra(TABLE[channels][:, 1:].T, AXIS[channels], dim="wavelength", quantity="absorptivity",
                        leading="component", labels=["oxyhaemoglobin", "deoxyhaemoglobin"],
                        attrs={"per": "mol/L"})  # fmt: skip


def blood(rng, saturation):
    """Samples of one saturation each, with an offset, a slope and white noise."""
    amounts = TOTAL * np.column_stack([saturation, 1.0 - saturation])
    values = PATH * amounts @ TABLE[SEEN][:, 1:].T
    line = np.vstack([np.ones(values.shape[1]), np.linspace(-1, 1, values.shape[1])])
    values = values + rng.normal(scale=0.02, size=(saturation.size, 2)) @ line + NOISE * rng.normal(size=values.shape)
    return make_spectra(values, AXIS[SEEN], dim="wavelength", quantity="absorbance"), amounts


def test_table_holds_the_published_anchors():
    # values of the compilation as printed, per mol/L and cm
    anchors = {250: (106112, 112736), 500: (20932.8, 20862), 570: (44496, 45072), 584: (34639.6, 34332.8),
               660: (319.6, 3226.56), 798: (807.2, 782.36), 940: (1214, 693.44), 1000: (1024, 206.784)}  # fmt: skip
    for wavelength, (oxy, deoxy) in anchors.items():
        assert TABLE[wavelength == AXIS, 1:].tolist() == [[oxy, deoxy]]


def test_isosbestic_wavelengths():
    difference = OXY - DEOXY
    at = np.flatnonzero(np.sign(difference[1:]) != np.sign(difference[:-1]))
    crossings = AXIS[at] + 2.0 * difference[at] / (difference[at] - difference[at + 1])
    assert crossings == pytest.approx(CROSSINGS, abs=0.0051)
    # the set that is usually named, to the nearest nanometre
    for named in (500, 529, 545, 570, 584, 797):
        assert np.abs(crossings - named).min() < 0.6


@pytest.mark.parametrize("noise", [None, NOISE])
def test_saturation_from_nothing_to_full(rng, noise):
    # 200 spectra at each of eleven saturations. Nominal 5% of misses; the two amounts of a spectrum err together, so
    # the standard error is 0.46% over all and 1.5% a saturation. At an absent component only one side can miss, which
    # takes 0.2% off the whole. Margins: four standard errors
    saturation = np.repeat(np.linspace(0, 1, 11), 200)
    spectra, amounts = blood(rng, saturation)
    found = unmix.quantify(spectra, haemoglobin(), noise=noise, path_length=f"{10 * PATH} mm")
    missed = (found.lower.values > amounts) | (found.upper.values < amounts)
    assert 0.03 < missed.mean() < 0.068
    assert missed.reshape(11, 400).mean(axis=1).max() < 0.11
    assert np.mean(found.verdict.values != "supported") < 0.03
    # saturation itself, and its interval from the ends of the two (wider than 95%, since their errors go together)
    c = found.concentration.values
    assert np.abs(c[:, 0] / c.sum(axis=1) - saturation).max() < 0.01
    low = found.lower.values[:, 0] / (found.lower.values[:, 0] + found.upper.values[:, 1])
    high = found.upper.values[:, 0] / (found.upper.values[:, 0] + found.lower.values[:, 1])
    inside = (low <= saturation) & (saturation <= high)
    assert inside.mean() > 0.93
    # counter-test: half of these intervals would not do
    middle, half = (found.lower + found.upper).values / 2, (found.upper - found.lower).values / 4
    assert (np.abs(amounts - middle) > half).mean() > 0.2


@pytest.mark.parametrize("pair", [(529.24, 545.26), (500.11, 584.09), (545.26, 570.18)])
@pytest.mark.parametrize("noise", [None, NOISE])
def test_two_isosbestic_channels_cannot_answer_and_say_why(rng, pair, noise):
    # both spectra have the same absorptivity at each: the sum is measured twice, the ratio never
    known = haemoglobin(np.ones(AXIS.size, dtype=bool))
    values = PATH * TOTAL * np.array([np.interp(pair, AXIS, OXY)]) + NOISE * rng.normal(size=(1, 2))
    sample = make_spectra(values, pair, dim="wavelength", quantity="absorbance")
    found = unmix.quantify(sample, known, baseline=None, noise=noise, path_length=PATH)
    assert found.verdict.values[0] == "unsupported"
    reason = found.reason.values[0]
    assert "oxyhaemoglobin and deoxyhaemoglobin cannot be told apart" in reason
    assert "condition index" in reason or "the same up to a factor" in reason
    width = (found.upper - found.lower).values[0]
    assert not (width < 0.5 * TOTAL).any()


def test_two_channels_beside_can(rng):
    # 560 nm and 660 nm, where the spectra part: the same two numbers answer
    channels = np.isin(AXIS, [560.0, 660.0])
    amounts = TOTAL * np.array([[0.7, 0.3]])
    values = PATH * amounts @ TABLE[channels][:, 1:].T + NOISE * rng.normal(size=(1, 2))
    sample = make_spectra(values, AXIS[channels], dim="wavelength", quantity="absorbance")
    found = unmix.quantify(sample, haemoglobin(), baseline=None, noise=NOISE, path_length=PATH)
    assert found.verdict.values[0] == "supported"
    score = (found.concentration.values - amounts) / found.standard_uncertainty.values
    assert np.abs(score).max() < 4.5


def test_conditioning_knows_it_before_anything_is_measured():
    whole = haemoglobin()
    assert unmix.conditioning(whole).verdict.item() == "supported"
    # the nearest channels of the table to two isosbestic points
    near = haemoglobin(np.isin(AXIS, [570.0, 584.0]))
    found = unmix.conditioning(near, baseline=None, noise=NOISE)
    assert found.verdict.item() != "supported"
    assert "oxyhaemoglobin and deoxyhaemoglobin" in found.reason.item()
    assert found.confused_with.values.tolist() == ["deoxyhaemoglobin", "oxyhaemoglobin"]
    ratio = found.detection_limit.values / unmix.conditioning(whole, noise=NOISE).detection_limit.values
    assert (ratio > 50).all()
