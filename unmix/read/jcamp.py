"""JCAMP-DX files to spectra: which blocks hold one, what its labels say, and in which units.

How a table is packed is known to ``ordinates.py``, how it is checked to ``jcamp_table.py``, pages to ``ntuples.py``.
"""

from dataclasses import dataclass

from unmix.errors import ReadError, UnitError
from unmix.ordinate_units import settle
from unmix.read.blocks import TABLES, Block, Entry, split_blocks
from unmix.read.found import Findings, Found, Options, axis_of, increasing, ordinate_of, refuse_infinite
from unmix.read.jcamp_table import Budget, Header, Number, Table, number_of, read_table
from unmix.read.ntuples import Page, pages
from unmix.units import length_in_cm

#: tables that hold no continuous spectrum
_NO_SPECTRUM = {"PEAKTABLE": "a peak table", "PEAKASSIGNMENTS": "peak assignments", "RADATA": "an interferogram"}


@dataclass(frozen=True)
class _Source:
    """What the blocks of one file share."""

    options: Options
    findings: Findings
    budget: Budget
    n_blocks: int


def read_jcamp(data: bytes, options: Options, *, file: str) -> list[Found]:
    """Read every spectrum of a JCAMP-DX file.

    Parameters
    ----------
    data : bytes
        The file as plain lines (see ``text.plain_lines``).
    options : Options
        What the caller says about the file.
    file : str
        Its base name.

    Returns
    -------
    list of Found
        One for each block or page, in the order of the file.

    Raises
    ------
    ReadError
        When the file, or any block of it, cannot be read right.
    """
    findings = Findings(file, options.checks)
    blocks = split_blocks(data, findings)
    source = _Source(options, findings, Budget.of(len(data)), len(blocks))
    found: list[Found] = []
    other: list[str] = []
    for block in blocks:
        _links(block, findings)
        if block.find("NTUPLES"):
            found += [_of_page(block, page, source) for page in pages(block, findings)]
            continue
        tables = [entry for entry in block.entries if entry.label in TABLES]
        spectra = [entry for entry in tables if entry.label not in _NO_SPECTRUM]
        other += [_NO_SPECTRUM[entry.label] for entry in tables if entry.label in _NO_SPECTRUM]
        if len(spectra) > 1:
            raise ReadError("the block holds two data tables", path=file, line=spectra[1].line,
                            accepted="each table needs a block of its own, with ##TITLE= and ##END=")  # fmt: skip
        found += [_of_block(block, entry, source) for entry in spectra]
    if not found:
        what = f"the file holds {other[0]}, no spectrum" if other else "the file holds no data table"
        raise ReadError(what, path=file, accepted="a spectrum stands in ##XYDATA= or ##XYPOINTS=")
    if other:
        findings.note(f"{other[0]} in the file is left out")
    found[0].notes[:0] = findings.notes
    return found


def _links(block: Block, findings: Findings) -> None:
    said = number_of(block.find("BLOCKS"), findings, name="BLOCKS")
    # The standard counts the blocks inside; some writers count the outer one too
    if said is not None and said.value not in (block.children, block.children + 1):
        findings.failed(f"##BLOCKS= says {said.value:g} but {block.children} blocks follow", said.line)


def _header(block: Block, findings: Findings) -> Header:
    def get(label: str) -> Number | None:
        return number_of(_only(block, label, findings), findings, name=label)

    return Header(first_x=get("FIRSTX"), last_x=get("LASTX"), delta_x=get("DELTAX"), n_points=get("NPOINTS"),
                  x_factor=get("XFACTOR"), y_factor=get("YFACTOR"), first_y=get("FIRSTY"), max_y=get("MAXY"),
                  min_y=get("MINY"), max_x=get("MAXX"), min_x=get("MINX"))  # fmt: skip


def _only(block: Block, label: str, findings: Findings) -> Entry | None:
    entries = [entry for entry in block.entries if entry.label == label]
    if len({entry.value for entry in entries}) > 1:
        raise ReadError(f"##{label}= stands twice and says '{entries[0].value[:40]}' and '{entries[1].value[:40]}'",
                        path=findings.file, line=entries[1].line)  # fmt: skip
    return entries[0] if entries else None


def _of_block(block: Block, entry: Entry, source: _Source) -> Found:
    findings = Findings(source.findings.file, source.options.checks)
    table = read_table(entry, _header(block, findings), findings, source.budget)
    entries = [_only(block, label, findings) for label in ("XUNITS", "YUNITS")]
    x_units, y_units = (found.value if found else "" for found in entries)
    return _found(block, table, x_units, y_units, block.text("TITLE"), source, findings)


def _of_page(block: Block, page: Page, source: _Source) -> Found:
    findings = Findings(source.findings.file, source.options.checks)
    table = read_table(page.table, page.header, findings, source.budget)
    title = f"{block.text('TITLE')}, {page.name}" if page.name else block.text("TITLE")
    return _found(block, table, page.x_units, page.y_units, title, source, findings)


def _found(
    block: Block, table: Table, x_units: str, y_units: str, title: str, source: _Source, findings: Findings
) -> Found:
    data_type = block.text("DATATYPE")
    raman = "RAMAN" in data_type.upper()
    line = (block.find("XUNITS") or block.entries[0]).line
    x_unit = axis_of(x_units, source.options, findings, raman=raman, line=line)
    axis, values, direction = increasing(x_unit.convert(table.x), table.y[None, :], findings)
    unit, quantity = ordinate_of(y_units, source.options, findings)
    per = source.options.per or ""
    if unit is None:
        findings.note(f"ordinate unit '{quantity}' is not understood; kept as text" if quantity
                      else "the file does not say what its ordinates are (##YUNITS=)")  # fmt: skip
        quantity = quantity or "not stated"
    else:
        values, notes = settle(values, unit, quantity)
        findings.notes += notes
        quantity, per = unit.quantity, per or unit.per
    refuse_infinite(values, findings)
    facts = {
        "format": f"JCAMP-DX {block.text('JCAMPDX').split(' ')[0]}".strip(),
        "packing": table.forms,
        "blocks": str(source.n_blocks),
        "direction": direction,
        "data_type": data_type,
        "axis_unit_written": x_units,
        "ordinate_unit_written": y_units,
    }
    coords = {}
    path_length = _path_length(block, findings)
    if path_length is not None:
        coords["path_length"] = [path_length]
    return Found(axis, values, x_unit.dim, quantity, [title], findings.file, per,
                 coords, notes=findings.notes, facts=facts)  # fmt: skip


def _path_length(block: Block, findings: Findings) -> float | None:
    text = block.text("PATHLENGTH")
    if not text:
        return None
    try:
        return length_in_cm(text if text[-1:].isalpha() else "")
    except UnitError:
        findings.note(f"##PATHLENGTH= is '{text[:60]}', without a unit that is understood; left out")
        return None
