"""``unmix inspect``: a line a file, findings, JSON, refusals and exit statuses."""

import json
from pathlib import Path

import numpy as np
import pytest

REFERENCE = Path(__file__).parents[1] / "reference" / "jcamp"


def test_good_files_are_one_line_each(laboratory, unmix):
    status, out, err = unmix("inspect", "samples")
    assert (status, err) == (0, "")
    lines = out.splitlines()
    assert lines[0].split() == ["file", "kind", "n", "axis", "quantity", "noise", "remarks"]
    assert lines[2].split()[:8] == ["vat1.csv", "table", "1", "400-700", "nm", "by", "2", "absorbance"]
    assert 1e-4 < float(lines[2].split()[8]) < 3e-4
    assert lines[2].split()[9:] == ["none"]
    assert lines[-1] == "All spectra stand on one axis."


def test_a_bad_file_is_named_and_the_rest_shown(laboratory, unmix):
    (laboratory / "samples" / "torn.csv").write_text("Wavelength (nm),Absorbance\n400,0.1\n402\n404,0.3\n")
    status, out, err = unmix("inspect", "samples")
    assert status == 2
    assert "vat1.csv" in out
    assert err == ("unmix: torn.csv: line 3: the row has 1 cells but the rows before it have 2; every row of numbers "
                   "has the same number of cells\n")  # fmt: skip


def test_only_bad_files(laboratory, unmix):
    (laboratory / "torn.csv").write_text("hello")
    status, out, err = unmix("inspect", "torn.csv")
    assert (status, out) == (2, "")
    assert err.startswith("unmix: torn.csv: no rows of numbers were found")
    status, _, err = unmix("inspect", "nowhere")
    assert (status, err) == (2, "unmix: nowhere: there is no such file\n")


def test_doubtful_files_and_details(laboratory, unmix):
    path = REFERENCE / "ir_link_five_blocks.jdx"
    status, out, _ = unmix("inspect", path)
    assert status == 1
    assert "The remarks are shown with --verbose." in out
    assert "The axes differ" in out
    status, out, _ = unmix("inspect", path, "--verbose")
    text = " ".join(out.split())
    assert status == 1
    assert "format: JCAMP-DX 4.24; packing: DIF DUP SQZ; blocks: 6; data type: INFRARED SPECTRUM" in text
    assert "##MAXY= says 49.32 but the table has 0.4932; the header gives it in percent" in text
    assert "carbon dioxide near 2361 cm-1" in text


def test_json_holds_everything(laboratory, unmix):
    status, out, err = unmix("inspect", REFERENCE, "--json", "-")
    assert (status, err) == (1, "")
    answer = json.loads(out)
    assert answer["kind"] == "inspect"
    assert answer["shared_axis"] is False
    assert answer["refused"] == []
    assert answer["remarks"] == ["left alone in the folder jcamp: 'README.md'"]
    assert len(answer["files"]) == 12
    first = answer["files"][0]
    assert first["axis"] == {"dimension": "wavenumber", "unit": "cm-1", "first": 400.0, "last": 4000.0,
                             "channels": 3601, "spacing": 1.0, "even": True}  # fmt: skip
    assert first["spectra"][0]["noise"] == pytest.approx(7e-5, rel=0.2)
    unmix("inspect", REFERENCE, "--json", "out.json", "--quiet")
    assert json.loads((laboratory / "out.json").read_text(encoding="utf-8")) == answer
    status, _, err = unmix("inspect", REFERENCE, "--json", "out.json")
    assert (status, "exists already" in err) == (2, True)
    status, _, _ = unmix("inspect", REFERENCE, "--json", "out.json", "--overwrite")
    assert status == 1


def test_arguments_say_what_files_do_not(laboratory, unmix):
    (laboratory / "bare.csv").write_text("400,0.5\n401,0.6\n402,0.7\n")
    status, _, err = unmix("inspect", "bare.csv")
    assert (status, "give it as quantity=" in err) == (2, True)
    status, _, err = unmix("inspect", "bare.csv", "--quantity", "absorbance")
    assert (status, "give it as unit=" in err) == (2, True)
    status, out, _ = unmix("inspect", "bare.csv", "--unit", "nm", "--quantity", "absorbance")
    assert (status, "400-402 nm by 1" in out) == (0, True)
    status, _, err = unmix("inspect", "bare.csv", "--unit", "yards")
    assert (status, "axis unit 'yards' is not understood" in err) == (2, True)


def test_failed_checks_can_be_looked_at(laboratory, unmix):
    text = (REFERENCE / "uvvis_difdup_ascending.jdx").read_text("latin-1")
    (laboratory / "cut.jdx").write_text(text.replace("NPOINTS=  440", "NPOINTS=  441"))
    status, _, err = unmix("inspect", "cut.jdx")
    assert (status, "##NPOINTS= says 441 but the table holds 440 points" in err) == (2, True)
    status, out, _ = unmix("inspect", "cut.jdx", "--checks", "warn", "-v")
    assert (status, "##NPOINTS= says 441" in out) == (1, True)


def test_names_from_files_cannot_steer_the_terminal(laboratory, unmix):
    (laboratory / "x.csv").write_text("nm,a\x1b[31m (A),b (A)\n400,0.5,1\n401,0.6,1\n402,0.7,1\n")
    _, out, err = unmix("inspect", "x.csv", "-v")
    assert "\x1b" not in out + err


def test_stores_are_inspected_too(laboratory, unmix):
    import unmix as package  # noqa: PLC0415 - the fixture has the name
    from unmix.spectra import make_spectra  # noqa: PLC0415

    spectra = make_spectra(np.ones((2, 20)), np.arange(20.0), dim="raman_shift", quantity="intensity")
    package.write(spectra, laboratory / "s.nc")
    status, out, _ = unmix("inspect", "s.nc")
    assert status == 1
    assert "store" in out
