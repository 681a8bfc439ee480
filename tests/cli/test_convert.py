"""``unmix convert``: into one file or one by one, whole files only, exit statuses."""

import json

import numpy as np

import unmix as package


def test_all_into_one_file(laboratory, unmix):
    status, out, err = unmix("convert", "samples", "--to", "all.jdx", "--form", "DIFDUP")
    assert (status, out, err) == (0, "", "wrote all.jdx (2 spectra)\n")
    read = package.read(laboratory / "all.jdx")
    expected = package.read(laboratory / "samples")
    assert read.label.values.tolist() == ["vat1", "vat2"]
    np.testing.assert_allclose(read.values, expected.values, atol=1e-9)


def test_one_by_one_keeps_each_axis(laboratory, unmix, lab):
    lab["write"](laboratory / "samples" / "vat3.csv", lab["axis"][::2], lab["sample"](1, 1, 3, lab["axis"][::2]))
    status, _, err = unmix("convert", "samples", "--into", "out", "--suffix", ".nc")
    assert (status, err) == (0, "wrote 3 files into out\n")
    assert package.read(laboratory / "out" / "vat3.nc").sizes["wavelength"] == 76
    assert package.read(laboratory / "out" / "vat1.nc").sizes["wavelength"] == 151


def test_what_was_cut_is_said(laboratory, unmix, lab):
    lab["write"](laboratory / "samples" / "vat3.csv", lab["axis"][50:], lab["sample"](1, 1, 3, lab["axis"][50:]))
    status, _, err = unmix("convert", "samples", "--to", "all.csv")
    assert status == 1
    assert "channels outside that range were cut from vat1.csv" in " ".join(err.split())


def test_a_bad_file_is_named_and_the_rest_converted(laboratory, unmix):
    (laboratory / "samples" / "torn.csv").write_text("")
    status, _, err = unmix("convert", "samples", "--into", "out")
    assert status == 2
    assert "torn.csv: the file is empty" in err
    assert sorted(path.name for path in (laboratory / "out").iterdir()) == ["vat1.jdx", "vat2.jdx"]
    status, _, err = unmix("convert", "samples", "--to", "all.nc")
    assert (status, "torn.csv" in err) == (2, True)
    assert list(json.loads(package.read(laboratory / "all.nc").attrs["source_sha256"])) == ["all.nc"]


def test_nothing_is_replaced_unless_asked(laboratory, unmix):
    unmix("convert", "samples", "--to", "all.csv")
    before = (laboratory / "all.csv").read_text()
    status, _, err = unmix("convert", "pure", "--to", "all.csv")
    assert (status, "exists already" in err) == (2, True)
    assert (laboratory / "all.csv").read_text() == before
    status, _, _ = unmix("convert", "pure", "--to", "all.csv", "--overwrite")
    assert status == 0
    unmix("convert", "samples", "--into", "out")
    status, _, err = unmix("convert", "samples", "--into", "out")
    assert (status, err.count("exists already")) == (2, 2)


def test_arguments_that_make_no_sense(laboratory, unmix):
    status, _, err = unmix("convert", "samples")
    assert (status, "give either --to FILE or --into FOLDER" in err) == (2, True)
    status, _, err = unmix("convert", "samples", "--to", "a.csv", "--into", "b")
    assert (status, "give either --to FILE or --into FOLDER" in err) == (2, True)
    status, _, err = unmix("convert", "samples", "--to", "a.docx")
    assert (status, "the suffix '.docx' stands for no format" in err) == (2, True)
    (laboratory / "twice").mkdir()
    for suffix in (".csv", ".tsv"):
        (laboratory / "twice" / f"a{suffix}").write_bytes((laboratory / "samples" / "vat1.csv").read_bytes())
    status, _, err = unmix("convert", "twice", "--into", "out")
    assert (status, "two of the files would become out/a.jdx" in err) == (2, True)
