"""Reading and writing spectra: the format is found by content when reading, by suffix when writing.

A file is either read right or refused with the reason. How each format is read is known to its own module.
"""

from collections.abc import Sequence
from pathlib import Path
from typing import Any, Literal

import numpy as np
import xarray as xr

from unmix.errors import InputError, ReadError
from unmix.read.blocks import is_jcamp
from unmix.read.collect import Source, files_of, read_all, same_kind, stacked, unique_name, warn_of, with_record
from unmix.read.found import Checks, Found, Options
from unmix.read.jcamp import read_jcamp
from unmix.read.spreadsheet import read_workbook
from unmix.read.store import as_found, digest_of, is_store, read_store
from unmix.read.table import read_table
from unmix.read.text import plain_lines
from unmix.read.write import write

__all__ = ["read", "read_each", "read_file", "write"]

#: first bytes of files that are no text, and what they are
_BINARY = {b"\xd0\xcf\x11\xe0": "an old workbook (.xls); save it as .xlsx", b"%PDF": "a PDF", b"\x89PNG": "a picture",
           b"\xff\xd8\xff": "a picture", b"\x1f\x8b": "compressed (gzip); unpack it first"}  # fmt: skip


def read(
    source: Source,
    *,
    checks: Checks = "error",
    axis: Literal["overlap", "same"] = "overlap",
    quantity: str | None = None,
    unit: str | None = None,
    per: str | None = None,
    decimal: str | None = None,
    orientation: str | None = None,
    sheet: str | None = None,
    chunks: Any = None,
) -> xr.DataArray:
    r"""Read spectra from files into one labelled array.

    Parameters
    ----------
    source : path, pattern, folder, or list of them
        JCAMP-DX, tables of text (CSV, TSV and their kin), ``.xlsx``, netCDF or Zarr; what a file is, is found from its
        content. A folder means its files with a suffix of these formats.
    checks : {'error', 'warn'}
        What a failed check of a JCAMP-DX file does: the count of points, the abscissa of a line, a repeated ordinate,
        the first ordinate, a missing end.
    axis : {'overlap', 'same'}
        Spectra on different axes are brought, by interpolation inside their range only, onto the coarsest of them
        within the range that all share, with a warning that says what was cut; or they are an error.
    quantity : str, optional
        What the numbers are, where the files do not say it or say it wrong: ``absorbance``, ``%T``, ``L/(mol cm)``, ...
    unit : str, optional
        The unit of the axis likewise: ``cm-1``, ``nm``, ``um``, ...
    per : str, optional
        The unit amount of an absorptivity likewise: ``g/L``, ``mol/L``, ...
    decimal : {'.', ','}, optional
        The decimal mark of a table, where it cannot be told.
    orientation : {'columns', 'rows'}, optional
        Whether a table holds one spectrum a column or one a row, where it cannot be told.
    sheet : str, optional
        The sheet of a workbook that holds the spectra, where several are filled.
    chunks : optional
        Open a single netCDF or Zarr store lazily, in chunks as xarray takes them (needs dask).

    Returns
    -------
    DataArray, dims (sample, wavenumber or wavelength or raman_shift)
        The axis increases, in cm-1 or nm. NaN marks a missing channel. Coordinates along ``sample``: ``label`` (title,
        heading or file name, each once), ``file``, ``path_length`` (cm) where a file states it with a unit, and the
        facts that stand beside the spectra of a table. Attributes: ``quantity``, ``per`` where known,
        ``source_sha256`` (JSON, file to digest), ``notes`` (JSON list of all that was assumed, contradicted or cut)
        and, where many files were asked for, ``refused`` (JSON, file to reason). A quantity that is not understood is
        kept as the file has it; the solvers refuse it.

    Raises
    ------
    ReadError
        When the file, or every one of many, cannot be read right, or the files do not go together.
    InputError
        When an option is not one of those accepted.

    Warns
    -----
    UnmixWarning
        For whatever the notes and refusals say.

    References
    ----------
    R. S. McDonald and P. A. Wilks, Appl. Spectrosc. 42 (1988) 151-162 (JCAMP-DX 4.24).

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     path = Path(folder) / "dyes.csv"
    ...     _ = path.write_text("Wavelength (nm);red (A);blue (A)\n500;0,71;0,02\n510;0,64;0,05\n")
    ...     spectra = read(path)
    >>> spectra.label.values, spectra.sel(wavelength=510).values, spectra.quantity
    (array(['red', 'blue'], dtype='<U4'), array([0.64, 0.05]), 'absorbance')
    """
    options = Options(checks, quantity, unit, per, decimal, orientation, sheet, chunks)
    if axis not in ("overlap", "same"):
        raise InputError(f"axis is {axis!r}", accepted="give 'overlap' or 'same'")
    paths, many, notes = files_of(source)
    done, refused = read_all(paths, many, lambda path: read_file(path, options))
    spectra, more = _together(done, axis)
    notes += more
    warn_of(notes, refused)
    return with_record(spectra, _digests([path for path, _ in done], chunks), notes, refused if many else None)


def read_each(
    source: Source,
    *,
    checks: Checks = "error",
    quantity: str | None = None,
    unit: str | None = None,
    per: str | None = None,
    decimal: str | None = None,
    orientation: str | None = None,
    sheet: str | None = None,
) -> tuple[list[xr.DataArray], dict[str, str]]:
    """Read spectra from files, each on the axis that it has.

    Parameters
    ----------
    source, checks, quantity, unit, per, decimal, orientation, sheet
        As for ``read``.

    Returns
    -------
    spectra : list of DataArray
        In the order of the files; neighbours on one axis, with one quantity, share an array. Attributes as those of
        ``read``, for the files in the array.
    refused : dict
        File name to reason; empty for a single file, which is read or fails.

    Raises
    ------
    ReadError
        When the file, or every one of many, cannot be read right.

    Warns
    -----
    UnmixWarning
        For whatever the notes say; refusals are returned, not warned of.
    """
    options = Options(checks, quantity, unit, per, decimal, orientation, sheet)
    paths, many, left = files_of(source)
    done, refused = read_all(paths, many, lambda path: read_file(path, options))
    groups: list[list[tuple[Path, Found | xr.DataArray]]] = []
    for path, items in done:
        for item in items:
            if groups and same_kind(groups[-1][-1][1], item):
                groups[-1].append((path, item))
            else:
                groups.append([(path, item)])
    arrays = []
    every = [*left]
    for group in groups:
        spectra, notes = _together([(path, [item]) for path, item in group], "same")
        arrays.append(with_record(spectra, _digests(list(dict.fromkeys(path for path, _ in group)), None), notes, None))
        every += notes
    warn_of(every, {})
    return arrays, refused


def _together(
    done: Sequence[tuple[Path, Sequence[Found | xr.DataArray]]], axis: Literal["overlap", "same"]
) -> tuple[xr.DataArray, list[str]]:
    """One array of all that was read, and its notes."""
    items = [(path, item) for path, some in done for item in some]
    if len(items) == 1 and isinstance(items[0][1], xr.DataArray):
        return items[0][1], []
    found = [as_found(item, path.name) if isinstance(item, xr.DataArray) else item for path, item in items]
    spectra, cut = stacked(found, axis)
    return spectra, [*(f"{one.file}: {note}" for one in found for note in one.notes), *cut]


def _digests(paths: Sequence[Path], chunks: Any) -> dict[str, str]:
    digests: dict[str, str] = {}
    for path in paths:
        # Digesting a big store would read all of what was to stay on disk
        digests[unique_name(path, digests)] = digest_of(path) if chunks is None else "not digested, opened lazily"
    return digests


def read_file(path: Path, options: Options) -> list[Found | xr.DataArray]:
    """Read one file, whatever it is.

    Parameters
    ----------
    path : Path
        A file, or the folder of a Zarr store.
    options : Options
        What the caller says about it.

    Returns
    -------
    list of Found or DataArray
        One entry for each block, page or table; a DataArray for a store.

    Raises
    ------
    ReadError
        When it cannot be read right.
    """
    try:
        # What overflows becomes infinite and is refused in words, not by a warning of numpy
        with np.errstate(all="ignore"):
            return _by_content(path, options)
    except OSError as error:
        if isinstance(error, ReadError):
            raise
        raise ReadError(f"it cannot be opened ({error.strerror or error})", path=path.name) from error


def _by_content(path: Path, options: Options) -> list[Found | xr.DataArray]:
    head = b"" if path.is_dir() else _head(path)
    if is_store(path, head):
        return [read_store(path, head, options)]
    if head.startswith(b"PK\x03\x04"):
        return [*read_workbook(path, options, file=path.name)]
    if is_jcamp(head, file=path.name):
        return [*read_jcamp(plain_lines(path.read_bytes(), file=path.name), options, file=path.name)]
    return [*read_table(path, options, file=path.name)]


def _head(path: Path) -> bytes:
    if not path.is_file():
        raise ReadError("it is not a file", path=path.name)
    with path.open("rb") as file:
        head = file.read(4096)
    if not head.strip():
        raise ReadError("the file is empty", path=path.name)
    for mark, what in _BINARY.items():
        if head.startswith(mark):
            raise ReadError(f"the file is {what}", path=path.name,
                            accepted="give JCAMP-DX, CSV, TSV, xlsx, netCDF or Zarr")  # fmt: skip
    return head
