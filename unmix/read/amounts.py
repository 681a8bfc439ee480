"""Tables of known amounts or reference values: names in the first column, one column a component."""

import re
from pathlib import Path

import pandas as pd

from unmix.errors import ReadError, listed

#: suffixes that are read as a workbook
_WORKBOOKS = (".xlsx", ".xlsm")


def read_amounts(path: str | Path) -> pd.DataFrame:
    """Read a table of amounts.

    Parameters
    ----------
    path : str or Path
        CSV, TSV or semicolon table, or a workbook (first sheet). The first column names the samples; the others hold
        numbers, their unit in parentheses behind the name, such as ``copper (mol/L)``. A decimal comma is understood
        where columns are parted by semicolons or tabs.

    Returns
    -------
    DataFrame
        Names as the index, one column a component; ``attrs["units"]`` is the unit that all columns share, if any.

    Raises
    ------
    ReadError
        When the file is missing, empty or not a table, a name appears twice, a cell is not a number, or the
        columns are in different units.
    """
    path = Path(path)
    table, names = table_cells(path)
    columns = {}
    units = set()
    for header in table.columns[1:]:
        name, unit = split_unit(str(header))
        units.add(unit)
        columns[name] = _numbers(table[header], names, name, path)
    if len(units) > 1:
        raise ReadError(f"the columns are in different units ({', '.join(sorted(u or 'none' for u in units))})",
                        path=path.name, accepted="give all amounts in one unit")  # fmt: skip
    found = pd.DataFrame(columns, index=pd.Index(names, name=str(table.columns[0])))
    unit = units.pop()
    if unit:
        found.attrs["units"] = unit
    return found


def table_cells(path: Path) -> tuple[pd.DataFrame, list[str]]:
    """The cells of a table as text, and the names in its first column.

    Raises
    ------
    ReadError
        When the file is missing, empty or not a table, or a name appears twice.
    """
    if not path.is_file():
        raise ReadError("there is no such file", path=str(path))
    table = _workbook(path) if path.suffix.lower() in _WORKBOOKS else _text(path)
    if table.shape[1] < 2 or table.empty:
        raise ReadError(f"the table has {table.shape[1]} columns and {len(table)} rows", path=path.name,
                        accepted="give names in the first column and amounts in the others")  # fmt: skip
    names = [str(name).strip() for name in table.iloc[:, 0]]
    double = sorted({name for name in names if names.count(name) > 1})
    if double:
        raise ReadError(f"sample {listed(double)} has more than one row", path=path.name, accepted="give each one row")
    return table, names


def _text(path: Path) -> pd.DataFrame:
    raw = path.read_bytes()
    encoding = "utf-16" if raw[:2] in (b"\xff\xfe", b"\xfe\xff") else "utf-8-sig"
    try:
        text = raw.decode(encoding)
    except UnicodeDecodeError:
        text = raw.decode("latin-1")
    lines = [line for line in text.splitlines() if line.strip() and not line.startswith("#")]
    if not lines:
        raise ReadError("the file is empty", path=path.name)
    separator = next((mark for mark in (";", "\t", ",") if mark in lines[0]), None)
    if separator is None:
        raise ReadError("no comma, semicolon or tab parts the columns of the first line", path=path.name, line=1)
    rows = [[cell.strip().strip('"') for cell in line.split(separator)] for line in lines]
    for number, row in enumerate(rows, start=1):
        if len(row) != len(rows[0]):
            raise ReadError(f"the row has {len(row)} cells but the header {len(rows[0])}", path=path.name, line=number)
    table = pd.DataFrame(rows[1:], columns=rows[0])
    if separator != ",":
        table.iloc[:, 1:] = table.iloc[:, 1:].map(lambda cell: cell.replace(",", ".") if cell.count(",") == 1 else cell)
    return table


def _workbook(path: Path) -> pd.DataFrame:
    try:
        return pd.read_excel(path, dtype=str)
    except ImportError as missing:
        raise ReadError("workbooks need the package openpyxl", path=path.name,
                        accepted="install unmix[spreadsheet], or save the table as CSV") from missing  # fmt: skip
    except Exception as cause:
        raise ReadError(f"the workbook cannot be read ({type(cause).__name__})", path=path.name) from cause


def split_unit(header: str) -> tuple[str, str]:
    """Name and unit of a heading such as ``copper (mol/L)``; the unit is empty where there is none."""
    match = re.fullmatch(r"\s*(.*?)\s*[(\[]\s*(.+?)\s*[)\]]\s*", header)
    return (match.group(1), match.group(2)) if match and match.group(1) else (header.strip(), "")


def _numbers(column: "pd.Series[str]", names: list[str], header: str, path: Path) -> list[float]:
    values = pd.to_numeric(column, errors="coerce")
    bad = values.isna().to_numpy()
    if bad.any():
        at = int(bad.argmax())
        raise ReadError(f"'{column.iloc[at]}' for '{header}' of sample '{names[at]}' is not a number", path=path.name,
                        accepted="give a number, 0 where there is none")  # fmt: skip
    return [float(value) for value in values]
