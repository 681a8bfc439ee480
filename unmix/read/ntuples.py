"""NTUPLES of JCAMP-DX 5: the pages of a block, each as a table with a header of its own.

References
----------
A. N. Davies and P. Lampen, JCAMP-DX for NMR, Appl. Spectrosc. 47 (1993) 1093-1099, which defines NTUPLES; JCAMP-DX
5.01 (Pure Appl. Chem. 71 (1999) 1549-1556) uses them for every technique.
"""

import re
from dataclasses import dataclass

from unmix.errors import ReadError, listed
from unmix.read.blocks import Block, Entry
from unmix.read.found import Findings
from unmix.read.jcamp_table import Header, Number, number_of


@dataclass(frozen=True)
class Page:
    """One page: its table, the header that holds for it, its units as written, and its name (``T=0.5``)."""

    table: Entry
    header: Header
    x_units: str
    y_units: str
    name: str


def pages(block: Block, findings: Findings) -> list[Page]:
    """The pages of an NTUPLES block that hold a spectrum.

    Raises
    ------
    ReadError
        When the table of variables is incomplete, or a page does not name its variables.
    """
    symbols = [symbol.upper() for symbol in _list(block.find("SYMBOL"))]
    if not symbols:
        raise ReadError("the NTUPLES block has no ##SYMBOL=", path=findings.file, line=block.line)
    found: list[Page] = []
    name = ""
    own: list[Entry] = []
    seen: set[str] = set()
    for entry in block.entries:
        if entry.label == "PAGE":
            name, own = entry.value, []
        elif entry.label == "DATATABLE":
            x, y = _variables(entry, symbols, findings)
            found.append(_page(block, Block(entry.line, own), entry, name, symbols, (x, y), findings, y not in seen))
            seen.add(y)
            own = []
        elif entry.label == "ENDNTUPLES":
            break
        else:
            own.append(entry)
    if not found:
        raise ReadError("the NTUPLES block has no ##DATA TABLE=", path=findings.file, line=block.line)
    return found


def _variables(table: Entry, symbols: list[str], findings: Findings) -> tuple[str, str]:
    """The symbols of the abscissa and the ordinate of a table."""
    form = re.match(r"\(\s*(\w+?)\s*(?:\+\+\s*\(\s*(\w+)\s*\.\.|,?\s*(\w)\s*\.\.)", table.value)
    x, y = (form.group(1).upper(), (form.group(2) or form.group(3)).upper()) if form else ("", "")
    for symbol in (x, y):
        if symbol not in symbols:
            raise ReadError(f"the table '{table.value[:60]}' names no variables of ##SYMBOL=", path=findings.file,
                            line=table.line, accepted=f"the variables are {listed(symbols)}")  # fmt: skip
    return x, y


def _page(
    block: Block, own: Block, table: Entry, name: str, symbols: list[str], variables: tuple[str, str],
    findings: Findings, is_first: bool,
) -> Page:  # fmt: skip
    x, y = variables

    def given(label: str, symbol: str) -> Number | None:
        """A number of one variable: of the page where it repeats the label, else of the block."""
        entry = block.find(label)
        words = _list(entry)
        at = symbols.index(symbol)
        if entry is None or at >= len(words) or not words[at]:
            return None
        return number_of(Entry(label, words[at], entry.line), findings, name=label)

    header = Header(
        first_x=given("FIRST", x), last_x=given("LAST", x), x_factor=given("FACTOR", x),
        y_factor=given("FACTOR", y), n_points=given("VARDIM", x),
        # The table of variables describes the first page of each
        first_y=given("FIRST", y) if is_first else None,
    )  # fmt: skip
    for label, field in (("NPOINTS", "n_points"), ("FIRSTX", "first_x"), ("LASTX", "last_x"), ("DELTAX", "delta_x"),
                         ("XFACTOR", "x_factor"), ("YFACTOR", "y_factor"), ("FIRSTY", "first_y"),
                         ("MAXY", "max_y"), ("MINY", "min_y")):  # fmt: skip
        number = number_of(own.find(label), findings, name=label)
        if number is not None:
            setattr(header, field, number)
    units = _list(block.find("UNITS")) + [""] * len(symbols)
    plain_form = re.sub(rf"(?i)\b{y}\b", "Y", re.sub(rf"(?i)\b{x}\b", "X", table.value))
    entry = Entry(table.label, plain_form if "++" in table.value else "(XY..XY)", table.line, table.rest)
    return Page(entry, header, units[symbols.index(x)], units[symbols.index(y)], name)


def _list(entry: Entry | None) -> list[str]:
    return [word.strip() for word in entry.value.split(",")] if entry and entry.value else []
