"""Standard addition against the textbook formula, and its interval by simulation."""

import numpy as np
import pytest
import xarray as xr

import unmix
from unmix.errors import InputError


def series(found):
    return xr.Dataset({"concentration": (("sample", "component"), np.asarray(found, dtype=float)[:, None],
                                         {"units": "ug/mL"})}, coords={"component": ["silver"]})  # fmt: skip


def test_the_textbook_example():
    # Miller and Miller, Statistics and Chemometrics for Analytical Chemistry, example 5.8.1 (silver in photographic
    # waste; from memory, the arithmetic done again by hand): 17.3 ug/mL, standard error 0.749, interval 17.3 +- 1.9
    added = np.arange(0.0, 31, 5)
    found = unmix.standard_addition(series([0.32, 0.41, 0.52, 0.60, 0.70, 0.77, 0.89]), added, "silver")
    assert found.slope.item() == pytest.approx(0.0186, abs=5e-5)
    assert found.intercept.item() == pytest.approx(0.3218, abs=5e-5)
    assert found.concentration.item() == pytest.approx(17.3, abs=0.05)
    assert found.residual_deviation.item() == pytest.approx(0.0109, abs=5e-5)
    assert found.standard_uncertainty.item() == pytest.approx(0.749, abs=2e-3)
    # Fieller's interval is close to +-1.9 and a little longer upwards
    assert found.lower.item() == pytest.approx(17.3 - 1.9, abs=0.15)
    assert found.upper.item() == pytest.approx(17.3 + 1.9, abs=0.25)
    assert found.upper.item() - 17.3 > 17.3 - found.lower.item()
    assert found.verdict.item() == "supported"


def test_the_interval_covers_and_a_matrix_that_scales_does_no_harm(rng):
    added, inside, size = np.array([0.0, 0, 2, 4, 6]), [], 1500
    for _ in range(size):
        found = unmix.standard_addition(series(0.7 * (5.0 + added) + 0.1 * rng.normal(size=5)), added, "silver")
        inside.append(found.lower.item() <= 5.0 <= found.upper.item())
    # standard error 0.56%
    assert 0.93 < np.mean(inside) < 0.97


def test_through_spectra(dyes, rng):
    # the matrix takes a fifth of the response of all
    added = np.array([0.0, 1.0, 2.0, 3.0, 4.0])
    truth = np.column_stack([3.0 + added, np.full(5, 4.0), np.full(5, 2.0)])
    values = 0.8 * truth @ dyes.pure.values + 5e-4 * rng.normal(size=(5, dyes.pure.shape[1]))
    spectra = xr.DataArray(values, dims=("sample", "wavelength"), coords={"wavelength": dyes.pure.wavelength},
                           attrs={"quantity": "absorbance"})  # fmt: skip
    result = unmix.quantify(spectra, dyes.pure, path_length=1)
    found = unmix.standard_addition(result, added, "crimson")
    assert found.lower.item() <= 3.0 <= found.upper.item()
    assert found.upper.item() - found.lower.item() < 0.2
    assert "found as 0.8" in found.reason.item()
    assert "the matrix changes the response" in found.reason.item()
    assert found.concentration.attrs["units"] == "mg/L"


def test_doubts_are_said():
    added = np.arange(6.0)
    bent = unmix.standard_addition(
        series(5 + added - 0.08 * added**2 + [0, 0.001, -0.001, 0.001, -0.001, 0]), added, "silver"
    )
    assert (bent.verdict.item(), "bend with those added" in bent.reason.item()) == ("doubtful", True)
    none = unmix.standard_addition(series([1.0, 1.1, 0.9, 1.0, 1.05, 0.95]), added, "silver")
    assert none.verdict.item() == "unsupported"
    assert np.isinf(none.upper)


@pytest.mark.parametrize(
    ("found", "added", "component", "told"),
    [
        ([1.0, 2, 3], [0.0, 1], "silver", "2 amounts for 3 spectra"),
        ([1.0, 2, 3], [0.0, 1, -1], "silver", "below zero"),
        ([1.0, 2, 3], [1.0, 1, 1], "silver", "1 different additions"),
        ([1.0, np.nan, 3], [0.0, 1, 2], "silver", "2 usable measurements"),
        ([1.0, 2, 3], [0.0, 1, 2], "gold", "component is 'gold'"),
    ],
)
def test_bad_series_are_refused(found, added, component, told):
    with pytest.raises(InputError, match=told):
        unmix.standard_addition(series(found), added, component)
