"""Axis errors fitted with the amounts, through the public function."""

import json
import re

import numpy as np
import pytest
import xarray as xr
from scipy.interpolate import CubicSpline

import unmix
from unmix.errors import InputError

TRUTH = np.array([[4.0, 3.0, 5.0], [0.0, 6.0, 2.0]])


def moved(gases_or_dyes, rng, by, sd=5e-4, truth=TRUTH):
    """Mixtures whose axis is off by ``by`` (one for all, or one a component)."""
    pure = gases_or_dyes.pure
    axis = pure[pure.dims[-1]].values
    shifted = np.array(
        [CubicSpline(axis, row)(axis - b) for row, b in zip(pure.values, np.broadcast_to(by, 3), strict=True)]
    )
    values = truth @ shifted + 0.01 + sd * rng.normal(size=(len(truth), axis.size))
    return xr.DataArray(values, dims=("sample", pure.dims[-1]), coords={pure.dims[-1]: axis},
                        attrs={"quantity": "absorbance"})  # fmt: skip


def test_a_shift_is_found_and_the_amounts_are_right(dyes, rng):
    spectra = moved(dyes, rng, 1.5)
    bad = unmix.quantify(spectra, dyes.pure, path_length=1)
    assert (bad.verdict.values != "supported").all()
    assert re.search(r"looks like a shift of the axis by 1(\.\d)? nm: fit the axis", bad.reason.values[0])
    found = unmix.quantify(spectra, dyes.pure, path_length=1, axis="shift")
    assert found.verdict.values.tolist() == ["supported"] * 2
    assert "The shift of the axis was found as 1.5 nm" in found.reason.values[0]
    score = (found.axis_shift - 1.5) / found.axis_shift_uncertainty
    assert (np.abs(score) < 4.5).all()
    assert found.axis_shift.attrs["units"] == "nm"
    assert ((found.lower <= TRUTH) & (found.upper >= TRUTH)).all()
    # what is not known of the axis widens the amounts
    assert (
        found.standard_uncertainty >= unmix.quantify(moved(dyes, rng, 0.0), dyes.pure).standard_uncertainty * 0.9
    ).all()


def test_spectra_that_fit_give_a_shift_of_zero_within_its_uncertainty(dyes, rng):
    spectra = moved(dyes, rng, 0.0, truth=np.tile(TRUTH[0], (40, 1)))
    found = unmix.quantify(spectra, dyes.pure, path_length=1, axis=["shift", "stretch"])
    for name in ("shift", "stretch"):
        z = found[f"axis_{name}"].values[:, 0] / found[f"axis_{name}_uncertainty"].values[:, 0]
        # 40 values: the standard deviation is 1 within 4 standard errors
        assert 0.55 < z.std() < 1.45
        assert abs(z.mean()) < 0.65


def test_components_can_have_their_own(dyes, rng):
    by = np.array([1.2, -0.8, 0.5])
    spectra = moved(dyes, rng, by)
    found = unmix.quantify(spectra, dyes.pure, path_length=1, axis="shift", axis_per_component=True)
    score = (found.axis_shift.values[0] - by) / found.axis_shift_uncertainty.values[0]
    assert (np.abs(score) < 4.5).all()
    # an absent component has no shift to be found
    assert np.isnan(found.axis_shift.values[1, 0])
    assert found.verdict.values[0] == "supported"


def test_broadening_is_found(solvents, rng):
    pure = solvents.pure
    axis = pure.wavenumber.values
    fine = np.arange(axis[0], axis[-1], 0.5)
    width = 6.0
    kernel = np.exp(-0.5 * (np.arange(-60, 61) * 0.5 / (width / 2.3548)) ** 2)
    broad = np.array([np.interp(axis, fine, np.convolve(CubicSpline(axis, row)(fine), kernel / kernel.sum(), "same"))
                      for row in pure.values])  # fmt: skip
    truth = np.array([[300.0, 200.0, 400.0]])
    values = 0.0025 * truth @ broad + 2e-4 * rng.normal(size=(1, axis.size))
    spectra = xr.DataArray(
        values, dims=("sample", "wavenumber"), coords={"wavenumber": axis}, attrs={"quantity": "absorbance"}
    )
    found = unmix.quantify(spectra, pure, path_length="25 um", axis={"broadening": 20.0})
    assert found.axis_broadening.values[0] == pytest.approx(np.full(3, width), rel=0.05)
    np.testing.assert_allclose(found.concentration.values, truth, rtol=0.02)
    before = unmix.quantify(spectra, pure, path_length="25 um")
    assert (np.abs(found.concentration - truth) < np.abs(before.concentration - truth)).mean() > 0.6


def test_at_its_bound_it_is_said(dyes, rng):
    found = unmix.quantify(moved(dyes, rng, 2.0), dyes.pure, path_length=1, axis={"shift": 1.0})
    assert (found.verdict.values != "supported").all()
    assert "The shift of the axis is at its bound (1 nm)" in found.reason.values[0]


def test_spectra_without_features_tell_nothing(dyes, rng):
    flat = dyes.pure.copy(
        data=np.vstack([np.linspace(1, 2, 301), np.linspace(2, 1, 301) ** 2, dyes.pure.values[2] * 0 + 1])
    )
    spectra = xr.DataArray(np.array([[1.0, 1.0, 0.5]]) @ flat.values + 1e-3 * rng.normal(size=(1, 301)),
                           dims=("sample", "wavelength"), coords={"wavelength": flat.wavelength},
                           attrs={"quantity": "absorbance"})  # fmt: skip
    found = unmix.quantify(spectra, flat[:1], path_length=1, axis="shift", baseline=2)
    assert np.isnan(found.axis_shift).all()
    assert "cannot be told from this spectrum" in found.reason.values[0]


def test_zero_missing_and_image_shaped_spectra(dyes, rng):
    spectra = moved(dyes, rng, 1.0)
    cube = xr.DataArray(np.stack([spectra.values, 0 * spectra.values]), dims=("y", "x", "wavelength"),
                        coords={"wavelength": spectra.wavelength}, attrs=spectra.attrs)  # fmt: skip
    cube[0, 0, 100:110] = np.nan
    found = unmix.quantify(cube, dyes.pure, path_length=1, axis="shift")
    assert found.axis_shift.dims == ("y", "x", "component")
    np.testing.assert_allclose(found.axis_shift.values[0, :, 0], 1.0, atol=0.05)
    assert np.isnan(found.axis_shift.values[1]).all()
    assert (found.concentration.values[1] == 0).all()


@pytest.mark.parametrize(
    ("options", "told"),
    [
        ({"axis": "shfit"}, "'shfit', did you mean|'shfit'"),
        ({"axis": {"shift": 0}}, "bound of the shift is 0"),
        ({"axis": 3}, "axis is 3"),
        ({"axis_per_component": True}, "without axis"),
    ],
)
def test_bad_questions_are_refused(dyes, options, told):
    with pytest.raises(InputError, match=told):
        unmix.quantify(dyes.spectra, dyes.pure, **options)


def test_settings_are_remembered(dyes, rng):
    found = unmix.quantify(moved(dyes, rng, 1.0), dyes.pure, axis={"shift": 3.0})
    assert json.loads(found.attrs["settings"])["axis"] == {"shift": 3.0}
    assert "axis_shift" not in unmix.quantify(dyes.spectra, dyes.pure)
