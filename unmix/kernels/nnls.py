"""Non-negative least squares for many spectra at once.

Combinatorial active sets: spectra that share a passive set are solved together from the triangular factor,
never from the normal equations, which would square the condition number.

References
----------
Lawson and Hanson, Solving Least Squares Problems (1974), chapter 23. Bro and de Jong, J. Chemometrics 11 (1997)
393. Van Benthem and Keenan, J. Chemometrics 18 (2004) 441.
"""

import numpy as np
from scipy.optimize import nnls as one_by_one

from unmix.kernels import BoolArray, FloatArray, IntArray
from unmix.kernels.linalg import unit_columns

#: gradient below this fraction of the data's length counts as zero
_FLAT = 1e-14

#: numbers of the data looked at in one go, half a megabyte
_CACHED = 2**16

#: a triangle with a diagonal ratio below this starts from the empty passive set
_NEARLY_SINGULAR = 1e-12


def nnls(A: FloatArray, Y: FloatArray) -> FloatArray:
    """Minimise ||A x - y|| subject to x >= 0 for every row y of Y.

    Parameters
    ----------
    A : ndarray, shape (channels, components), float
        The design; columns may differ in scale by many orders of magnitude.
    Y : ndarray, shape (spectra, channels), float
        Finite values.

    Returns
    -------
    ndarray, shape (spectra, components), float64
        Each row meets the Karush-Kuhn-Tucker conditions to rounding; where A has dependent columns it is one of
        several equally good answers. A row is NaN in the one case that no optimum was found within the
        iteration limit of the last resort, ``scipy.optimize.nnls``.

    Notes
    -----
    Inputs are not overwritten. Cost: one product of Y with an orthonormal basis (spectra x channels x
    components), then work on components x components triangles.
    """
    scaled, length = unit_columns(np.asarray(A, dtype=np.float64))
    q, r = np.linalg.qr(scaled)
    return nnls_reduced(r, _product(np.asarray(Y), q)) / length


def _product(y: FloatArray, q: FloatArray) -> FloatArray:
    """Y Q in blocks that stay in the cache: matrix products with so few columns otherwise copy all of Y first."""
    out = np.empty((y.shape[0], q.shape[1]))
    block = max(1, _CACHED // max(y.shape[1], 1))
    for start in range(0, y.shape[0], block):
        out[start : start + block] = y[start : start + block] @ q
    return out


def nnls_reduced(r: FloatArray, z: FloatArray) -> FloatArray:
    """Solve the reduced problems min ||R x - z||, x >= 0, for every row z.

    Parameters
    ----------
    r : ndarray, shape (rank or components, components)
        Triangular factor of a design with columns of unit length.
    z : ndarray, shape (spectra, rows of r)
        The data in the basis of the design.

    Returns
    -------
    ndarray, shape (spectra, components)
    """
    n, k = z.shape[0], r.shape[1]
    x: FloatArray = np.zeros((n, k))
    if n == 0 or k == 0:
        return x
    # rows are solved at unit size so that one tolerance serves all; a row of zeros stays one
    columns, size = unit_columns(z.T)
    unit = columns.T
    diagonal = np.abs(np.diagonal(r))
    regular = r.shape[0] == k and diagonal.min(initial=1.0) > _NEARLY_SINGULAR * diagonal.max(initial=0.0)
    passive = np.zeros((n, k), dtype=bool)
    if regular:
        x = _back_substitute(r, unit)
        passive = x > 0
        np.maximum(x, 0.0, out=x)
    waiting: IntArray = np.flatnonzero(~passive.all(axis=1) & unit.any(axis=1))
    stuck = _active_sets(r, unit, x, passive, waiting)
    for row in stuck:
        try:
            x[row] = one_by_one(r, unit[row])[0]
        except RuntimeError:
            x[row] = np.nan
    solved: FloatArray = x * size[:, None]
    return solved


def _active_sets(
    r: FloatArray, z: FloatArray, x: FloatArray, passive: BoolArray, waiting: IntArray
) -> IntArray:
    """Run the active sets of the rows in ``waiting`` to their optimum, in place; returns the rows left over."""
    k = r.shape[1]
    barred = np.zeros_like(passive)  # entries that came back non-positive when they were freed
    fresh = np.full(x.shape[0], -1)  # the entry that was freed last
    for _ in range(10 * k + 10):
        if waiting.size == 0:
            break
        _inner(r, z, x, passive, waiting, fresh, barred)
        gradient = (z[waiting] - x[waiting] @ r.T) @ r
        gradient[passive[waiting] | barred[waiting]] = -np.inf
        best = gradient.argmax(axis=1)
        open_ = gradient[np.arange(waiting.size), best] > _FLAT
        waiting = waiting[open_]
        fresh[waiting] = best[open_]
        passive[waiting, best[open_]] = True
    return waiting


def _inner(
    r: FloatArray,
    z: FloatArray,
    x: FloatArray,
    passive: BoolArray,
    rows: IntArray,
    fresh: IntArray,
    barred: BoolArray,
) -> None:
    """Move every row to the least squares point of its passive set, dropping entries that would go negative."""
    k = r.shape[1]
    active = rows
    first = True
    for _ in range(k + 1):
        if active.size == 0:
            return
        goal = _grouped(r, z[active], passive[active])
        inside = passive[active]
        if first:
            # a freed entry that does not come out positive is rounding noise: bar it until something else moves
            newest = fresh[active]
            known = newest >= 0
            bad = np.zeros(active.size, dtype=bool)
            bad[known] = goal[np.flatnonzero(known), newest[known]] <= 0
            passive[active[bad], newest[bad]] = False
            barred[active[bad], newest[bad]] = True
            good = known & ~bad
            barred[active[good]] = False
            active, goal, inside, first = active[~bad], goal[~bad], inside[~bad], False
        negative = inside & (goal <= 0)
        feasible = ~negative.any(axis=1)
        x[active[feasible]] = goal[feasible]
        active, goal, negative = active[~feasible], goal[~feasible], negative[~feasible]
        if active.size == 0:
            return
        now = x[active]
        with np.errstate(divide="ignore", invalid="ignore"):
            step = np.where(negative, now / (now - goal), np.inf)
        step = np.where(np.isnan(step), 0.0, step)
        length = np.minimum(step.min(axis=1, keepdims=True), 1.0)
        x[active] = np.maximum(now + length * (goal - now), 0.0)
        drop = negative & (step <= length)
        passive[active] &= ~drop
        x[active] = np.where(passive[active], x[active], 0.0)


def _grouped(r: FloatArray, z: FloatArray, passive: BoolArray) -> FloatArray:
    """Least squares on each row's passive columns, all rows with the same set in one solution."""
    out = np.zeros((z.shape[0], r.shape[1]))
    for rows in _alike(passive):
        columns = np.flatnonzero(passive[rows[0]])
        if columns.size:
            q, t = np.linalg.qr(r[:, columns])
            pivot = np.abs(np.diagonal(t))
            if t.shape[0] < t.shape[1] or pivot.min() < 1e-14 * pivot.max():
                out[np.ix_(rows, columns)] = np.linalg.lstsq(r[:, columns], z[rows].T, rcond=None)[0].T
            else:
                out[np.ix_(rows, columns)] = _back_substitute(t, z[rows] @ q)
    return out


def _alike(passive: BoolArray) -> list[IntArray]:
    """Rows that share a passive set, set by set."""
    if passive.shape[0] == 0:
        return []
    order = np.lexsort(np.packbits(passive, axis=1).T)
    changes = (passive[order[1:]] != passive[order[:-1]]).any(axis=1)
    return np.split(order, np.flatnonzero(changes) + 1)


def _back_substitute(r: FloatArray, z: FloatArray) -> FloatArray:
    """Solve R x = z for every row z; as accurate as the library's solver, which is slow for many small rows."""
    x = np.empty((r.shape[1], z.shape[0]))
    for i in range(r.shape[1] - 1, -1, -1):
        x[i] = (z[:, i] - r[i, i + 1 :] @ x[i + 1 :]) / r[i, i]
    return x.T
