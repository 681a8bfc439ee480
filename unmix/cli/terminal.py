"""Text for a person at a terminal: tables that fit, wrapped notes, colour, progress.

Nothing here knows a spectrum; text that came out of a file is made harmless before it is shown.
"""

import os
import shutil
import sys
import textwrap
import time
import unicodedata
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from typing import TextIO

#: style -> escape code; yellow and red are told apart by their words too, never by colour alone
STYLES = {"good": "32", "warn": "33", "bad": "31", "strong": "1", "faint": "2"}

#: reports how far a work has come: done, of how many
Tick = Callable[[int, int], None]


@dataclass(frozen=True)
class Column:
    """One column of a table: its title, whether it is flush right, and whether its texts may be cut."""

    title: str
    right: bool = False
    cut: bool = False


@dataclass(frozen=True)
class Cell:
    """A text with a style of :data:`STYLES`."""

    text: str
    style: str = ""


def harmless(text: object) -> str:
    """A text without control, format or direction characters, on one line: safe to send to a terminal."""
    return "".join(
        " "
        if char in "\r\n\t"
        else "\N{REPLACEMENT CHARACTER}"
        if unicodedata.category(char)[0] == "C"
        else char
        for char in str(text)
    )


def columns_of(text: str) -> int:
    """How many columns of a terminal a text takes."""
    return sum(
        0 if unicodedata.combining(char) else 2 if unicodedata.east_asian_width(char) in "WF" else 1
        for char in text
    )


def shortened(text: str, room: int) -> str:
    """The text cut to fit into so many columns, an ellipsis at the end."""
    if columns_of(text) <= room:
        return text
    kept, used = [], 1
    for char in text:
        used += columns_of(char)
        if used > room:
            break
        kept.append(char)
    return "".join(kept) + "\N{HORIZONTAL ELLIPSIS}"


def terminal_width() -> int:
    """Columns of the terminal, between 60 and 120; 80 where there is none."""
    return min(max(shutil.get_terminal_size((80, 24)).columns, 60), 120)


def coloured(stream: TextIO) -> bool:
    """Whether colour is wanted: a terminal, not a dumb one, and NO_COLOR not set."""
    return stream.isatty() and not os.environ.get("NO_COLOR") and os.environ.get("TERM") != "dumb"


def painted(text: str, style: str, *, colour: bool) -> str:
    """The text in a style of :data:`STYLES`, where colour is wanted."""
    return f"\x1b[{STYLES[style]}m{text}\x1b[0m" if colour and style else text


def table(
    columns: Sequence[Column], rows: Sequence[Sequence[str | Cell]], *, width: int = 80, colour: bool = False
) -> str:
    """Rows as a table that fits the width; only columns that allow it are cut, numbers never.

    Parameters
    ----------
    columns : sequence of Column
    rows : sequence of rows
        One text or :class:`Cell` a column.
    width : int
        Columns of the terminal.
    colour : bool
        Whether styles become escape codes.

    Returns
    -------
    str
        Lines with a rule under the titles, no line break at the end.
    """
    cells = [[cell if isinstance(cell, Cell) else Cell(cell) for cell in row] for row in rows]
    cells = [[Cell(harmless(cell.text), cell.style) for cell in row] for row in cells]
    widths = [
        max([columns_of(column.title), *(columns_of(row[i].text) for row in cells)])
        for i, column in enumerate(columns)
    ]
    gap = 2
    while sum(widths) + gap * (len(widths) - 1) > width:
        able = [i for i, column in enumerate(columns) if column.cut and widths[i] > max(8, len(column.title))]
        if not able:
            break
        widest = max(able, key=lambda i: widths[i])
        widths[widest] -= 1

    def line(entries: Sequence[Cell]) -> str:
        shown = []
        for entry, column, room in zip(entries, columns, widths, strict=True):
            text = shortened(entry.text, room) if column.cut else entry.text
            blanks = " " * (room - columns_of(text))
            text = painted(text, entry.style, colour=colour)
            shown.append(blanks + text if column.right else text + blanks)
        return (" " * gap).join(shown).rstrip()

    titles = line([Cell(column.title, "strong") for column in columns])
    rule = (" " * gap).join("-" * room for room in widths)
    return "\n".join([titles, rule, *(line(row) for row in cells)])


def print_table(columns: Sequence[Column], rows: Sequence[Sequence[str | Cell]]) -> None:
    """Print a table on standard output, fitted to the terminal."""
    print(table(columns, rows, width=terminal_width(), colour=coloured(sys.stdout)))


def wrapped(text: str, *, first: str = "", rest: str | None = None, width: int | None = None) -> str:
    """A paragraph wrapped to the terminal, the first line and the others behind their own margins."""
    margin = " " * len(first) if rest is None else rest
    return textwrap.fill(
        harmless(text), width or terminal_width(), initial_indent=first, subsequent_indent=margin
    )


def say(text: str) -> None:
    """One remark on standard error, wrapped; standard output stays free for the answer."""
    print(wrapped(text, rest="  "), file=sys.stderr)


@contextmanager
def progress(what: str, *, after: float = 1.0) -> Iterator[Tick]:
    """Hand out a callback ``tick(done, total)`` that draws a bar with the time left on standard error.

    Nothing is drawn before so many seconds have passed, nor where standard error is no terminal.

    Examples
    --------
    >>> with progress("reading") as tick:
    ...     tick(1, 2)
    """
    start = time.monotonic()
    last = start
    drawn = False

    def tick(done: int, total: int) -> None:
        nonlocal last, drawn
        now = time.monotonic()
        if not sys.stderr.isatty() or now - start < after or (now - last < 0.1 and done < total):
            return
        last, drawn = now, True
        share = done / total if total else 1.0
        left = (now - start) * (1 - share) / share if share else float("inf")
        bar = ("#" * round(24 * share)).ljust(24, ".")
        remaining = f"{left:.0f} s left" if left < 600 else f"{left / 60:.0f} min left" if share else ""
        print(f"\r{what} [{bar}] {done}/{total} {remaining}\x1b[K", end="", file=sys.stderr, flush=True)

    try:
        yield tick
    finally:
        if drawn:
            print("\r\x1b[K", end="", file=sys.stderr, flush=True)
