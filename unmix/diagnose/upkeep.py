"""Is a calibration still right? Adjustments and their tests, two calibrations on the same samples, charts over time."""

from typing import NamedTuple

import numpy as np
from scipy import stats

from unmix.kernels import BoolArray, FloatArray

#: false alarms of a chart, one in so many points, while nothing has changed
RUN_LENGTH = 1000.0


class Adjustment(NamedTuple):
    """What new reference values say of a calibration.

    Attributes
    ----------
    bias : float
        Mean of reference less predicted.
    bias_p : float
        Of its t test.
    slope, intercept : float
        Of the reference on the predicted values.
    slope_p : float
        Of the F test that a slope is needed beside the bias.
    advised : str
        ``none``, ``bias`` or ``slope and bias``.
    error, error_after : float
        Root mean square error before and after what is advised, the latter found by leaving samples out.
    """

    bias: float
    bias_p: float
    slope: float
    intercept: float
    slope_p: float
    advised: str
    error: float
    error_after: float


def adjustment(reference: FloatArray, predicted: FloatArray, level: float) -> Adjustment:
    """Test whether predictions need a bias, or a slope and a bias.

    Parameters
    ----------
    reference, predicted : ndarray, shape (samples,)
        Five or more.
    level : float
        Of the tests, such as 0.95.

    Returns
    -------
    Adjustment

    References
    ----------
    ASTM E1655, bias test. Draper and Smith, Applied Regression Analysis, 3rd ed. (1998), chapter 1, for the extra sum
    of squares.
    """
    n, errors = reference.size, reference - predicted
    bias = float(errors.mean())
    spread = float(errors.std(ddof=1))
    bias_p = float(2.0 * stats.t.sf(abs(bias) * np.sqrt(n) / spread, n - 1)) if spread > 0 else float(bias == 0)
    slope, intercept = (float(v) for v in np.polyfit(predicted, reference, 1)) if np.ptp(predicted) > 0 else (1.0, bias)
    rest = float(np.sum((reference - intercept - slope * predicted) ** 2))
    gained = float(np.sum((errors - bias) ** 2)) - rest
    slope_p = float(stats.f.sf(gained / (rest / (n - 2)), 1, n - 2)) if rest > 0 else float(gained == 0)
    alpha = 1.0 - level
    advised = "slope and bias" if slope_p < alpha else "bias" if bias_p < alpha else "none"
    return Adjustment(bias, bias_p, slope, intercept, slope_p, advised, float(np.sqrt(np.mean(errors**2))),
                      _left_out_error(reference, predicted, advised))  # fmt: skip


def _left_out_error(reference: FloatArray, predicted: FloatArray, what: str) -> float:
    found = np.empty(reference.size)
    for i in range(reference.size):
        rest = np.arange(reference.size) != i
        y, f = reference[rest], predicted[rest]
        if what == "slope and bias":
            slope, intercept = np.polyfit(f, y, 1)
            found[i] = intercept + slope * predicted[i]
        else:
            found[i] = predicted[i] + (float(np.mean(y - f)) if what == "bias" else 0.0)
    return float(np.sqrt(np.mean((reference - found) ** 2)))


def randomisation_p(first: FloatArray, second: FloatArray, *, shuffles: int, seed: int) -> float:
    """P value that two calibrations have the same mean squared error on the same samples.

    Parameters
    ----------
    first, second : ndarray, shape (samples,)
        Their errors.
    shuffles : int
        Random changes of sign of the differences of squared errors.
    seed : int

    Returns
    -------
    float
        Two-sided.

    References
    ----------
    van der Voet, Chemom. Intell. Lab. Syst. 25 (1994) 313.
    """
    difference = first**2 - second**2
    if not difference.any():
        return 1.0
    signs = np.random.default_rng(seed).integers(0, 2, (shuffles, difference.size)) * 2 - 1
    means = np.abs(signs @ difference)
    return float((np.sum(means >= abs(difference.sum()) * (1.0 - 1e-12)) + 1) / (shuffles + 1))


class Chart(NamedTuple):
    """A chart over time.

    Attributes
    ----------
    value : ndarray, shape (points,)
        Exponentially weighted mean of the standardised readings.
    limit : ndarray, shape (points,)
        Of its size.
    alarm : ndarray of bool, shape (points,)
    """

    value: FloatArray
    limit: FloatArray
    alarm: BoolArray


def chart(standardised: FloatArray, weight: float = 0.2, known_from: float = np.inf) -> Chart:
    """Exponentially weighted moving average of readings that have mean 0 and variance 1 while nothing has changed.

    Parameters
    ----------
    standardised : ndarray, shape (points,)
        In the order of time; NaN where there is no reading.
    weight : float
        Of the newest reading, above 0 and up to 1.
    known_from : float
        How many readings mean and variance were found from; few of them widen the limit.

    Returns
    -------
    Chart
        The limit lets one point in about a thousand alarm by chance (two-sided).

    References
    ----------
    Roberts, Technometrics 1 (1959) 239. Lucas and Saccucci, Technometrics 32 (1990) 1; the width of the limits is that
    of one point, which is close to one over the run length for weights from 0.2.
    """
    value, limit = np.empty(standardised.size), np.empty(standardised.size)
    width = float(stats.norm.isf(0.5 / RUN_LENGTH))
    state, share = 0.0, 0.0
    for i, reading in enumerate(standardised):
        if np.isfinite(reading):
            state, share = (1.0 - weight) * state + weight * reading, (1.0 - weight) ** 2 * share + weight**2
        value[i], limit[i] = state, width * np.sqrt(share + 1.0 / known_from)
    return Chart(value, limit, np.asarray((np.abs(value) > limit) & np.isfinite(standardised)))
