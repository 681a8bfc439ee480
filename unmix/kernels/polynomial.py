"""Polynomials fitted to whole spectra, plainly or under the bands.

Local polynomials belong in ``localfit``.
"""

import numpy as np

from unmix.kernels import BoolArray, FloatArray, IntArray
from unmix.kernels.missing import patterns


def basis(axis: FloatArray, order: int) -> FloatArray:
    """Legendre polynomials to ``order`` on an axis scaled to -1 .. 1, shape (channels, order + 1)."""
    reach = (axis[-1] - axis[0]) or 1.0
    return np.polynomial.legendre.legvander(2.0 * (axis - axis[0]) / reach - 1.0, order)


def fitted(rows: FloatArray, axis: FloatArray, order: int, used: BoolArray) -> FloatArray:
    """Least-squares polynomials of spectra.

    Parameters
    ----------
    rows : ndarray, shape (n, m)
        NaN marks a missing channel.
    axis : ndarray, shape (m,)
    order : int
    used : ndarray of bool, shape (m,)
        The channels that are fitted.

    Returns
    -------
    ndarray, shape (n, m)
        The polynomial at every channel; NaN for a row with ``order`` used channels or fewer.
    """
    curves, _, _ = fitted_below(rows, axis, order, used, iterations=1, tolerance=0.0)
    return curves


def fitted_below(
    rows: FloatArray, axis: FloatArray, order: int, used: BoolArray, iterations: int, tolerance: float
) -> tuple[FloatArray, IntArray, BoolArray]:
    """Polynomials fitted again and again to the lower of spectrum and fit (Lieber and Mahadevan-Jansen 2003).

    Parameters
    ----------
    rows, axis, order, used
        As in ``fitted``.
    iterations : int
        Fits at most; one is the plain least-squares fit.
    tolerance : float
        Settled when no value of the fit moves by more than this part of the spectrum's range.

    Returns
    -------
    curves : ndarray, shape (n, m)
    count : ndarray of int, shape (n,)
    settled : ndarray of bool, shape (n,)
    """
    every = basis(axis, order)
    curves = np.full_like(rows, np.nan)
    count = np.zeros(rows.shape[0], dtype=np.int64)
    settled = np.zeros(rows.shape[0], dtype=np.bool_)
    for members, present in patterns(np.isfinite(rows) & used):
        if np.count_nonzero(present) <= order:
            continue
        q, r = np.linalg.qr(every[present])
        target = rows[np.ix_(members, present)]
        limit = tolerance * np.ptp(target, axis=1)
        active, last = np.arange(members.size), np.full(target.shape, np.inf)
        coefficients = np.empty((members.size, order + 1))
        for _ in range(iterations):
            coefficients[active] = target[active] @ q
            fit = coefficients[active] @ q.T
            count[members[active]] += 1
            still = np.abs(fit - last[active]).max(axis=1) > limit[active]
            settled[members[active[~still]]] = True
            last[active] = fit
            target[active] = np.minimum(target[active], fit)
            active = active[still]
            if not active.size:
                break
        curves[members] = np.linalg.solve(r, coefficients.T).T @ every.T
    return curves, count, settled
