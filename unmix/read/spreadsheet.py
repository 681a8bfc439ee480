"""Workbooks (.xlsx) to rows of cells and back; openpyxl is an optional package and is loaded here alone.

What the rows mean is decided as for a text table.
"""

import datetime
import zipfile
from collections.abc import Iterable, Iterator
from itertools import chain, islice
from pathlib import Path
from typing import Any

from unmix.errors import ReadError, UnmixError, WriteError, listed
from unmix.read.delimited import Dialect, Row
from unmix.read.found import Found, Options
from unmix.read.table import HEAD_ROWS, read_rows

#: a workbook that unpacks to more than this many times its size is refused
_LARGEST_EXPANSION, _ALWAYS = 200, 64 * 2**20
#: what a sheet can hold
_MOST_ROWS, _MOST_COLUMNS = 1_048_576, 16_384


def read_workbook(path: Path, options: Options, *, file: str) -> list[Found]:
    """Read the spectra of one sheet of a workbook.

    Parameters
    ----------
    path : Path
        The workbook.
    options : Options
        ``sheet`` names the sheet where more than one holds something.
    file : str
        Base name.

    Returns
    -------
    list of Found

    Raises
    ------
    ReadError
        When the workbook cannot be opened, or as for a text table.
    """
    openpyxl = _package(file)
    try:
        with zipfile.ZipFile(path) as packed:
            unpacked = sum(member.file_size for member in packed.infolist())
        if unpacked > _ALWAYS + _LARGEST_EXPANSION * path.stat().st_size:
            raise ReadError(f"the workbook unpacks to {unpacked:.3g} bytes", path=file)
        book = openpyxl.load_workbook(path, read_only=True, data_only=True)
        try:
            return _of_book(book, options, file)
        finally:
            book.close()
    except UnmixError:
        raise
    # A damaged workbook fails anywhere in three libraries, with any kind of error
    except Exception as error:
        raise ReadError(f"the workbook cannot be opened ({type(error).__name__}: {str(error)[:120]})",
                        path=file) from error  # fmt: skip


def _package(file: str) -> Any:
    try:
        import openpyxl  # noqa: PLC0415 - an optional package
    except ImportError:
        raise ReadError("workbooks need the package openpyxl", path=file,
                        accepted="install unmix[spreadsheet], or save the sheet as CSV") from None  # fmt: skip
    return openpyxl


def _of_book(book: Any, options: Options, file: str) -> list[Found]:
    sheets = {sheet.title: sheet for sheet in book.worksheets}
    if options.sheet is not None:
        if options.sheet not in sheets:
            raise ReadError(f"there is no sheet '{options.sheet}'", path=file,
                            accepted=f"the sheets are {listed(sheets)}")  # fmt: skip
        name = options.sheet
    else:
        filled = [title for title, sheet in sheets.items() if next(_rows(sheet), None)]
        if len(filled) != 1:
            what = f"several sheets: {listed(filled)}" if filled else "no cells"
            raise ReadError(f"the workbook holds {what}", path=file, accepted="name one as sheet=")
        name = filled[0]
    rows = _rows(sheets[name])
    start = list(islice(rows, HEAD_ROWS))
    width = max(len(cells) for _, cells in start) if start else 0
    padded = ((line, cells + [""] * (width - len(cells))) for line, cells in chain(start, rows))
    head = [(line, cells + [""] * (width - len(cells))) for line, cells in start]
    return read_rows(padded, head, Dialect(None, "."), options, file=file, kind="xlsx", words=f"sheet '{name}'")


def _rows(sheet: Any) -> Iterator[Row]:
    """Rows that hold something, with their numbers; cells behind the last filled one are left off."""
    # The stated size of a sheet may be a lie of a million rows
    sheet.reset_dimensions()
    for number, cells in enumerate(sheet.iter_rows(values_only=True), 1):
        texts = [_text(cell) for cell in cells]
        while texts and not texts[-1]:
            texts.pop()
        if texts:
            yield number, texts


def _text(cell: Any) -> str:
    if cell is None:
        return ""
    if isinstance(cell, bool) or not isinstance(cell, int | float | datetime.date):
        return str(cell).strip()
    return cell.isoformat() if isinstance(cell, datetime.date) else repr(cell)


def write_workbook(rows: Iterable[list[str | float]], path: Path) -> None:
    """Write rows of harmless texts and numbers as a workbook of one sheet.

    Raises
    ------
    WriteError
        When openpyxl is missing, or the rows are too many or too long for a sheet.
    """
    try:
        openpyxl = _package("")
    except ReadError as error:
        raise WriteError(error.message, where=path.name, accepted=error.accepted) from None
    book = openpyxl.Workbook(write_only=True)
    sheet = book.create_sheet("spectra")
    for number, row in enumerate(rows, 1):
        if number > _MOST_ROWS or len(row) > _MOST_COLUMNS:
            raise WriteError(f"a sheet holds at most {_MOST_ROWS} rows and {_MOST_COLUMNS} columns",
                             accepted="write .csv or .nc")  # fmt: skip
        try:
            sheet.append([None if cell == "" else cell for cell in row])
        except (ValueError, TypeError, openpyxl.utils.exceptions.IllegalCharacterError) as error:
            raise WriteError(
                f"row {number} cannot stand in a workbook ({error})", accepted="write .csv or .nc"
            ) from None
    book.save(path)
