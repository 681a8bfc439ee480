"""Axis and path units, transmittance to absorbance, unit amounts: what is understood, and what is refused."""

import numpy as np
import pytest

from unmix.errors import UnitError
from unmix.units import (
    axis_title,
    axis_unit,
    length_in_cm,
    path_factor,
    quantity_unit,
    split_per,
    to_absorbance,
)


@pytest.mark.parametrize(
    ("text", "dim", "factor"),
    [
        ("1/CM", "wavenumber", 1), ("cm-1", "wavenumber", 1), ("cm⁻¹", "wavenumber", 1), ("cm^-1", "wavenumber", 1),
        ("Wavenumber (cm-1)", "wavenumber", 1), ("Wavenumbers / cm-1", "wavenumber", 1), ("m-1", "wavenumber", 0.01),
        ("NANOMETERS", "wavelength", 1), ("nm", "wavelength", 1), ("Wavelength [nm]", "wavelength", 1),
        ("µm", "wavelength", 1000), ("\u03bcm", "wavelength", 1000), ("MICROMETERS", "wavelength", 1000),
        ("Angstrom", "wavelength", 0.1), ("m", "wavelength", 1e9),
        ("Raman shift", "raman_shift", 1), ("Raman Shift (cm-1)", "raman_shift", 1),
        ("Raman shift / cm-1", "raman_shift", 1), ("  nm ", "wavelength", 1),
    ],
)  # fmt: skip
def test_axis_units_that_are_understood(text, dim, factor):
    unit = axis_unit(text)
    assert unit.dim == dim
    assert unit.convert(np.array([2.0]))[0] == pytest.approx(2.0 * factor)
    assert unit.unit == ("nm" if dim == "wavelength" else "cm-1")


@pytest.mark.parametrize("text", ["", "seconds", "pixel", "cm", "eV", "THz", "cm-2"])
def test_axis_units_that_are_not_are_refused_with_what_is(text):
    with pytest.raises(UnitError) as error:
        axis_unit(text)
    assert f"'{text}'" in str(error.value)
    assert "cm-1" in str(error.value)


def test_a_slip_of_the_pen_gets_a_suggestion():
    with pytest.raises(UnitError, match="did you mean 'nanometres'"):
        axis_unit("nanometrs")


def test_absorbance_of_transmittance():
    absorbance, lost = to_absorbance(np.array([1.0, 0.1, 0.01, 10.0]))
    assert absorbance == pytest.approx([0.0, 1.0, 2.0, -1.0])
    assert lost == 0


def test_light_at_or_below_zero_is_missing_and_counted_never_clipped():
    light = np.array([[0.5, 0.0, -0.01], [np.nan, 1e-300, -0.0]])
    absorbance, lost = to_absorbance(light)
    assert lost == 3
    assert np.isnan(absorbance).tolist() == [[False, True, True], [True, False, True]]
    assert absorbance[1, 1] == pytest.approx(300.0)
    assert light[0, 2] == -0.01


def test_single_precision_stays():
    assert to_absorbance(np.array([0.5, 0.0], dtype=np.float32))[0].dtype == np.float32


@pytest.mark.parametrize(
    ("length", "cm"),
    [
        (1, 1), (0.5, 0.5), ("1", 1), ("1 cm", 1), ("25 um", 0.0025), ("25µm", 0.0025), ("2 mm", 0.2),
        ("10 m", 1000), (" 1.5e-1 cm ", 0.15), (np.float64(2.0), 2), (np.int64(3), 3), (np.str_("4 mm"), 0.4),
        ("1 in", 2.54),
    ],
)  # fmt: skip
def test_lengths_that_are_understood(length, cm):
    assert length_in_cm(length) == pytest.approx(cm, rel=1e-12)


@pytest.mark.parametrize("length", ["", "long", "1 yard", "cm", "1 2", "nan", "inf", "1e400", None, [1], True, "--1"])
def test_lengths_that_are_not_are_refused(length):
    with pytest.raises(UnitError, match="is not understood; give a positive number of centimetres"):
        length_in_cm(length)


@pytest.mark.parametrize("length", [0, -1, "-2 mm", -1e-300])
def test_lengths_that_are_not_positive_are_refused(length):
    with pytest.raises(UnitError, match="but a path is longer than zero"):
        length_in_cm(length)


def test_the_name_of_the_length_is_in_the_message():
    with pytest.raises(UnitError, match="path_length of the spectra is -1"):
        length_in_cm(-1, name="path_length of the spectra")


@pytest.mark.parametrize(
    ("per", "amount", "path"),
    [
        ("g/L", "g/L", None), ("mol/L", "mol/L", None), ("umol/mol m", "umol/mol", "m"), ("ppm·m", "ppm", "m"),
        ("mol/L*cm", "mol/L", "cm"), ("fraction", "fraction", None), ("g/100 mL", "g/100 mL", None), ("mm", "mm", None),
        ("10 mg/L", "10 mg/L", None), ("% (v/v)", "% (v/v)", None),
    ],
)  # fmt: skip
def test_unit_amounts_and_their_path(per, amount, path):
    assert split_per(per) == (amount, path)


def test_path_units_a_centimetre_holds():
    assert path_factor(None) == 1.0
    assert path_factor("m") == pytest.approx(0.01)
    assert path_factor("um") == pytest.approx(1e4)


def test_words_for_figures():
    assert axis_title("wavenumber") == "Wavenumber (cm-1)"
    assert axis_title("raman_shift") == "Raman shift (cm-1)"
    assert quantity_unit("absorbance") == "1"
    assert quantity_unit("transmittance") == "fraction"
    assert quantity_unit("absorptivity", "umol/mol m") == "per umol/mol per m"
    assert quantity_unit("absorptivity", "g/L") == "per g/L per cm"
