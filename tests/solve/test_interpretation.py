"""What a calibration rests on, and choosing samples for one."""

import numpy as np
import pandas as pd
import pytest
from sklearn.cross_decomposition import PLSRegression

import unmix
from unmix.errors import InputError
from unmix.spectra import make_spectra

AXIS = np.arange(1000.0, 1600, 10)
PURE = np.exp(-(((AXIS - np.array([[1150.0], [1300], [1450]])) / 60) ** 2))


@pytest.fixture
def runs(rng):
    c = rng.uniform(0.2, 2, (50, 3))
    x = c @ PURE + 1e-3 * rng.normal(size=(50, AXIS.size))
    names = [f"run {i}" for i in range(50)]
    spectra = make_spectra(x, AXIS, dim="wavelength", quantity="absorbance", labels=names)
    return spectra, pd.DataFrame({"water": c[:, 0]}, index=names), c


@pytest.fixture
def read(runs):
    spectra, known, _ = runs
    calibration = unmix.calibrate(spectra, known, n_components=3, permutations=0, unit="g/L", reference_error=0.01)
    return calibration, unmix.interpret(calibration)


def test_importance_equals_that_of_the_general_library(runs, read):
    spectra, known, _ = runs
    pls = PLSRegression(3, scale=False).fit(spectra.values, known.to_numpy())
    w, q, t = pls.x_weights_, pls.y_loadings_[0], pls.x_scores_
    explained = q**2 * np.sum(t**2, axis=0)
    expected = np.sqrt(AXIS.size * ((w / np.linalg.norm(w, axis=0)) ** 2 @ explained) / explained.sum())
    found = read[1].importance.values[0]
    np.testing.assert_allclose(found, expected, rtol=1e-6)
    assert np.mean(found**2) == pytest.approx(1.0)
    np.testing.assert_allclose(read[1].coefficient.values[0], pls.coef_[0], atol=1e-8)


def test_the_channels_that_matter_are_those_of_the_property(read):
    found = read[1]
    assert 1100 <= found.wavelength.values[found.importance.values[0].argmax()] <= 1200
    assert 1100 <= found.wavelength.values[found.selectivity_ratio.values[0].argmax()] <= 1200
    # the uncertainty says that the vector is not zero there
    peak = int(np.abs(found.coefficient.values[0]).argmax())
    assert found.coefficient_uncertainty.values[0, peak] < 0.3 * abs(found.coefficient.values[0, peak])


def test_the_selectivity_ratio_equals_its_definition(runs, read):
    spectra = runs[0]
    calibration, found = read
    b = found.coefficient.values[0]
    x = calibration.model.known_scores @ calibration.model.loadings.T
    t = x @ b / np.linalg.norm(b)
    p = x.T @ t / (t @ t)
    along, rest = np.var(np.outer(t, p), axis=0, ddof=1), np.var(x - np.outer(t, p), axis=0, ddof=1)
    residual = calibration.data["residual_scale"].values ** 2
    np.testing.assert_allclose(found.selectivity_ratio.values[0], along / (rest + residual), rtol=1e-6)
    assert spectra.shape[1] == b.size


def test_net_signal_and_detection_limits(runs, read, rng):
    _, found = read
    # the net analyte signal of a unit reads as one unit, and nothing of the others
    b, net = found.coefficient.values[0], found.net_signal.values[0]
    assert b @ net == pytest.approx(1.0)
    assert np.linalg.norm(net) == pytest.approx(found.sensitivity.values[0])
    np.testing.assert_allclose(b @ PURE[1:].T, 0, atol=0.01)
    # Allegrini and Olivieri by hand
    calibration = read[0]
    y = runs[2][:, 0]
    noise = np.sqrt(np.mean(calibration.data["residual_scale"].values ** 2))
    h0 = y.mean() ** 2 / np.sum((y - y.mean()) ** 2)
    low = 3.3 * np.sqrt((1 + h0) * (noise * np.linalg.norm(b)) ** 2 + h0 * 0.01**2)
    assert found.detection_low.values[0] == pytest.approx(low)
    assert found.detection_high.values[0] >= found.detection_low.values[0]
    # blanks scatter by less than the limit over 3.3, above by the noise of the spectra alone
    blanks = np.column_stack([np.zeros(300), rng.uniform(0.2, 2, (300, 2))]) @ PURE + 1e-3 * rng.normal(
        size=(300, AXIS.size)
    )
    predicted = calibration.model.guard(blanks).predicted[:, 0]
    assert predicted.std() < found.detection_low.values[0] / 3.3


def test_units(read):
    found = read[1]
    assert found.detection_low.attrs["units"] == "g/L"
    assert found.sensitivity.attrs["units"] == "signal per g/L"


def test_another_thing_is_refused(runs):
    with pytest.raises(InputError, match="calibration is a DataFrame"):
        unmix.interpret(runs[1])


@pytest.mark.parametrize("method", ["kennard-stone", "duplex", "y-aware"])
def test_samples_span_the_set(runs, method):
    spectra, known, c = runs
    options = {"reference": known} if method == "y-aware" else {}
    chosen = unmix.select_samples(spectra, 12, method=method, **options)
    assert chosen.label.values.tolist() == [f"run {i}" for i in chosen.values]
    assert len(set(chosen.values.tolist())) == 12
    assert np.ptp(c[chosen.values, 0]) > 0.75 * np.ptp(c[:, 0])


@pytest.mark.parametrize(
    ("options", "told"),
    [
        ({"count": 1}, "count is 1 of 50"),
        ({"count": 30, "method": "duplex"}, "give 2 to 25"),
        ({"count": 5, "method": "random"}, "method is 'random'"),
        ({"count": 5, "method": "y-aware"}, "reference values go with"),
    ],
)
def test_choices_that_cannot_be_made(runs, options, told):
    with pytest.raises(InputError, match=told):
        unmix.select_samples(runs[0], **options)
