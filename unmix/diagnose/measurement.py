"""How to measure so that wanted detection limits are reached: windows, path length, resolution, number of scans."""

from typing import NamedTuple

import numpy as np

from unmix.diagnose.limits import limits
from unmix.kernels import BoolArray, FloatArray
from unmix.kernels.linalg import inverse_factor, reduce_design

#: blocks that the axis is cut into, from which windows are put together
BLOCKS = 48
#: windows may fall short of all channels by this share
_WORTH = 0.1
#: path lengths tried, as multiples of the present one
PATHS = np.round(10.0 ** np.linspace(-1.5, 1.5, 61), 4)


class Windows(NamedTuple):
    """Windows chosen and what they reach.

    Attributes
    ----------
    chosen : ndarray of bool, shape (channels,)
    limit : ndarray, shape (components,)
        Detection limits on the chosen channels.
    """

    chosen: BoolArray
    limit: FloatArray


def detection_limits(signal: FloatArray, free: FloatArray, sd: FloatArray, used: BoolArray) -> FloatArray:
    """Detection limits of all components on some channels.

    Parameters
    ----------
    signal : ndarray, shape (channels, components)
        Pure spectra per unit amount.
    free : ndarray, shape (channels, terms)
    sd : ndarray, shape (channels,)
        Standard deviation of the noise.
    used : ndarray of bool, shape (channels,)

    Returns
    -------
    ndarray, shape (components,)
        Infinite where an amount is not determined.
    """
    k = signal.shape[1]
    if used.sum() < k + free.shape[1]:
        return np.full(k, np.inf)
    weight = (1.0 / sd[used])[:, None]
    factor = inverse_factor(reduce_design(signal[used] * weight, free[used] * weight))[free.shape[1] :]
    return limits(np.linalg.norm(factor, axis=1), np.asarray(np.inf)).detection


def worst(limit: FloatArray, wanted: FloatArray) -> float:
    """The largest ratio of a detection limit to the one wanted."""
    return float(np.max(limit / wanted))


def choose_windows(
    signal: FloatArray, free: FloatArray, sd: FloatArray, usable: BoolArray, wanted: FloatArray
) -> Windows:
    """Choose few windows by adding, each time, the block that lowers the largest variance over its target most.

    Parameters
    ----------
    signal, free, sd
        As for :func:`detection_limits`.
    usable : ndarray of bool, shape (channels,)
        Channels that may be trusted; saturated ones may not.
    wanted : ndarray, shape (components,)
        Detection limits wanted.

    Returns
    -------
    Windows
        The smallest set of the greedy sequence that reaches the wanted limits, or that comes within a tenth of what
        all usable channels reach.

    References
    ----------
    Largest-variance (E-optimal) and trace (A-optimal, while amounts are still undetermined) criteria: F. Pukelsheim,
    Optimal Design of Experiments (1993), chapter 6; chosen greedily.
    """
    p, k = signal.shape
    blocks = [part for part in np.array_split(np.arange(p), min(BLOCKS, p)) if usable[part].any()]
    columns = np.hstack([free, signal * wanted]) / sd[:, None]
    length = np.linalg.norm(columns[usable], axis=0)
    columns = columns / np.where(length > 0, length, 1.0)
    gram = np.array([columns[part[usable[part]]].T @ columns[part[usable[part]]] for part in blocks])
    whole = detection_limits(signal, free, sd, usable)
    goal = max(1.0, worst(whole, wanted) * (1.0 + _WORTH))
    # a little of everything keeps the first choices finite
    total = 1e-9 * np.eye(columns.shape[1])
    scale = 1.0 / np.where(length > 0, length, 1.0)[free.shape[1] :] ** 2
    left, chosen = list(range(len(blocks))), np.zeros(p, dtype=bool)
    limit = np.full(k, np.inf)
    while left:
        variances = np.array([np.diag(np.linalg.inv(total + gram[b]))[free.shape[1] :] * scale for b in left])
        determined = np.isfinite(limit).all()
        score = variances.max(axis=1) if determined else np.log(variances).sum(axis=1)
        best = left.pop(int(np.argmin(score)))
        total = total + gram[best]
        chosen[blocks[best]] = usable[blocks[best]]
        limit = detection_limits(signal, free, sd, chosen)
        if worst(limit, wanted) <= goal:
            break
    return Windows(chosen, limit)


def over_paths(
    signal: FloatArray,
    free: FloatArray,
    noise: FloatArray,
    usable: BoolArray,
    typical: FloatArray,
    largest: float,
    growth: float,
) -> tuple[FloatArray, FloatArray]:
    """Detection limits for longer and shorter paths, saturated channels left out.

    Parameters
    ----------
    signal, free
        At the present path.
    noise : ndarray, shape (channels,)
        Standard deviation in the light of a clear sample.
    usable : ndarray of bool
    typical : ndarray, shape (components,)
        Amounts of a usual sample, which make the channels dark.
    largest : float
        Absorbance above which a channel is not trusted.
    growth : float
        Share of the exponent of ten to the absorbance by which noise grows.

    Returns
    -------
    limit : ndarray, shape (PATHS, components)
    lost : ndarray, shape (PATHS,)
        Share of the channels that are saturated.
    """
    limit, lost = np.empty((PATHS.size, signal.shape[1])), np.empty(PATHS.size)
    for i, factor in enumerate(PATHS):
        absorbance = factor * signal @ typical
        bright = usable & (absorbance <= largest)
        lost[i] = 1.0 - bright.sum() / usable.sum()
        sd = noise * 10.0 ** (growth * np.maximum(absorbance, 0.0))
        limit[i] = detection_limits(factor * signal, free, sd, bright)
    return limit, lost


def scans_needed(limit: FloatArray, wanted: FloatArray) -> float:
    """How many co-added scans reach the wanted limits where one does not: noise falls as the root of their number."""
    ratio = worst(limit, wanted)
    return float(np.ceil(max(ratio, 1.0) ** 2 * (1.0 - 1e-9))) if np.isfinite(ratio) else float("inf")
