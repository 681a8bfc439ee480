"""Path lengths: argument before coordinate before nothing, units, and what cannot be worked out."""

import numpy as np
import pytest
import xarray as xr

from unmix.errors import InputError, UnitError
from unmix.solve.paths import path_of, scale_to_path
from unmix.spectra import make_spectra

AXIS = [400.0, 500.0, 600.0]


def samples(n=3, quantity="absorbance", **coords):
    made = make_spectra(np.ones((n, 3)), AXIS, dim="wavelength", quantity=quantity, coords=coords)
    return made


def pure(quantity="absorptivity", per="g/L", **attrs):
    return make_spectra(np.ones((2, 3)), AXIS, dim="wavelength", quantity=quantity, leading="component",
                        labels=["a", "b"], attrs={"per": per, **attrs})  # fmt: skip


def test_absorptivity_with_nothing_said_is_one_centimetre_and_says_so():
    paths = path_of(samples(), pure(), None)
    assert paths.factor.tolist() == [1.0] * 3
    assert paths.amount_unit == "g/L"
    assert "no path length was given for the samples; taken as 1 cm" in paths.assumptions


@pytest.mark.parametrize(
    ("given", "factor"), [(2, [2.0] * 3), ("25 um", [0.0025] * 3), ([1, "2 mm", "1 m"], [1, 0.2, 100])]
)
def test_argument(given, factor):
    paths = path_of(samples(), pure(), given)
    assert paths.factor == pytest.approx(factor)
    assert paths.assumptions == []


def test_argument_takes_precedence_over_the_coordinate():
    assert path_of(samples(path_length=[5.0, 5.0, 5.0]), pure(), 1).factor.tolist() == [1.0] * 3


def test_path_unit_of_the_pure_spectra():
    # ten metres of a gas per metre of path: a factor of ten
    paths = path_of(samples(), pure(per="umol/mol m"), "10 m")
    assert paths.factor == pytest.approx([10.0] * 3)
    assert paths.amount_unit == "umol/mol"


@pytest.mark.parametrize("length", [0.5, "5 mm"])
def test_coordinate_and_attribute_of_the_samples(length):
    one_each = samples(path_length=[length] * 3)
    for given in (one_each, samples().assign_attrs(path_length=length), samples().assign_coords(path_length=length)):
        assert path_of(given, pure(), None).factor == pytest.approx([0.5] * 3)


def test_coordinate_along_one_dimension_of_an_image():
    cube = xr.DataArray(np.ones((2, 3, 3)), dims=("y", "x", "wavelength"), coords={"wavelength": AXIS},
                        attrs={"quantity": "absorbance"})  # fmt: skip
    by_row = path_of(cube.assign_coords(path_length=("y", [1.0, 2.0])), pure(), None)
    assert by_row.factor.tolist() == [1, 1, 1, 2, 2, 2]
    by_column = path_of(cube.assign_coords(path_length=("x", [1.0, 2.0, 3.0])), pure(), None)
    assert by_column.factor.tolist() == [1, 2, 3, 1, 2, 3]


def test_absorbance_at_a_known_path_is_scaled_to_the_sample_s():
    known = pure("absorbance", path_length=0.5)
    paths = path_of(samples(), known, 2)
    assert scale_to_path(known, paths) == pytest.approx(np.full((2, 3), 2.0))  # 1 at half a centimetre
    assert paths.factor.tolist() == [2.0] * 3


def test_absorbance_at_paths_of_their_own():
    known = pure("absorbance").assign_coords(path_length=("component", [1.0, 0.1]))
    assert scale_to_path(known, path_of(samples(), known, 1))[:, 0] == pytest.approx([1.0, 10.0])


def test_absorbance_without_a_path_is_taken_as_at_the_same_one_and_says_so():
    paths = path_of(samples(), pure("absorbance"), None)
    assert paths.factor.tolist() == [1.0] * 3
    assert "samples and pure spectra are taken as measured at the same path length" in paths.assumptions


def test_absorbance_without_a_path_cannot_follow_an_argument():
    with pytest.raises(InputError, match="path_length is given, but the pure spectra hold absorbance and do not say at "
                       "which path length; give the pure spectra as absorptivity"):  # fmt: skip
        path_of(samples(), pure("absorbance"), 2)


def test_missing_unit_amount_is_told():
    known = pure()
    del known.attrs["per"]
    paths = path_of(samples(), known, 1)
    assert paths.amount_unit == "1"
    assert "do not say which amount they belong to" in paths.assumptions[0]


def test_absorptivity_of_the_samples_has_no_path():
    paths = path_of(samples(quantity="absorptivity").assign_attrs(per="g/L"), pure(), None)
    assert paths.factor.tolist() == [1.0] * 3


def test_absorptivities_per_different_amounts_are_refused():
    with pytest.raises(UnitError, match="absorptivity per 'mol/L' but the pure spectra per 'g/L'"):
        path_of(samples(quantity="absorptivity").assign_attrs(per="mol/L"), pure(), None)
    with pytest.raises(UnitError, match="the spectra hold absorptivity but the pure spectra absorbance"):
        path_of(samples(quantity="absorptivity"), pure("absorbance"), None)


@pytest.mark.parametrize("length", [0, -1, "-2 cm"])
def test_paths_that_are_not_positive_are_refused(length):
    with pytest.raises(UnitError, match=f"path_length is {length}, but a path is longer than zero"):
        path_of(samples(), pure(), length)
    with pytest.raises(UnitError, match=f"path_length of the spectra is {length}, but a path is longer than zero"):
        path_of(samples(path_length=[length] * 3), pure(), None)


def test_paths_of_the_wrong_number_are_refused():
    with pytest.raises(InputError, match="path_length has 2 values for 3 spectra; give one for all or one each"):
        path_of(samples(), pure(), [1, 2])


def test_a_path_that_is_missing_for_some_is_refused():
    with pytest.raises(UnitError, match="path_length of the spectra 'nan' is not understood"):
        path_of(samples(path_length=[1.0, np.nan, 1.0]), pure(), None)
    assert path_of(samples(path_length=[np.nan] * 3), pure(), None).factor.tolist() == [1.0] * 3
