"""The layout of a table: where its axis runs, which row or column holds what, and which heading says which unit.

Works on rows of cells, whether they came from a text file or a spreadsheet. What is ambiguous is an error that
names the argument which settles it.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np

from unmix.errors import ReadError
from unmix.read.delimited import Dialect, Row, is_data
from unmix.read.found import Options
from unmix.read.headings import LABEL_WORDS, Metadata, axis_cell, axis_heading, ordinate_heading, take_line

#: fewer positions than this in a heading line are no axis
_SHORTEST_AXIS = 3
#: where spectra are measured, in the contract's units; only decides which of two possible axes is one
_PLAUSIBLE = {"wavelength": (100.0, 1e6), "wavenumber": (10.0, 1e5), "raman_shift": (-1e4, 1e4)}


@dataclass
class Layout:
    """Where everything stands.

    Attributes
    ----------
    orientation : {'columns', 'rows', 'pairs'}
        One spectrum a column, one a row, or one in each pair of columns with an axis of its own.
    width : int
        Cells in every row of numbers.
    first_line : int
        Line of the first row of numbers.
    headings : list of list of str
        Rows between the metadata and the numbers, each ``width`` cells.
    span : (int, int)
        For rows: the columns that belong to the spectrum, the second no more.
    axis : list of float
        For rows: the positions.
    axis_text : str
        The axis unit as written, empty where it is not.
    metadata : Metadata
        What the lines before say.
    """

    orientation: str
    width: int
    first_line: int
    headings: list[list[str]] = field(default_factory=list)
    span: tuple[int, int] = (0, 0)
    axis: list[float] = field(default_factory=list)
    axis_text: str = ""
    metadata: Metadata = field(default_factory=Metadata)


def find_layout(head: Sequence[Row], dialect: Dialect, options: Options, *, file: str) -> Layout:
    """Find the layout of a table from its first rows.

    Parameters
    ----------
    head : sequence of (int, list of str)
        Numbered rows of cells from the start of the table.
    dialect : Dialect
        How numbers are written.
    options : Options
        ``orientation`` settles what is ambiguous.
    file : str
        For messages.

    Raises
    ------
    ReadError
        When there are no numbers, no axis, or two possible ones.
    """
    start, stop = _numbers(head, dialect)
    if stop <= start:
        raise ReadError("no rows of numbers were found", path=file,
                        accepted="a table has two or more columns of numbers")  # fmt: skip
    width = len(head[start][1])
    _refuse_numbers_before(head[:start], head[start][0], width, dialect, file)
    metadata, headings = _before(head[:start], width, dialect, file)
    data = head[start:stop]
    rows = _rows(data, headings, dialect, broken=False)
    columns = _columns(data, headings, dialect, broken=rows is None)
    if columns is None and rows is None:
        rows = _rows(data, headings, dialect, broken=True)
    chosen = _choose(columns, rows, data, options, file)
    chosen.metadata = metadata
    return chosen


def _numbers(head: Sequence[Row], dialect: Dialect) -> tuple[int, int]:
    """The longest stretch of rows of numbers with equally many cells: its start and its end."""
    best = (0, 0)
    start = 0
    for i, (_, cells) in enumerate(head):
        if not is_data(cells, dialect):
            start = i + 1
        elif i > start and len(cells) != len(head[start][1]):
            start = i
        if i + 1 - start > best[1] - best[0]:
            best = (start, i + 1)
    return best


def _refuse_numbers_before(rows: Sequence[Row], start: int, width: int, dialect: Dialect, file: str) -> None:
    """Rows of numbers that do not belong to the longest stretch of them must not be taken for headings."""
    for i, (line, cells) in enumerate(rows):
        touching = i + 1 == len(rows) and all(map(dialect.is_value, cells))
        if (is_data(cells, dialect) and dialect.is_value(cells[0])) or touching:
            if len(cells) != width:
                raise ReadError(f"the row has {len(cells)} cells but the rows from line {start} on have {width}",
                                path=file, line=line,
                                accepted="every row of numbers has the same number of cells")  # fmt: skip
            after = next((number for number, later in rows[i + 1 :] if not is_data(later, dialect)), start)
            raise ReadError("text stands between rows of numbers", path=file, line=after)


def _before(rows: Sequence[Row], width: int, dialect: Dialect, file: str) -> tuple[Metadata, list[list[str]]]:
    """Metadata and heading rows from what stands before the numbers; headings touch the numbers."""
    headings: list[list[str]] = []
    for line, cells in reversed(rows):
        if len(cells) == width and dialect.is_value(cells[0]):
            dialect.numbers(cells, file=file, line=line)  # a row of numbers with one that is none: say which
        fitted = _fitted(cells, width)
        if fitted is None:
            break
        headings.insert(0, fitted)
    headings = headings[_first_heading(headings, width) :]
    metadata = Metadata()
    for _, cells in rows[: len(rows) - len(headings)]:
        take_line(metadata, " ".join(cell.strip() for cell in cells if cell.strip()), list(cells))
    merged = _merged(*headings[-2:]) if len(headings) > 1 else None
    return metadata, headings if merged is None else [*headings[:-2], merged]


def _first_heading(rows: list[list[str]], width: int) -> int:
    """Where headings start: rows with two filled cells may as well be a word of the file and its value.

    A row of names makes headings of all below it; without one, headings are the last row and the fuller ones above.
    """
    full = [width > 2 and any(row[2:]) for row in rows]
    for i, row in enumerate(rows):
        if row[0].lower() in LABEL_WORDS and (width == 2 or full[i]):
            return i
    start = len(rows) - 1 if rows and (full[-1] or axis_heading(rows[-1][0]) or width == 2) else len(rows)
    if width == 2 and start > 0 and _merged(*rows[start - 1 :]) is not None:
        return start - 1
    while 0 < start < len(rows) and full[start - 1]:
        start -= 1
    return start


def _merged(names: list[str], units: list[str]) -> list[str] | None:
    """Two rows of headings as one, where the first names quantities and the second their units; None otherwise."""
    if axis_heading(names[0]) or not axis_heading(units[0]):
        return None
    merged = [f"{name} ({unit})" if unit else name for name, unit in zip(names, units, strict=True)]
    quantities = [ordinate_heading(text) for text in merged[1:]]
    whole = axis_heading(merged[0]) and all(unit is not None and not name for name, unit in quantities)
    return merged if whole else None


def _fitted(cells: list[str], width: int) -> list[str] | None:
    """A row of headings with ``width`` cells: as it is, without its corner, or with units in cells of their own."""
    cells = [cell.strip() for cell in cells]
    if len(cells) == width:
        return cells
    if len(cells) == width - 1 and width > 2:
        return ["", *cells]
    if len(cells) == 2 * width and axis_heading(f"{cells[0]} ({cells[1]})"):
        return [f"{name} ({unit})" if unit else name for name, unit in zip(cells[::2], cells[1::2], strict=True)]
    if len(cells) > width:
        # Headings that hold the delimiter themselves, such as "Wavelength, nm" or "Wavelength (nm)" between blanks
        for n in range(len(cells) - width + 1, 1, -1):
            joined = " ".join(cells[:n])
            if axis_heading(joined) or axis_heading(", ".join(cells[:n])):
                rest = cells[n:]
                merged = [*rest[: width - 2], " ".join(rest[width - 2 :])]
                return [joined if axis_heading(joined) else ", ".join(cells[:n]), *merged]
    return None


def _columns(data: Sequence[Row], headings: list[list[str]], dialect: Dialect, *, broken: bool) -> Layout | None:
    """The layout with the axis in the first column, if that is possible.

    ``broken`` allows cells of that column to hold no number, which is an error with a line when they are read.
    """
    numeric = [dialect.is_value(cells[0]) for _, cells in data]
    if not any(numeric):
        return None
    body = numeric.index(True)
    if not (broken or all(numeric[body:])):
        return None
    above = [cells for _, cells in data[:body]]
    width = len(data[0][1])
    layout = Layout("columns", width, data[body][0], [*headings, *above])
    heading = next((row[0] for row in reversed(layout.headings) if axis_heading(row[0])), "")
    layout.axis_text = heading
    own_axes = [row for row in layout.headings if width >= 4 and width % 2 == 0
                and all(axis_heading(cell) for cell in row[::2])]  # fmt: skip
    if own_axes:
        layout.orientation, layout.axis_text = "pairs", own_axes[-1][0]
    return layout


def _rows(data: Sequence[Row], headings: list[list[str]], dialect: Dialect, *, broken: bool) -> Layout | None:
    """The layout with the axis in a heading row, if that is possible.

    ``broken`` allows an axis that does not run one way, which is an error with its place when it is used.
    """
    candidates = [(row, data) for row in headings[-1:]]
    if not headings or not dialect.is_value(data[0][1][0]):
        candidates.append((data[0][1], data[1:]))
    for cells, body in candidates:
        found = [axis_cell(cell, dialect.decimal) for cell in cells]
        start, stop = _longest([cell is not None for cell in found])
        run = [cell for cell in found[start:stop] if cell is not None]
        positions, units = [position for position, _ in run], {unit for _, unit in run}
        if len(run) < _SHORTEST_AXIS or len(units) > 1 or _counts(positions) or not body:
            continue
        if not (broken or _runs_one_way(positions)):
            continue
        if not all(dialect.is_number(cell) for _, row in body for cell in row[start:stop]):
            continue
        text = units.pop() or next((cell for cell in cells[:start] if axis_heading(cell)), "")
        return Layout("rows", len(cells), body[0][0], [cells], (start, stop), positions, text)
    return None


def _longest(flags: Sequence[bool]) -> tuple[int, int]:
    """Start and end of the longest run of true flags."""
    best = (0, 0)
    start = 0
    for i, flag in enumerate(flags):
        if not flag:
            start = i + 1
        elif i + 1 - start > best[1] - best[0]:
            best = (start, i + 1)
    return best


def _runs_one_way(positions: Sequence[float]) -> bool:
    step = np.diff(positions)
    return bool((step > 0).all() or (step < 0).all())


def _counts(positions: Sequence[float]) -> bool:
    """Whether numbers only count 0, 1, 2 or 1, 2, 3: a row number, no axis."""
    return positions[0] in (0, 1) and all(b - a == 1 for a, b in pairwise(positions))


_AN_AXIS = "an axis is a list of numbers in rising or falling order"
_ORIENTATIONS = "give orientation='columns' (one spectrum a column) or orientation='rows' (one a row)"


def _choose(columns: Layout | None, rows: Layout | None, data: Sequence[Row], options: Options, file: str) -> Layout:
    """The layout that the caller asks for, the only one, or the one for which the evidence speaks."""
    if options.orientation is not None:
        wanted = columns if options.orientation == "columns" else rows
        if wanted is None:
            where = "first column" if options.orientation == "columns" else "heading line"
            raise ReadError(f"no axis was found in the {where}", path=file, line=data[0][0], accepted=_AN_AXIS)
        return wanted
    first = _first(data, columns) if columns is not None else []
    if columns is not None and not columns.axis_text and len(first) > 1 and _counts(first):
        if rows is not None:
            return rows
        raise ReadError("the first column only counts the rows and no line of headings is an axis", path=file,
                        line=columns.first_line, accepted=_ORIENTATIONS)  # fmt: skip
    if columns is not None and rows is not None:
        return _likelier(columns, rows, first, options, file)
    nameless = columns is not None and bool(columns.headings) and not columns.axis_text
    found = rows or columns
    if found is None or (nameless and not _runs_one_way(first)):
        raise ReadError("neither the first column nor a line of headings is an axis", path=file, line=data[0][0],
                        accepted=_AN_AXIS)  # fmt: skip
    return found


def _likelier(columns: Layout, rows: Layout, first: list[float], options: Options, file: str) -> Layout:
    """One of two possible layouts, where there is evidence for it: named units, shape, or a range that is possible."""
    if not columns.axis_text and (rows.axis_text or not _runs_one_way(first)):
        return rows
    if len(first) <= 2 and len(rows.axis) >= 10:
        return rows  # hardly a spectrum of two channels
    unit = axis_heading(options.unit or columns.axis_text or rows.axis_text)
    if unit is not None and _runs_one_way(first):
        low, high = _PLAUSIBLE[unit.dim]
        possible = [all(low <= unit.factor * position <= high for position in axis) for axis in (first, rows.axis)]
        if possible[0] != possible[1]:
            return columns if possible[0] else rows
    raise ReadError("both the first column and a line of headings could be the axis", path=file,
                    line=rows.first_line, accepted=_ORIENTATIONS)  # fmt: skip


def _first(data: Sequence[Row], columns: Layout) -> list[float]:
    """The numbers in the first column of the rows seen so far."""
    cells = [cells[0].replace(",", ".") for line, cells in data if line >= columns.first_line]
    return [float(cell) for cell in cells if _is_float(cell)]


def label_row(headings: Sequence[Sequence[str]]) -> int | None:
    """Which row of headings holds the names of the spectra: one that says so, else the first that holds texts."""
    for i, row in enumerate(headings):
        if row[0].strip().lower() in LABEL_WORDS:
            return i
    for i, row in enumerate(headings):
        names = [ordinate_heading(cell)[0] for cell in row[1:]]
        if any(names) and not all(_is_float(name) for name in names):
            return i
    # Names that are numbers, such as times: those beside the heading of the axis
    for i, row in enumerate(headings):
        if axis_heading(row[0]) and any(ordinate_heading(cell)[0] for cell in row[1:]):
            return i
    return None


def _is_float(text: str) -> bool:
    try:
        return math.isfinite(float(text.replace(",", ".")))
    except ValueError:
        return False
