"""Headings of table columns and metadata lines to names and units; nothing here knows where they stand."""

import math
import re
from dataclasses import dataclass, field

from unmix.errors import UnitError
from unmix.ordinate_units import OrdinateUnit, ordinate_unit
from unmix.units import AxisUnit, axis_unit, plain

#: headings of a column or row that holds the names of the spectra
LABEL_WORDS = frozenset(["sample", "samples", "name", "label", "labels", "id", "title", "sample name", "sample id",
                         "sample_id", "sample_name", "spectrum", "component", "compound", "substance", "no", "nr",
                         "no.", "nr."])  # fmt: skip
_META = {
    "axis": ("xunits", "xunit", "xaxis", "xaxisunit", "xlabel", "axisunit", "unit", "axis", "abscissa", "xaxislabel"),
    "ordinate": ("yunits", "yunit", "yaxis", "yaxisunit", "ylabel", "quantity", "ordinate", "ordinates", "datatype",
                 "yaxislabel", "mode", "photometricmode"),
    "title": ("title", "sample", "samplename", "name", "sampleid", "label", "spectrumname"),
    "path": ("pathlength", "path", "celllength", "cellpath", "cellpathlength", "cuvette", "opticalpath", "cell"),
    "per": ("per",),
}  # fmt: skip


@dataclass
class Metadata:
    """What lines around a table say; empty texts where they say nothing."""

    axis: str = ""
    ordinate: str = ""
    title: str = ""
    path: str = ""
    per: str = ""
    lines: list[str] = field(default_factory=list)

    def take(self, key: str, value: str) -> None:
        """Keep a pair if its key is known and nothing was said before."""
        unit = path_heading(key)
        if unit is not None:
            key, value = "path", f"{value.strip()} {unit}".strip()
        word = re.sub(r"[^a-z]", "", key.lower())
        for name, words in _META.items():
            if word in words and value.strip() and not getattr(self, name):
                setattr(self, name, value.strip())


def take_line(metadata: Metadata, text: str, cells: list[str]) -> None:
    """Read a line in front of a table: ``key: value``, ``key = value`` or two cells."""
    metadata.lines.append(text)
    filled = [cell.strip() for cell in cells if cell.strip()]
    if match := re.fullmatch(r"\s*([^:=]{1,40}?)\s*[:=]\s*(.+?)[\s,;]*", text):
        metadata.take(*match.groups())
    elif len(filled) == 2:
        metadata.take(*filled)


def axis_heading(text: str) -> AxisUnit | None:
    """The axis unit in a heading such as ``Wavelength (nm)``, ``wavelength_nm`` or ``cm-1``; None without one.

    Examples
    --------
    >>> axis_heading("wavelength_nm").unit, axis_heading("toluene")
    ('nm', None)
    """
    text = text.strip()
    if path_heading(text) is not None:
        return None
    for attempt in (text, *(f"{head} ({tail})" for head, tail in _splits(text))):
        try:
            return axis_unit(attempt) if attempt else None
        except UnitError:
            continue
    return None


def ordinate_heading(text: str) -> tuple[str, OrdinateUnit | None]:
    """Name and unit in the heading of a spectrum; an empty name where the heading is nothing but the unit.

    Examples
    --------
    >>> name, unit = ordinate_heading("HbO2_cm-1_per_M")
    >>> name, unit.quantity, unit.per
    ('HbO2', 'absorptivity', 'mol/L')
    >>> ordinate_heading("%T")[1].quantity, ordinate_heading("drum 7")
    ('transmittance', ('drum 7', None))
    """
    text = text.strip()
    unit = _unit(text)
    if unit:
        return "", unit
    bracket = re.fullmatch(r"(.*\S)\s*[(\[](.+)[)\]]", text)
    if bracket and (len(bracket.group(2)) > 1 or bracket.group(2) == "A") and (unit := _unit(bracket.group(2))):
        return bracket.group(1), unit
    for head, tail in _splits(text):
        if len(tail) > 1 and (unit := _unit(tail)):
            return head, unit
    return text, None


def _splits(text: str) -> list[tuple[str, str]]:
    """Every way to cut a heading in two at a blank, underscore, comma, slash or colon, longest tail first."""
    return [(text[: cut.start()], text[cut.end() :]) for cut in re.finditer(r"[ _,/:]+", text)
            if text[: cut.start()] and text[cut.end() :]]  # fmt: skip


def _unit(text: str) -> OrdinateUnit | None:
    try:
        return ordinate_unit(text) if text.strip() else None
    except UnitError:
        return None


def path_heading(text: str) -> str | None:
    """The length unit in the heading of a row or column of path lengths; None where it is no such heading.

    The unit is empty where it stands beside each number instead; ``path_length`` is in cm, as everywhere in unmix.
    """
    if text.strip() == "path_length":
        return "cm"
    word = plain(text).replace("_", " ")
    match = re.fullmatch(r"(?:optical |cell )?path ?(?:length)?\s*[(\[/,]?\s*(cm|mm|um|m)?\s*[)\]]?", word)
    return (match.group(1) or "") if match else None


_AXIS_CELL = re.compile(r"\s*[Xx]?\s*([-+]?\d+(?:[.,]\d+)?(?:[eE][-+]?\d+)?)\s*_?\s*([^\d\s].*)?\s*")


def axis_cell(text: str, decimal: str) -> tuple[float, str] | None:
    """Position and unit in the heading of one channel, such as ``900 nm``; None where it is none.

    Examples
    --------
    >>> axis_cell("900 nm", "."), axis_cell("X1102.5", "."), axis_cell("octane", ".")
    ((900.0, 'nm'), (1102.5, ''), None)
    """
    match = _AXIS_CELL.fullmatch(text)
    if not match or (decimal == "." and "," in match.group(1)) or (decimal == "," and "." in match.group(1)):
        return None
    unit = (match.group(2) or "").strip(" )(][")
    if unit:
        try:
            axis_unit(unit)
        except UnitError:
            return None
    position = float(match.group(1).replace(",", "."))
    return (position, unit) if math.isfinite(position) else None
