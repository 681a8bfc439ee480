"""Writing spectra: the format by suffix, the file whole or not at all."""

import os
from pathlib import Path
from typing import Any, Literal

import numpy as np
import xarray as xr

from unmix.errors import InputError, WriteError, listed
from unmix.files import whole_file
from unmix.read.jcamp_write import jcamp_lines
from unmix.read.spreadsheet import write_workbook
from unmix.read.store import write_store
from unmix.read.table_write import table_rows, write_csv
from unmix.spectra import check_spectra

#: suffix -> what is written
FORMATS = {".jdx": "JCAMP-DX", ".dx": "JCAMP-DX", ".csv": "CSV", ".tsv": "TSV", ".xlsx": "workbook",
           ".nc": "netCDF", ".zarr": "Zarr"}  # fmt: skip


def write(
    spectra: Any,
    path: str | os.PathLike[str],
    *,
    overwrite: bool = False,
    form: Literal["AFFN", "DIFDUP"] = "AFFN",
) -> Path:
    """Write spectra to a file; the suffix says which format.

    Parameters
    ----------
    spectra : DataArray, dims (..., spectral)
        As ``read`` returns them.
    path : path
        ``.jdx`` or ``.dx`` (JCAMP-DX 4.24, several spectra as a LINK file, an unevenly spaced axis as pairs),
        ``.csv``, ``.tsv``, ``.xlsx`` (one spectrum a column, facts above), ``.nc`` (netCDF) or ``.zarr``. Images
        and other arrays with several leading dimensions, attributes and lazy arrays go into netCDF or Zarr.
    overwrite : bool
        Whether an existing file may be replaced. The file appears whole or not at all.
    form : {'AFFN', 'DIFDUP'}
        How ordinates stand in JCAMP-DX. AFFN keeps every digit. DIFDUP is a quarter of the size and rounds to
        ``##YFACTOR=``, a power of ten at most 5e-9 of the largest ordinate, coarser only where nothing is lost.

    Returns
    -------
    Path
        The file.

    Raises
    ------
    WriteError
        When the suffix is unknown, the file exists, or the format cannot hold the spectra.
    InputError, AxisError
        When the spectra break the data contract.

    References
    ----------
    R. S. McDonald and P. A. Wilks, Appl. Spectrosc. 42 (1988) 151-162 (JCAMP-DX 4.24).

    Examples
    --------
    >>> import tempfile
    >>> from unmix.spectra import make_spectra
    >>> spectra = make_spectra([[0.1, 0.4]], [500, 510], dim="wavelength", quantity="absorbance", labels=["dye"])
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     print(write(spectra, Path(folder) / "dye.csv").read_text())
    sample,dye
    Wavelength (nm),Absorbance
    500.0,0.1
    510.0,0.4
    <BLANKLINE>
    """
    target = Path(path)
    suffix = target.suffix.lower()
    if suffix not in FORMATS:
        raise WriteError(f"the suffix '{target.suffix}' stands for no format that unmix writes", where=str(target),
                         accepted=f"give one of {', '.join(FORMATS)}")  # fmt: skip
    if form not in ("AFFN", "DIFDUP"):
        raise InputError(f"form is {form!r}", accepted="give 'AFFN' or 'DIFDUP'")
    checked = _checked(spectra)
    if suffix in (".nc", ".zarr"):
        with whole_file(target, overwrite) as beside:
            write_store(checked, beside, suffix)
        return target
    if checked.ndim > 2:
        raise WriteError(f"{FORMATS[suffix]} holds a list of spectra, not an array over {listed(checked.dims)}",
                         where=str(target), accepted="write .nc or .zarr")  # fmt: skip
    values = np.asarray(checked.values)
    if np.isinf(values).any():
        raise InputError(f"{int(np.isinf(values).sum())} values are infinite", where=str(target),
                         accepted="mark what is missing with NaN")  # fmt: skip
    with whole_file(target, overwrite) as beside:
        if suffix in (".jdx", ".dx"):
            with beside.open("w", encoding="utf-8", newline="\r\n") as file:
                file.writelines(f"{line}\n" for line in jcamp_lines(checked, form))
        elif suffix == ".xlsx":
            write_workbook(table_rows(checked), beside)
        else:
            write_csv(checked, beside, "," if suffix == ".csv" else "\t")
    return target


def _checked(spectra: Any) -> xr.DataArray:
    """Checked spectra, whose quantity may also be text that a file was read with."""
    if not isinstance(spectra, xr.DataArray):
        return check_spectra(spectra)
    quantity = spectra.attrs.get("quantity")
    if quantity is None:
        raise InputError("the spectra do not say what their numbers are", accepted="set attrs['quantity']")
    checked = check_spectra(spectra.assign_attrs(quantity="absorbance"))
    return checked.assign_attrs(quantity=quantity)
