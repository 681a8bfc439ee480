"""Results as rows for spreadsheets and programs, one row an amount, and the files that hold them.

What a person reads on a page or at a terminal is rounded elsewhere; here nothing is.
"""

import csv
import io
import json
import math
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from unmix.errors import WriteError
from unmix.files import harmless_cell, whole_file
from unmix.report.calibrations import FIGURE_COLUMNS, PREDICTION_COLUMNS, figure_rows, prediction_rows
from unmix.report.candidates import CANDIDATE_COLUMNS, candidate_rows
from unmix.report.view import Composition, Result, Row, Value, refused_of, results_of

#: columns of the long table of amounts, in their order
AMOUNT_COLUMNS = (
    "sample", "file", "component", "concentration", "unit", "standard_uncertainty", "lower", "upper", "level",
    "detection_limit", "detected", "verdict", "reason",
)  # fmt: skip
#: columns of the table of components that ``conditioning`` gives
DESIGN_COLUMNS = (
    "component", "variance_inflation", "selectivity", "detection_limit", "unit", "confused_with", "verdict",
    "reason",
)  # fmt: skip
#: kind -> the columns of its table
_COLUMNS = {"quantify": AMOUNT_COLUMNS, "conditioning": DESIGN_COLUMNS, "prediction": PREDICTION_COLUMNS,
            "calibration": FIGURE_COLUMNS, "identify": CANDIDATE_COLUMNS}  # fmt: skip
#: kind -> what a sheet of it is called
_SHEETS = {"quantify": "amounts", "conditioning": "conditioning", "prediction": "predictions", "calibration": "figures",
           "identify": "candidates"}  # fmt: skip
_ROWS = {"prediction": prediction_rows, "calibration": figure_rows, "identify": candidate_rows}
_ENTRIES = ("settings", "versions", "inputs", "assumptions", "notes", "refused")


def _number(value: float) -> float | None:
    return float(value) if math.isfinite(value) else None


def rows(result: xr.Dataset | Sequence[xr.Dataset]) -> list[Row]:
    """One row an amount, with unit, verdict and reason in every row.

    Of a conditioning it is one row a component, of a prediction one a value, of a calibration one a property and set.

    Parameters
    ----------
    result : Dataset or sequence of Dataset
        From ``quantify``, ``conditioning`` or ``predict``, or the ``data`` of a calibration.

    Returns
    -------
    list of dict
        Keys as :func:`columns` gives them; None where a number is not known.

    Raises
    ------
    InputError
        When it is no result, or lacks what cannot be done without.
    """
    found: list[Row] = []
    for one in results_of(result, kinds=tuple(_COLUMNS)):
        kind = one.attrs["kind"]
        if kind == "conditioning":
            found += _design_rows(Result(one))
        elif kind == "quantify":
            found += _amount_rows(one)
        else:
            found += _ROWS[kind](one)
    return found


def _amount_rows(data: xr.Dataset) -> list[Row]:
    view = Composition(data)
    level = _number(float(data.attrs.get("level", math.nan)))
    names = ("concentration", "standard_uncertainty", "lower", "upper", "detection_limit")
    numbers = {name: view.table(name) for name in names}
    detected = view.detected()
    return [
        {
            "sample": sample,
            "file": view.files[i],
            "component": component,
            **{name: _number(table[i, j]) for name, table in numbers.items()},
            "unit": view.concentration_unit,
            "level": level,
            "detected": bool(detected[i, j]),
            "verdict": view.verdicts[i],
            "reason": view.reasons[i],
        }
        for i, sample in enumerate(view.samples)
        for j, component in enumerate(view.components)
    ]


def _design_rows(view: Result) -> list[Row]:
    numbers = {
        name: view.per_component(name) for name in ("variance_inflation", "selectivity", "detection_limit")
    }
    verdict, reason = (
        str(view.data[name].item()) if name in view.data else "" for name in ("verdict", "reason")
    )
    confused = view.confused_with()
    return [
        {
            "component": component,
            **{name: _number(values[j]) for name, values in numbers.items()},
            "unit": view.unit("detection_limit"),
            "confused_with": confused[j],
            "verdict": verdict,
            "reason": reason,
        }
        for j, component in enumerate(view.components)
    ]


def columns(result: xr.Dataset | Sequence[xr.Dataset]) -> tuple[str, ...]:
    """The columns of the table that :func:`rows` gives, in their order."""
    return _COLUMNS[results_of(result, kinds=tuple(_COLUMNS))[0].attrs["kind"]]


def csv_text(table: Sequence[Mapping[str, Value]], titles: Sequence[str]) -> str:
    """Rows as CSV; no cell can run as a formula, numbers keep every digit, unknown ones stay empty."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow([harmless_cell(title) for title in titles])
    for row in table:
        writer.writerow([_cell(row.get(title)) for title in titles])
    return out.getvalue()


def _cell(value: Value) -> str:
    if value is None:
        return ""
    if isinstance(value, bool):
        return "true" if value else "false"
    return harmless_cell(value) if isinstance(value, str) else repr(value)


def document(result: xr.Dataset | Sequence[xr.Dataset]) -> dict[str, Any]:
    """Everything but the curves as one structure for JSON: samples, amounts, verdicts, provenance, caution.

    Parameters
    ----------
    result : Dataset or sequence of Dataset
        Files that could not be used stand in ``attrs["refused"]``, a JSON object of file and reason.

    Returns
    -------
    dict
        ``kind``, ``rows``, ``refused`` and, one entry a Dataset, ``provenance``.
    """
    several = results_of(result, kinds=tuple(_COLUMNS))
    attributes = []
    for one in several:
        view = Result(one)
        plain = {str(key): _plain(value) for key, value in one.attrs.items() if key not in _ENTRIES}
        attributes.append({**plain, **{key: view.entries(key) for key in _ENTRIES if key in one.attrs}})
    return {
        "kind": several[0].attrs["kind"],
        "rows": rows(several),
        "refused": [{"file": file, "reason": reason} for file, reason in refused_of(several).items()],
        "provenance": attributes,
    }


def _plain(value: Any) -> Any:
    if isinstance(value, np.generic):
        return value.item()
    return value.tolist() if isinstance(value, np.ndarray) else value


def json_text(structure: Any) -> str:
    """A structure as JSON text; there is no NaN in it."""
    return json.dumps(structure, indent=2, ensure_ascii=False, allow_nan=False, default=str) + "\n"


def write_csv(result: xr.Dataset | Sequence[xr.Dataset], path: Path, *, overwrite: bool = False) -> None:
    """Write the long table as CSV (UTF-8 with a byte order mark, which spreadsheets ask for)."""
    with whole_file(path, overwrite) as beside:
        beside.write_text(csv_text(rows(result), columns(result)), encoding="utf-8-sig")


def write_xlsx(result: xr.Dataset | Sequence[xr.Dataset], path: Path, *, overwrite: bool = False) -> None:
    """Write the long table as a spreadsheet, numbers as numbers.

    Raises
    ------
    WriteError
        When openpyxl is not installed, or the file cannot be written.
    """
    try:
        from openpyxl import Workbook  # noqa: PLC0415 - an optional extra
    except ModuleNotFoundError as error:
        raise WriteError("spreadsheets need the package openpyxl", where=str(path),
                         accepted="install unmix[spreadsheet], or write CSV") from error  # fmt: skip
    titles = columns(result)
    book = Workbook()
    sheet = book.active
    sheet.title = next(_SHEETS[kind] for kind, held in _COLUMNS.items() if held is titles)
    sheet.append(list(titles))
    for row in rows(result):
        sheet.append([_sheet_cell(row[title]) for title in titles])
    sheet.freeze_panes = "A2"
    with whole_file(path, overwrite) as beside:
        book.save(beside)


def _sheet_cell(value: Value) -> Value:
    if not isinstance(value, str):
        return value
    # Control characters cannot stand in a workbook, and a cell holds 32,767 characters
    return harmless_cell("".join(char for char in value if char.isprintable()))[:32_767]


def write_json(result: xr.Dataset | Sequence[xr.Dataset], path: Path, *, overwrite: bool = False) -> None:
    """Write :func:`document` as JSON."""
    with whole_file(path, overwrite) as beside:
        beside.write_text(json_text(document(result)), encoding="utf-8")


def write_netcdf(result: xr.Dataset | Sequence[xr.Dataset], path: Path, *, overwrite: bool = False) -> None:
    """Write whole results as netCDF; results on several axes become the groups ``grid_1``, ``grid_2``, ..."""
    several = results_of(result, kinds=tuple(_COLUMNS))
    with whole_file(path, overwrite) as beside:
        for number, one in enumerate(several, start=1):
            # netCDF has no empty attribute and no truth value
            odd = {
                key: str(value)
                for key, value in one.attrs.items()
                if value is None or isinstance(value, bool)
            }
            group = None if len(several) == 1 else f"grid_{number}"
            one.assign_attrs(odd).to_netcdf(
                beside, mode="w" if number == 1 else "a", group=group, engine="h5netcdf"
            )
