"""Names, units and facts of the spectra of a table, from its headings, the cells beside it and the arguments."""

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from unmix.errors import ReadError, UnitError, listed
from unmix.files import read_cell
from unmix.kernels import BoolArray, FloatArray
from unmix.ordinate_units import OrdinateUnit, settle
from unmix.read.delimited import MISSING, Dialect
from unmix.read.found import Findings, Options, ordinate_of
from unmix.read.headings import LABEL_WORDS, axis_heading, ordinate_heading, path_heading
from unmix.read.layout import Layout, label_row
from unmix.units import SPECTRAL_UNITS, length_in_cm

#: names that coordinates of the data contract have already
_TAKEN = ("label", "file", "sample", "component", *SPECTRAL_UNITS)


@dataclass
class Naming:
    """What the spectra of a table are called and what their numbers are.

    ``units`` has one entry a spectrum, None where the words ``written`` are not understood; ``filled`` says which
    spectra have any heading at all.
    """

    labels: list[str]
    units: list[OrdinateUnit | None]
    written: str
    per: str
    coords: dict[str, list[Any]] = field(default_factory=dict)
    filled: list[bool] = field(default_factory=list)

    @property
    def quantity(self) -> str:
        """The contract's word, or the file's own where it is not understood."""
        unit = self.units[0]
        return unit.quantity if unit else self.written

    def only(self, used: BoolArray) -> "Naming":
        """The naming of some of the spectra."""
        keep = np.flatnonzero(used)
        return replace(self, labels=[self.labels[i] for i in keep], units=[self.units[i] for i in keep],
                       filled=[self.filled[i] for i in keep],
                       coords={name: [entries[i] for i in keep] for name, entries in self.coords.items()})  # fmt: skip

    def settled(self, values: FloatArray) -> tuple[FloatArray, list[str]]:
        """Values in the contract's unit, with what the headings say and the values contradict."""
        first = self.units[0]
        if first is None:
            return values, [f"ordinate unit '{self.written}' is not understood; kept as text"]
        if all(unit == first for unit in self.units):
            return settle(values, first, self.written)
        notes: list[str] = []
        parts = []
        for row, unit in zip(values, self.units, strict=True):
            part, more = settle(row, unit or first, self.written)
            parts.append(part)
            notes += more
        return np.stack(parts), list(dict.fromkeys(notes))


def named_columns(layout: Layout, options: Options, findings: Findings) -> Naming:
    """Names and units where every column but the first is a spectrum.

    Raises
    ------
    ReadError
        When what the numbers are is not stated, or differs between the columns.
    """
    n = layout.width - 1
    headings = [[read_cell(cell) for cell in row] for row in layout.headings]
    names_at = label_row(headings)
    labels, texts = [""] * n, [""] * n
    units: list[OrdinateUnit | None] = [None] * n
    coords: dict[str, list[Any]] = {}
    for i, row in enumerate(headings):
        found = [ordinate_heading(cell) for cell in row[1:]]
        # A lone word such as "A" is a unit only where every column has one
        only_units = all(unit and not name for name, unit in found if name or unit) and any(unit for _, unit in found)
        if only_units or i == names_at:
            for j, (name, unit) in enumerate(found):
                if unit and (only_units or name):
                    units[j], texts[j] = unit, row[j + 1]
                if i == names_at:
                    labels[j] = name if unit and name else "" if only_units else row[j + 1]
        elif row[0] and not axis_heading(row[0]):
            _keep(coords, row[0], row[1:], findings)
    return _naming(labels, units, texts, coords, layout, options, findings)


def named_pairs(layout: Layout, first: int, options: Options, findings: Findings) -> Naming:
    """Name and unit of one spectrum where each has an axis column of its own."""
    label, text, unit = "", "", None
    for row in layout.headings:
        name, found = ordinate_heading(row[first + 1])
        if found:
            unit, text = found, row[first + 1]
        if not label:
            label = (row[first] if not axis_heading(row[first]) else "") or name
    return _naming([read_cell(label)], [unit], [text], {}, layout, options, findings)


def named_rows(
    layout: Layout, beside: Sequence[Sequence[str]], dialect: Dialect, options: Options, findings: Findings
) -> Naming:
    """Names and units where every row is a spectrum and the cells beside it are facts about it."""
    n = len(beside)
    start, stop = layout.span
    heads = [read_cell(text.strip()) for text in layout.headings[0][:start] + layout.headings[0][stop:]]
    columns = [[read_cell(row[j].strip()) for row in beside] for j in range(len(heads))]
    names_at = next((j for j, head in enumerate(heads) if head.lower() in LABEL_WORDS), None)
    if names_at is None:
        texts = [j for j, column in enumerate(columns) if not all(map(dialect.is_number, column))]
        unnamed = [j for j, head in enumerate(heads) if not head or axis_heading(head)]
        names_at = next(iter(texts or unnamed), None)
    coords: dict[str, list[Any]] = {}
    for j, (head, column) in enumerate(zip(heads, columns, strict=True)):
        if j != names_at:
            _keep(coords, head or f"column {j + 1}", column, findings)
    labels = columns[names_at] if names_at is not None else [""] * n
    return _naming(labels, [None] * n, [""] * n, coords, layout, options, findings)


def _naming(
    labels: list[str], units: list[OrdinateUnit | None], texts: list[str], coords: dict[str, list[Any]],
    layout: Layout, options: Options, findings: Findings,
) -> Naming:  # fmt: skip
    filled = [bool(label or text) for label, text in zip(labels, texts, strict=True)]
    stated = [unit for unit in units if unit]
    written = next(filter(None, texts), "")
    if options.quantity is not None or not stated:
        unit, written = ordinate_of(written or layout.metadata.ordinate, options, findings)
        if unit is None and not written:
            raise ReadError("what the numbers are is not stated", path=findings.file,
                            accepted="give it as quantity=, for example 'absorbance' or '%T'")  # fmt: skip
        units = [unit] * len(labels)
    elif len(stated) < sum(filled):
        without = [label for label, unit in zip(labels, units, strict=True) if unit is None and label]
        raise ReadError(f"the headings of {listed(without)} do not say what the numbers are, but others do",
                        path=findings.file, accepted="give it for all as quantity=")  # fmt: skip
    elif len({(unit.quantity, unit.per) for unit in stated}) > 1:
        raise ReadError(f"the columns hold different quantities: {listed(dict.fromkeys(filter(None, texts)))}",
                        path=findings.file, accepted="give a file for each quantity")  # fmt: skip
    first = next((unit for unit in units if unit), None)
    units = [unit or first for unit in units]
    per = options.per or (first.per if first else "") or layout.metadata.per
    if layout.metadata.title and labels == [""]:
        labels = [layout.metadata.title]
    if layout.metadata.path and "path_length" not in coords:
        _path(coords, layout.metadata.path, len(labels), findings)
    return Naming(labels, units, written, per, coords, filled)


def _path(coords: dict[str, list[Any]], text: str, n: int, findings: Findings) -> None:
    try:
        coords["path_length"] = [length_in_cm(text if text[-1:].isalpha() else "")] * n
    except UnitError:
        findings.note(f"path length '{text[:60]}' has no unit that is understood; left out")


def _keep(coords: dict[str, list[Any]], heading: str, cells: Sequence[str], findings: Findings) -> None:
    """Keep a row or column of facts as a coordinate: numbers where all are numbers, else texts."""
    entries: list[Any] = [read_cell(cell.strip()) for cell in cells]
    numbers = [_float(cell) for cell in entries]
    name = heading.replace("/", "_").strip()
    unit = path_heading(heading)
    if unit is not None:
        paths = [_length(cell, unit) for cell in entries]
        if None in paths:
            findings.note(f"the path lengths under '{heading}' have no unit that is understood; left out")
            return
        name, entries = "path_length", paths
    elif all(number is not None for number in numbers):
        entries = numbers
    while name in _TAKEN or name in coords:
        name += "_"
    coords[name] = entries


def _length(cell: str, unit: str) -> float | None:
    """A path length in centimetres, NaN where it is missing, None where it is not understood."""
    if cell.lower() in MISSING:
        return np.nan
    try:
        return length_in_cm(f"{cell} {unit}") if unit or cell[-1:].isalpha() else None
    except UnitError:
        return None


def _float(cell: str) -> float | None:
    if cell.lower() in MISSING:
        return np.nan
    try:
        return float(cell.replace(",", ".")) if "_" not in cell else None
    except ValueError:
        return None
