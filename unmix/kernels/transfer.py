"""Piecewise direct standardisation: what makes spectra of one instrument look like those of another."""

from typing import NamedTuple

import numpy as np

from unmix.kernels import FloatArray, IntArray

#: a direction with less than this share of the largest is rounding
_ROUNDING = 1e-9


class Piecewise(NamedTuple):
    """target[t] = offset[t] + sum over j of weights[t, j] * source[first[t] + j].

    Attributes
    ----------
    first : ndarray of int, shape (targets,)
    weights : ndarray, shape (targets, window)
    offset : ndarray, shape (targets,)
    """

    first: IntArray
    weights: FloatArray
    offset: FloatArray


def piecewise(
    source: FloatArray, target: FloatArray, source_axis: FloatArray, target_axis: FloatArray, window: int, components:
    int
) -> Piecewise:
    """Regress every channel of the one instrument on a window of channels of the other, by principal components.

    Parameters
    ----------
    source, target : ndarray, shapes (samples, channels)
        The same samples on both instruments.
    source_axis, target_axis : ndarray
    window : int
        Channels of the source; as many as it has make direct standardisation.
    components : int
        Principal components of a window, at most one less than the samples.

    Returns
    -------
    Piecewise

    References
    ----------
    Wang, Veltkamp and Kowalski, Anal. Chem. 63 (1991) 2750.
    """
    p, n = target.shape[1], source.shape[0]
    window = min(window, source.shape[1])
    near = np.searchsorted(source_axis, target_axis)
    near = np.clip(near, 1, source_axis.size - 1)
    near -= (target_axis - source_axis[near - 1]) < (source_axis[near] - target_axis)
    first: IntArray = np.clip(near - window // 2, 0, source.shape[1] - window).astype(np.intp)
    weights, offset = np.zeros((p, window)), np.empty(p)
    middle = source.mean(axis=0)
    for t in range(p):
        place = slice(int(first[t]), int(first[t]) + window)
        centred = source[:, place] - middle[place]
        u, s, v = np.linalg.svd(centred, full_matrices=False)
        keep = min(components, n - 1, int(np.sum(s > _ROUNDING * s[0])) if s[0] > 0 else 0)
        if keep:
            weights[t] = (v[:keep].T / s[:keep]) @ (u[:, :keep].T @ (target[:, t] - target[:, t].mean()))
        offset[t] = target[:, t].mean() - middle[place] @ weights[t]
    return Piecewise(first, weights, offset)


def apply_piecewise(made: Piecewise, source: FloatArray) -> FloatArray:
    """Spectra as the other instrument would have measured them, shape (spectra, targets)."""
    columns = made.first[:, None] + np.arange(made.weights.shape[1])
    found: FloatArray = np.einsum("stj,tj->st", source[:, columns], made.weights) + made.offset
    return found
