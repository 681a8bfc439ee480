"""Tables of amounts or reference values brought into the order of the spectra, by name."""

from typing import Any

import pandas as pd
import xarray as xr

from unmix.errors import InputError, listed, suggestion
from unmix.spectra import labels_of


def match_table(
    spectra: xr.DataArray, table: Any, *, name: str = "amounts", signed: bool = False, gaps: bool = False
) -> tuple[pd.DataFrame, list[str]]:
    """Rows of a table in the order of the spectra.

    Parameters
    ----------
    spectra : DataArray, dims (sample, spectral)
    table : DataFrame, Series or DataArray
        The index, the leading coordinate or a first column of text holds the names.
    name : str
        What the messages call the table.
    signed : bool
        Whether numbers below zero are allowed.
    gaps : bool
        Whether a sample may lack a row or a value; it is NaN then.

    Returns
    -------
    table : DataFrame of float
    assumptions : list of str
        How rows were matched where there were no names, and which rows match no spectrum.

    Raises
    ------
    InputError
        When rows cannot be matched, a name appears twice, or a cell is not a number.
    """
    rows = _as_table(table, name)
    leading = spectra.dims[0]
    named = any(coord in spectra.coords for coord in ("label", str(leading), "file"))
    if not named or isinstance(rows.index, pd.RangeIndex):
        if len(rows) != spectra.sizes[leading]:
            raise InputError(f"{name} has {len(rows)} rows for {spectra.sizes[leading]} spectra",
                             accepted="name the rows as the spectra, or give one row each in order")  # fmt: skip
        return _numbers(rows, name, signed, gaps), [
            f"{name} were matched to spectra by order, since one of them has no names"
        ]
    labels = labels_of(spectra)
    index = [str(entry) for entry in rows.index]
    double = sorted({entry for entry in index if index.count(entry) > 1})
    if double:
        raise InputError(f"{name}: row {listed(double)} appears more than once", accepted="give each sample one row")
    rows = rows.set_axis(index, axis=0)
    missing = [entry for entry in labels if entry not in rows.index]
    if missing and (not gaps or len(missing) == len(labels)):
        at = labels.index(missing[0])
        raise InputError(
            f"{name}: no row for sample {listed(missing)} (the first is spectrum {at + 1} of {len(labels)})"
            f"{suggestion(missing[0], index)}",
            accepted="name the rows as the spectra",
        )
    known = set(labels)
    surplus = [entry for entry in index if entry not in known]
    told = [f"{name}: row {listed(surplus)} matches no spectrum and was not used"] if surplus else []
    return _numbers(rows.reindex(labels), name, signed, gaps), told


def _as_table(table: Any, name: str) -> pd.DataFrame:
    if isinstance(table, xr.DataArray):
        if table.ndim == 1:
            table = table.expand_dims({"property": [str(table.name or "value")]}, axis=-1)
        if table.ndim != 2:
            raise InputError(f"{name} has dimensions {listed(table.dims)}", accepted="give (sample, component)")
        rows, columns = table.dims
        names = table["label"] if "label" in table.coords else table.coords.get(rows)
        index = None if names is None else [str(entry) for entry in names.values]
        return pd.DataFrame(table.values, index=index, columns=[str(c) for c in table[columns].values])
    if isinstance(table, pd.Series):
        table = table.to_frame(name="value" if table.name is None else str(table.name))
    if not isinstance(table, pd.DataFrame):
        raise InputError(f"{name} is a {type(table).__name__}", accepted="give a DataFrame or a DataArray")
    if isinstance(table.index, pd.RangeIndex) and len(table.columns) and not _numeric(table.iloc[:, 0]):
        return table.set_index(table.columns[0])
    return table


def _numeric(column: "pd.Series[Any]") -> bool:
    return bool(pd.api.types.is_numeric_dtype(column))


def _numbers(table: pd.DataFrame, name: str, signed: bool, gaps: bool) -> pd.DataFrame:
    for column in table.columns:
        numbers = pd.to_numeric(table[column], errors="coerce")
        bad = numbers.isna() | numbers.isin([float("inf"), float("-inf")])
        if gaps:
            bad &= table[column].notna()
        if not signed:
            bad |= numbers < 0
        if bad.any():
            row = table.index[int(bad.to_numpy().argmax())]
            accepted = "give a number" if signed else "give a number that is not negative, 0 where there is none"
            raise InputError(f"{name}: '{table.loc[row, column]}' for '{column}' in sample '{row}'", accepted=accepted)
    return table.astype(float)
