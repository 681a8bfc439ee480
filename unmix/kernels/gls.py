"""Generalised least squares for many spectra on one pattern of channels, with the noise of each found on the way.

Legend: Y (spectra x channels) data; A = [B, S] (channels x terms) with the free baseline columns B first; A D^-1
= Q R with D the column lengths; W the whitening filter of one spectrum; L L' = (WQ)'(WQ). Then the terms are
x = D^-1 R^-1 L^-T (L^-1 (WQ)' W y), and their covariance is sigma^2 F F' with F = D^-1 R^-1 L^-T.
"""

from typing import NamedTuple

import numpy as np
from scipy.linalg import solve_triangular

from unmix.kernels import BoolArray, FloatArray, IntArray
from unmix.kernels.linalg import Reduced, inverse_factor, reduce_design
from unmix.kernels.nnls import nnls_reduced
from unmix.kernels.noise import (
    Autoregression,
    autoregression,
    block_power,
    correlation_length,
    interpolation_stride,
    rows_like,
    whiten,
)

#: spectra whitened side by side; bounds the memory at this times terms times channels
CHUNK = 64


class GlsFit(NamedTuple):
    """Fit of a chunk of spectra. Terms are ordered as the columns of A, baseline first.

    Attributes
    ----------
    terms : ndarray, shape (spectra, terms)
        Least squares without constraint.
    solution : ndarray, shape (spectra, terms)
        Least squares with the components (not the baseline) non-negative; equal to ``terms`` where not asked.
    factor : ndarray, shape (spectra, terms, terms) or (1, terms, terms)
        F of the module's legend; rows of a term that the design does not determine are infinite.
    basis : ndarray, shape (spectra, terms, channels) or (1, terms, channels)
        Orthonormal basis of the whitened design.
    residual : ndarray, shape (spectra, channels)
        Whitened residual of ``terms``.
    sigma : ndarray, shape (spectra,)
        Standard deviation of the whitened residual; NaN without degrees of freedom.
    filter : ndarray, shape (spectra, order + 1)
        Prediction error filter of each spectrum.
    length : ndarray, shape (spectra,)
        Correlation length in channels.
    """

    terms: FloatArray
    solution: FloatArray
    factor: FloatArray
    basis: FloatArray
    residual: FloatArray
    sigma: FloatArray
    filter: FloatArray
    length: FloatArray


class Design(NamedTuple):
    """What all spectra of one pattern of channels share."""

    a: FloatArray
    weight: FloatArray
    reduced: Reduced
    factor: FloatArray
    nonnegative: bool

    @property
    def freedom(self) -> int:
        """Channels less fitted terms."""
        return int(self.used.sum()) - self.reduced.rank

    @property
    def used(self) -> BoolArray:
        """Channels that count."""
        return np.asarray(self.weight != 0)


def make_design(signal: FloatArray, free: FloatArray, weight: FloatArray, *, nonnegative: bool) -> Design:
    """Reduce the weighed design of one pattern of channels.

    Parameters
    ----------
    signal : ndarray, shape (channels, components)
    free : ndarray, shape (channels, baseline terms)
    weight : ndarray, shape (channels,)
        What each channel is multiplied by; zero for those that do not count.
    nonnegative : bool
        Whether the components are bounded at zero.
    """
    a = np.hstack([free, signal]) * weight[:, None]
    reduced = reduce_design(a[:, free.shape[1] :], a[:, : free.shape[1]])
    return Design(a, weight, reduced, inverse_factor(reduced), nonnegative)


def independent_stride(y: FloatArray, design: Design) -> IntArray:
    """For each spectrum the spacing of channels that carry independent information (1, 2, 4 or 8).

    Parameters
    ----------
    y : ndarray, shape (spectra, channels)
        Weighed as the design; zero on unused channels.
    design : Design
    """
    power = block_power(_ordinary_residual(y, design), design.used)
    return np.ones(y.shape[0], dtype=int) if power is None else interpolation_stride(power)


def _ordinary_residual(y: FloatArray, design: Design) -> FloatArray:
    q = design.reduced.q
    rest: FloatArray = y - (y @ q) @ q.T
    return rest


def fit(
    y: FloatArray, design: Design, *, correlated: bool = True, known: Autoregression | None = None
) -> list[tuple[IntArray, GlsFit]]:
    """Solve a chunk of spectra in the metric of each one's own noise.

    Parameters
    ----------
    y : ndarray, shape (spectra, channels)
        Weighed as the design; zero on unused channels.
    design : Design
    correlated : bool
        Whether to look for correlation between neighbouring channels.
    known : Autoregression, optional
        The correlation of the noise, of one row, where it is known; nothing is looked for then.

    Returns
    -------
    list of (rows, GlsFit)
        Groups of spectra with the same order of correlation; together they hold every row once.
    """
    rest = _ordinary_residual(y, design)
    if known is not None and known.order[0] > 0:
        return [(np.arange(y.shape[0]), _coloured(y, design, rows_like(known, y.shape[0])))]
    power = block_power(rest, design.used) if correlated and known is None else None
    if power is None:
        return [(np.arange(y.shape[0]), _white(y, rest, design))]
    model = autoregression(power, np.full(y.shape[0], int(design.used.sum())))
    return [
        (
            rows := np.flatnonzero(model.order == order),
            _white(y[rows], rest[rows], design)
            if order == 0
            else _coloured(y[rows], design, Autoregression(model.order[rows], model.predictor[rows], model.gain[rows])),
        )
        for order in np.unique(model.order)
    ]


def _white(y: FloatArray, rest: FloatArray, design: Design) -> GlsFit:
    reduced, n_free = design.reduced, design.reduced.n_free
    z = y @ reduced.q
    terms = _solve(reduced, z)
    solution = terms
    if design.nonnegative:
        solution = terms.copy()
        wrong = np.flatnonzero((terms[:, n_free:] < 0).any(axis=1) | (reduced.rank < reduced.r.shape[0]))
        solution[wrong] = _bounded(reduced.r, z[wrong], n_free) / reduced.scale
    n = y.shape[0]
    return GlsFit(
        terms, solution, design.factor[None], reduced.q.T[None], rest,
        _spread(rest, design.freedom), np.ones((n, 1)), np.ones(n),
    )  # fmt: skip


def _coloured(y: FloatArray, design: Design, model: Autoregression) -> GlsFit:
    reduced, n_free = design.reduced, design.reduced.n_free
    n, m = y.shape[0], reduced.r.shape[0]
    data = whiten(y, model, design.used)
    columns = whiten(reduced.q.T[None], model, design.used)
    gram = columns @ columns.transpose(0, 2, 1)
    # Q is orthonormal, so the Gram matrix is as well conditioned as the noise spectrum is even
    lower = np.linalg.cholesky(gram + np.eye(m) * (1e-13 * np.trace(gram, axis1=1, axis2=2) / m)[:, None, None])
    inverse = np.linalg.inv(lower)
    basis = inverse @ columns
    z = (basis @ data[:, :, None])[:, :, 0]
    residual = data - (z[:, None, :] @ basis)[:, 0]
    factor = design.factor @ inverse.transpose(0, 2, 1)
    triangle = lower.transpose(0, 2, 1) @ reduced.r
    in_q = (inverse.transpose(0, 2, 1) @ z[:, :, None])[:, :, 0]
    terms = _solve(reduced, in_q)
    solution = terms
    if design.nonnegative:
        solution = terms.copy()
        for i in np.flatnonzero((terms[:, n_free:] < 0).any(axis=1) | (reduced.rank < m)):
            solution[i] = _bounded(triangle[i], z[i : i + 1], n_free)[0] / reduced.scale
    order = int(model.order[0])
    error_filter = np.concatenate([np.ones((n, 1)), -model.predictor[:, order, :order]], axis=1)
    return GlsFit(terms, solution, factor, basis, residual, _spread(residual, design.freedom),
                  error_filter, correlation_length(model))  # fmt: skip


def _solve(reduced: Reduced, z: FloatArray) -> FloatArray:
    x: FloatArray
    if reduced.rank == reduced.r.shape[0]:
        x = solve_triangular(reduced.r, z.T).T
    else:
        x = np.linalg.lstsq(reduced.r, z.T, rcond=1e-12)[0].T
    terms: FloatArray = x / reduced.scale
    return terms


def _bounded(r: FloatArray, z: FloatArray, n_free: int) -> FloatArray:
    """Non-negative components, free baseline: the baseline is eliminated exactly by the triangle."""
    x = np.zeros((z.shape[0], r.shape[1]))
    x[:, n_free:] = nnls_reduced(r[n_free:, n_free:], z[:, n_free:])
    if n_free:
        right = z[:, :n_free] - x[:, n_free:] @ r[:n_free, n_free:].T
        x[:, :n_free] = np.linalg.lstsq(r[:n_free, :n_free], right.T, rcond=1e-12)[0].T
    return x


def _spread(residual: FloatArray, freedom: int) -> FloatArray:
    if freedom <= 0:
        return np.full(residual.shape[0], np.nan)
    spread: FloatArray = np.sqrt(np.einsum("ij,ij->i", residual, residual) / freedom)
    return spread
