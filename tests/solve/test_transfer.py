"""A calibration on a second instrument."""

import numpy as np
import pandas as pd
import pytest
from sklearn.decomposition import PCA
from sklearn.linear_model import LinearRegression

import unmix
from unmix.errors import InputError
from unmix.kernels.transfer import apply_piecewise, piecewise
from unmix.prepare import SavitzkyGolay
from unmix.spectra import make_spectra

FIRST = np.arange(1000.0, 1700, 5)
SECOND = np.arange(998.0, 1702, 4)
NAMES = [f"run {i}" for i in range(60)]


def instrument(c, axis, rng, second=False):
    """The second has another wavelength scale, a broader line, another gain and stray offset."""
    at = axis + (2.5 + 0.002 * (axis - 1300) if second else 0.0)
    wide = 42.0 if second else 40.0
    pure = np.exp(-(((at - np.array([[1150.0], [1310], [1450]])) / wide) ** 2))
    values = (
        (0.93 if second else 1.0) * c @ pure + (0.03 if second else 0.0) + 3e-4 * rng.normal(size=(len(c), axis.size))
    )
    return make_spectra(values, axis, dim="wavelength", quantity="absorbance", labels=NAMES[: len(c)])


@pytest.fixture
def plant(rng):
    c = rng.uniform(0.2, 2, (60, 3))
    known = pd.DataFrame({"water": c[:, 0]}, index=NAMES)
    first, second = instrument(c, FIRST, rng), instrument(c, SECOND, rng, second=True)
    made = unmix.calibrate(first[:40], known.iloc[:40], permutations=0, unit="g/L", preparation=SavitzkyGolay(window=7))
    return made, first, second, c[:, 0]


def sep(found, truth):
    return np.sqrt(np.mean((found.predicted.values[:, 0] - truth) ** 2))


def test_ten_samples_bring_the_error_back(plant):
    made, first, second, y = plant
    own = sep(unmix.predict(made, first[40:]), y[40:])
    moved = unmix.transfer(made, second[:10], first[:10])
    found = unmix.predict(moved, second[40:])
    assert sep(found, y[40:]) < 1.3 * own
    inside = (found.lower.values[:, 0] <= y[40:]) & (y[40:] <= found.upper.values[:, 0])
    assert inside.mean() >= 0.85
    assert (found.verdict.values == "supported").mean() > 0.8
    # without it the second instrument would mislead, and is refused for its axis
    with pytest.raises(unmix.errors.AxisError):
        unmix.predict(made, second)
    raw = unmix.predict(made, second.interp(wavelength=FIRST).assign_attrs(second.attrs)[40:])
    assert sep(raw, y[40:]) > 5 * own
    assert (raw.verdict.values != "supported").all()


def test_the_uncertainty_of_the_transfer_is_in_the_intervals(plant):
    made, first, second, _ = plant
    moved = unmix.transfer(made, second[:6], first[:6])
    own = unmix.predict(made, first[40:])
    found = unmix.predict(moved, second[40:])
    width = lambda one: float((one.upper - one.lower).mean())  # noqa: E731
    assert width(found) > width(own)
    assert moved.data["transfer_uncertainty"].values[0] > 0


def test_it_is_saved_bit_for_bit(plant, tmp_path):
    made, first, second, _ = plant
    moved = unmix.transfer(made, second[:8], first[:8])
    unmix.save(moved, tmp_path / "second.nc")
    again = unmix.load(tmp_path / "second.nc")
    one, other = unmix.predict(moved, second), unmix.predict(again, second)
    for name in ("predicted", "lower", "upper", "q_residual"):
        assert one[name].values.tobytes() == other[name].values.tobytes()
    assert "transferred to another instrument by 8 samples" in again.data.attrs["notes"]


def test_samples_are_matched_by_label(plant, rng):
    made, first, second, _ = plant
    order = rng.permutation(10)
    one, other = unmix.transfer(made, second[:10], first[:10]), unmix.transfer(made, second[:10], first[:10][order])
    np.testing.assert_allclose(unmix.predict(one, second).predicted, unmix.predict(other, second).predicted)


def test_direct_standardisation_is_the_widest_window(rng):
    c = rng.uniform(0.2, 2, (9, 3))
    x, y = instrument(c, SECOND, rng, second=True).values, instrument(c, FIRST, rng).values
    made = piecewise(x, y, SECOND, FIRST, SECOND.size, 3)
    scores = PCA(3).fit(x)
    expected = LinearRegression().fit(scores.transform(x), y).predict(scores.transform(x))
    np.testing.assert_allclose(apply_piecewise(made, x), expected, atol=1e-9)


def test_a_window_of_one_is_a_line_for_each_channel(rng):
    x = rng.normal(size=(8, 12))
    y = 2.0 * x + np.arange(12)
    made = piecewise(x, y, np.arange(12.0), np.arange(12.0), 1, 1)
    np.testing.assert_allclose(made.weights[:, 0], 2.0)
    np.testing.assert_allclose(made.offset, np.arange(12.0), atol=1e-12)
    assert made.first.tolist() == list(range(12))


@pytest.mark.parametrize(
    ("change", "told"),
    [
        (lambda s, f: (s[:3], f[:3], {}), "3 samples have a label in both"),
        (lambda s, f: (s[:8], f[:8], {"window": 0}), "window is 0"),
        (lambda s, f: (s[:8], f[:8], {"components": 9}), "components is 9"),
        (lambda s, f: (s[:8].where(s.wavelength > 1100), f[:8], {}), "misses a channel"),
        (lambda s, f: (s[:8].assign_coords(label=("sample", list("abcdefgh"))), f[:8], {}), "0 samples have a label"),
    ],
)
def test_transfers_that_cannot_be(plant, change, told):
    made, first, second, _ = plant
    spectra, like, options = change(second, first)
    with pytest.raises(InputError, match=told):
        unmix.transfer(made, spectra, like, **options)
