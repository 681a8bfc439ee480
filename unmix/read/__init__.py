"""Reading and writing spectra: ``read`` and ``write`` find the format, by content and by suffix.

A file is either read right or refused with the reason. How each format is read is known to its module.
"""

from pathlib import Path
from typing import Any, Literal

import xarray as xr

from unmix.errors import InputError, ReadError
from unmix.provenance import digest
from unmix.read.blocks import is_jcamp
from unmix.read.collect import Source, files_of, read_all, stacked, unique_name, warn_of, with_record
from unmix.read.found import Checks, Found, Options
from unmix.read.jcamp import read_jcamp
from unmix.read.table import read_table
from unmix.read.text import plain_lines

__all__ = ["read", "read_each"]

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
) -> xr.DataArray:
    """Read spectra from files into one labelled array."""
    options = Options(checks, quantity, unit, per, decimal, orientation)
    if axis not in ("overlap", "same"):
        raise InputError(f"axis is {axis!r}", accepted="give 'overlap' or 'same'")
    paths, many, left = files_of(source)
    done, refused = read_all(paths, many, lambda path: _read_file(path, options))
    found = [one for _, items in done for one in items if isinstance(one, Found)]
    spectra, cut = stacked(found, axis)
    notes = [*left, *(f"{one.file}: {note}" for one in found for note in one.notes), *cut]
    warn_of(notes, refused)
    digests: dict[str, str] = {}
    for path, _ in done:
        digests[unique_name(path, digests)] = digest(path)
    return with_record(spectra, digests, notes, refused if many else None)


def read_each(source: Source, **options: Any) -> tuple[list[xr.DataArray], dict[str, str]]:
    """Read spectra from files, each on the axis that it has."""
    given = Options(**options)
    paths, many, left = files_of(source)
    done, refused = read_all(paths, many, lambda path: _read_file(path, given))
    arrays = []
    for path, items in done:
        for one in items:
            if isinstance(one, Found):
                spectra, _ = stacked([one], "same")
                notes = [f"{one.file}: {note}" for note in one.notes]
                arrays.append(with_record(spectra, {path.name: digest(path)}, notes, None))
    warn_of(left, {})
    return arrays, refused


def _read_file(path: Path, options: Options) -> list[Found | xr.DataArray]:
    """Read one file, whatever it is."""
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
    if is_jcamp(head):
        return [*read_jcamp(plain_lines(path.read_bytes(), file=path.name), options, file=path.name)]
    return [*read_table(path, options, file=path.name)]
