"""Is this sample like the calibration: residual and distance of its spectrum, their limits, and the channels at fault.

Functions of scores and residuals; the model that they come from is known to ``solve``.
"""

import numpy as np
from scipy import stats

from unmix.kernels import FloatArray

#: fewest samples from which the traces of a covariance can be told
_FEW = 4

#: a region of channels at fault ends where their share falls below this part of the highest
_EDGE = 0.25


def traces(eigenvalues: FloatArray) -> tuple[float, float, float]:
    """Sums of the first, second and third powers of the eigenvalues of a covariance."""
    values = np.asarray(eigenvalues, dtype=float)
    return float(values.sum()), float(np.sum(values**2)), float(np.sum(values**3))


def estimated_traces(residuals: FloatArray) -> tuple[float, float, float]:
    """Traces of the first three powers of the covariance that residuals of few samples were drawn from.

    Parameters
    ----------
    residuals : ndarray, shape (samples, channels)
        Of spectra that the model was not fitted to, expected to be zero.

    Returns
    -------
    one, two, three : float

    Notes
    -----
    Eigenvalues of the covariance of n samples spread more than the true ones, so that their powers are too large: with
    S the sample covariance of normal residuals, E tr S^2 = (1 + 1/n) tr C^2 + (tr C)^2 / n. These and the third moments
    of the Wishart distribution are solved for the traces of C, and the answer is kept within tr(C)^2 / p <= tr C^2 and
    (tr C^2)^2 <= tr C tr C^3 <= tr C (tr C^2)^(3/2), which hold for every covariance.

    References
    ----------
    Letac and Massam, Scand. J. Stat. 31 (2004) 295, for the moments.
    """
    n, p = residuals.shape
    s1, s2, s3 = traces(np.linalg.svd(residuals, compute_uv=False) ** 2 / max(n, 1))
    if s1 <= 0 or n < _FEW:
        # three samples leave the third moment open
        return s1, s2, s3
    u = 1.0 / n
    # products of traces in the order: (tr C^2, (tr C)^2) and (tr C^3, tr C tr C^2, (tr C)^3)
    two = np.linalg.solve([[1 + u, u], [2 * u, 1.0]], [s2, s1**2])[0]
    third = [[1 + 3 * u + 4 * u**2, 3 * u + 3 * u**2, u**2],
             [4 * u + 4 * u**2, 1 + u + 4 * u**2, u],
             [8 * u**2, 6 * u, 1.0]]  # fmt: skip
    three = np.linalg.solve(third, [s3, s1 * s2, s1**3])[0]
    two = float(np.clip(two, s1**2 / p, s2))
    return s1, two, float(np.clip(three, two**2 / s1, two**1.5))


def residual_limit(powers: tuple[float, float, float], level: float) -> float:
    """Limit of the squared length of a residual (Q).

    Parameters
    ----------
    powers : (float, float, float)
        Traces of the first three powers of the covariance of the residuals, from :func:`traces` or
        :func:`estimated_traces`.
    level : float
        Part of samples like the calibration that stays below.

    Returns
    -------
    float
        By Jackson and Mudholkar; where their power h0 is not positive, by the two-moment form of Box. Zero when there
        are no residuals.

    References
    ----------
    Jackson and Mudholkar, Technometrics 21 (1979) 341. Box, Ann. Math. Stat. 25 (1954) 290.

    Examples
    --------
    >>> round(residual_limit(traces(np.array([3.0, 2.0, 1.0])), 0.95), 6)
    16.55755
    """
    one, two, three = powers
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
