"""Shift and stretch of spectra against one reference, by least squares.

y (n, m) spectra   v(x) = x - shift - stretch (x - centre) / half   centre, half: middle and half length of the axis
model y = a + b reference(v), the amplitudes a and b eliminated (variable projection)
"""

import numpy as np
from scipy.interpolate import CubicSpline

from unmix.kernels import BoolArray, FloatArray

_ITERATIONS = 40
#: a step below this part of a channel is the last
_SETTLED = 1e-4
_BLOCK = 256


def fit_moves(
    y: FloatArray, axis: FloatArray, reference: FloatArray, max_shift: float, max_stretch: float
) -> tuple[FloatArray, BoolArray]:
    """Shift and stretch that carry the reference onto each spectrum.

    Parameters
    ----------
    y : ndarray, shape (n, m)
        NaN marks a missing channel.
    axis, reference : ndarray, shape (m,)
    max_shift, max_stretch : float
        Bounds, in units of the axis; ``max_stretch`` is the move of the ends against the middle, 0 for none.

    Returns
    -------
    moves : ndarray, shape (n, 2)
        Shift and stretch; positive when the spectrum lies at higher positions than the reference. NaN for a
        spectrum without a band.
    settled : ndarray of bool, shape (n,)
        Whether the last step was below a ten-thousandth of a channel.

    Notes
    -----
    Start: the best of a grid of shifts, one channel apart. Then Gauss-Newton steps with halving. Each spectrum is
    treated as if it were alone.
    """
    spline = CubicSpline(axis, reference)
    moves = np.empty((y.shape[0], 2))
    settled = np.zeros(y.shape[0], dtype=np.bool_)
    for low in range(0, y.shape[0], _BLOCK):
        part = slice(low, low + _BLOCK)
        moves[part], settled[part] = _fit_block(y[part], axis, spline, max_shift, max_stretch)
    return moves, settled


def _fit_block(
    y: FloatArray, axis: FloatArray, spline: CubicSpline, max_shift: float, max_stretch: float
) -> tuple[FloatArray, BoolArray]:
    spacing = (axis[-1] - axis[0]) / (axis.size - 1)
    moves = np.zeros((y.shape[0], 2))
    moves[:, 0] = _best_on_grid(y, axis, spline, max_shift, spacing)
    bounds = np.array([max_shift, max_stretch])
    cost, step, flat = _step(y, axis, spline, moves, bounds)
    damping = np.ones((y.shape[0], 1))
    settled = np.zeros(y.shape[0], dtype=np.bool_)
    for _ in range(_ITERATIONS):
        tried = np.clip(moves + damping * step, -bounds, bounds)
        new_cost, new_step, _ = _step(y, axis, spline, tried, bounds)
        better = new_cost <= cost
        small = (np.abs(tried - moves) < _SETTLED * spacing).all(axis=1)
        take = better & ~settled
        settled |= small
        moves[take], cost[take], step[take] = tried[take], new_cost[take], new_step[take]
        damping = np.where(take[:, None], 1.0, damping / 2)
        if settled.all():
            break
    moves[flat] = np.nan
    return moves, settled


def _best_on_grid(y: FloatArray, axis: FloatArray, spline: CubicSpline, max_shift: float, spacing: float) -> FloatArray:
    count = int(np.clip(np.ceil(max_shift / spacing), 0, 200))
    grid = np.linspace(-max_shift, max_shift, 2 * count + 1) if count else np.zeros(1)
    costs = np.stack([_cost(*_projected(y, _model(axis, spline, np.array([[shift, 0.0]]))[0])) for shift in grid])
    best: FloatArray = grid[costs.argmin(axis=0)]
    return best


def _model(axis: FloatArray, spline: CubicSpline, moves: FloatArray) -> tuple[FloatArray, FloatArray]:
    """The reference and its slope at the moved positions, held at the ends, both (n, m)."""
    lever = 2.0 * (axis - axis[0]) / (axis[-1] - axis[0]) - 1.0
    at = np.clip(axis - moves[:, :1] - moves[:, 1:] * lever, axis[0], axis[-1])
    return spline(at), spline(at, 1)


def _projected(y: FloatArray, model: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Spectra and model centred over the channels that are present; zero elsewhere."""
    present = np.isfinite(y)
    count = np.maximum(present.sum(axis=1, keepdims=True), 1)
    model = np.where(present, model, 0.0)
    filled = np.where(present, y, 0.0)
    centred = np.where(present, filled - filled.sum(axis=1, keepdims=True) / count, 0.0)
    return centred, np.where(present, model - model.sum(axis=1, keepdims=True) / count, 0.0)


def _cost(y: FloatArray, model: FloatArray) -> FloatArray:
    """Sum of squares left after scaling the model."""
    norm = np.einsum("ij,ij->i", model, model)
    along = np.einsum("ij,ij->i", y, model)
    cost: FloatArray = np.einsum("ij,ij->i", y, y) - along**2 / np.where(norm > 0, norm, np.inf)
    return cost


def _step(
    y: FloatArray, axis: FloatArray, spline: CubicSpline, moves: FloatArray, bounds: FloatArray
) -> tuple[FloatArray, FloatArray, BoolArray]:
    """Cost, Gauss-Newton step within the bounds, and whether there is no band to go by."""
    shape, slope = _model(axis, spline, moves)
    lever = 2.0 * (axis - axis[0]) / (axis[-1] - axis[0]) - 1.0
    centred, model = _projected(y, shape)
    norm = np.einsum("ij,ij->i", model, model)
    factor = np.einsum("ij,ij->i", centred, model) / np.where(norm > 0, norm, np.inf)
    rest = centred - factor[:, None] * model
    columns = [_projected(y, -factor[:, None] * slope * arm)[1] for arm in (np.ones_like(axis), lever)]
    # the part of each column that the scale could explain is taken out (variable projection)
    away = [c - (np.einsum("ij,ij->i", c, model) / np.where(norm > 0, norm, np.inf))[:, None] * model for c in columns]
    gram = np.einsum("kij,lij->ikl", np.stack(away), np.stack(away))
    right = np.einsum("kij,ij->ik", np.stack(away), rest)
    size = np.trace(gram, axis1=1, axis2=2)
    flat = size <= 0
    gram += (np.where(flat, 1.0, 1e-12 * size))[:, None, None] * np.eye(2)
    step = np.linalg.solve(gram, right[..., None])[..., 0]
    # what stands at a bound and would go beyond stays, and the other is found without it
    free = np.abs(moves + np.sign(step) * 1e-9 * bounds) < bounds
    gram = np.where(free[:, :, None] & free[:, None, :], gram, np.eye(2))
    return _cost(centred, model), np.linalg.solve(gram, np.where(free, right, 0.0)[..., None])[..., 0], flat
