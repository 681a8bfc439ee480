"""Looking after a calibration, through the public functions."""

import numpy as np
import pandas as pd
import pytest

import unmix
from unmix.errors import InputError
from unmix.spectra import make_spectra

AXIS = np.arange(1000.0, 1600, 10)
PURE = np.exp(-(((AXIS - np.array([[1150.0], [1300], [1450]])) / 60) ** 2))


def measured(rng, n, gain=1.0, start=0, drift=None):
    c = rng.uniform(0.2, 2, (n, 3))
    x = gain * c @ PURE + 1e-3 * rng.normal(size=(n, AXIS.size))
    if drift is not None:
        x = x + drift[:, None] * np.exp(-(((AXIS - 1230) / 20) ** 2))
    names = [f"run {start + i}" for i in range(n)]
    y = c[:, 0] + 0.02 * rng.normal(size=n)
    return make_spectra(x, AXIS, dim="wavelength", quantity="absorbance", labels=names), pd.DataFrame(
        {"water": y}, index=names
    )


@pytest.fixture
def made(rng):
    return unmix.calibrate(*measured(rng, 60), n_components=3, permutations=0, unit="g/L")


def test_new_samples_that_agree(made, rng):
    found = unmix.check_calibration(made, *measured(rng, 25, start=100))
    assert found.verdict.item() == "supported"
    assert found.advised.values.tolist() == ["none"]
    assert found.error.values[0] < 1.5 * found.expected_error.values[0]
    with pytest.raises(InputError, match="calls for no adjustment"):
        unmix.adjust(made, found)
    assert unmix.adjust(made, found, by="bias") is not made


def test_a_gain_calls_for_a_slope_and_gets_it(made, rng, tmp_path):
    spectra, known = measured(rng, 20, gain=0.85, start=100)
    found = unmix.check_calibration(made, spectra, known)
    assert found.verdict.item() != "supported"
    assert found.advised.values.tolist() == ["slope and bias"]
    assert "slope and bias adjustment" in found.reason.item()
    after = unmix.adjust(made, found)
    fresh, truth = measured(rng, 200, gain=0.85, start=200)
    predicted = unmix.predict(after, fresh)
    error = np.sqrt(np.mean((predicted.predicted.values[:, 0] - truth.water) ** 2))
    assert error < 1.5 * found.expected_error.values[0]
    inside = (predicted.lower.values[:, 0] <= truth.water) & (truth.water <= predicted.upper.values[:, 0])
    assert inside.mean() > 0.88
    # by hand: a + b x of the first predictions
    first = unmix.predict(made, fresh).predicted.values[:, 0]
    expected = found.intercept.values[0] + found.slope.values[0] * first
    np.testing.assert_allclose(predicted.predicted.values[:, 0], expected, rtol=1e-9)
    assert "adjusted after 20 new samples" in after.data.attrs["notes"]
    unmix.save(after, tmp_path / "after.nc")
    again = unmix.predict(unmix.load(tmp_path / "after.nc"), fresh)
    assert again.upper.values.tobytes() == predicted.upper.values.tobytes()


def test_two_calibrations_on_the_same_samples(made, rng):
    spectra, known = measured(rng, 60, start=300)
    poor = unmix.calibrate(
        spectra[:, ::12].isel(sample=slice(0, 20)), known.iloc[:20], n_components=1, permutations=0, unit="g/L"
    )
    fresh, truth = measured(rng, 40, start=500)
    with pytest.raises(unmix.errors.AxisError):
        unmix.compare_calibrations(made, poor, fresh, truth)
    one = unmix.calibrate(spectra, known, n_components=1, permutations=0, unit="g/L")
    found = unmix.compare_calibrations(made, one, fresh, truth)
    assert found.better.values.tolist() == ["first"]
    assert found.p.values[0] < 0.01
    same = unmix.compare_calibrations(made, made, fresh, truth)
    assert same.better.values.tolist() == [""]
    assert same.p.values[0] == 1.0


def test_charts_are_quiet_until_something_changes(made, rng):
    quiet, _ = measured(rng, 300, start=1000)
    found = unmix.drift(made, quiet)
    for name in ("q", "t2"):
        alarm = found[f"{name}_alarm"].values
        assert (alarm[1:] & ~alarm[:-1]).sum() <= 3
    change = np.r_[np.zeros(150), np.linspace(0, 0.05, 150)]
    spectra, known = measured(rng, 300, start=2000, drift=change)
    found = unmix.drift(made, spectra, known)
    first = dict(zip(found.chart.values.tolist(), found.first_alarm.values.tolist(), strict=True))
    assert 0 <= first["q"] < 230
    # alarms by chance come in runs, since the mean remembers
    quiet = found.q_alarm.values[:150]
    assert (quiet[1:] & ~quiet[:-1]).sum() <= 3
    assert found.q_alarm.values[250:].mean() > 0.9
    assert found.bias_chart.shape == (300, 1)
    # half of the reference values are enough
    some = unmix.drift(made, spectra, known.iloc[::2].reindex(known.index))
    assert np.isfinite(some.bias_chart).all()


@pytest.mark.parametrize(
    ("work", "told"),
    [
        (lambda m, s, k: unmix.check_calibration(m, s[:4], k.iloc[:4]), "4 samples have a prediction"),
        (lambda m, s, k: unmix.check_calibration(m, s, k.rename(columns={"water": "moisture"})), "no column 'water'"),
        (lambda m, s, _: unmix.drift(m, s, weight=0), "weight is 0"),
        (lambda m, s, k: unmix.adjust(m, unmix.check_calibration(m, s, k), by="slope"), "by is 'slope'"),
        (lambda m, *_: unmix.adjust(m, m.data), "not a check"),
    ],
)
def test_what_cannot_be_done_is_refused(made, rng, work, told):
    spectra, known = measured(rng, 12, start=700)
    with pytest.raises(InputError, match=told):
        work(made, spectra, known)
