"""Messages: one sentence that names the thing, the value and the place, and what would be accepted instead."""

import json

import numpy as np
import pytest
import xarray as xr

import unmix
from unmix.errors import AxisError, InputError, UnitError, UnmixError, UnmixWarning

#: what a person does wrong -> (kind of error, what the message must hold: thing, value, place, way out)
CASES = {
    "empty samples": (
        lambda s, p: unmix.quantify(s[:0], p), InputError, ["spectra is empty", "(0, 301)"]),
    "empty pure spectra": (
        lambda s, p: unmix.quantify(s, p[:0]), InputError, ["pure is empty", "(0, 301)"]),
    "not labelled": (
        lambda s, p: unmix.quantify(s.values, p), InputError, ["spectra is a ndarray", "unmix.read"]),
    "no overlap": (
        lambda s, p: unmix.quantify(s, moved(p, 1000)), AxisError,
        ["400 to 700 nm", "1400 to 1700 nm", "share no channel", "cover the range of the samples"]),
    "hardly any overlap": (
        lambda s, p: unmix.quantify(s, moved(p, 300)), AxisError, ["only one channel", "700 to 1000 nm"]),
    "mixed quantities": (
        lambda s, p: unmix.quantify(s.assign_attrs(quantity="absorptivity", per="g/L"), p), UnitError,
        ["'g/L'", "'mg/L'", "give both per the same amount"]),
    "mixed quantities, the pure spectra without a path": (
        lambda s, p: unmix.quantify(s.assign_attrs(quantity="absorptivity"), p.assign_attrs(quantity="absorbance")),
        UnitError, ["absorptivity", "absorbance", "give both as absorptivity"]),
    "not additive": (
        lambda s, p: unmix.quantify(s.assign_attrs(quantity="reflectance"), p), UnitError,
        ["spectra holds reflectance", "do not add up", "give absorbance or transmittance"]),
    "pure spectra not additive": (
        lambda s, p: unmix.quantify(s, p.assign_attrs(quantity="intensity")), UnitError,
        ["pure holds intensity", "give absorbance or transmittance"]),
    "unknown quantity": (
        lambda s, p: unmix.quantify(s.assign_attrs(quantity="colour"), p), UnitError,
        ["spectra holds 'colour'", "absorbance, transmittance, reflectance, absorptivity, intensity"]),
    "wrong axis unit": (
        lambda s, p: unmix.quantify(in_unit(s, "um"), p), UnitError, ["'wavelength'", "'um'", "give it in nm"]),
    "Raman against absorption": (
        lambda s, p: unmix.quantify(s, renamed(p, "raman_shift")), AxisError,
        ["'wavelength'", "'raman_shift'", "give both of one kind"]),
    "duplicate component names": (
        lambda s, p: unmix.quantify(s, p.assign_coords(component=["a", "a", "b"])), InputError,
        ["pure", "component name 'a'", "more than once", "a name of its own"]),
    "negative path": (
        lambda s, p: unmix.quantify(s, p, path_length=-1), UnitError,
        ["path_length is -1", "longer than zero", "'25 um'"]),
    "negative path of a sample": (
        lambda s, p: unmix.quantify(s.assign_coords(path_length=("sample", [1, 1, -2, 1])), p), UnitError,
        ["path_length of the spectra is -2", "positive number of centimetres"]),
    "path in an unknown unit": (
        lambda s, p: unmix.quantify(s, p, path_length="3 feet"), UnitError, ["'3 feet'", "'2 mm'"]),
    "too many paths": (
        lambda s, p: unmix.quantify(s, p, path_length=[1, 2]), InputError, ["2 values for 4 spectra", "one each"]),
    "a path without one for the pure spectra": (
        lambda s, p: unmix.quantify(s, p.assign_attrs(quantity="absorbance"), path_length=1), InputError,
        ["path_length is given", "hold absorbance", "absorptivity, or with a coordinate 'path_length' in cm"]),
    "more unknowns than channels": (
        lambda s, p: unmix.quantify(s[:, 100:104], p[:, 100:104]), InputError,
        ["4 channels cannot determine 5 unknowns", "3 components and 2 baseline terms", "lower baseline order"]),
    "axis not monotonic": (
        lambda s, p: unmix.quantify(shuffled(s), p), AxisError,
        ["spectra", "does not run one way", "450 nm is followed by 430 nm at channel 52 of 301", "sort the channels"]),
    "pure axis not monotonic": (
        lambda s, p: unmix.quantify(s, shuffled(p)), AxisError, ["pure", "450 nm is followed by 430 nm"]),
    "axis not finite": (
        lambda s, p: unmix.quantify(s.assign_coords(wavelength=np.full(301, np.nan)), p), AxisError,
        ["spectra", "not finite at channel 1 of 301"]),
    "text for numbers": (
        lambda s, p: unmix.quantify(s.astype(str), p), InputError, ["spectra", "not numbers"]),
    "noise below zero": (
        lambda s, p: unmix.quantify(s, p, noise=-1e-3), InputError, ["noise is -0.001", "above zero"]),
    "noise of another length": (
        lambda s, p: unmix.quantify(s, p, noise=[1e-3] * 5), InputError, ["(5,)", "301 channels", "give one"]),
    "unknown noise model": (
        lambda s, p: unmix.quantify(s, p, noise_model="shot"), InputError, ["'shot'", "constant, detector, source"]),
    "level in percent": (
        lambda s, p: unmix.quantify(s, p, level=95), InputError, ["level is 95", "such as 0.95"]),
    "baseline that is no order": (
        lambda s, p: unmix.quantify(s, p, baseline="line"), InputError, ["baseline is 'line'", "0 to 20"]),
    "flag that is text": (
        lambda s, p: unmix.quantify(s, p, nonnegative="no"), InputError, ["nonnegative is 'no'", "True or False"]),
    "region that ends before it starts": (
        lambda s, p: unmix.quantify(s, p, regions=[(600, 500)]), InputError,
        ["regions: (600, 500) nm ends before it starts", "(500, 600)"]),
    "region beyond the axis": (
        lambda s, p: unmix.quantify(s, p, regions=[(650, 900)]), AxisError,
        ["(650, 900) nm", "400 to 700 nm", "narrow the region"]),
    "region that is no pair": (
        lambda s, p: unmix.quantify(s, p, regions=[500]), InputError, ["500", "not a pair", "(1650, 1800)"]),
    "pure spectrum without a value": (
        lambda s, p: unmix.quantify(s, lost(p, 1, np.nan)), InputError, ["'amber'", "no value at any channel"]),
    "pure spectrum of zeros": (
        lambda s, p: unmix.quantify(s, lost(p, 1, 0.0)), InputError, ["'amber'", "zero at every", "leave it out"]),
    "uncertainty below zero": (
        lambda s, p: unmix.quantify(s, p.assign_coords(relative_uncertainty=("component", [0, -0.1, 0]))), InputError,
        ["'amber'", "-0.1", "as a fraction"]),
    "unit of amount that is none": (
        lambda s, p: unmix.quantify(s, p.assign_attrs(per="M-1 cm-1")), UnitError, ["'M-1 cm-1'", "'mol/L'"]),
    "coordinate in the way": (
        lambda s, p: unmix.quantify(s.assign_coords(concentration=("sample", [1, 2, 3, 4])), p), InputError,
        ["'concentration'", "rename it"]),
    "conditioning of too few channels": (
        lambda _, p: unmix.conditioning(p[:, 100:104]), InputError, ["4 usable channels", "5 unknowns"]),
}  # fmt: skip


def moved(spectra, by):
    return spectra.assign_coords(wavelength=("wavelength", spectra.wavelength.values + by, {"units": "nm"}))


def in_unit(spectra, unit):
    return spectra.assign_coords(wavelength=("wavelength", spectra.wavelength.values, {"units": unit}))


def renamed(spectra, dim):
    plain = xr.DataArray(spectra.values, dims=("component", dim), attrs=spectra.attrs,
                         coords={"component": spectra.component.values, dim: spectra.wavelength.values})  # fmt: skip
    return plain


def shuffled(spectra):
    axis = spectra.wavelength.values.copy()
    axis[51] = 430.0
    return spectra.assign_coords(wavelength=("wavelength", axis, {"units": "nm"}))


def lost(spectra, row, value):
    values = spectra.values.copy()
    values[row] = value
    return spectra.copy(data=values)


@pytest.mark.parametrize("case", CASES)
def test_message_names_thing_value_place_and_way_out(dyes, case):
    act, kind, parts = CASES[case]
    with pytest.raises(kind) as error:
        act(dyes.spectra, dyes.pure)
    text = str(error.value)
    for part in parts:
        assert part in text
    assert isinstance(error.value, UnmixError)
    assert isinstance(error.value, ValueError)  # so that code which knows nothing of unmix can catch it
    # one sentence: no line break, no full stop inside, no repr of an array
    assert "\n" not in text
    assert ". " not in text.rstrip(".")
    assert "array(" not in text
    assert len(text) < 300


@pytest.mark.parametrize("case", [case for case in CASES if not case.startswith(("empty", "text"))])
def test_message_says_what_would_be_accepted(dyes, case):
    act, kind, _ = CASES[case]
    with pytest.raises(kind) as error:
        act(dyes.spectra, dyes.pure)
    if "not finite" not in str(error.value):
        assert error.value.accepted


def test_nothing_is_assumed_in_silence(dyes):
    bare = dyes.pure.copy()
    del bare.attrs["per"]
    found = unmix.quantify(dyes.spectra, bare)
    text = " ".join(json.loads(found.attrs["assumptions"]))
    assert "taken as 1 cm" in text
    assert "do not say which amount they belong to" in text
    assert found.concentration.attrs["units"] == "1"
    with pytest.warns(UnmixWarning, match="spectra does not say what its numbers are"):
        unmix.quantify(dyes.spectra.drop_attrs(), dyes.pure)
