"""Numbers to packed ordinates of JCAMP-DX, line by line; ``ordinates.py`` decodes them.

The packed digits are those of R. S. McDonald and P. A. Wilks, Appl. Spectrosc. 42 (1988) 151-162, Table VII.
"""

from collections.abc import Iterator, Sequence

import numpy as np

from unmix.kernels import FloatArray
from unmix.read.ordinates import DIF_DIGITS, DUP_DIGITS, SQZ_DIGITS


def pack(abscissae: Sequence[str], ordinates: FloatArray, *, width: int) -> Iterator[str]:
    """Write ordinates as the lines of a DIFDUP table.

    Parameters
    ----------
    abscissae : sequence of str
        The text of every abscissa, of which the first of each line is printed.
    ordinates : ndarray, shape (points,)
        Rounded to whole numbers; NaN becomes ``?``.
    width : int
        The longest line.

    Yields
    ------
    str
        Lines; each starts with the last ordinate of the line before as the Y-check, and a line with nothing but
        that check closes the table.

    Examples
    --------
    >>> list(pack(["1", "2", "3", "4"], np.array([1.0, 2.0, 3.0, 3.0]), width=80))
    ['1AJT%', '4C']
    """
    whole = [None if np.isnan(y) else int(y) for y in np.rint(ordinates)]
    n = len(whole)
    words = [_packed(whole[i], whole[i - 1] if i else None) for i in range(n)]
    i = 0
    ends_in_difference = False
    while i < n or ends_in_difference:
        at = i - 1 if ends_in_difference else i
        line = abscissae[at] + _packed(whole[at], None)
        i = at + 1
        ends_in_difference = False
        while i < n:
            run = 1
            while i + run < n and words[i + run] == words[i] and words[i][0] in _DIFFERENCES:
                run += 1
            piece = words[i] + (_coded(run, _DUP_CODES) if run > 1 else "")
            if len(line) + len(piece) > width:
                break
            line += piece
            ends_in_difference = words[i][0] in _DIFFERENCES
            i += run
        yield line


def _packed(value: int | None, before: int | None) -> str:
    if value is None:
        return "?"
    return _coded(value, _SQZ_CODES) if before is None else _coded(value - before, _DIF_CODES)


def _coded(value: int, codes: dict[str, str]) -> str:
    """A whole number whose sign and first digit are one letter."""
    digits = str(abs(value))
    return codes[f"-{digits[0]}" if value < 0 else digits[0]] + digits[1:]


_SQZ_CODES = {str(digit): char for char, digit in SQZ_DIGITS.items()}
_DIF_CODES = {str(digit): char for char, digit in DIF_DIGITS.items()}
_DUP_CODES = {str(digit): char for char, digit in DUP_DIGITS.items()}
_DIFFERENCES = frozenset(DIF_DIGITS)
