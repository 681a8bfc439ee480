"""Intervals at and away from the bound, critical levels, detection and quantification limits."""

from typing import NamedTuple

import numpy as np
from scipy import special

from unmix.kernels import FloatArray

#: chance of claiming an absent component, and of missing one at the detection limit (ISO 11843-1, IUPAC 1995)
ERROR_PROBABILITY = 0.05


class Interval(NamedTuple):
    """Lower and upper end of intervals, each shaped like the estimates."""

    lower: FloatArray
    upper: FloatArray


def quantile(level: float, freedom: FloatArray) -> FloatArray:
    """Student's t quantile; normal where the degrees of freedom are infinite, NaN where there are none."""
    freedom = np.asarray(freedom, dtype=float)
    with np.errstate(invalid="ignore"):
        student = special.stdtrit(np.where(freedom > 0, freedom, 1.0), level)
    t: FloatArray = np.where(np.isinf(freedom), special.ndtri(level), student)
    return np.where(freedom > 0, t, np.nan)


def interval(
    estimate: FloatArray,
    uncertainty: FloatArray,
    freedom: FloatArray,
    *,
    level: float,
    reported: FloatArray,
    nonnegative: bool,
) -> Interval:
    """Two-sided interval, cut at zero where amounts cannot be negative.

    Cutting an interval at a bound that the truth keeps does not change how often it covers. The upper end never
    falls below the one-sided limit at zero, so that an accident of noise cannot pretend to a sensitivity that the
    measurement does not have.

    Parameters
    ----------
    estimate, uncertainty : ndarray, shape (spectra, components)
        Estimates without constraint and their standard uncertainties.
    freedom : ndarray, broadcastable
        Degrees of freedom of the uncertainty.
    level : float
        Nominal coverage, such as 0.95.
    reported : ndarray, shape (spectra, components)
        The values reported beside the interval, which it always includes.
    nonnegative : bool

    Returns
    -------
    Interval
    """
    reach = quantile(0.5 + level / 2.0, freedom) * uncertainty
    lower, upper = estimate - reach, estimate + reach
    if nonnegative:
        lower = np.maximum(lower, 0.0)
        upper = np.where(lower > 0, upper, np.maximum(upper, quantile(level, freedom) * uncertainty))
    return Interval(np.minimum(lower, reported), np.maximum(upper, reported))


class Limits(NamedTuple):
    """Critical level, detection limit and quantification limit, each shaped like the input."""

    critical: FloatArray
    detection: FloatArray
    quantification: FloatArray


def limits(at_zero: FloatArray, freedom: FloatArray) -> Limits:
    """Limits from the standard uncertainty that an absent component's amount would have.

    Parameters
    ----------
    at_zero : ndarray
        s0 = sigma sqrt([(A'A)^-1]_jj), in units of amount.
    freedom : ndarray, broadcastable
        Degrees of freedom of sigma.

    Returns
    -------
    Limits
        Critical level t s0 and detection limit 2 t s0 with t at 5% error of either kind (ISO 11843-1; Currie, Pure
        Appl. Chem. 67 (1995) 1699), about 3.3 s0; quantification limit 10 s0 (ICH Q2).
    """
    critical = quantile(1.0 - ERROR_PROBABILITY, freedom) * at_zero
    return Limits(critical, 2.0 * critical, 10.0 * at_zero)
