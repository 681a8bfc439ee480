"""How good a calibration is: errors, bias and slope with their tests, and the choice of latent variables.

Functions of reference and predicted values alone; how the predictions came about is known to ``solve``.
"""

from dataclasses import dataclass

import numpy as np
from scipy import stats

from unmix.kernels import FloatArray, IntArray

#: a part of the range counts as thin when it holds less than this share of its fair number of samples
_THIN = 0.25


@dataclass(frozen=True)
class Figures:
    """Figures of merit of one property on one set of samples.

    Attributes
    ----------
    count : int
        Samples with both values.
    error : float
        Root mean square error: SEC, SECV or SEP, by the degrees of freedom that were asked for.
    bias, bias_p : float
        Mean error and the p value of its t test.
    corrected : float
        Standard deviation of the errors (SEP corrected for bias).
    slope, intercept, line_p : float
        Of the reference on the predicted values, and the p value of the joint test of slope 1 and intercept 0.
    r2 : float
        One minus the squared errors over the squared deviations of the reference.
    rpd : float
        Standard deviation of the reference over ``error``.
    lowest, highest : float
        Range of the reference.
    """

    count: int
    error: float
    bias: float
    bias_p: float
    corrected: float
    slope: float
    intercept: float
    line_p: float
    r2: float
    rpd: float
    lowest: float
    highest: float


def figures(reference: FloatArray, predicted: FloatArray, *, fitted: int = 0) -> Figures:
    """Compare predictions of one property with its reference values.

    Parameters
    ----------
    reference, predicted : ndarray, shape (samples,)
        Pairs with a NaN are left out.
    fitted : int
        Parameters fitted to these very samples, taken off the degrees of freedom of ``error``: latent variables
        plus one for SEC of a centred model, none for SECV and SEP.

    Returns
    -------
    Figures
        NaN where too few samples are left, or the reference does not vary.

    Notes
    -----
    ASTM E1655: SEC = sqrt(sum e^2 / (n - k - 1)); SECV and SEP (there SEV) = sqrt(sum e^2 / n); bias t =
    |mean e| sqrt(n) / SDV with n - 1 degrees of freedom. Slope and intercept are those of reference against
    predicted values, for which slope 1 and intercept 0 are expected of an unbiased calibration, and are tested
    together by F with 2 and n - 2 degrees of freedom.

    References
    ----------
    ASTM E1655, Standard Practices for Infrared Multivariate Quantitative Analysis. Mandel and Linnig, Anal. Chem. 29
    (1957) 743, for the joint test.

    Examples
    --------
    >>> found = figures(np.array([1.0, 2.0, 3.0, 4.0]), np.array([1.1, 1.9, 3.1, 4.1]))
    >>> round(found.error, 6), round(found.bias, 6)
    (0.1, 0.05)
    """
    kept = np.isfinite(reference) & np.isfinite(predicted)
    y, f = np.asarray(reference, dtype=float)[kept], np.asarray(predicted, dtype=float)[kept]
    n = y.size
    if n == 0:
        return Figures(0, *[np.nan] * 11)
    e = f - y
    squares = float(np.sum(e**2))
    freedom = n - fitted
    error = float(np.sqrt(squares / freedom)) if freedom > 0 else np.nan
    bias = float(e.mean())
    corrected = float(e.std(ddof=1)) if n > 1 else np.nan
    bias_p = _two_sided(abs(bias) * np.sqrt(n), corrected, n - 1)
    slope, intercept, line_p = _line(y, f)
    spread = float(np.sum((y - y.mean()) ** 2))
    r2 = 1.0 - squares / spread if spread > 0 else np.nan
    rpd = float(y.std(ddof=1)) / error if n > 1 and error > 0 else np.nan
    return Figures(n, error, bias, bias_p, corrected, slope, intercept, line_p, r2, rpd, float(y.min()), float(y.max()))


def _two_sided(distance: float, spread: float, freedom: int) -> float:
    if freedom < 1 or not np.isfinite(spread):
        return np.nan
    if spread == 0:
        return 1.0 if distance == 0 else 0.0
    return float(2 * stats.t.sf(distance / spread, freedom))


def _line(y: FloatArray, f: FloatArray) -> tuple[float, float, float]:
    """Slope, intercept and joint p value of y = intercept + slope f."""
    n = y.size
    across = f - f.mean()
    width = float(across @ across)
    if n < 3 or width <= (1e-12 * np.abs(f).max()) ** 2:
        return np.nan, np.nan, np.nan
    slope = float(across @ y / width)
    intercept = float(y.mean() - slope * f.mean())
    left = float(np.sum((y - intercept - slope * f) ** 2))
    gained = float(np.sum((y - f) ** 2)) - left
    if left <= 0:
        return slope, intercept, 1.0 if gained <= 0 else 0.0
    return slope, intercept, float(stats.f.sf(max(gained, 0.0) / 2 / (left / (n - 2)), 2, n - 2))


def one_standard_error(errors: FloatArray, units: IntArray | None = None) -> tuple[int, FloatArray]:
    """The smallest number of latent variables within one standard error of the best.

    Parameters
    ----------
    errors : ndarray, shape (numbers, samples)
        Squared cross-validation errors with 0, 1, 2, ... latent variables; NaN where there is none.
    units : ndarray of int, shape (samples,), optional
        Samples with equal entries belong together (a batch, a day) and count as one observation of the error.

    Returns
    -------
    chosen : int
        Latent variables, 0 when nothing beats the mean.
    standard_error : ndarray, shape (numbers,)
        Of the mean squared error.

    References
    ----------
    Breiman, Friedman, Olshen and Stone, Classification and Regression Trees (1984), section 3.4.3.
    """
    kept = np.isfinite(errors).all(axis=0)
    e = errors[:, kept]
    if units is not None:
        names = units[kept]
        held = np.array([np.sum(names == name) for name in np.unique(names)])
        e = np.array([e[:, names == name].mean(axis=1) for name in np.unique(names)]).T * (held / held.mean())
    mean = e.mean(axis=1)
    spread: FloatArray = e.std(axis=1, ddof=1) / np.sqrt(e.shape[1]) if e.shape[1] > 1 else np.zeros(e.shape[0])
    best = int(mean.argmin())
    return int(np.flatnonzero(mean <= mean[best] + spread[best])[0]), spread


def samples_wanted(components: int) -> tuple[int, int]:
    """Samples that ASTM E1655 asks for, for a centred model: in the calibration, and in its validation."""
    return (24 if components <= 3 else 6 * (components + 1)), (20 if components <= 5 else 4 * components)


def thin_range(reference: FloatArray, parts: int = 4) -> tuple[float, float] | None:
    """A part of the range of reference values that holds far fewer samples than the others.

    Parameters
    ----------
    reference : ndarray, shape (samples,)
    parts : int
        How many equal parts the range is cut into.

    Returns
    -------
    (low, high) or None
        The emptiest part, when it holds less than a quarter of its fair share.
    """
    edges = np.linspace(reference.min(), reference.max(), parts + 1)
    held, _ = np.histogram(reference, edges)
    at = int(held.argmin())
    if held[at] >= _THIN * reference.size / parts:
        return None
    return float(edges[at]), float(edges[at + 1])
