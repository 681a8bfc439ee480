"""``read`` and ``read_each``: which files a source means, one axis or each its own, labels, refusals, the record."""

import hashlib
import json
import warnings

import numpy as np
import pytest

import unmix
from unmix.errors import InputError, ReadError, UnmixWarning
from unmix.read import read_each
from unmix.spectra import as_absorbance, make_spectra


def table(values, axis, *, quantity="Absorbance", unit="Wavelength (nm)"):
    rows = "".join(f"{x},{y}\n" for x, y in zip(axis, values, strict=True))
    return f"{unit},{quantity}\n{rows}"


@pytest.fixture
def folder(tmp_path):
    (tmp_path / "b.csv").write_text(table([0.4, 0.5, 0.6], [400, 410, 420]))
    (tmp_path / "a.csv").write_text(table([0.1, 0.2, 0.3], [400, 410, 420]))
    (tmp_path / "notes.md").write_text("nothing")
    (tmp_path / ".hidden.csv").write_text("nothing")
    (tmp_path / "inner").mkdir()
    return tmp_path


def read_quietly(*args, **kwargs):
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", UnmixWarning)
        return unmix.read(*args, **kwargs)


def test_single_file_says_where_it_came_from(folder):
    spectra = unmix.read(folder / "a.csv")
    assert spectra.dims == ("sample", "wavelength")
    assert spectra.attrs == {
        "quantity": "absorbance",
        "source_sha256": json.dumps({"a.csv": hashlib.sha256((folder / "a.csv").read_bytes()).hexdigest()}),
        "notes": "[]",
    }
    assert spectra.wavelength.attrs == {"units": "nm"}
    assert spectra.label.values.tolist() == ["a"]
    assert spectra.file.values.tolist() == ["a.csv"]


def test_folder_pattern_and_list(folder):
    with pytest.warns(UnmixWarning, match=r"left alone in the folder .*: 'notes.md'"):
        whole = unmix.read(folder)
    assert whole.label.values.tolist() == ["a", "b"]
    assert json.loads(whole.attrs["refused"]) == {}
    pattern = unmix.read(f"{folder}/*.csv")
    listed = unmix.read([folder / "b.csv", str(folder / "a.csv"), folder / "b.csv"])
    assert pattern.label.values.tolist() == ["a", "b"]
    assert listed.label.values.tolist() == ["b", "a"]
    np.testing.assert_array_equal(listed.values, [[0.4, 0.5, 0.6], [0.1, 0.2, 0.3]])


def test_a_name_with_pattern_characters_is_a_name(tmp_path):
    (tmp_path / "a[1].csv").write_text(table([0.1, 0.2], [1, 2]))
    assert unmix.read(tmp_path / "a[1].csv").label.values.tolist() == ["a[1]"]


@pytest.mark.parametrize(("source", "message"), [
    ("nope.csv", "nope.csv: there is no such file"), ("aa.csv", "there is no such file; did you mean 'a.csv'?"),
    ("*.jdx", "no file matches"), ("inner", "the folder holds no file with spectra; the suffixes looked for are .jdx"),
    ("notes.md", "notes.md: no rows of numbers were found"),
])  # fmt: skip
def test_nothing_there(folder, source, message):
    with pytest.raises(ReadError, match=message):
        unmix.read(folder / source)


def test_sources_and_options_that_make_no_sense(folder):
    with pytest.raises(InputError, match="the source is 5; give a path"):
        unmix.read(5)
    with pytest.raises(ReadError, match="the list of files is empty"):
        unmix.read([])
    for option, value in (("checks", "maybe"), ("axis", "any"), ("decimal", "x"), ("orientation", "down")):
        with pytest.raises(InputError, match=f"{option} is '{value}'; give"):
            unmix.read(folder / "a.csv", **{option: value})
    with pytest.raises(InputError, match="ordinate unit 'glow' is not understood; give absorbance"):
        unmix.read(folder / "a.csv", quantity="glow")
    with pytest.raises(InputError, match="axis unit 'yards' is not understood"):
        unmix.read(folder / "a.csv", unit="yards")


def test_bad_file_is_refused_and_the_rest_read(folder):
    (folder / "c.csv").write_text("Wavelength (nm),Absorbance\n400,x\n410,0.2\n420,0.3\n430,0.1\n")
    (folder / "d.csv").write_text("")
    with pytest.warns(UnmixWarning) as caught:
        spectra = unmix.read(f"{folder}/*.csv")
    assert spectra.label.values.tolist() == ["a", "b"]
    refused = json.loads(spectra.attrs["refused"])
    assert refused["d.csv"] == "the file is empty"
    assert refused["c.csv"].startswith("line 2: 'x' in column 2 is not a number")
    assert [str(entry.message) for entry in caught] == [f"{name} was not read: {why}" for name, why in refused.items()]


def test_all_files_bad_is_an_error_that_names_five(tmp_path):
    for i in range(7):
        (tmp_path / f"{i}.csv").write_text("")
    with pytest.raises(ReadError, match=r"none of the 7 files could be read \(0.csv: .*4.csv: .*and 2 more\)"):
        unmix.read(tmp_path)


def test_different_axes_are_brought_onto_the_coarsest_within_the_overlap(tmp_path):
    fine = np.arange(400, 501, 1.0)
    coarse = np.arange(390, 481, 5.0)

    def band(x):
        return np.exp(-(((x - 440) / 20) ** 2))

    (tmp_path / "fine.csv").write_text(table(band(fine), fine))
    (tmp_path / "coarse.csv").write_text(table(band(coarse), coarse))
    (tmp_path / "shifted.csv").write_text(table(band(fine + 0.5), fine + 0.5))
    with pytest.warns(UnmixWarning) as caught:
        spectra = unmix.read(tmp_path)
    assert "all were brought onto 16 channels from 405 to 480 nm, the coarsest axis" in str(caught[0].message)
    assert spectra.wavelength.values.tolist() == list(range(405, 481, 5))
    np.testing.assert_allclose(spectra.values, np.tile(band(spectra.wavelength.values), (3, 1)), atol=1e-6)
    notes = json.loads(spectra.attrs["notes"])
    assert "channels outside that range were cut from coarse.csv (390 to 480 nm)" in notes[1]
    with pytest.raises(ReadError, match=r"the axis has 101 channels from 400 to 500 nm but coarse.csv has 19 channels"):
        unmix.read(tmp_path, axis="same")


def test_interpolation_never_leaves_the_range_nor_bridges_gaps(tmp_path):
    fine = np.arange(400, 441, 1.0)
    values = np.where((fine > 409) & (fine < 416), np.nan, 1.0)
    (tmp_path / "a.csv").write_text(table(["" if np.isnan(v) else v for v in values], fine))
    (tmp_path / "b.csv").write_text(table(np.ones(9), np.arange(398.5, 443, 5.0)))
    spectra = read_quietly(tmp_path)
    assert spectra.wavelength.values.tolist() == [403.5, 408.5, 413.5, 418.5, 423.5, 428.5, 433.5, 438.5]
    assert np.isnan(spectra.values[0]).tolist() == [False, False, True, False, False, False, False, False]


def test_axes_that_are_the_same_but_for_rounding_are_one(tmp_path):
    (tmp_path / "a.csv").write_text(table([1, 2, 3], ["400.000", "400.333", "400.667"]))
    (tmp_path / "b.csv").write_text(table([1, 2, 3], ["400.0000", "400.3333", "400.6667"]))
    assert json.loads(unmix.read(tmp_path).attrs["notes"]) == []


@pytest.mark.parametrize(("other", "message"), [
    (table([1, 2, 3], [600, 610, 620]), "the axes do not overlap: 'a.csv' ends at 420 nm, 'z.csv' starts at 600 nm"),
    (table([1, 2, 3], [400, 410, 420], unit="cm-1"),
     "the files differ in axis: 'wavelength' in 'a.csv'; 'wavenumber' in 'z.csv'; read them apart"),
    (table([10, 20, 3], [400, 410, 420], quantity="%T"), "the files differ in quantity: 'absorbance' in 'a.csv'"),
])  # fmt: skip
def test_files_that_do_not_go_together(folder, other, message):
    (folder / "b.csv").unlink()
    (folder / "z.csv").write_text(other)
    with pytest.raises(ReadError, match=message):
        unmix.read(f"{folder}/*.csv")


def test_each_keeps_its_own_axis_and_order(folder):
    (folder / "aa.csv").write_text(table([1, 2], [400, 500]))
    (folder / "c.csv").write_text("")
    arrays, refused = read_each(f"{folder}/*.csv")
    assert [one.label.values.tolist() for one in arrays] == [["a"], ["aa"], ["b"]]
    assert list(json.loads(arrays[1].attrs["source_sha256"])) == ["aa.csv"]
    assert refused == {"c.csv": "the file is empty"}
    (folder / "aa.csv").unlink()
    arrays, _ = read_each([folder / "a.csv", folder / "b.csv"])
    assert [one.label.values.tolist() for one in arrays] == [["a", "b"]]
    with pytest.raises(ReadError, match=r"^c.csv: the file is empty$"):
        read_each(folder / "c.csv")


def test_labels_are_each_there_once(tmp_path):
    for name in ("x", "y"):
        (tmp_path / f"{name}.csv").write_text("Wavelength (nm),dup (A),dup (A),own (A)\n400,1,2,3\n410,2,3,4\n")
    labels = unmix.read(tmp_path).label.values.tolist()
    assert labels == ["dup (x) [1]", "dup (x) [2]", "own (x)", "dup (y) [1]", "dup (y) [2]", "own (y)"]


def test_coordinates_that_only_some_files_have(tmp_path):
    (tmp_path / "a.csv").write_text("sample,p,q\nbatch,x,y\npath_length (mm),1,2\nnm,Abs,Abs\n400,1,2\n401,2,3\n")
    (tmp_path / "b.csv").write_text("nm,r (A)\n400,1\n401,2\n")
    spectra = unmix.read(tmp_path)
    assert spectra.batch.values.tolist() == ["x", "y", ""]
    np.testing.assert_array_equal(spectra.path_length.values, [0.1, 0.2, np.nan])


def test_many_notes_are_counted_not_poured_out(tmp_path):
    for i in range(9):
        (tmp_path / f"{i}.csv").write_text(table([0.1, 0.2], [400, 410], quantity="%T"))
    with pytest.warns(UnmixWarning) as caught:
        spectra = unmix.read(tmp_path)
    assert len(caught) == 6
    assert "4 more: see the attributes" in str(caught[-1].message)
    assert len(json.loads(spectra.attrs["notes"])) == 9


def test_unknown_quantity_is_refused_by_the_solvers_with_its_words(tmp_path):
    spectra = make_spectra([[0.1, 0.2]], [400, 410], dim="wavelength", quantity="absorbance", labels=["a"])
    path = unmix.write(spectra, tmp_path / "a.jdx")
    path.write_text(path.read_text().replace("ABSORBANCE", "GLOW IN THE DARK"))
    with pytest.warns(UnmixWarning, match="'GLOW IN THE DARK' is not understood; kept as text"):
        read = unmix.read(path)
    with pytest.raises(InputError, match="GLOW IN THE DARK"):
        as_absorbance(read)


@pytest.mark.parametrize(("content", "message"), [
    (b"%PDF-1.7 ...", "the file is a PDF; give JCAMP-DX"), (b"\x89PNG\r\n", "the file is a picture"),
    (b"\xd0\xcf\x11\xe0\xa1", r"an old workbook .*save it as .xlsx"), (b"\x1f\x8b\x08", "compressed .gzip.; unpack it"),
    (b"   \n\n", "the file is empty"), (b"\x00\x01\x02\x03" * 50, "the file is not text"),
    (b"\x89HDF\r\n\x1a\n" + b"x" * 99, "the store cannot be opened"),
    (b"PK\x03\x04nonsense", "the workbook cannot be opened"), (b"CDF\x01nonsense", "the store cannot be opened"),
])  # fmt: skip
def test_other_kinds_of_files(tmp_path, content, message):
    (tmp_path / "x.csv").write_bytes(content)
    with pytest.raises(ReadError, match=message):
        unmix.read(tmp_path / "x.csv")


def test_the_public_name_stays_the_function():
    import unmix.read  # noqa: PLC0415 - the import itself is under test

    assert callable(unmix.read)
    assert unmix.read.__name__ == "read"
