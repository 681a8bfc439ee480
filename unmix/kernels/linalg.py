"""Dense linear algebra that several solvers and diagnostics share: scaling, thin QR, condition numbers."""

from typing import NamedTuple

import numpy as np
from numpy.polynomial import legendre
from scipy.linalg import solve_triangular

from unmix.kernels import FloatArray

#: a column counts as dependent on those before it when this fraction of its length is left
DEPENDENT = 1e-12


class Reduced(NamedTuple):
    """A design reduced once so that every spectrum is solved from a few numbers.

    The free columns come first: A P = Q R with A's columns scaled to unit length.

    Attributes
    ----------
    q : ndarray, shape (channels, terms)
        Orthonormal basis, free (baseline) terms first.
    r : ndarray, shape (terms, terms)
        Upper triangular factor of the scaled design.
    scale : ndarray, shape (terms,)
        Length of each column before scaling, in the order of ``r``.
    n_free : int
        How many columns are free in sign (they come first).
    rank : int
        Numerical rank of the scaled design.
    """

    q: FloatArray
    r: FloatArray
    scale: FloatArray
    n_free: int
    rank: int


def polynomial_terms(axis: FloatArray, order: int | None) -> FloatArray:
    """Legendre polynomials 0 to ``order`` over the axis, the baseline terms of a fit.

    Parameters
    ----------
    axis : ndarray, shape (channels,)
    order : int or None
        None gives no term.

    Returns
    -------
    ndarray, shape (channels, order + 1)
    """
    if order is None:
        return np.empty((axis.size, 0))
    low, high = float(axis.min()), float(axis.max())
    at = np.zeros_like(axis) if high == low else 2.0 * (axis - low) / (high - low) - 1.0
    terms: FloatArray = legendre.legvander(at, order)
    return terms


def unit_columns(a: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Columns scaled to unit length, and their lengths; a column of zeros keeps length 1."""
    # the largest entry is taken out first so that squares neither overflow nor vanish
    largest = np.abs(a).max(axis=0, initial=0.0)
    largest[largest == 0] = 1.0
    length: FloatArray = largest * np.linalg.norm(a / largest, axis=0)
    length[length == 0] = 1.0
    return a / length, length


def reduce_design(signal: FloatArray, free: FloatArray) -> Reduced:
    """Thin QR of the scaled design, free terms first.

    Parameters
    ----------
    signal : ndarray, shape (channels, components)
        Columns whose amounts are sought.
    free : ndarray, shape (channels, terms)
        Columns that are free in sign and of no interest, such as baseline terms.

    Returns
    -------
    Reduced
    """
    scaled, scale = unit_columns(np.hstack([free, signal]))
    q, r = np.linalg.qr(scaled)
    if scaled.shape[0] < scaled.shape[1]:
        # fewer channels than terms: keep r square so that the solvers see one shape
        pad = scaled.shape[1] - scaled.shape[0]
        r = np.vstack([r, np.zeros((pad, scaled.shape[1]))])
        q = np.hstack([q, np.zeros((scaled.shape[0], pad))])
    singular = np.linalg.svd(r, compute_uv=False)
    rank = int(np.count_nonzero(singular > DEPENDENT * singular.max(initial=0.0)))
    return Reduced(q, r, scale, free.shape[1], rank)


def inverse_factor(reduced: Reduced) -> FloatArray:
    """R^-1 with the column scale undone: (A'A)^-1 = F F', rows in the order of ``r``.

    A direction that the design does not determine gets infinite entries in the rows that it involves.

    Returns
    -------
    ndarray, shape (terms, terms)
    """
    m = reduced.r.shape[0]
    if reduced.rank == m:
        factor: FloatArray = solve_triangular(reduced.r, np.eye(m))
    else:
        u, s, vt = np.linalg.svd(reduced.r)
        keep = s > DEPENDENT * s.max(initial=0.0)
        factor = (vt[keep].T / s[keep]) @ u[:, keep].T
        lost = np.abs(vt[~keep]).max(axis=0) > np.sqrt(DEPENDENT)
        factor[lost] = np.inf
    return factor / reduced.scale[:, None]


class Collinearity(NamedTuple):
    """Condition indices and variance-decomposition proportions of a scaled design.

    Attributes
    ----------
    indices : ndarray, shape (columns,)
        Condition indices, increasing.
    proportion : ndarray, shape (columns, columns)
        Share of the variance of each column (second axis) that belongs to each index (first axis).
    direction : ndarray, shape (columns, columns)
        Right singular vectors as rows, in the order of ``indices``.
    """

    indices: FloatArray
    proportion: FloatArray
    direction: FloatArray


def collinearity(a: FloatArray) -> Collinearity:
    """Condition indices and variance proportions of Belsley, Kuh and Welsch (1980), chapter 3.

    Parameters
    ----------
    a : ndarray, shape (rows, columns)
        Scaled here to unit column length, not centred.
    """
    scaled, _ = unit_columns(a)
    _, s, vt = np.linalg.svd(scaled, full_matrices=False)
    if s.size < scaled.shape[1]:
        full = np.linalg.svd(scaled, full_matrices=True)
        s, vt = np.r_[full[1], np.zeros(scaled.shape[1] - s.size)], full[2]
    # an exact dependence must not divide by zero; its share then swallows what it should
    safe = np.maximum(s, np.finfo(float).eps * s.max(initial=1.0))
    share = (vt / safe[:, None]) ** 2
    return Collinearity(safe.max(initial=1.0) / safe, share / share.sum(axis=0), vt)
