"""The data contract: what comes out of the door has one form, and what cannot is refused with its place."""

import numpy as np
import pytest
import xarray as xr

from unmix.errors import AxisError, InputError, UnitError, UnmixWarning
from unmix.spectra import (
    as_absorbance,
    as_pure,
    check_spectra,
    labels_of,
    make_spectra,
    rows_of,
    spectral_dim,
)

AXIS = np.array([400.0, 410.0, 425.0, 450.0])
IN_UM = ("wavelength", AXIS, {"units": "um"})


def spectra(values=None, axis=AXIS, **options):
    values = np.arange(8.0).reshape(2, 4) if values is None else values
    return make_spectra(values, axis, **{"dim": "wavelength", "quantity": "absorbance", **options})


def test_made_spectra_have_the_form_of_the_contract():
    made = spectra(labels=["a", "b"], coords={"batch": [1, 2]}, attrs={"title": "t"})
    assert made.dims == ("sample", "wavelength")
    assert made.wavelength.attrs["units"] == "nm"
    assert made.attrs == {"quantity": "absorbance", "title": "t"}
    assert made.label.values.tolist() == ["a", "b"]
    assert made.batch.values.tolist() == [1, 2]
    assert made.dtype == np.float64


def test_pure_spectra_have_names_in_place_of_labels():
    made = spectra(leading="component", labels=["a", "b"])
    assert made.component.values.tolist() == ["a", "b"]
    assert "label" not in made.coords


def test_a_falling_axis_is_turned_with_its_values():
    made = spectra([[1, 2, 3, 4]], AXIS[::-1])
    assert made.wavelength.values.tolist() == AXIS.tolist()
    assert made.values.tolist() == [[4.0, 3.0, 2.0, 1.0]]


def test_one_spectrum_becomes_a_set_of_one():
    made = spectra([1, 2, 3, 4])
    assert made.shape == (1, 4)
    assert check_spectra(made[0]).dims == ("sample", "wavelength")


@pytest.mark.parametrize(("given", "kept"), [("float32", "float32"), ("float64", "float64"), ("int16", "float64")])
def test_precision(given, kept):
    assert spectra(np.ones((1, 4), dtype=given)).dtype == kept
    assert check_spectra(spectra().astype(given)).dtype == kept


def test_channels_go_last_and_other_dimensions_keep_their_order():
    cube = xr.DataArray(np.zeros((4, 2, 3)), dims=("wavelength", "y", "x"), coords={"wavelength": AXIS})
    assert check_spectra(cube).dims == ("y", "x", "wavelength")


def test_checking_changes_nothing_and_is_idempotent():
    given = spectra().isel(wavelength=slice(None, None, -1))
    before = given.copy(deep=True)
    checked = check_spectra(given)
    assert given.identical(before)
    assert check_spectra(checked).identical(checked)


def test_an_axis_of_whole_numbers_is_an_axis():
    checked = check_spectra(spectra().assign_coords(wavelength=[400, 410, 425, 450]))
    assert checked.wavelength.values.tolist() == AXIS.tolist()
    assert checked.wavelength.attrs["units"] == "nm"


@pytest.mark.parametrize(
    ("axis", "text"),
    [
        ([400, 420, 410, 450], "420 nm is followed by 410 nm at channel 3 of 4"),
        ([400, 400, 410, 450], "400 nm is followed by 400 nm at channel 2 of 4"),
        ([400, np.nan, 410, 450], "is not finite at channel 2 of 4"),
        ([450, 400, 410, np.inf], "is not finite at channel 4 of 4"),
    ],
)
def test_an_axis_that_does_not_run_one_way_is_refused_with_its_place(axis, text):
    with pytest.raises(AxisError, match=text):
        spectra(axis=axis)


def test_an_axis_of_another_length_is_refused():
    with pytest.raises(AxisError, match="the spectra have 4 channels but the axis has 3 values"):
        spectra(axis=AXIS[:3])


def test_what_is_not_labelled_is_refused():
    with pytest.raises(InputError, match=r"samples is a ndarray, not labelled spectra; read files with unmix\.read"):
        check_spectra(np.zeros((2, 4)), name="samples")


def test_spectral_dimensions():
    assert spectral_dim(spectra()) == "wavelength"
    with pytest.raises(AxisError, match=r"no spectral dimension \(its dimensions are 'sample', 'channel'\)"):
        check_spectra(spectra().rename(wavelength="channel"))
    with pytest.raises(AxisError, match="more than one spectral dimension"):
        check_spectra(xr.DataArray(np.zeros((2, 2)), dims=("wavenumber", "wavelength")))
    with pytest.raises(AxisError, match="spectra has no values along 'wavelength'; give it a coordinate"):
        check_spectra(spectra().drop_vars("wavelength"))


@pytest.mark.parametrize(
    ("change", "kind", "text"),
    [
        (lambda s: s[:0], InputError, r"is empty \(shape \(0, 4\)\)"),
        (lambda s: s[:, :0], InputError, r"is empty \(shape \(2, 0\)\)"),
        (lambda s: s.astype(str), InputError, "values, not numbers"),
        (lambda s: s.astype(complex), InputError, "holds complex128 values, not numbers"),
        (lambda s: s.astype(bool), InputError, "holds bool values, not numbers"),
        (lambda s: s.assign_attrs(quantity="colour"), UnitError, "holds 'colour'.*one of absorbance, transmittance"),
        (lambda s: s.assign_coords(wavelength=IN_UM), UnitError, "in 'um'; give it in nm"),
    ],
)
def test_what_breaks_the_contract_is_refused(change, kind, text):
    with pytest.raises(kind, match=text):
        check_spectra(change(spectra()))


def test_absorbance_stays_and_transmittance_is_converted():
    assert as_absorbance(spectra())[0].identical(spectra())
    converted, notes = as_absorbance(spectra([[1.0, 0.1, 0.0, -0.1]], quantity="transmittance"))
    assert converted.values[0, :2] == pytest.approx([0.0, 1.0])
    assert np.isnan(converted.values[0, 2:]).all()
    assert converted.attrs["quantity"] == "absorbance"
    assert converted.attrs["measured_as"] == "transmittance"
    assert notes == ["spectra: 2 of 4 values have a transmittance at or below zero; left out"]


@pytest.mark.parametrize("quantity", ["reflectance", "intensity"])
def test_quantities_that_do_not_add_up_are_refused(quantity):
    with pytest.raises(UnitError, match=f"holds {quantity}, in which the contributions of components do not add up"):
        as_absorbance(spectra(quantity=quantity))


def test_a_missing_quantity_is_assumed_aloud():
    bare = spectra().drop_attrs()
    with pytest.warns(UnmixWarning, match="does not say what its numbers are"):
        taken, notes = as_absorbance(bare)
    assert taken.attrs["quantity"] == "absorbance"
    assert "taken as absorbance" in notes[0]


def test_pure_spectra_take_their_names_from_where_they_are():
    assert as_pure(spectra(leading="component", labels=["a", "b"])).component.values.tolist() == ["a", "b"]
    assert as_pure(spectra(labels=["a", "b"])).component.values.tolist() == ["a", "b"]
    own = spectra().rename(sample="dye").assign_coords(dye=["a", "b"])
    assert as_pure(own).component.values.tolist() == ["a", "b"]
    one = spectra(leading="component", labels=["a", "b"])[1]
    assert as_pure(one).component.values.tolist() == ["b"]
    assert as_pure(one).dims == ("component", "wavelength")


@pytest.mark.parametrize(
    ("pure", "text"),
    [
        (spectra(), "has no component names; give it a coordinate 'component'"),
        (spectra(leading="component"), "has no component names"),
        (spectra([1, 2, 3, 4])[0], "has no component names"),
        (spectra(leading="component", labels=["a", "a"]), "component name 'a' appears more than once"),
        (spectra(leading="component", labels=["a", " "]), "spectrum 2 of 2 has an empty component name"),
        (spectra().expand_dims("y"), "has dimensions 'y', 'sample', 'wavelength'; give"),
    ],
)
def test_pure_spectra_without_usable_names_are_refused(pure, text):
    with pytest.raises(InputError, match=text):
        as_pure(pure)


@pytest.mark.parametrize("per", ["M-1 cm-1", "L/(mol cm)", "L/mol/cm", "(umol/mol)-1 m-1", "cm2/mol", 1])
def test_the_unit_of_an_absorptivity_is_no_unit_of_amount(per):
    with pytest.raises(UnitError, match=r"attrs\['per'\] is .*, which is not a unit of amount; give the unit amount"):
        as_pure(spectra(leading="component", labels=["a", "b"], attrs={"per": per}))


@pytest.mark.parametrize("per", ["g/L", "mol/L", "umol/mol m", "% (v/v)", "g/(100 mL)", "mol/m3", "fraction", ""])
def test_units_of_amount_are_taken(per):
    assert as_pure(spectra(leading="component", labels=["a", "b"], attrs={"per": per})).attrs["per"] == per


def test_labels_of_spectra():
    assert labels_of(spectra(labels=["a", "b"])) == ["a", "b"]
    assert labels_of(spectra(coords={"file": ["x.csv", "y.csv"]})) == ["x.csv", "y.csv"]
    assert labels_of(spectra()) == ["sample 1", "sample 2"]
    timed = spectra(leading="time").assign_coords(time=[0.5, 1.0])
    assert labels_of(timed) == ["0.5", "1.0"]
    cube = xr.DataArray(np.zeros((2, 1, 4)), dims=("y", "x", "wavelength"))
    assert labels_of(cube) == ["y 1, x 1", "y 2, x 1"]


def test_rows_of_an_image():
    cube = xr.DataArray(np.arange(24.0).reshape(2, 3, 4), dims=("y", "x", "wavelength"))
    assert rows_of(cube).shape == (6, 4)
    assert rows_of(cube)[4].tolist() == [16.0, 17.0, 18.0, 19.0]
