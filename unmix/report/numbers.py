"""Numbers for people: as many digits as the uncertainty leaves meaning to, never a naked zero."""

import math
from dataclasses import dataclass

#: outside these bounds a number is written with a power of ten
_PLAIN = (1e-4, 1e6)

#: what stands where nothing could be determined
ABSENT = "\N{EN DASH}"


def significant(value: float, digits: int = 3) -> str:
    """A number to so many significant digits, in plain or scientific notation.

    Examples
    --------
    >>> significant(0.012345), significant(1234.5), significant(2.5e-7)
    ('0.0123', '1230', '2.50e-07')
    """
    if not math.isfinite(value):
        return to_step(value, 1.0, size=1.0)
    if value == 0:
        return "0"
    return to_step(value, 10.0 ** (math.floor(math.log10(abs(value))) - digits + 1), size=abs(value))


def to_step(value: float, step: float, *, size: float) -> str:
    """A number rounded to a step that is a power of ten; ``size`` decides about the notation."""
    if not math.isfinite(value):
        return "unlimited" if value == math.inf else ABSENT
    power = round(math.log10(step))
    if round(value / step) == 0:
        return f"{0:.{max(-power, 0)}f}" if _PLAIN[0] <= size < _PLAIN[1] else "0"
    if _PLAIN[0] <= size < _PLAIN[1]:
        return f"{round(value / step) * step:.{max(-power, 0)}f}"
    top = math.floor(math.log10(abs(value)))
    return f"{value:.{max(top - power, 0)}e}"


def step_for(uncertainty: float, size: float) -> float:
    """The power of ten to round to, so that the uncertainty keeps two significant digits."""
    if not math.isfinite(uncertainty) or uncertainty <= 0:
        uncertainty = max(size, 1e-300) * 1e-2
    # Digits beyond the precision of the arithmetic mean nothing
    return float(10.0 ** (math.floor(math.log10(max(uncertainty, size * 1e-12))) - 1))


@dataclass(frozen=True)
class Amount:
    """One amount as a person reads it: the value (or the limit it is below) and both ends of its interval."""

    value: str
    lower: str
    upper: str
    known: bool
    found: bool

    @property
    def interval(self) -> str:
        """Both ends in one text, empty where the amount could not be determined."""
        return f"{self.lower} to {self.upper}" if self.known else ""


def amount(
    value: float, lower: float, upper: float, *, detected: bool, uncertainty: float = math.nan
) -> Amount:
    """Write an amount with its interval.

    Parameters
    ----------
    value, lower, upper : float
        In one unit; NaN where it could not be determined.
    detected : bool
        Whether it is above its critical level; if not, it is written as below its upper limit.
    uncertainty : float
        Standard uncertainty, which sets the digits together with the width of the interval.

    Returns
    -------
    Amount

    Examples
    --------
    >>> amount(12.3456, 12.1, 12.6, detected=True, uncertainty=0.127).value
    '12.35'
    >>> amount(0.0, 0.0, 0.31, detected=False, uncertainty=0.16).value
    '< 0.31'
    """
    if not math.isfinite(value):
        return Amount(ABSENT, ABSENT, ABSENT, known=False, found=False)
    ends = [abs(number) for number in (value, lower, upper) if math.isfinite(number)]
    size = max(ends)
    if not detected and math.isfinite(upper) and upper > 0:
        # A limit is rounded up, so that what is printed still holds
        step = 10.0 ** (math.floor(math.log10(upper)) - 1)
        limit = to_step(math.ceil(upper / step * (1 - 1e-12)) * step, step, size=upper)
        return Amount(f"< {limit}", to_step(lower, step, size=upper), limit, known=True, found=False)
    width = [number for number in (uncertainty, (upper - lower) / 4) if math.isfinite(number)]
    step = step_for(max(width, default=math.nan), size)
    shown = [to_step(number, step, size=size) for number in (value, lower, upper)]
    return Amount(shown[0], shown[1], shown[2], known=True, found=detected)
