"""Packed ordinates of JCAMP-DX to numbers, a whole table at a time: text in, arrays out; ``pack.py`` is the way back.

AFFN, PAC, SQZ, DIF and DUP may be mixed in one line; the first character of a value says which it is. What the
numbers mean, and whether they agree with the header, is judged in ``jcamp.py``.

References
----------
R. S. McDonald and P. A. Wilks, JCAMP-DX: a standard form for exchange of infrared spectra in computer readable
form, Appl. Spectrosc. 42 (1988) 151-162, section 4.5 and Table VII.
"""

from dataclasses import dataclass, field

import numpy as np

from unmix.errors import ReadError
from unmix.kernels import BoolArray, FloatArray, IntArray

# Classes of a byte in a data table. The order matters: from _SIGN on, a byte always starts a value.
_BLANK, _INSIDE, _DIGIT, _DOT, _SIGN, _SQZ, _DIF, _DUP, _MISSING, _WRONG = range(10)

SQZ_DIGITS = {"@": 0, **{c: i for i, c in enumerate("ABCDEFGHI", 1)}, **{c: -i for i, c in enumerate("abcdefghi", 1)}}
DIF_DIGITS = {"%": 0, **{c: i for i, c in enumerate("JKLMNOPQR", 1)}, **{c: -i for i, c in enumerate("jklmnopqr", 1)}}
DUP_DIGITS = {c: i for i, c in enumerate("STUVWXYZs", 1)}

#: a value longer than this is turned by ``float`` instead of digit by digit
_EXACT_DIGITS = 15
#: differences that add up beyond this are no longer exact
_EXACT_SUM = 2.0**53


def _byte_tables() -> tuple[IntArray, FloatArray, FloatArray]:
    kind = np.full(256, _WRONG, dtype=np.int8)
    lead = np.zeros(256)
    sign = np.ones(256)
    kind[[ord(c) for c in " \t\n,;"]] = _BLANK
    for code, digits in ((_SQZ, SQZ_DIGITS), (_DIF, DIF_DIGITS), (_DUP, DUP_DIGITS),
                         (_DIGIT, {str(d): d for d in range(10)})):  # fmt: skip
        for char, digit in digits.items():
            kind[ord(char)], lead[ord(char)], sign[ord(char)] = code, abs(digit), -1 if digit < 0 else 1
    kind[[ord("+"), ord("-")]], sign[ord("-")] = _SIGN, -1
    kind[ord(".")], kind[ord("?")] = _DOT, _MISSING
    return kind, lead, sign


_KIND, _LEAD, _VALUE_SIGN = _byte_tables()


@dataclass(frozen=True)
class Ordinates:
    """The ordinates of one ``(X++(Y..Y))`` table, and what its lines say about them.

    Attributes
    ----------
    values : ndarray, shape (points,)
        As printed, before any factor; NaN where the file says ``?``.
    x : ndarray, shape (lines,)
        The abscissa printed at the start of each line, before any factor.
    x_unit : ndarray, shape (lines,)
        One unit in the last printed digit of that abscissa.
    index : ndarray, shape (lines,)
        The ordinate that the abscissa stands beside; in a line that starts with a check, the one repeated.
    checked : ndarray of bool, shape (lines,)
        Whether the line started with such a check.
    line : ndarray, shape (lines,)
        Line numbers in the file.
    forms : frozenset of str
        Which of ``AFFN``, ``SQZ``, ``DIF``, ``DUP`` occur.
    faults : list of (int, str)
        Line number and sentence for every failed Y-check.
    """

    values: FloatArray
    x: FloatArray
    x_unit: FloatArray
    index: IntArray
    checked: BoolArray
    line: IntArray
    forms: frozenset[str]
    faults: list[tuple[int, str]] = field(default_factory=list)


@dataclass(frozen=True)
class _Values:
    """Every value of a table: its class, number, line (from 0), and one unit in its last digit."""

    kind: IntArray
    number: FloatArray
    line: IntArray
    unit: FloatArray


def decode(table: bytes, *, path: str, line: int, limit: int) -> Ordinates:
    r"""Decode a ``(X++(Y..Y))`` table.

    Parameters
    ----------
    table : bytes
        The lines after the label, ``\n`` between them, comments removed.
    path : str
        The file, for messages.
    line : int
        Line number of the first line of the table.
    limit : int
        The most ordinates that may come out; a DUP count beyond it is refused before anything is allocated.

    Returns
    -------
    Ordinates

    Raises
    ------
    ReadError
        When the text cannot be a table. A failed Y-check is no error here: it is listed in ``faults``.

    Examples
    --------
    >>> decode(b"1A%jX", path="", line=1, limit=100).values
    array([ 1.,  1.,  0., -1., -2., -3., -4., -5.])
    """
    found = _values(table, path, line)
    first = np.empty(found.line.size, dtype=bool)
    first[:1] = True
    np.not_equal(found.line[1:], found.line[:-1], out=first[1:])
    _no_such(first & (found.kind != _DIGIT) & (found.kind != _SIGN), found, path, line,
             "the line does not start with an abscissa")  # fmt: skip
    is_last = np.append(first[1:], True)[: first.size]
    _no_such(first & is_last, found, path, line, "the line holds an abscissa but no ordinate")
    x, x_unit, x_line = found.number[first], found.unit[first], found.line[first]
    rest = ~first
    ordinates = _Values(found.kind[rest], found.number[rest], found.line[rest], found.unit[rest])
    is_difference, value, repeat, at_line = _repeats(ordinates, path, line)
    total = float(repeat.sum())
    if total > limit + x.size:
        raise ReadError(f"the repeat counts ask for {total:.3g} ordinates but at most {limit} can belong here",
                        path=path, line=line)  # fmt: skip
    repeats = repeat.astype(np.intp)
    values, differs = _sums(is_difference, value, repeats, path, line, at_line)
    ends = np.cumsum(repeats)
    first_value = np.flatnonzero(np.diff(at_line, prepend=-1))
    starts = ends[first_value] - repeats[first_value]
    checked = np.zeros(x.size, dtype=bool)
    checked[1:] = differs[starts[1:] - 1]
    faults = _y_checks(values, starts, checked, x_line + line)
    keep = np.ones(values.size, dtype=bool)
    keep[starts[checked]] = False
    # A checked line stands at the ordinate that it repeats, one before its first new one
    index = starts - np.cumsum(checked)
    names = {_SQZ: "SQZ", _DIF: "DIF", _DUP: "DUP"}
    forms = frozenset(names.get(int(code), "AFFN") for code in np.unique(ordinates.kind))
    return Ordinates(values[keep], x, x_unit, index, checked, x_line + line, forms, faults)


def decode_pairs(table: bytes, *, path: str, line: int) -> tuple[FloatArray, FloatArray]:
    """Decode a table of pairs, ``(XY..XY)`` or ``(X,Y)``, one or more whole pairs a line.

    Returns
    -------
    x, y : ndarray, shape (points,)
        As printed, before any factor; NaN in ``y`` where the file says ``?``.

    Raises
    ------
    ReadError
        When a line does not hold whole pairs of plain numbers.

    Examples
    --------
    >>> decode_pairs(b"400, 0.5; 401, 0.6", path="", line=1)
    (array([400., 401.]), array([0.5, 0.6]))
    """
    found = _values(table.replace(b"(", b" ").replace(b")", b" "), path, line)
    packed = (found.kind == _SQZ) | (found.kind == _DIF) | (found.kind == _DUP)
    _no_such(packed, found, path, line, "a packed value stands in a table of pairs")
    odd = np.flatnonzero(np.bincount(found.line) % 2)
    if odd.size:
        raise ReadError("the line does not hold whole pairs", path=path, line=line + int(odd[0]),
                        accepted="a table of pairs has two numbers for each point")  # fmt: skip
    x, y = found.number[::2], found.number[1::2]
    lost = np.flatnonzero(np.isnan(x))
    if lost.size:
        raise ReadError("an abscissa is missing", path=path, line=line + int(found.line[2 * lost[0]]))
    return x, y


def _no_such(offends: BoolArray, found: _Values, path: str, line: int, message: str) -> None:
    if offends.any():
        raise ReadError(message, path=path, line=line + int(found.line[np.argmax(offends)]))


def _values(table: bytes, path: str, line: int) -> _Values:
    """Cut a table into values and turn each into a number."""
    text = np.frombuffer(table, dtype=np.uint8)
    kind = _KIND[text]
    newline = np.flatnonzero(text == ord("\n"))
    if (kind == _WRONG).any():
        at = int(np.argmax(kind == _WRONG))
        raise ReadError(f"the character '{chr(text[at])}' does not belong in a data table", path=path,
                        line=line + int(np.searchsorted(newline, at)))  # fmt: skip
    _mark_exponents(text, kind)
    start, end = _cut(kind)
    if not start.size:
        raise ReadError("the data table is empty", path=path, line=line)
    at_line = np.searchsorted(newline, start)
    leads = kind[start]
    length = end - start
    number = _LEAD[text[start]]
    unit = np.ones(start.size)
    by_float = length > _EXACT_DIGITS
    dots = np.flatnonzero(kind == _DOT)
    dotted = np.searchsorted(start, dots, side="right") - 1
    unit[dotted] = 10.0 ** (dots + 1 - end[dotted])
    by_float[dotted] = True
    scaled = np.searchsorted(start, np.flatnonzero(kind == _INSIDE), side="right") - 1
    by_float[scaled] = True
    exact = np.where(by_float, 0, length)
    for place in range(1, int(exact.max(initial=0))):
        longer = np.flatnonzero(exact > place)
        number[longer] = number[longer] * 10 + (text[start[longer] + place] - 48.0)
    number *= _VALUE_SIGN[text[start]]
    number[leads == _MISSING] = np.nan
    leads[leads == _DOT] = _DIGIT
    found = _Values(leads, number, at_line, unit)
    _no_such((leads == _SIGN) & (length == 1), found, path, line, "a sign stands without a number")
    _no_such(by_float & (leads > _SIGN), found, path, line, "a packed value is not a whole number of up to 14 digits")
    for i in np.flatnonzero(by_float):
        word = table[start[i] : end[i]]
        try:
            number[i] = float(word)
        except ValueError:
            raise ReadError(f"'{word[:40].decode('latin-1')}' is not a number", path=path,
                            line=line + int(at_line[i])) from None  # fmt: skip
    for i in np.unique(scaled):
        unit[i] = last_digit(table[start[i] : end[i]])
    _no_such(np.isinf(number), found, path, line, "a number is too large")
    return found


def _cut(kind: IntArray) -> tuple[IntArray, IntArray]:
    """Where every value starts and ends."""
    inside = (kind >= _INSIDE) & (kind <= _DOT)
    starts = kind >= _SIGN
    starts[1:] |= inside[1:] & ((kind == _BLANK) | (kind == _MISSING))[:-1]
    starts[:1] |= inside[:1]
    ends = kind != _BLANK
    ends[:-1] &= ~(inside & ~starts)[1:]
    return np.flatnonzero(starts), np.flatnonzero(ends) + 1


def _mark_exponents(text: IntArray, kind: IntArray) -> None:
    """Mark exponents as inside their number.

    ``E`` is also the packed digit 5. It is an exponent where a sign and a digit follow it, as the standard asks, or,
    in a table without any other packed digit, where digits follow it directly behind a decimal fraction.
    """
    at = np.flatnonzero((text | 0x20) == ord("e"))
    at = at[(at > 0) & (at < text.size - 1)]
    after_number = (kind[at - 1] == _DIGIT) | (kind[at - 1] == _DOT)
    signed = after_number & (kind[at + 1] == _SIGN) & (kind[np.minimum(at + 2, text.size - 1)] == _DIGIT)
    marks = at[signed]
    kind[marks] = kind[marks + 1] = _INSIDE
    if at.size > marks.size and not ((kind >= _SQZ) & (kind <= _DUP) & ((text | 0x20) != ord("e"))).any():
        bare = at[after_number & ~signed & (kind[at + 1] == _DIGIT)]
        fraction = np.array([_is_fraction(text, kind, int(i)) for i in bare], dtype=bool)
        if bare.size and fraction.all():
            kind[bare] = _INSIDE


def _is_fraction(text: IntArray, kind: IntArray, end: int) -> bool:
    """Whether the number that ends before a position holds a decimal point and is not the first of its line."""
    at = end - 1
    points = 0
    while at >= 0 and kind[at] in (_DIGIT, _DOT, _SIGN):
        points += int(kind[at] == _DOT)
        at -= 1
    while at >= 0 and text[at] in b" \t":
        at -= 1
    return points == 1 and at >= 0 and text[at] != ord("\n")


def last_digit(word: bytes | str) -> float:
    """One unit in the last printed digit of a number.

    Examples
    --------
    >>> last_digit("249.741"), last_digit("4.5E-0001"), last_digit("450.")
    (0.001, 0.01, 1.0)
    """
    text = word.decode("latin-1") if isinstance(word, bytes) else word
    mantissa, _, exponent = text.lower().partition("e")
    decimals = len(mantissa.partition(".")[2])
    try:
        return float(f"1e{int(exponent or 0) - decimals}")
    except ValueError:
        return 0.0


def _repeats(found: _Values, path: str, line: int) -> tuple[BoolArray, FloatArray, FloatArray, IntArray]:
    """Fold DUP counts into the values that they repeat: is it a difference, value, count, line."""
    is_count = found.kind == _DUP
    same_line = np.zeros(is_count.size, dtype=bool)
    same_line[1:] = (found.line[1:] == found.line[:-1]) & ~is_count[:-1]
    _no_such(is_count & ~same_line, found, path, line, "a repeat count has nothing before it to repeat")
    times = np.ones(is_count.size)
    at = np.flatnonzero(is_count)
    times[at - 1] = found.number[at]
    kept = ~is_count
    return (found.kind == _DIF)[kept], found.number[kept], times[kept], found.line[kept]


def _sums(
    is_difference: BoolArray, value: FloatArray, repeats: IntArray, path: str, line: int, at_line: IntArray
) -> tuple[FloatArray, BoolArray]:
    """Every ordinate, and whether it was given as a difference."""
    starts_line = np.diff(at_line, prepend=-1) != 0
    orphan = np.flatnonzero(starts_line & is_difference)
    if orphan.size:
        raise ReadError("the line starts with a difference, but every line starts with a full ordinate",
                        path=path, line=line + int(at_line[orphan[0]]))  # fmt: skip
    differs = np.repeat(is_difference, repeats)
    given = np.repeat(value, repeats)
    if not is_difference.any():
        return given, differs
    steps = np.where(differs, given, 0.0)
    if np.abs(steps).sum() > _EXACT_SUM:
        raise ReadError("the differences add up to more than can be held exactly", path=path, line=line)
    running = np.cumsum(steps)
    base = np.maximum.accumulate(np.where(differs, 0, np.arange(differs.size)))
    values: FloatArray = running + (given - running)[base]
    lost = np.flatnonzero(differs & np.isnan(values))
    if lost.size:
        at = int(np.searchsorted(np.cumsum(repeats), lost[0], side="right"))
        raise ReadError("a difference follows a missing ordinate", path=path, line=line + int(at_line[at]))
    return values, differs


def _y_checks(values: FloatArray, starts: IntArray, checked: BoolArray, lines: IntArray) -> list[tuple[int, str]]:
    again, before = values[starts[checked]], values[starts[checked] - 1]
    wrong = np.flatnonzero((again != before) & ~np.isnan(again))
    return [
        (int(lines[checked][i]), f"the line starts with {again[i]:.15g} but the line before ends with "
         f"{before[i]:.15g} (Y-check)") for i in wrong
    ]  # fmt: skip
