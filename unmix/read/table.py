"""Tables of text to spectra: CSV, TSV and their kin, read line by line so that big files fit into memory.

The layout is found in ``layout.py``, the meaning of headings in ``headings.py``, numbers in ``delimited.py``.
"""

from array import array
from collections.abc import Iterable, Iterator
from itertools import chain
from pathlib import Path
from typing import Any

import numpy as np

from unmix.errors import ReadError
from unmix.kernels import FloatArray
from unmix.read.columns import Naming, named_columns, named_pairs, named_rows
from unmix.read.delimited import Dialect, Row, comments, sniff, table_lines
from unmix.read.found import Findings, Found, Options, axis_of, increasing, refuse_infinite
from unmix.read.headings import take_line
from unmix.read.layout import Layout, find_layout
from unmix.read.text import encoding_of, lines_of

#: the layout is found from this many rows, or this many characters if that is more than a few rows
HEAD_ROWS, _HEAD_SIZE, _FEW = 400, 2**20, 8


def read_table(path: Path, options: Options, *, file: str) -> list[Found]:
    """Read the spectra of a text table.

    Parameters
    ----------
    path : Path
        The file.
    options : Options
        What the caller says about it.
    file : str
        Its base name.

    Returns
    -------
    list of Found
        One, or one for each pair of columns where every spectrum has an axis of its own.

    Raises
    ------
    ReadError
        When the table, its units or its layout are not understood, or a cell is not a number.
    """
    lines = lines_of(path, file=file)
    start: list[str] = []
    size = 0
    for line in lines:
        start.append(line)
        size += len(line)
        if len(start) >= HEAD_ROWS or (size > _HEAD_SIZE and len(start) > _FEW):
            break
    head = list(table_lines(start))
    dialect = sniff(head, options.decimal, file=file)
    with path.open("rb") as raw:
        encoding = encoding_of(raw.read(4096), file=file)
    rows = ((number, dialect.cells(line)) for number, line in table_lines(chain(start, lines)))
    words = f"{dialect.words}, {'UTF-8' if encoding == 'utf-8-sig' else encoding.upper()}"
    return read_rows(rows, [(number, dialect.cells(line)) for number, line in head], dialect, options,
                     file=file, kind="table", words=words, remarks=comments(start))  # fmt: skip


def read_rows(
    rows: Iterable[Row], head: list[Row], dialect: Dialect, options: Options, *, file: str, kind: str, words: str,
    remarks: Iterable[str] = (),
) -> list[Found]:  # fmt: skip
    """Read the spectra of a table that is cut into cells already.

    Parameters
    ----------
    rows : iterable of (int, list of str)
        Every row with its number.
    head : list of (int, list of str)
        The first of them, from which the layout is found.
    dialect : Dialect
        How numbers are written.
    options : Options
        What the caller says.
    file, kind, words : str
        Base name, format and how the cells were cut, for messages and facts.
    remarks : iterable of str
        Comment lines, which may state units.

    Returns
    -------
    list of Found
    """
    layout = find_layout(head, dialect, options, file=file)
    for remark in remarks:
        take_line(layout.metadata, remark, [])
    findings = Findings(file, options.checks)
    facts = {"format": kind, "cells": words}
    body = _Body(layout, dialect, findings)
    if layout.orientation == "rows":
        values, beside = body.rows(rows)
        naming = named_rows(layout, beside, dialect, options, findings)
        return [_found(np.array(layout.axis), values, naming, layout, options, findings, facts)]
    table = body.columns(rows)
    if layout.orientation == "pairs":
        found = []
        for i in range(0, layout.width, 2):
            kept = ~np.isnan(table[:, i : i + 2]).all(axis=1)
            naming = named_pairs(layout, i, options, findings)
            _require_axis(table[kept, i], body.lines, findings, column=i + 1)
            found.append(_found(table[kept, i], table[kept, i + 1][None, :], naming, layout, options, findings, facts))
            findings = Findings(file, options.checks)
        return found
    _require_axis(table[:, 0], body.lines, findings, column=1)
    values = np.ascontiguousarray(table[:, 1:].T)
    axis = table[:, 0].copy()
    del table
    naming = named_columns(layout, options, findings)
    used = np.array([bool(name) for name in naming.filled]) | ~np.isnan(values).all(axis=1)
    if not used.any():
        raise ReadError("every column beside the axis is empty", path=file, line=layout.first_line)
    if not used.all():
        values = values[used]
        naming = naming.only(used)
    return [_found(axis, values, naming, layout, options, findings, facts)]


class _Body:
    """Reads the rows of numbers that follow the headings."""

    def __init__(self, layout: Layout, dialect: Dialect, findings: Findings) -> None:
        self.layout, self.dialect, self.findings = layout, dialect, findings
        self.lines: list[int] = []

    def _data(self, rows: Iterable[Row]) -> Iterator[Row]:
        """Rows of numbers, each with the right number of cells; text behind them is left out and noted."""
        width, file = self.layout.width, self.findings.file
        text_from = 0
        for line, cells in rows:
            if line < self.layout.first_line:
                continue
            numeric = sum(map(self.dialect.is_value, cells)) if text_from or len(cells) != width else width
            if text_from and numeric == width == len(cells):
                raise ReadError("text stands between rows of numbers", path=file, line=text_from)
            if text_from:
                continue
            if len(cells) == width and (numeric and any(map(self.dialect.is_value, cells))):
                yield line, cells
                continue
            if numeric and len(cells) != width:
                raise ReadError(f"the row has {len(cells)} cells but the rows before it have {width}", path=file,
                                line=line, accepted="every row of numbers has the same number of cells")  # fmt: skip
            text_from = line
        if text_from:
            self.findings.note("text behind the numbers is left out", text_from)

    def columns(self, rows: Iterable[Row]) -> FloatArray:
        """All numbers, shape (rows, width)."""
        numbers = array("d")
        file = self.findings.file
        for line, cells in self._data(rows):
            numbers.extend(self.dialect.numbers(cells, file=file, line=line))
            self.lines.append(line)
        return np.frombuffer(numbers, dtype=np.float64).reshape(-1, self.layout.width)

    def rows(self, rows: Iterable[Row]) -> tuple[FloatArray, list[list[str]]]:
        """The numbers of the spectra, shape (rows, channels), and the cells beside them."""
        numbers = array("d")
        beside: list[list[str]] = []
        (start, stop), file = self.layout.span, self.findings.file
        for line, cells in self._data(rows):
            numbers.extend(self.dialect.numbers(cells[start:stop], file=file, line=line, first=start + 1))
            beside.append(cells[:start] + cells[stop:])
            self.lines.append(line)
        return np.frombuffer(numbers, dtype=np.float64).reshape(-1, stop - start), beside


def _require_axis(axis: FloatArray, lines: list[int], findings: Findings, *, column: int) -> None:
    lost = np.flatnonzero(np.isnan(axis))
    if lost.size:
        raise ReadError(f"the axis has no number in column {column}", path=findings.file, line=lines[lost[0]])
    step = np.diff(axis)
    if step.size and not ((step > 0).all() or (step < 0).all()):
        turned = step <= 0 if step[0] > 0 else step >= 0
        at = int(np.argmax(turned)) if step[0] else 0
        raise ReadError(f"the axis does not run one way: {axis[at]:.10g} is followed by {axis[at + 1]:.10g}",
                        path=findings.file, line=lines[at + 1],
                        accepted="each position stands once, in rising or falling order")  # fmt: skip


def _found(
    axis: FloatArray, values: FloatArray, naming: Naming, layout: Layout, options: Options, findings: Findings,
    facts: dict[str, Any],
) -> Found:  # fmt: skip
    written = layout.axis_text or layout.metadata.axis
    if not written and layout.orientation == "columns" and layout.headings:
        written = layout.headings[-1][0]  # not understood, but worth quoting
    unit = axis_of(written, options, findings, line=layout.first_line)
    points, values, direction = increasing(unit.convert(axis), values, findings)
    values, notes = naming.settled(values)
    refuse_infinite(values, findings)
    findings.notes += notes
    where = {"columns": "one spectrum a column", "rows": "one spectrum a row",
             "pairs": "each spectrum with an axis of its own"}[layout.orientation]  # fmt: skip
    facts = {
        **facts,
        "layout": f"{where}, numbers from line {layout.first_line}",
        "direction": direction,
        "axis_unit_written": written,
        "ordinate_unit_written": naming.written,
    }
    return Found(points, values, unit.dim, naming.quantity, naming.labels, findings.file, naming.per, naming.coords,
                 notes=findings.notes, facts=facts)  # fmt: skip
