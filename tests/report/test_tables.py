import csv
import io
import json
import math

import numpy as np
import pytest
import xarray as xr
from openpyxl import load_workbook

from unmix.errors import WriteError
from unmix.report import tables

HOSTILE = ["=1+1", "@cmd", "+a", "-b", "\tx", "plain", 'quo"te', "two\nlines"]


def read_rows(text):
    return list(csv.DictReader(io.StringIO(text)))


def test_one_row_an_amount_with_everything_in_it(composition):
    rows = tables.rows(composition)
    assert len(rows) == 8 * 4
    assert tuple(sorted(rows[0])) == tuple(sorted(tables.AMOUNT_COLUMNS))
    first = rows[0]
    assert first["sample"] == "drum 1"
    assert first["file"] == "drum_1.jdx"
    assert first["component"] == "isopropanol"
    assert first["concentration"] == composition["concentration"].values[0, 0]
    assert first["unit"] == "g/L"
    assert first["level"] == 0.95
    assert rows[3]["detected"] is False
    assert rows[4]["verdict"] == "unsupported"


def test_csv_keeps_every_digit_and_runs_no_formula(make_composition):
    result = make_composition(8, labels=HOSTILE)
    text = tables.csv_text(tables.rows(result), tables.columns(result))
    rows = read_rows(text)
    assert tuple(rows[0]) == tables.AMOUNT_COLUMNS
    numbers = [float(row["concentration"]) for row in rows]
    assert numbers == result["concentration"].values.ravel().tolist()
    for row, label in zip(rows[::4], HOSTILE, strict=True):
        assert row["sample"].lstrip("'") == label
        assert row["sample"][0] not in "=+-@\t"
    assert {row["detected"] for row in rows} == {"true", "false"}


def test_unknown_numbers_are_empty_in_csv_and_null_in_json(composition):
    blank = composition["concentration"].copy()
    blank[0] = np.nan
    result = composition.assign(concentration=blank)
    assert read_rows(tables.csv_text(tables.rows(result), tables.columns(result)))[0]["concentration"] == ""
    parsed = json.loads(tables.json_text(tables.document(result)))
    assert parsed["rows"][0]["concentration"] is None


def test_json_holds_rows_refusals_and_provenance(composition, tmp_path):
    result = composition.assign_attrs(refused=json.dumps({"bad.jdx": "empty"}), weights=np.array([1.0, 2.0]))
    tables.write_json([result, composition], tmp_path / "a.json")
    parsed = json.loads((tmp_path / "a.json").read_text(encoding="utf-8"))
    assert parsed["kind"] == "quantify"
    assert len(parsed["rows"]) == 64
    assert parsed["refused"] == [{"file": "bad.jdx", "reason": "empty"}]
    assert parsed["provenance"][0]["settings"] == {"baseline": 1, "level": 0.95}
    assert parsed["provenance"][0]["notes"] == ["drum_3.jdx: 37 saturated channels left out"]
    assert parsed["provenance"][0]["weights"] == [1.0, 2.0]


def test_netcdf_comes_back_whole(composition, tmp_path):
    path = tmp_path / "a.nc"
    tables.write_netcdf(composition.assign_attrs(odd=None, flag=True), path)
    with xr.open_dataset(path, engine="h5netcdf") as back:
        back.load()
    xr.testing.assert_equal(back, composition)
    assert back["used"].dtype == bool
    assert back["concentration"].attrs == composition["concentration"].attrs
    assert back.attrs["level"] == 0.95
    assert back.attrs["flag"] == "True"


def test_results_on_several_axes_become_groups(composition, make_composition, tmp_path):
    other = make_composition(2, axis=np.arange(1000.0, 1800.0, 2.0))
    path = tmp_path / "a.nc"
    tables.write_netcdf([composition, other], path)
    for group, result in (("grid_1", composition), ("grid_2", other)):
        with xr.open_dataset(path, group=group, engine="h5netcdf") as back:
            xr.testing.assert_equal(back.load(), result)


def test_spreadsheet_has_numbers_as_numbers(make_composition, tmp_path):
    labels = ["=1+1", "\x07bell", *"cdefgh"]
    result = make_composition(8, labels=labels)
    tables.write_xlsx(result, tmp_path / "a.xlsx")
    sheet = load_workbook(tmp_path / "a.xlsx").active
    assert [cell.value for cell in sheet[1]] == list(tables.AMOUNT_COLUMNS)
    assert sheet["A2"].value == "'=1+1"
    assert sheet["A2"].data_type == "s"
    assert sheet["A6"].value == "bell"
    assert sheet["D2"].value == pytest.approx(float(result["concentration"][0, 0]), rel=1e-15)
    assert sheet.max_row == 33


def test_conditioning_has_a_row_a_component(design, make_conditioning):
    rows = tables.rows(design)
    assert [row["component"] for row in rows] == list(design["component"].values)
    assert tables.columns(design) == tables.DESIGN_COLUMNS
    assert rows[3]["confused_with"] == "isopropanol"
    assert rows[0]["verdict"] == "doubtful"
    assert all(row["detection_limit"] is None for row in tables.rows(make_conditioning(noise=False)))
    assert math.isfinite(rows[0]["selectivity"])


@pytest.mark.parametrize(
    "write", [tables.write_csv, tables.write_json, tables.write_netcdf, tables.write_xlsx]
)
def test_a_file_is_replaced_only_when_asked(write, composition, tmp_path):
    path = tmp_path / "file.out"
    path.write_text("mine", encoding="utf-8")
    with pytest.raises(WriteError, match="exists already"):
        write(composition, path)
    assert path.read_text(encoding="utf-8") == "mine"
    write(composition, path, overwrite=True)
    assert path.stat().st_size > 100
    assert [entry.name for entry in tmp_path.iterdir()] == ["file.out"]
