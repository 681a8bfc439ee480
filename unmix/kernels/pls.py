"""Partial least squares for many training sets at once, every number of latent variables in one pass.

Improved kernel algorithm: only the cross-product X'Y is deflated, X is never touched. Training sets that are parts of
one table differ by their row weights alone, so that each pass over X serves all of them as one matrix product.

Legend: n samples, p channels, m properties, A latent variables, G training sets; X (n, p) and Y (n, m) centred; w, r
(p) weights of the deflated and of the original channels; t = X r (n) scores; p (p) and q (m) loadings; S = X'Y.

References
----------
Dayal and MacGregor, J. Chemometrics 11 (1997) 73. Hoeskuldsson, J. Chemometrics 2 (1988) 211, for several properties.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from unmix.kernels import FloatArray, IntArray

#: a cross-product below this many roundings of its factors' lengths is empty
_EMPTY = 64.0

#: numbers that the working arrays of one batch of training sets may hold
_ROOM = 8_000_000


@dataclass(frozen=True)
class PLSFit:
    """A model for every number of latent variables up to A.

    Attributes
    ----------
    x_mean, y_mean : ndarray, shapes (channels,), (properties,)
    rotations : ndarray, shape (channels, A)
        r: scores are (x - x_mean) @ rotations.
    loadings : ndarray, shape (channels, A)
    y_loadings : ndarray, shape (properties, A)
    weights : ndarray, shape (channels, A)
        w, of unit length.
    scores : ndarray, shape (samples, A)
        Of all rows given, those of weight zero included.
    score_squares : ndarray, shape (A,)
        Weighted sum of squares of the scores.
    rank : int
        Latent variables found; those beyond are zero, and predictions do not change any more.
    """

    x_mean: FloatArray
    y_mean: FloatArray
    rotations: FloatArray
    loadings: FloatArray
    y_loadings: FloatArray
    weights: FloatArray
    scores: FloatArray
    score_squares: FloatArray
    rank: int

    def coefficients(self) -> FloatArray:
        """Regression coefficients with 1 to A latent variables, shape (A, channels, properties)."""
        terms = self.rotations.T[:, :, None] * self.y_loadings.T[:, None, :]
        summed: FloatArray = np.cumsum(terms, axis=0)
        return summed


def fit(X: FloatArray, Y: FloatArray, n_components: int, weights: FloatArray | None = None) -> PLSFit:
    """Fit all numbers of latent variables up to ``n_components``.

    Parameters
    ----------
    X : ndarray, shape (samples, channels), float
    Y : ndarray, shape (samples, properties), float
    n_components : int
        At least 1; more than the rank allows is no error, see ``rank``.
    weights : ndarray, shape (samples,), optional
        Weight of each sample, zero or above, not all zero; equal when None.

    Returns
    -------
    PLSFit

    Notes
    -----
    Inputs are finite and not overwritten. Cost: two products with X for every latent variable.
    """
    rows = np.ones((1, X.shape[0])) if weights is None else np.asarray(weights, dtype=np.float64)[None]
    x0, y0 = X.mean(axis=0), Y.mean(axis=0)
    passes = _passes(X - x0, (Y - y0)[None], rows, n_components, keep=True)
    return PLSFit(
        x_mean=x0 + passes.x_mean[0],
        y_mean=y0 + passes.y_mean[0],
        rotations=np.ascontiguousarray(passes.r[0].T),
        loadings=np.ascontiguousarray(passes.p[0].T),
        y_loadings=np.ascontiguousarray(passes.q[0].T),
        weights=np.ascontiguousarray(passes.w[0].T),
        scores=np.ascontiguousarray(passes.t[0].T),
        score_squares=passes.tt[0].copy(),
        rank=int(passes.rank[0]),
    )


def cross_validate(
    X: FloatArray,
    Y: FloatArray,
    n_components: int,
    folds: Sequence[tuple[IntArray, IntArray]],
    weights: FloatArray | None = None,
) -> FloatArray:
    """Predict the test samples of every fold from its training samples, with 1 to ``n_components`` latent variables.

    Parameters
    ----------
    X : ndarray, shape (samples, channels), float
    Y : ndarray, shape (samples, properties), float
    n_components : int
    folds : sequence of (train, test)
        Index arrays; a sample that is tested in several folds gets the mean of its predictions.
    weights : ndarray, shape (samples,), optional
        Weight of each sample in training.

    Returns
    -------
    ndarray, shape (n_components, samples, properties), float64
        NaN where a sample is in no test set.

    Notes
    -----
    Inputs are finite and not overwritten. Where channels outnumber samples and the work pays, X is first replaced by
    the triangle of its LQ factors, which has the same inner products. The cross-product X'X, whose downdating would
    lose half of the digits on spectra, is never formed, so the answer is that of separate fits to rounding. Cost: two
    products of X with a matrix of as many columns as there are folds, for every latent variable.

    Examples
    --------
    >>> x = np.array([[0.0, 1.0], [1.0, 1.5], [2.0, 1.0], [3.0, 1.5]])
    >>> parts = [(np.array([0, 1, 3]), np.array([2])), (np.array([1, 2, 3]), np.array([0]))]
    >>> cross_validate(x, 2 * x[:, :1], 2, parts)[1].ravel().round(6)
    array([ 0., nan,  4., nan])
    """
    n = X.shape[0]
    rows = _training(folds, n, weights)
    y0 = Y.mean(axis=0)
    x = _reduced(X - X.mean(axis=0), len(folds) * n_components)
    y = (Y - y0)[None]
    total, count = np.zeros((n_components, n, Y.shape[1])), np.zeros(n)
    for part in _batches(len(folds), x.shape, n_components):
        passes = _passes(x, y, rows[part], n_components, keep=False)
        for g, (_, test) in enumerate(folds[part]):
            total[:, test] += _predicted(passes, g, test)
            count[test] += 1
    with np.errstate(invalid="ignore"):
        found: FloatArray = y0 + total / count[:, None]
    return found


def permuted_errors(
    X: FloatArray,
    Y: FloatArray,
    n_components: int,
    folds: Sequence[tuple[IntArray, IntArray]],
    orders: IntArray,
) -> FloatArray:
    """Mean squared error of cross-validation after the rows of Y were put into other orders.

    Parameters
    ----------
    X : ndarray, shape (samples, channels), float
    Y : ndarray, shape (samples, properties), float
    n_components : int
    folds : sequence of (train, test)
    orders : ndarray of int, shape (orders, samples)
        Row i of X goes with row ``orders[k, i]`` of Y.

    Returns
    -------
    ndarray, shape (orders, n_components)
        Mean over test samples and properties, in the units of Y squared.
    """
    n, m = Y.shape
    x, y = _reduced(X - X.mean(axis=0), len(folds) * n_components * len(orders)), Y - Y.mean(axis=0)
    rows = _training(folds, n)
    tested = sum(len(test) for _, test in folds) * m
    problems = [(k, g) for k in range(len(orders)) for g in range(len(folds))]
    found = np.zeros((len(orders), n_components))
    for part in _batches(len(problems), x.shape, n_components):
        these = problems[part]
        shuffled = y[orders[[k for k, _ in these]]]
        passes = _passes(x, shuffled, rows[[g for _, g in these]], n_components, keep=False)
        for j, (k, g) in enumerate(these):
            test = folds[g][1]
            wrong = _predicted(passes, j, test) - shuffled[j, test]
            found[k] += np.sum(wrong**2, axis=(1, 2)) / tested
    return found


@dataclass
class _Passes:
    """Arrays of a batch of training sets: training set first, then latent variable.

    Shapes: x_mean (G, p), y_mean (G, m), w, r, p (G, A, p), t (G, A, n), q (G, A, m), tt (G, A), rank (G,). Without
    ``keep`` the weights w are not stored.
    """

    x_mean: FloatArray
    y_mean: FloatArray
    w: FloatArray
    r: FloatArray
    p: FloatArray
    t: FloatArray
    q: FloatArray
    tt: FloatArray
    rank: NDArray[np.int64]


def _passes(x: FloatArray, y: FloatArray, rows: FloatArray, A: int, *, keep: bool) -> _Passes:
    """Run the algorithm for all training sets side by side.

    x is (n, p) and y (1 or G, n, m), both centred on all samples so that the means of training sets are small; rows
    (G, n) holds the weight of each sample in each training set.
    """
    (n, p), G, m = x.shape, rows.shape[0], y.shape[2]
    share = rows / rows.sum(axis=1, keepdims=True)
    x_mean, y_mean = share @ x, np.einsum("gn,gnm->gm", share, np.broadcast_to(y, (G, n, m)))
    centred = np.swapaxes(y - y_mean[:, None], 1, 2)
    weighted = rows[:, None] * centred
    # X needs no centring here, since the weighted Y of each training set sums to zero
    s = (weighted.reshape(G * m, n) @ x).reshape(G, m, p)
    squares = rows @ np.einsum("np,np->n", x, x)
    empty = _EMPTY * np.finfo(float).eps * np.sqrt(squares * np.einsum("gmn,gmn->g", weighted, centred))
    out = _Passes(x_mean, y_mean, np.zeros((G, A if keep else 0, p)), np.zeros((G, A, p)), np.zeros((G, A, p)),
                  np.zeros((G, A, n)), np.zeros((G, A, m)), np.zeros((G, A)), np.zeros(G, dtype=np.int64))  # fmt: skip
    alive = np.ones(G, dtype=bool)
    for a in range(A):
        w = _leading(s)
        length = np.linalg.norm(w, axis=1)
        alive &= length > empty
        if not alive.any():
            break
        w = np.where(alive, 1.0 / np.where(alive, length, 1.0), 0.0)[:, None] * w
        along = out.p[:, :a] @ w[:, :, None]
        r = w - (np.swapaxes(along, 1, 2) @ out.r[:, :a])[:, 0]
        t = r @ x.T - np.einsum("gp,gp->g", x_mean, r)[:, None]
        t_weighted = t * rows
        tt = np.einsum("gn,gn->g", t, t_weighted)
        alive &= tt > 0
        one_over = np.divide(1.0, tt, out=np.zeros(G), where=alive)[:, None]
        loading = (t_weighted @ x) * one_over
        q = np.einsum("gp,gmp->gm", r, s) * one_over
        s -= (q * tt[:, None])[:, :, None] * loading[:, None]
        on = alive[:, None]
        out.r[:, a], out.p[:, a], out.t[:, a], out.q[:, a], out.tt[:, a] = r * on, loading, t * on, q, tt * alive
        if keep:
            out.w[:, a] = w
        out.rank += alive
    return out


def _leading(s: FloatArray) -> FloatArray:
    """The weights of the next latent variable: S itself, or S times its leading right singular vector."""
    if s.shape[1] == 1:
        first: FloatArray = s[:, 0]
        return first
    _, vectors = np.linalg.eigh(s @ np.swapaxes(s, 1, 2))
    v = vectors[:, :, -1]
    # the sign is free; the largest entry is made positive so that it does not depend on the library
    v = v * np.sign(np.take_along_axis(v, np.abs(v).argmax(axis=1)[:, None], axis=1))
    leading: FloatArray = np.einsum("gmp,gm->gp", s, v)
    return leading


def _predicted(passes: _Passes, g: int, test: IntArray) -> FloatArray:
    """Test samples from training set g, shape (A, test samples, properties), as far from the mean of all samples."""
    each = passes.t[g][:, test, None] * passes.q[g][:, None, :]
    found: FloatArray = np.cumsum(each, axis=0) + passes.y_mean[g]
    return found


def _training(folds: Sequence[tuple[IntArray, IntArray]], n: int, weights: FloatArray | None = None) -> FloatArray:
    """Weight of each sample in the training set of each fold, shape (folds, samples)."""
    rows = np.zeros((len(folds), n))
    for g, (train, _) in enumerate(folds):
        rows[g, train] = 1.0 if weights is None else weights[train]
    return rows


def _reduced(x: FloatArray, passes: int) -> FloatArray:
    """Rows with the same inner products in fewer columns, where that costs less than it saves."""
    n, p = x.shape
    if p <= n or n * (p - n / 3) > passes * (p - n):
        return x
    triangle: FloatArray = np.asarray(np.linalg.qr(x.T, mode="r"))
    return np.ascontiguousarray(triangle.T)


def _batches(count: int, shape: tuple[int, ...], A: int) -> list[slice]:
    """Slices of training sets whose working arrays stay within bounds."""
    size = max(1, _ROOM // (A * (shape[0] + 2 * shape[1])))
    return [slice(start, start + size) for start in range(0, count, size)]
