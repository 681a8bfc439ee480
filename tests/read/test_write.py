"""Writing: every format keeps what it can, appears whole or not at all, and says what it cannot hold."""

import csv
import re

import numpy as np
import pytest
import xarray as xr

import unmix
from unmix.errors import InputError, WriteError
from unmix.spectra import make_spectra

AXIS = np.array([400.0, 401.0, 402.0, 403.0, 404.0])


def spectra(values=((0.125, 0.25, np.nan, 0.5, 0.625), (1e-7, -2.5, 3.0, 1 / 3, 5e10)), **kwargs):
    options = {"dim": "wavelength", "quantity": "absorbance", "labels": ["a", "b"][: len(values)], **kwargs}
    return make_spectra(values, AXIS, **options)


@pytest.mark.parametrize("suffix", [".jdx", ".dx", ".csv", ".tsv", ".nc", ".zarr"])
def test_numbers_names_and_paths_come_back_exactly(tmp_path, suffix):
    written = spectra(coords={"path_length": [1.0, 0.0025]})
    read = unmix.read(unmix.write(written, tmp_path / f"s{suffix}"))
    np.testing.assert_array_equal(read.values, written.values)
    np.testing.assert_array_equal(read.wavelength.values, AXIS)
    assert read.label.values.tolist() == ["a", "b"]
    assert read.path_length.values.tolist() == [1.0, 0.0025]
    assert read.attrs["quantity"] == "absorbance"


def test_workbooks_keep_sixteen_digits(tmp_path):
    written = spectra(coords={"batch": ["x", "=1+1"], "conc": [0.5, np.nan]})
    read = unmix.read(unmix.write(written, tmp_path / "s.xlsx"))
    np.testing.assert_allclose(read.values, written.values, rtol=1e-15)
    assert read.batch.values.tolist() == ["x", "=1+1"]
    np.testing.assert_array_equal(read.conc.values, [0.5, np.nan])


@pytest.mark.parametrize("n", [1, 2])
def test_facts_stand_above_the_columns(tmp_path, n):
    written = spectra(coords={"batch": ["x", "y"], "conc": [0.5, np.nan]}).isel(sample=slice(n))
    path = unmix.write(written, tmp_path / "s.csv")
    rows = list(csv.reader(path.read_text().splitlines()))
    assert [row[0] for row in rows[:4]] == ["sample", "batch", "conc", "Wavelength (nm)"]
    read = unmix.read(path)
    assert read.batch.values.tolist() == ["x", "y"][:n]
    np.testing.assert_array_equal(read.conc.values, [0.5, np.nan][:n])


def test_no_cell_becomes_a_formula(tmp_path):
    written = spectra(labels=["=HYPERLINK(1)", "@x"], coords={"+fact": ["-1+2", "ok"]})
    for suffix in (".csv", ".tsv", ".xlsx"):
        path = unmix.write(written, tmp_path / f"s{suffix}")
        read = unmix.read(path)
        assert read.label.values.tolist() == ["=HYPERLINK(1)", "@x"]
        assert read["+fact"].values.tolist() == ["-1+2", "ok"]
    cells = [cell for row in csv.reader((tmp_path / "s.csv").read_text().splitlines()) for cell in row]
    assert [cell for cell in cells if re.match(r"[=+@]|-[^\d]|-\d.*[^\d.e-]", cell)] == []


@pytest.mark.parametrize(("quantity", "per"), [
    ("transmittance", ""), ("reflectance", ""), ("intensity", ""), ("absorptivity", "g/L"), ("absorptivity", "mol/L"),
    ("absorptivity", "umol/mol m"), ("absorptivity", "mg/mL"), ("absorptivity", "ppm m"), ("absorptivity", "fraction"),
])  # fmt: skip
@pytest.mark.parametrize("suffix", [".jdx", ".csv", ".nc"])
def test_quantity_and_unit_amount_come_back(tmp_path, quantity, per, suffix):
    written = spectra(((0.1, 0.2, 0.3, 0.4, 0.5),), quantity=quantity, attrs={"per": per} if per else {})
    read = unmix.read(unmix.write(written, tmp_path / f"s{suffix}"))
    assert (read.attrs["quantity"], read.attrs.get("per", "")) == (quantity, per)
    np.testing.assert_array_equal(read.values, written.values)


@pytest.mark.parametrize("dim", ["wavenumber", "wavelength", "raman_shift"])
@pytest.mark.parametrize("suffix", [".jdx", ".csv", ".nc"])
def test_kind_of_axis_comes_back(tmp_path, dim, suffix):
    written = spectra(((0.1, 0.2, 0.3, 0.4, 0.5),), dim=dim)
    assert unmix.read(unmix.write(written, tmp_path / f"s{suffix}")).dims == ("sample", dim)


def test_uneven_axis_goes_into_pairs(tmp_path):
    axis = [400.0, 400.5, 402.25, 403.0, 410.0]
    written = make_spectra([[1.5, np.nan, 3, 4, 5]], axis, dim="wavelength", quantity="absorbance", labels=["a"])
    for form in ("AFFN", "DIFDUP"):
        path = unmix.write(written, tmp_path / f"{form}.jdx", form=form)
        assert "##XYPOINTS= (XY..XY)" in path.read_text()
        read = unmix.read(path)
        np.testing.assert_array_equal(read.values, written.values)
        assert read.wavelength.values.tolist() == axis


def test_required_labels_are_there(tmp_path):
    text = unmix.write(spectra(((1.0, 2.0, 3.0, 4.0, 5.0),)), tmp_path / "s.jdx").read_bytes().decode()
    assert text.endswith("##END=\r\n")
    labels = re.findall(r"##([^=]+)=", text)
    for label in ("TITLE", "JCAMP-DX", "DATA TYPE", "ORIGIN", "OWNER", "XUNITS", "YUNITS", "XFACTOR", "YFACTOR",
                  "FIRSTX", "LASTX", "NPOINTS", "FIRSTY", "XYDATA", "END"):  # fmt: skip
        assert labels.count(label) == 1
    assert max(map(len, text.splitlines())) <= 80
    linked = unmix.write(spectra(), tmp_path / "l.jdx").read_text()
    assert "##DATA TYPE= LINK\n##BLOCKS= 2\n" in linked


@pytest.mark.parametrize("decimals", [0, 2, 4, 6])
def test_difdup_loses_nothing_that_is_rounded(tmp_path, rng, decimals):
    values = np.round(rng.normal(size=(1, 300)) * 3, decimals)
    written = make_spectra(values, np.arange(300.0), dim="wavenumber", quantity="absorbance", labels=["a"])
    path = unmix.write(written, tmp_path / "s.jdx", form="DIFDUP")
    np.testing.assert_array_equal(unmix.read(path).values, values)
    assert max(map(len, path.read_text().splitlines())) <= 80


def test_difdup_states_its_resolution(tmp_path, rng):
    values = rng.normal(size=(1, 300))
    written = make_spectra(values, np.arange(300.0), dim="wavenumber", quantity="absorbance", labels=["a"])
    path = unmix.write(written, tmp_path / "s.jdx", form="DIFDUP")
    factor = float(re.search(r"##YFACTOR= (\S+)", path.read_text()).group(1))
    assert factor <= 5e-9 * np.abs(values).max()
    assert np.abs(unmix.read(path).values - values).max() <= 0.5 * factor * (1 + 1e-6)


def test_single_precision_is_written_with_its_own_digits(tmp_path):
    written = spectra(np.array([[0.1, 0.2, 0.3, 0.4, 0.7]], dtype=np.float32))
    assert written.dtype == np.float32
    for suffix in (".jdx", ".csv", ".nc"):
        read = unmix.read(unmix.write(written, tmp_path / f"s{suffix}"))
        np.testing.assert_array_equal(read.values.astype(np.float32), written.values)
        assert read.dtype == (np.float32 if suffix == ".nc" else np.float64)


def test_images_and_attributes_go_into_stores_only(tmp_path):
    values = np.arange(30.0).reshape(2, 3, 5)
    image = xr.DataArray(values, dims=("y", "x", "wavelength"), coords={"wavelength": AXIS},
                         attrs={"quantity": "absorbance", "note": "x"})  # fmt: skip
    for suffix in (".nc", ".zarr"):
        read = unmix.read(unmix.write(image, tmp_path / f"s{suffix}"))
        assert read.dims == ("y", "x", "wavelength")
        np.testing.assert_array_equal(read.values, values)
        assert read.attrs["note"] == "x"
    with pytest.raises(WriteError, match="CSV holds a list of spectra, not an array over 'y', 'x', 'wavelength'"):
        unmix.write(image, tmp_path / "s.csv")


def test_existing_files_are_kept_unless_asked(tmp_path):
    for suffix in (".jdx", ".csv", ".xlsx", ".nc", ".zarr"):
        path = unmix.write(spectra(), tmp_path / f"s{suffix}")
        with pytest.raises(WriteError, match="exists already"):
            unmix.write(spectra(), path)
        unmix.write(spectra().isel(sample=[0]), path, overwrite=True)
        assert unmix.read(path).sizes["sample"] == 1
    assert sorted(entry.name for entry in tmp_path.iterdir()) == ["s.csv", "s.jdx", "s.nc", "s.xlsx", "s.zarr"]


@pytest.mark.parametrize(("change", "name", "error", "message"), [
    (lambda s: s, "s.docx", WriteError, "the suffix '.docx' stands for no format that unmix writes; give one of .jdx"),
    (lambda s: s, "s", WriteError, "the suffix '' stands for no format"),
    (lambda s: s, "no/s.csv", WriteError, "its folder does not exist"),
    (lambda s: s.where(s < 1, np.inf), "s.csv", InputError, "values are infinite; mark what is missing with NaN"),
    (lambda s: s.values, "s.csv", InputError, "is a ndarray, not labelled spectra"),
    (lambda s: s.drop_attrs(deep=False), "s.csv", InputError, "the spectra do not say what their numbers are"),
    (lambda s: s.assign_attrs(odd={"a": 1}), "s.nc", WriteError, "an attribute or coordinate cannot be stored"),
    (lambda s: s.isel(wavelength=slice(0)), "s.csv", InputError, "is empty"),
])  # fmt: skip
def test_what_cannot_be_written_leaves_nothing(tmp_path, change, name, error, message):
    with pytest.raises(error, match=message):
        unmix.write(change(spectra()), tmp_path / name)
    assert list(tmp_path.iterdir()) == []


def test_unknown_form(tmp_path):
    with pytest.raises(InputError, match="form is 'PAC'; give 'AFFN' or 'DIFDUP'"):
        unmix.write(spectra(), tmp_path / "s.jdx", form="PAC")


def test_titles_cannot_break_a_file(tmp_path):
    written = spectra(labels=["a\n##END=\n##TITLE= b", "c $$ d"])
    read = unmix.read(unmix.write(written, tmp_path / "s.jdx"))
    assert read.label.values.tolist() == ["a ##END= ##TITLE= b", "c $ $ d"]
