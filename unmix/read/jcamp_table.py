"""One data table of JCAMP-DX against the header in front of it: placing the points, and every check of them.

Checks of the count, of the abscissae, of repeated ordinates and of the first ordinate are failed checks;
a header that only disagrees in scale, or in its largest or smallest value, is noted.
"""

import re
from dataclasses import dataclass, field

import numpy as np

from unmix.errors import ReadError
from unmix.kernels import FloatArray
from unmix.read.blocks import Entry
from unmix.read.found import Findings
from unmix.read.ordinates import Ordinates, decode, decode_pairs, last_digit

#: part of a step by which an abscissa may drift because first, last and step are printed rounded
_DRIFT = 0.25
#: a header is in another scale where it agrees with the data to this part after one of these factors
_LOOSE = 0.02
_SCALES = ((100.0, "in percent"), (0.01, "as a fraction"))


@dataclass(frozen=True)
class Number:
    """A number of a header, with one unit in its last digit and its line."""

    value: float
    unit: float
    line: int


@dataclass
class Header:
    """What a header says about a table, None where it says nothing; ``names`` are the labels for messages."""

    first_x: Number | None = None
    last_x: Number | None = None
    delta_x: Number | None = None
    n_points: Number | None = None
    x_factor: Number | None = None
    y_factor: Number | None = None
    first_y: Number | None = None
    max_y: Number | None = None
    min_y: Number | None = None
    max_x: Number | None = None
    min_x: Number | None = None


@dataclass
class Table:
    """The points of a table: ``x`` in the file's unit, ``y`` with its factor applied; the forms seen."""

    x: FloatArray
    y: FloatArray
    forms: str


@dataclass
class Budget:
    """How many ordinates a file may still give, so that a short file cannot ask for endless memory."""

    left: int
    size: int = field(default=0)

    @classmethod
    def of(cls, size: int) -> "Budget":
        """A million points, and sixteen more for every byte of the file."""
        return cls(2**20 + 16 * size, size)


def number_of(entry: Entry | None, findings: Findings, *, name: str) -> Number | None:
    """The number in front of a label's value; None where the label is missing or empty.

    Raises
    ------
    ReadError
        When the value does not start with a finite number.
    """
    if entry is None or not entry.value:
        return None
    word = re.split(r"[\s,;]", entry.value.strip(), maxsplit=1)[0]
    try:
        value = float(word)
    except ValueError:
        value = np.nan
    if not np.isfinite(value) or "_" in word:
        raise ReadError(f"##{name}= is '{entry.value[:60]}'", path=findings.file, line=entry.line,
                        accepted="it is a finite number with a decimal point")  # fmt: skip
    return Number(value, last_digit(word), entry.line)


def read_table(entry: Entry, header: Header, findings: Findings, budget: Budget) -> Table:
    """Decode a table, place its points and check it against its header.

    Raises
    ------
    ReadError
        When the table cannot be decoded or placed, or a check fails and failed checks are errors.
    """
    form = re.sub(r"\s", "", entry.value.partition(")),")[0] if "++" in entry.value else entry.value).upper()
    x_factor = _factor(header.x_factor, "XFACTOR", findings)
    y_factor = _factor(header.y_factor, "YFACTOR", findings)
    if "++" in form:
        limit = budget.left
        raw = decode(entry.rest, path=findings.file, line=entry.line + 1, limit=limit)
        budget.left -= raw.values.size
        for line, text in raw.faults[:1]:
            more = f"; {len(raw.faults) - 1} more lines fail" if len(raw.faults) > 1 else ""
            findings.failed(text + more, line)
        x = _placed(raw, header, x_factor, findings, entry.line)
        y = _scaled(raw.values, y_factor)
        forms = " ".join(sorted(raw.forms))
    elif re.match(r"\((XY|X,?Y)", form):
        x, y = decode_pairs(entry.rest, path=findings.file, line=entry.line + 1)
        x, y = _scaled(x, x_factor), _scaled(y, y_factor)
        _count(y.size, header, findings, entry.line)
        _ends(x, header, findings)
        forms = "pairs"
    else:
        raise ReadError(f"the table has the form '{entry.value[:60]}'", path=findings.file, line=entry.line,
                        accepted="unmix reads (X++(Y..Y)), (XY..XY) and (X,Y)")  # fmt: skip
    _check_range(x, header, findings)
    _check_y(y, header, y_factor, findings)
    return Table(x, y, forms)


def _factor(number: Number | None, name: str, findings: Findings) -> float:
    if number is None:
        return 1.0
    if number.value == 0:
        raise ReadError(f"##{name}= is zero", path=findings.file, line=number.line)
    return number.value


def _scaled(values: FloatArray, factor: float) -> FloatArray:
    """Values times a factor; a factor such as 0.0001 divides by 10000, which gives the decimal that was meant."""
    inverse = float(np.rint(1 / factor))
    return values / inverse if inverse and 1 / inverse == factor else values * factor


def _count(n: int, header: Header, findings: Findings, line: int) -> None:
    if header.n_points is None:
        findings.failed(f"##NPOINTS= is missing, so the {n} points cannot be counted against it", line)
    elif header.n_points.value != n:
        findings.failed(f"##NPOINTS= says {header.n_points.value:.15g} but the table holds {n} points",
                        header.n_points.line)  # fmt: skip


def _placed(raw: Ordinates, header: Header, x_factor: float, findings: Findings, line: int) -> FloatArray:
    """The abscissa of every ordinate, from the header, checked against what the lines print."""
    n = raw.values.size
    _count(n, header, findings, line)
    first = header.first_x.value if header.first_x else raw.x[0] * x_factor
    if not header.first_x:
        findings.failed("##FIRSTX= is missing; taken from the first line of the table", line)
    if n == 1:
        return np.array([first])
    step = _step(first, n, header, findings, line)
    x = first + step * np.arange(n)
    if header.last_x and header.n_points and header.n_points.value == n:
        x[-1] = header.last_x.value
    _check_x(raw, first, step, x_factor, findings)
    return x


def _step(first: float, n: int, header: Header, findings: Findings, line: int) -> float:
    delta = header.delta_x
    said = header.n_points.value if header.n_points else n
    if header.last_x is None:
        if delta is None or delta.value == 0:
            raise ReadError("neither ##LASTX= nor ##DELTAX= says where the points stand", path=findings.file,
                            line=line)  # fmt: skip
        findings.failed("##LASTX= is missing; the points are placed by ##DELTAX=", line)
        return delta.value
    if said < 2:
        said = n
    step = (header.last_x.value - first) / (said - 1)
    if step == 0:
        raise ReadError(f"##FIRSTX= and ##LASTX= are both {first:.10g}", path=findings.file,
                        line=header.last_x.line)  # fmt: skip
    if delta is not None and abs(delta.value - step) > 0.5 * delta.unit + _DRIFT * abs(step):
        findings.note(f"##DELTAX= says {delta.value:.8g} but ##FIRSTX=, ##LASTX= and ##NPOINTS= make it "
                      f"{step:.8g}; the latter is used", delta.line)  # fmt: skip
    return step


def _check_x(raw: Ordinates, first: float, step: float, x_factor: float, findings: Findings) -> None:
    """Compare the abscissa of every line with its place.

    Abscissae may be printed rounded or cut off, and beside the ordinate that a line repeats or beside the next.
    """
    printed = raw.x * x_factor
    unit = raw.x_unit * abs(x_factor)
    drift = _DRIFT * abs(step)
    for index in (raw.index, raw.index + raw.checked):
        place = first + step * index
        off = np.abs(printed - place)
        wrong = off > 0.5 * unit + drift
        # Cut off, not rounded: every place lies within one unit beyond what is printed, away from zero
        beyond = (place - printed) * np.sign(place)
        if not wrong.any() or ((beyond > -1e-6 * unit) & (beyond < unit * (1 - 1e-6))).all():
            return
    place = first + step * raw.index
    at = int(np.argmax(np.abs(printed - place) > 0.5 * unit + drift))
    findings.failed(f"the line starts at {printed[at]:.10g} but its place is {place[at]:.10g} (X-check)",
                    int(raw.line[at]))  # fmt: skip


def _ends(x: FloatArray, header: Header, findings: Findings) -> None:
    """Compare the ends of a table of pairs with the header."""
    ends = {float(x[0]), float(x[-1])}
    for name, number in (("FIRSTX", header.first_x), ("LASTX", header.last_x)):
        if number is None:
            continue
        tolerance = 0.5 * number.unit + 1e-6 * abs(number.value)
        near = float(x[0] if name == "FIRSTX" else x[-1])
        if abs(near - number.value) <= tolerance:
            continue
        if any(abs(end - number.value) <= tolerance for end in ends):
            findings.note(f"##{name}= is the other end of the table", number.line)
        else:
            findings.failed(f"##{name}= says {number.value:.10g} but the table has {near:.10g} there",
                            number.line)  # fmt: skip


def _check_range(x: FloatArray, header: Header, findings: Findings) -> None:
    """Compare the largest and smallest abscissa with the header, which no point depends on."""
    close = 0.5 * float(np.ptp(x)) / max(x.size - 1, 1)
    for name, number, found in (("MAXX", header.max_x, float(x.max())), ("MINX", header.min_x, float(x.min()))):
        if number is not None and abs(number.value - found) > close + 0.5 * number.unit:
            findings.note(f"##{name}= says {number.value:.8g} but the table has {found:.8g}", number.line)


def _check_y(y: FloatArray, header: Header, y_factor: float, findings: Findings) -> None:
    known = y[~np.isnan(y)]
    if not known.size:
        return
    low, high = float(known.min()), float(known.max())
    close = max(abs(y_factor), 1e-3 * (high - low))
    scale: set[str] = set()
    for name, number, found in (("FIRSTY", header.first_y, float(y[0])), ("MAXY", header.max_y, high),
                                ("MINY", header.min_y, low)):  # fmt: skip
        if number is None or np.isnan(found):
            continue
        if abs(number.value - found) <= close + 0.5 * number.unit + 1e-3 * abs(found):
            continue
        said = f"##{name}= says {number.value:.6g} but the table has {found:.6g}"
        reason = _scale(number, found, y_factor, close)
        if reason:
            if reason not in scale:
                findings.note(f"{said}; the header gives it {reason}", number.line)
            scale.add(reason)
        elif name == "FIRSTY":
            findings.failed(said, number.line)
        elif not scale:
            findings.note(said, number.line)


def _scale(number: Number, found: float, y_factor: float, close: float) -> str:
    """In which other scale a header's value agrees with the data; empty where in none."""
    for factor, name in (*_SCALES, (1 / y_factor, "before its factor")):
        rounding = min(0.5 * number.unit / abs(factor), 0.1 * abs(found))
        if factor != 1 and abs(number.value / factor - found) <= close + rounding + _LOOSE * abs(found):
            return name if number.value else ""
    return ""
