"""Is this sample like the calibration: residual and distance of its spectrum, their limits, and the channels at fault.

Functions of scores, residuals and eigenvalues; the model that they come from is known to ``solve``.
"""

import numpy as np
from scipy import stats

from unmix.kernels import FloatArray

#: a region of channels at fault ends where their share falls below this part of the highest
_EDGE = 0.25


def residual_limit(eigenvalues: FloatArray, level: float) -> float:
    """Limit of the squared length of a residual whose covariance has these eigenvalues.

    Parameters
    ----------
    eigenvalues : ndarray
        Of the covariance of the residuals (divisor n - 1), zeros allowed.
    level : float
        Part of samples like the calibration that stays below.

    Returns
    -------
    float
        By Jackson and Mudholkar; where their power h0 is not positive, by the two-moment form of Box. Zero when all
        eigenvalues are.

    References
    ----------
    Jackson and Mudholkar, Technometrics 21 (1979) 341. Box, Ann. Math. Stat. 25 (1954) 290.

    Examples
    --------
    >>> round(residual_limit(np.array([3.0, 2.0, 1.0]), 0.95), 6)
    16.55755
    """
    one, two, three = (float(np.sum(np.asarray(eigenvalues, dtype=float) ** k)) for k in (1, 2, 3))
    if one <= 0 or two <= 0:
        return 0.0
    power = 1.0 - 2.0 * one * three / (3.0 * two**2)
    if power > 0:
        c = float(stats.norm.ppf(level))
        inner = c * np.sqrt(2.0 * two * power**2) / one + 1.0 + two * power * (power - 1.0) / one**2
        if inner > 0:
            return float(one * inner ** (1.0 / power))
    return float(two / one * stats.chi2.ppf(level, one**2 / two))


def distance_limit(components: int, samples: int, level: float) -> float:
    """Limit of Hotelling's T2 of a sample that was not in the calibration.

    Parameters
    ----------
    components : int
        Latent variables.
    samples : int
        Calibration samples.
    level : float

    Returns
    -------
    float
        k (n^2 - 1) / (n (n - k)) F(k, n - k); infinite when there are no more samples than latent variables.

    References
    ----------
    Tracy, Young and Mason, J. Qual. Technol. 24 (1992) 88.

    Examples
    --------
    >>> round(distance_limit(2, 50, 0.95), 6)
    6.64469
    """
    k, n = components, samples
    if k < 1:
        return 0.0
    if n <= k:
        return float("inf")
    return float(k * (n**2 - 1) / (n * (n - k)) * stats.f.ppf(level, k, n - k))


def nearest(scores: FloatArray, others: FloatArray, *, itself: bool = False) -> FloatArray:
    """Squared distance of each sample to the nearest of others.

    Parameters
    ----------
    scores : ndarray, shape (samples, k)
        Scaled so that the distance is that of Mahalanobis.
    others : ndarray, shape (others, k)
    itself : bool
        Whether both are the same samples, none of which is its own neighbour.

    Returns
    -------
    ndarray, shape (samples,)
        Infinite where there is no other.
    """
    found = np.full(scores.shape[0], np.inf)
    lengths = np.einsum("ij,ij->i", others, others)
    for start in range(0, scores.shape[0], 4096):
        part = scores[start : start + 4096]
        squares = np.einsum("ij,ij->i", part, part)[:, None] + lengths - 2.0 * part @ others.T
        if itself:
            rows = np.arange(part.shape[0])
            squares[rows, rows + start] = np.inf
        if squares.shape[1]:
            found[start : start + 4096] = np.maximum(squares.min(axis=1), 0.0)
    return found


def region_at_fault(share: FloatArray) -> tuple[int, int, float]:
    """The stretch of channels around the largest contribution to an excess.

    Parameters
    ----------
    share : ndarray, shape (channels,)
        Contribution of each channel; only positive ones are at fault.

    Returns
    -------
    first, last : int
        Channels at both ends, included.
    part : float
        Their part of all positive contributions.
    """
    positive = np.maximum(np.nan_to_num(share), 0.0)
    total = float(positive.sum())
    if total <= 0:
        return 0, share.size - 1, 1.0
    top = int(positive.argmax())
    low = positive < _EDGE * positive[top]
    before, after = np.flatnonzero(low[:top]), np.flatnonzero(low[top:])
    first = int(before[-1]) + 1 if before.size else 0
    last = top + int(after[0]) - 1 if after.size else share.size - 1
    return first, last, float(positive[first : last + 1].sum() / total)
