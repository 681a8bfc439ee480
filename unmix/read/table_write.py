"""Spectra to the rows of a table: one spectrum a column, names and facts above, units in the headings."""

import csv
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import xarray as xr

from unmix.files import harmless_cell
from unmix.ordinate_units import ordinate_text
from unmix.spectra import labels_of, spectral_dim
from unmix.units import axis_title


def table_rows(spectra: xr.DataArray) -> Iterator[list[str | float]]:
    """The rows of a table that ``read`` takes back as it was.

    Parameters
    ----------
    spectra : DataArray, dims (sample, spectral)
        Checked spectra.

    Yields
    ------
    list
        Texts that no spreadsheet runs as a formula, and numbers; an empty text where a value is missing.
    """
    dim = spectral_dim(spectra)
    leading = spectra.dims[0]
    yield ["sample", *map(harmless_cell, labels_of(spectra))]
    for name, coord in spectra.coords.items():
        if coord.dims == (leading,) and name not in ("label", "file", "component", leading):
            heading = "path_length (cm)" if name == "path_length" else harmless_cell(str(name))
            yield [heading, *(_cell(entry) for entry in coord.values)]
    unit = ordinate_text(str(spectra.attrs.get("quantity", "")), str(spectra.attrs.get("per", ""))).capitalize()
    yield [axis_title(dim), *[harmless_cell(unit)] * spectra.sizes[leading]]
    for position, values in zip(spectra[dim].values, np.asarray(spectra.values).T, strict=True):
        yield [float(position), *("" if np.isnan(value) else _number(value) for value in values)]


def _number(value: np.floating) -> float:
    # The shortest decimal that is the same 32-bit number, not the 17 digits of its 64-bit neighbour
    return float(str(value)) if isinstance(value, np.float32) else float(value)


def _cell(entry: object) -> str | float:
    if isinstance(entry, float | int | np.floating | np.integer) and not isinstance(entry, bool):
        number = float(entry)
        return "" if np.isnan(number) else number
    return harmless_cell(str(entry))


def write_csv(spectra: xr.DataArray, path: Path, delimiter: str) -> None:
    """Write spectra as a table of text, in UTF-8."""
    with path.open("w", encoding="utf-8", newline="") as file:
        csv.writer(file, delimiter=delimiter, lineterminator="\n").writerows(table_rows(spectra))
