"""Workbooks: layouts as in text tables, sheets, damage, and the missing package."""

import datetime
import sys
import zipfile

import numpy as np
import pytest

import unmix
from unmix.errors import ReadError, WriteError
from unmix.spectra import make_spectra

openpyxl = pytest.importorskip("openpyxl")


def workbook(path, **sheets):
    book = openpyxl.Workbook()
    book.remove(book.active)
    for name, rows in sheets.items():
        sheet = book.create_sheet(name)
        for row in rows:
            sheet.append(row)
    book.save(path)
    return path


ROWS = [["Wavelength (nm)", "a (A)", "b (A)"], [400, 0.1, 0.2], [401, 0.2, None], [402, 0.3, 0.4]]


def test_sheet_like_a_table(tmp_path):
    read = unmix.read(workbook(tmp_path / "s.xlsx", data=ROWS))
    assert read.label.values.tolist() == ["a", "b"]
    np.testing.assert_array_equal(read.values, [[0.1, 0.2, 0.3], [0.2, np.nan, 0.4]])


def test_metadata_above_and_empty_rows(tmp_path):
    rows = [["Operator", "x"], ["Date", datetime.date(2026, 1, 2)], [], *ROWS]
    assert unmix.read(workbook(tmp_path / "s.xlsx", data=rows)).sizes == {"sample": 2, "wavelength": 3}


def test_one_spectrum_a_row(tmp_path):
    rows = [["name", "batch", "400 nm", "401 nm", "402 nm"], ["a", "x", 0.1, 0.2, 0.3], ["b", "y", 1, 2, 3]]
    read = unmix.read(workbook(tmp_path / "s.xlsx", data=rows), quantity="absorbance")
    assert read.batch.values.tolist() == ["x", "y"]
    assert read.values[1].tolist() == [1, 2, 3]


def test_several_sheets_ask(tmp_path):
    path = workbook(tmp_path / "s.xlsx", first=ROWS, second=ROWS[:3], empty=[])
    with pytest.raises(ReadError, match="the workbook holds several sheets: 'first', 'second'; name one as sheet="):
        unmix.read(path)
    assert unmix.read(path, sheet="second").sizes["wavelength"] == 2
    with pytest.raises(ReadError, match="there is no sheet 'third'; the sheets are 'first', 'second', 'empty'"):
        unmix.read(path, sheet="third")
    with pytest.raises(ReadError, match="the workbook holds no cells"):
        unmix.read(workbook(tmp_path / "e.xlsx", empty=[]))


@pytest.mark.parametrize(("cell", "message"), [
    ("x", "line 3: 'x' in column 2 is not a number"), ("0,5", "line 3: '0,5' in column 2 is not a number"),
    (True, "line 3: 'True' in column 2"), (datetime.datetime(2026, 1, 2), "line 3: '2026-01-02T00:00:00' in column 2"),
    ("#DIV/0!", "line 3: '#DIV/0!' in column 2"),
])  # fmt: skip
def test_cells_that_are_no_numbers(tmp_path, cell, message):
    rows = [ROWS[0], ROWS[1], [401, cell, 0.2], ROWS[3]]
    with pytest.raises(ReadError, match=message):
        unmix.read(workbook(tmp_path / "s.xlsx", data=rows))


def test_damaged_workbooks(tmp_path):
    path = workbook(tmp_path / "s.xlsx", data=ROWS)
    whole = path.read_bytes()
    rng = np.random.default_rng(0)
    for size in range(4, len(whole), len(whole) // 10):
        path.write_bytes(whole[:size])
        with pytest.raises(ReadError):
            unmix.read(path)
    for _ in range(40):
        changed = bytearray(whole)
        changed[rng.integers(4, len(whole))] ^= 1 << int(rng.integers(8))
        path.write_bytes(changed)
        try:
            unmix.read(path)
        except ReadError as error:
            assert "s.xlsx" in str(error)  # noqa: PT017 - either outcome is right, another error is not


def test_workbook_that_unpacks_to_too_much_is_refused(tmp_path):
    path = tmp_path / "s.xlsx"
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as packed:
        packed.writestr("xl/worksheets/sheet1.xml", b" " * 200_000_000)
    with pytest.raises(ReadError, match=r"the workbook unpacks to 2e\+08 bytes"):
        unmix.read(path)


def test_missing_package_is_named(tmp_path, monkeypatch):
    path = workbook(tmp_path / "s.xlsx", data=ROWS)
    monkeypatch.setitem(sys.modules, "openpyxl", None)
    with pytest.raises(ReadError, match=r"workbooks need the package openpyxl; install unmix.spreadsheet., or save"):
        unmix.read(path)
    spectra = make_spectra([[1.0, 2.0]], [1, 2], dim="wavelength", quantity="absorbance", labels=["a"])
    with pytest.raises(WriteError, match="workbooks need the package openpyxl"):
        unmix.write(spectra, tmp_path / "t.xlsx")


def test_sheet_limits(tmp_path):
    wide = make_spectra(np.ones((16_384, 2)), [1, 2], dim="wavelength", quantity="absorbance",
                        labels=[f"s{i}" for i in range(16_384)])  # fmt: skip
    with pytest.raises(WriteError, match="a sheet holds at most 1048576 rows and 16384 columns"):
        unmix.write(wide, tmp_path / "t.xlsx")
    assert list(tmp_path.iterdir()) == []


def test_control_characters_cannot_stand_in_a_workbook(tmp_path):
    spectra = make_spectra([[1.0, 2.0]], [1, 2], dim="wavelength", quantity="absorbance", labels=["a\x07"])
    with pytest.raises(WriteError, match="row 1 cannot stand in a workbook"):
        unmix.write(spectra, tmp_path / "t.xlsx")
