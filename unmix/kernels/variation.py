"""Pure spectra learnt from spectra of known amounts, together with how measurements vary from sample to sample.

Legend: A (spectra x channels) data; C (spectra x components) amounts; S (components x channels) pure spectra by
least squares; R = A - C S residuals; the covariance between channels is L'L + f^2 I with L = R / sqrt(n - k), so
every residual counts, and the floor f says how little variation in a direction is still believed.

Classical least squares with the residuals of the calibration as its metric: Martens and Naes, Multivariate
Calibration (1989), section 3.3 (generalised least squares); the floor shrinks the covariance as Hoerl and Kennard
(Technometrics 12 (1970) 55) shrink a regression.
"""

from typing import NamedTuple

import numpy as np

from unmix.kernels import BoolArray, FloatArray, IntArray
from unmix.kernels.nnls import nnls


class Learnt(NamedTuple):
    """Pure spectra and between-sample variation.

    Attributes
    ----------
    pure : ndarray, shape (components, channels)
    modes : ndarray, shape (modes, channels)
        Directions of variation, each of the length of its standard deviation.
    floor : float
        Standard deviation of a channel beside the modes.
    """

    pure: FloatArray
    modes: FloatArray
    floor: float


class Metric(NamedTuple):
    """The symmetric root of the inverse covariance, times the floor, in low-rank form: W = I - V diag(g) V'.

    Attributes
    ----------
    directions : ndarray, shape (modes, channels)
        Orthonormal rows V.
    shrink : ndarray, shape (modes,)
        g.
    hidden : ndarray, shape (modes,)
        Share of a direction that counts as variation: W^2 = I - V diag(hidden) V'.
    """

    directions: FloatArray
    shrink: FloatArray
    hidden: FloatArray


def learn(a: FloatArray, c: FloatArray, floor: float) -> Learnt:
    """Least squares pure spectra, and the residuals as modes of variation.

    Parameters
    ----------
    a : ndarray, shape (spectra, channels)
    c : ndarray, shape (spectra, components)
        Of full column rank, more rows than columns.
    floor : float
    """
    pure = np.linalg.lstsq(c, a, rcond=None)[0]
    n, k = c.shape
    _, s, vt = np.linalg.svd(a - c @ pure, full_matrices=False)
    keep = n - k
    return Learnt(pure, vt[:keep] * (s[:keep, None] / np.sqrt(keep)), floor)


def metric(learnt: Learnt, used: BoolArray) -> Metric:
    """The metric on the used channels."""
    _, s, vt = np.linalg.svd(learnt.modes[:, used], full_matrices=False)
    ratio = learnt.floor**2 / (s**2 + learnt.floor**2)
    return Metric(vt, 1.0 - np.sqrt(ratio), 1.0 - ratio)


def apply(m: Metric, x: FloatArray) -> FloatArray:
    """Rows in the metric."""
    weighed: FloatArray = x - ((x @ m.directions.T) * m.shrink) @ m.directions
    return weighed


def predict(learnt: Learnt, a: FloatArray) -> FloatArray:
    """Non-negative amounts of complete spectra, (spectra, components)."""
    m = metric(learnt, np.ones(a.shape[1], dtype=bool))
    return nnls(apply(m, learnt.pure).T, apply(m, a))


def leave_out(a: FloatArray, c: FloatArray, floor: float, groups: list[IntArray]) -> FloatArray:
    """Amounts of every standard, found without it and the others of its group.

    Parameters
    ----------
    a, c : ndarray
        As for :func:`learn`.
    floor : float
    groups : list of ndarray of int
        Rows to leave out together; every row in one group.

    Returns
    -------
    ndarray, shape (spectra, components)
    """
    found = np.empty_like(c, dtype=float)
    for rows in groups:
        rest = np.setdiff1d(np.arange(a.shape[0]), rows)
        found[rows] = predict(learn(a[rest], c[rest], floor), a[rows])
    return found


def like_groups(c: FloatArray) -> list[IntArray]:
    """Standards of like composition (the same components present), as long as the others still determine every one.

    A group without which a component would be left with fewer than two standards is taken apart into single rows.
    """
    present, which = np.unique(c > 0, axis=0, return_inverse=True)
    groups: list[IntArray] = []
    for g in range(present.shape[0]):
        rows = np.flatnonzero(which.reshape(-1) == g)
        rest = np.delete(c, rows, axis=0)
        enough = rest.shape[0] > c.shape[1] + 1 and (np.count_nonzero(rest, axis=0) >= 2).all()
        if enough and np.linalg.matrix_rank(rest) == c.shape[1]:
            groups.append(rows)
        else:
            groups.extend(rows[:, None])
    return groups


def in_own_space(a: FloatArray) -> FloatArray:
    """Spectra as coordinates in the space that they span, where learning gives the same amounts at less cost.

    Pure spectra, modes and left-out spectra all lie in that space, and distances are kept.

    Parameters
    ----------
    a : ndarray, shape (spectra, channels)

    Returns
    -------
    ndarray, shape (spectra, min(spectra, channels))
    """
    u, s, _ = np.linalg.svd(a, full_matrices=False)
    short: FloatArray = u * s
    return short


def choose_floor(
    a: FloatArray, c: FloatArray, noise: float, n_channels: int, groups: list[IntArray]
) -> tuple[float, FloatArray]:
    """The floor with the least error when groups of like composition are left out.

    Parameters
    ----------
    a, c : ndarray
        As for :func:`learn`, or in their own space.
    noise : float
        Noise of a channel within one spectrum, the smallest floor tried; each next one is twice as large.
    n_channels : int
        Before the spectra were put in their own space.
    groups : list of ndarray of int

    Returns
    -------
    floor : float
    found : ndarray, shape (spectra, components)
        Amounts at that floor, each found without its group.
    """
    k = c.shape[1]
    pure = np.linalg.lstsq(c, a, rcond=None)[0]
    spread = float(np.sqrt(np.sum((a - c @ pure) ** 2) / max((a.shape[0] - k) * n_channels, 1)))
    tries = noise * 2.0 ** np.arange(max(int(np.ceil(np.log2(max(8.0 * spread / noise, 2.0)))), 1) + 1)
    best = (np.inf, tries[0], np.empty_like(c, dtype=float))
    for floor in tries:
        found = leave_out(a, c, float(floor), groups)
        # the geometric mean over components weighs each by its own error, whatever its unit
        error = float(np.mean(np.log(np.sqrt(np.mean((found - c) ** 2, axis=0)) + np.finfo(float).tiny)))
        if error < best[0]:
            best = (error, floor, found)
    return float(best[1]), best[2]
