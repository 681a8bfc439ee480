"""Lines of a text table to cells and numbers: which delimiter, which decimal mark, and what counts as a number.

What the cells mean (axis, header, spectra) is decided in ``layout.py``.
"""

import csv
import math
import re
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass

from unmix.errors import ReadError

#: delimiter -> how it is called in a message; None stands for runs of blanks
DELIMITERS: dict[str | None, str] = {"\t": "tab", ";": "semicolon", ",": "comma", "|": "bar", None: "blank"}
#: cells that say that a value is missing
MISSING = frozenset(["", "nan", "na", "n/a", "#n/a", "null", "none", "?", "-", "--", "---", "n.a.", "missing"])

_NUMBER = {
    ".": re.compile(r"\s*[-+]?([0-9]+\.?[0-9]*|\.[0-9]+)([eE][-+]?[0-9]{1,4})?\s*"),
    ",": re.compile(r"\s*[-+]?([0-9]+,?[0-9]*|,[0-9]+)([eE][-+]?[0-9]{1,4})?\s*"),
}
_THOUSANDS = re.compile(r"\s*[-+]?\d{1,3}(?:([,. '\u00a0\u2009\u202f])\d{3})(?:\1\d{3})*(?:[.,]\d*)?\s*")
_COMMENT = re.compile(r"\s*(#|//|!|%{2,})")

#: one row of a table: its line number in the file and its cells
Row = tuple[int, list[str]]


@dataclass(frozen=True)
class Dialect:
    """How a text table is written."""

    delimiter: str | None
    decimal: str

    @property
    def words(self) -> str:
        """Such as ``semicolon, decimal comma``."""
        mark = "decimal comma" if self.decimal == "," else "decimal point"
        return f"{DELIMITERS[self.delimiter]}, {mark}"

    def cells(self, line: str) -> list[str]:
        """The cells of a line, quotes taken off."""
        if self.delimiter is None:
            return line.split()
        if '"' in line:
            return next(csv.reader([line], delimiter=self.delimiter, skipinitialspace=True), [])
        return line.split(self.delimiter)

    def is_number(self, cell: str) -> bool:
        """Whether a cell holds a number or says that one is missing."""
        return _NUMBER[self.decimal].fullmatch(cell) is not None or cell.strip().lower() in MISSING

    def is_value(self, cell: str) -> bool:
        """Whether a cell holds a number."""
        return _NUMBER[self.decimal].fullmatch(cell) is not None

    def numbers(self, cells: Sequence[str], *, file: str, line: int, first: int = 1) -> list[float]:
        """The numbers of cells, NaN where one says that it is missing; ``first`` is the column of the first.

        Raises
        ------
        ReadError
            For the first cell that is neither.
        """
        joined = "".join(cells)
        # ``float`` also takes 1_000 and digits of other scripts; such cells go the slow way, one by one
        if joined.isascii() and "_" not in joined and not (self.decimal == "," and "." in joined):
            try:
                if self.decimal == ",":
                    found = [float(cell.replace(",", ".")) for cell in cells]
                else:
                    found = [float(cell) for cell in cells]
                if math.isfinite(sum(found)):
                    return found
            except ValueError:
                pass
        return [self._number(cell, file, line, first + i) for i, cell in enumerate(cells)]

    def _number(self, cell: str, file: str, line: int, column: int) -> float:
        if _NUMBER[self.decimal].fullmatch(cell):
            number = float(cell.replace(",", "."))
            if math.isfinite(number):
                return number
        if cell.strip().lower() in MISSING:
            return math.nan
        accepted = f"a number with {self.words.split(', ')[1]}, or an empty cell where it is missing"
        if _THOUSANDS.fullmatch(cell):
            accepted += "; thousands marks are not read"
        raise ReadError(f"'{cell.strip()[:60]}' in column {column} is not a number", path=file, line=line,
                        accepted=accepted)  # fmt: skip


def table_lines(lines: Iterable[str]) -> Iterator[tuple[int, str]]:
    """Lines that are neither blank nor comments, with their numbers from 1."""
    for number, line in enumerate(lines, 1):
        text = line.rstrip("\r\n")
        if text.strip() and not _COMMENT.match(text):
            yield number, text


def comments(lines: Iterable[str]) -> list[str]:
    """What comment lines say, without their mark."""
    return [match.string[match.end() :].strip() for line in lines if (match := _COMMENT.match(line))]


def is_data(cells: Sequence[str], dialect: Dialect) -> bool:
    """Whether a row can be one of numbers: two or more of them stand side by side, and they are half of its cells."""
    run = longest = 0
    for cell in cells:
        run = run + 1 if dialect.is_number(cell) else 0
        longest = max(longest, run)
    return longest >= 2 and 2 * longest >= len(cells) and any(dialect.is_value(cell) for cell in cells)


def sniff(lines: Sequence[tuple[int, str]], decimal: str | None, *, file: str) -> Dialect:
    """Find the delimiter and the decimal mark of a table from its first lines.

    Parameters
    ----------
    lines : sequence of (int, str)
        Numbered lines, without blank ones and comments.
    decimal : {'.', ',', None}
        What the caller says.
    file : str
        For messages.

    Raises
    ------
    ReadError
        When no delimiter gives rows of numbers, or the commas could be decimal or thousands marks.
    """
    best: tuple[int, Dialect] | None = None
    for delimiter in DELIMITERS:
        for mark in (decimal,) if decimal else (".", ","):
            if delimiter == mark and not any('"' in line for _, line in lines):
                continue
            dialect = Dialect(delimiter, mark)
            score = _longest_run(lines, dialect)
            # A later dialect has to explain more lines than an earlier, stricter one
            if score and (best is None or score > best[0]):
                best = score, dialect
    if best is None:
        raise ReadError("no rows of numbers were found", path=file,
                        accepted="a table has two or more columns of numbers, divided by tab, comma, semicolon "
                        "or blanks")  # fmt: skip
    if best[1].decimal == "," and decimal is None:
        _refuse_doubtful_commas(lines, best[1], file)
    return best[1]


def _longest_run(lines: Sequence[tuple[int, str]], dialect: Dialect) -> int:
    """How many rows of numbers of one length follow each other."""
    best = run = width = 0
    for _, line in lines:
        cells = dialect.cells(line)
        if not is_data(cells, dialect):
            run = 0
            continue
        run = run + 1 if len(cells) == width else 1
        width = len(cells)
        best = max(best, run)
    return best


def _refuse_doubtful_commas(lines: Sequence[tuple[int, str]], dialect: Dialect, file: str) -> None:
    """Commas that all have three digits behind and one to three in front may mark thousands."""
    doubtful: tuple[int, str] | None = None
    for number, line in lines:
        cells = dialect.cells(line)
        for cell in cells if is_data(cells, dialect) else []:
            if "," in cell and not re.fullmatch(r"\s*[-+]?[1-9]\d{0,2},\d{3}\s*", cell):
                return
            if "," in cell and doubtful is None:
                doubtful = number, cell
    if doubtful:
        raise ReadError(f"'{doubtful[1].strip()}' may hold a decimal comma or a thousands mark", path=file,
                        line=doubtful[0],
                        accepted="give decimal=',' if it is decimal; thousands marks are not read")  # fmt: skip
