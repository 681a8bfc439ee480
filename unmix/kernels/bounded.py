"""Least squares between bounds, from the unbounded answer and a factor of its covariance.

Legend: x (terms) the unbounded answer with covariance F F'; F (terms x directions); c = x + F u, with u as short as
possible, is the answer between the bounds, because ||u|| is the distance in the metric of the fit.

References
----------
Lawson and Hanson, Solving Least Squares Problems (1974), chapter 23, problem LDP (least distance programming).
"""

import numpy as np
from scipy.optimize import nnls

from unmix.kernels import FloatArray

#: a bound that is missed by less than this share of the largest miss counts as kept
_KEPT = 1e-9


def shortest(factor: FloatArray, low: FloatArray, high: FloatArray) -> tuple[FloatArray, bool]:
    """The shortest u with low <= F u <= high.

    Parameters
    ----------
    factor : ndarray, shape (terms, directions)
        Finite.
    low, high : ndarray, shape (terms,)
        Infinite where there is no bound; low <= high.

    Returns
    -------
    u : ndarray, shape (directions,)
        Zero where no u keeps all bounds.
    feasible : bool

    Notes
    -----
    Cost: one non-negative least squares problem of (directions + 1) x (finite bounds). Inputs are not overwritten.
    """
    size = factor.shape[1]
    below, above = np.isfinite(low), np.isfinite(high)
    g = np.vstack([factor[below], -factor[above]])
    h = np.concatenate([low[below], -high[above]])
    worst = float(h.max(initial=0.0))
    if worst <= 0:
        return np.zeros(size), True
    # rows of unit length and a largest miss of one, so that one tolerance serves all
    length = np.linalg.norm(g, axis=1)
    dead = length == 0
    if (h[dead] > 0).any():
        return np.zeros(size), False
    g, h = g[~dead] / length[~dead, None], h[~dead] / length[~dead]
    unit = float(h.max())
    h = h / unit
    end = np.zeros(size + 1)
    end[-1] = 1.0
    try:
        dual, distance = nnls(np.vstack([g.T, h]), end)
    except RuntimeError:
        return np.zeros(size), False
    rest = np.vstack([g.T, h]) @ dual - end
    if distance < _KEPT or rest[-1] == 0:
        return np.zeros(size), False
    u = -rest[:-1] / rest[-1]
    # the bounds that hold as equalities give the answer to rounding
    active = dual > 0
    exact = np.linalg.lstsq(g[active], h[active], rcond=1e-12)[0]
    if (g @ exact >= h - _KEPT).all():
        u = exact
    if not (g @ u >= h - 1e-6).all():
        return np.zeros(size), False
    found: FloatArray = u * unit
    return found, True


def between(
    terms: FloatArray, factor: FloatArray, low: FloatArray, high: FloatArray
) -> tuple[FloatArray, FloatArray, bool]:
    """Least squares answer between bounds.

    Parameters
    ----------
    terms : ndarray, shape (terms,)
        Unbounded answer.
    factor : ndarray, shape (terms, directions)
        F with the covariance F F' of the terms, in any unit.
    low, high : ndarray, shape (terms,)

    Returns
    -------
    terms : ndarray, shape (terms,)
        Within the bounds to the last digit; the unbounded answer, cut, where the bounds exclude each other.
    u : ndarray, shape (directions,)
        What moved them: terms + F u.
    feasible : bool
    """
    u, feasible = shortest(factor, low - terms, high - terms)
    moved: FloatArray = np.clip(terms + factor @ u, low, high)
    return moved, u, feasible
