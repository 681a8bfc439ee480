"""Tables of reference values: chosen columns of numbers, which may have gaps, beside columns such as batches."""

from collections.abc import Sequence
from pathlib import Path

import pandas as pd

from unmix.errors import ReadError, listed, suggestion
from unmix.read.amounts import split_unit, table_cells

#: what people write where there is no value
_GAPS = ("", "na", "n/a", "nan", "-", "none")


def read_references(path: str | Path, properties: Sequence[str] = (), *, groups: str | None = None) -> pd.DataFrame:
    """Read reference values of some properties.

    Parameters
    ----------
    path : str or Path
        CSV, TSV or semicolon table, or a workbook (first sheet). The first column names the samples.
    properties : sequence of str
        Columns to take, with or without the unit in parentheses behind the name; the only column when there is but one.
    groups : str, optional
        A further column whose entries are kept as text in ``attrs["groups"]``, name of the sample to entry.

    Returns
    -------
    DataFrame
        Names as the index, one column a property, NaN where a cell is empty; ``attrs["units"]`` holds the unit of each.

    Raises
    ------
    ReadError
        When the file cannot be read as a table, a column is not there, or a cell is not a number.
    """
    place = Path(path)
    cells, names = table_cells(place)
    headings = {split_unit(str(title))[0]: str(title) for title in cells.columns[1:]}
    if not properties:
        left = [name for name in headings if name != groups]
        if len(left) > 1:
            raise ReadError(f"the table has several columns ({listed(left)})", path=place.name,
                            accepted="say which property is meant")  # fmt: skip
        properties = left
    found, units = {}, {}
    for wanted in properties:
        name, title = _column(wanted, headings, place)
        found[name] = _numbers(cells[title], names, name, place)
        units[name] = split_unit(title)[1] or "1"
    table = pd.DataFrame(found, index=pd.Index(names, name=str(cells.columns[0])))
    table.attrs["units"] = units
    if groups is not None:
        title = _column(groups, headings, place)[1]
        table.attrs["groups"] = dict(zip(names, (str(cell) for cell in cells[title]), strict=True))
    return table


def _column(wanted: str, headings: dict[str, str], place: Path) -> tuple[str, str]:
    for name, title in headings.items():
        if wanted in (name, title):
            return name, title
    raise ReadError(f"there is no column '{wanted}'{suggestion(wanted, list(headings))}", path=place.name,
                    accepted=f"the columns are {listed(headings)}")  # fmt: skip


def _numbers(column: "pd.Series[str]", names: list[str], name: str, place: Path) -> list[float]:
    gaps = column.isna() | column.astype(str).str.strip().str.lower().isin(_GAPS)
    values = pd.to_numeric(column.where(~gaps), errors="coerce")
    bad = (values.isna() & ~gaps).to_numpy()
    if bad.any():
        at = int(bad.argmax())
        raise ReadError(f"'{column.iloc[at]}' for '{name}' of sample '{names[at]}' is not a number", path=place.name,
                        accepted="give a number, or leave the cell empty")  # fmt: skip
    return [float(value) for value in values]
