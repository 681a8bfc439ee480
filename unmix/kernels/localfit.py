"""Local polynomials on even and uneven axes: weights that smooth or differentiate each channel's neighbourhood.

Every method here is a fixed set of weights a channel, the same for all spectra; ``stencil`` applies them.

    axis (m,) positions   window w   order of the polynomial n   derivative k
"""

from math import factorial

import numpy as np

from unmix.kernels import FloatArray, IntArray


def polynomial_weights(axis: FloatArray, window: int, order: int, derivative: int) -> tuple[IntArray, FloatArray]:
    """Weights of a least-squares polynomial through the channels around each channel (Savitzky and Golay 1964).

    Parameters
    ----------
    axis : ndarray, shape (m,)
        Strictly increasing; spacing need not be even.
    window : int
        Channels that take part, at most m.
    order : int
        Of the polynomial, below ``window``.
    derivative : int
        0 for the value, 1 for the slope per unit of the axis, and so on, at most ``order``.

    Returns
    -------
    first : ndarray of int, shape (m,)
        First channel of each window; near the ends the window stops moving and the fit is read off-centre
        (Gorry 1990).
    weights : ndarray, shape (m, window)
        Exact for polynomials up to ``order`` at every channel. Cost O(m window order^2).
    """
    first = (np.arange(axis.size) - window // 2).clip(0, axis.size - window)
    offset = axis[first[:, None] + np.arange(window)] - axis[:, None]
    reach = np.abs(offset).max(axis=1, keepdims=True) if window > 1 else np.ones((axis.size, 1))
    powers = (offset / reach)[..., None] ** np.arange(order + 1)
    q, r = np.linalg.qr(powers)
    pick = np.zeros((order + 1, 1))
    pick[derivative] = factorial(derivative)
    along = np.linalg.solve(np.swapaxes(r, 1, 2), np.broadcast_to(pick, (axis.size, *pick.shape)))
    weights: FloatArray = (q @ along)[..., 0] / reach**derivative
    return first, weights


def gap_weights(axis: FloatArray, segment: int, gap: int, derivative: int) -> tuple[IntArray, FloatArray, IntArray]:
    """Weights of a gap-segment derivative from means of separated segments (Norris and Williams 1984).

    Parameters
    ----------
    axis : ndarray, shape (m,)
        Strictly increasing; spacing need not be even.
    segment, gap : int
        Odd numbers of channels in a segment and between two.
    derivative : int
        1 or 2.

    Returns
    -------
    first : ndarray of int, shape (targets,)
        First channel of each stencil.
    weights : ndarray, shape (targets, derivative * (segment + gap) + segment)
        Exact for polynomials up to degree ``derivative`` on any axis.
    centre : ndarray of int, shape (targets,)
        The channels at which the stencils stand; those nearer to the ends have none.
    """
    width = derivative * (segment + gap) + segment
    first = np.arange(axis.size - width + 1)
    centre = first + width // 2
    offset = axis[first[:, None] + np.arange(width)] - axis[centre][:, None]
    reach = np.abs(offset).max(axis=1, keepdims=True)
    powers = (offset / reach)[..., None] ** np.arange(derivative + 1)
    starts = np.arange(derivative + 1) * (segment + gap)
    moments = np.stack([powers[:, i : i + segment].mean(axis=1) for i in starts], axis=1)
    wanted = np.zeros((derivative + 1, 1))
    wanted[derivative] = factorial(derivative)
    parts = np.linalg.solve(np.swapaxes(moments, 1, 2), np.broadcast_to(wanted, (first.size, *wanted.shape)))[..., 0]
    weights: FloatArray = np.zeros((first.size, width))
    for index, start in enumerate(starts):
        weights[:, start : start + segment] = parts[:, index : index + 1] / segment
    return first, weights / reach**derivative, centre
