"""Values of a sampled spectrum between its channels: interpolation by local polynomials.

Changes of the axis alone belong here. What smooths belongs in ``localfit`` or ``whittaker``.

Why a local polynomial through six channels. It is a linear map with six numbers a target, the same for every
spectrum, so that Beer-Lambert additivity is kept; a missing channel harms only the targets beside it, where a
spline would spread it over the whole spectrum; and it is exact for polynomials to degree five. On a Gaussian
band of full width w at spacing h the error is at most 12.5 (h/w)^6 of the height (the remainder term of the
Lagrange form): 1e-5 with ten channels a band width and 2e-4 with six, under the noise of an ordinary
measurement, where a cubic through four channels leaves 2.2 (h/w)^4, 2e-4 and 1.7e-3.
"""

import numpy as np

from unmix.kernels import BoolArray, FloatArray, IntArray
from unmix.kernels.missing import patterns
from unmix.kernels.stencil import weighted_sums

#: channels that take part in one interpolated value
STENCIL = 6

#: targets this close to a channel, in parts of the local spacing, are that channel
SAME = 1e-6

#: an interval this many times wider than both its neighbours was not measured
HOLE = 5.0


def holes(axis: FloatArray) -> BoolArray:
    """Intervals of an axis in which nothing was measured, such as between two recorded regions.

    Parameters
    ----------
    axis : ndarray, shape (channels,)
        Strictly increasing.

    Returns
    -------
    ndarray of bool, shape (channels - 1,)
        True where an interval is more than five times as wide as both of its neighbours.
    """
    step = np.diff(axis)
    if step.size < 3:
        return np.zeros(step.size, dtype=np.bool_)
    padded = np.concatenate([step[1:2], step, step[-2:-1]])
    return np.asarray(step > HOLE * np.maximum(padded[:-2], padded[2:]))


def locate(axis: FloatArray, targets: FloatArray) -> tuple[IntArray, IntArray]:
    """Where targets stand between the channels of an axis.

    Parameters
    ----------
    axis : ndarray, shape (channels,)
        Strictly increasing.
    targets : ndarray, shape (targets,)
        In any order.

    Returns
    -------
    left, right : ndarray of int, shape (targets,)
        The channels on either side; both the same channel where a target stands on it (to 1e-6 of the
        spacing), both -1 where a target lies outside the axis.
    """
    channels = axis.size
    right = np.searchsorted(axis, targets).clip(1, max(channels - 1, 1))
    left = right - 1
    right = np.minimum(right, channels - 1)
    spacing = axis[right] - axis[left] if channels > 1 else np.maximum(np.abs(targets), 1.0)
    on_left = np.abs(targets - axis[left]) <= SAME * spacing
    on_right = np.abs(targets - axis[right]) <= SAME * spacing
    outside = ~(on_left | on_right) & ((targets < axis[0]) | (targets > axis[-1]))
    left, right = np.where(on_right, right, left), np.where(on_left & ~on_right, left, right)
    return np.where(outside, -1, left), np.where(outside, -1, right)


def stencil_weights(axis: FloatArray, targets: FloatArray) -> tuple[IntArray, FloatArray]:
    """Lagrange weights that give values at targets from the six nearest channels (fewer on a shorter axis).

    Parameters
    ----------
    axis : ndarray, shape (channels,)
        Strictly increasing; spacing need not be even.
    targets : ndarray, shape (targets,)
        Inside the axis.

    Returns
    -------
    first : ndarray of int, shape (targets,)
        The first channel of each stencil; near the ends the stencil is shifted inwards.
    weights : ndarray, shape (targets, stencil)
        Each row adds up to 1.
    """
    width = min(STENCIL, axis.size)
    left = np.searchsorted(axis, targets, side="right") - 1
    first = (left - (width - 1) // 2).clip(0, axis.size - width)
    nodes = axis[first[:, None] + np.arange(width)]
    weights = np.ones((targets.size, width))
    for j in range(width):
        for k in range(width):
            if k != j:
                weights[:, j] *= (targets - nodes[:, k]) / (nodes[:, j] - nodes[:, k])
    return first, weights


def interpolate(axis: FloatArray, values: FloatArray, targets: FloatArray) -> FloatArray:
    """Spectra on another axis, inside the range of their own only.

    Parameters
    ----------
    axis : ndarray, shape (channels,)
        Strictly increasing; spacing need not be even.
    values : ndarray, shape (..., channels), float32 or float64
        NaN marks a missing channel.
    targets : ndarray, shape (targets,)
        The new axis.

    Returns
    -------
    ndarray, shape (..., targets), dtype of ``values``
        NaN outside the axis, between two channels one of which is missing, and in a hole of the axis.

    Notes
    -----
    Rows with missing channels are interpolated from the channels they have, once for each pattern of missing
    channels. Cost: six multiplications a value, and as many again for each pattern.
    """
    rows = values.reshape(-1, axis.size)
    answer = np.full((rows.shape[0], targets.size), np.nan, dtype=values.dtype)
    left, right = locate(axis, targets)
    gap = np.append(holes(axis), False)
    reachable = (left >= 0) & ((left == right) | ~gap[left])
    for members, pattern in patterns(np.isfinite(rows)):
        here = reachable & pattern[left] & pattern[right]
        on, between = here & (left == right), here & (left != right)
        block = np.full((members.size, targets.size), np.nan, dtype=values.dtype)
        block[:, on] = rows[np.ix_(members, left[on])]
        if between.any():
            block[:, between] = weighted_sums(
                rows[members][:, pattern], *stencil_weights(axis[pattern], targets[between])
            )
        answer[members] = block
    return answer.reshape(*values.shape[:-1], targets.size)


def broadening_weights(
    axis: FloatArray, targets: FloatArray, width: float, shape: str
) -> tuple[BoolArray, IntArray, FloatArray]:
    """Weights that convolve with a line shape and read off the result at targets.

    Parameters
    ----------
    axis : ndarray, shape (channels,)
        Strictly increasing; spacing need not be even.
    targets : ndarray, shape (targets,)
    width : float
        Full width at half height, at least the channel spacing.
    shape : {'gaussian', 'triangle'}

    Returns
    -------
    reached : ndarray of bool, shape (targets,)
        Targets whose line shape lies inside the axis and over no hole; the rest describes these alone.
    first : ndarray of int, shape (reached,)
    weights : ndarray, shape (reached, stencil)
        For ``stencil.weighted_sums``; each row adds up to 1. The integral is taken by the trapezoidal rule, and
        the line shape ends at 1.5 widths (Gaussian, 4e-4 of its area cut) or 1 width (triangle).
    """
    reach = (1.5 if shape == "gaussian" else 1.0) * width
    reached = (targets >= axis[0] + reach * (1 - SAME)) & (targets <= axis[-1] - reach * (1 - SAME))
    for hole in np.flatnonzero(holes(axis)):
        reached &= (targets <= axis[hole] - reach) | (targets >= axis[hole + 1] + reach)
    inside = targets[reached]
    first = np.searchsorted(axis, inside - reach * (1 + SAME))
    last = np.searchsorted(axis, inside + reach * (1 + SAME), side="right")
    stencil = int((last - first).max(initial=1))
    columns = first[:, None] + np.arange(stencil)
    beyond = columns >= last[:, None]
    columns = np.minimum(columns, axis.size - 1)
    distance = (axis[columns] - inside[:, None]) / width
    profile = np.exp2(-4.0 * distance**2) if shape == "gaussian" else np.maximum(1.0 - np.abs(distance), 0.0)
    weights = np.where(beyond, 0.0, profile * _widths(axis)[columns])
    weights /= weights.sum(axis=1, keepdims=True)
    shift = np.maximum(first + stencil - axis.size, 0)
    for row in np.flatnonzero(shift):
        weights[row] = np.roll(weights[row], shift[row])
    return reached, first - shift, weights


def _widths(axis: FloatArray) -> FloatArray:
    """How much of the axis each channel stands for: half the intervals beside it, holes not counted."""
    step = np.where(holes(axis), np.nan, np.diff(axis))
    beside = np.stack([np.append(np.nan, step), np.append(step, np.nan)])
    known = np.maximum(np.isfinite(beside).sum(axis=0), 1)
    widths: FloatArray = np.nansum(beside, axis=0) / known
    return np.where(widths > 0, widths, 1.0)
