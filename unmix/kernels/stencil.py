"""Weighted sums over a few neighbouring channels, the common last step of interpolation and local fits.

What the weights are belongs to ``resample`` and ``localfit``.
"""

import numpy as np
from scipy.sparse import csr_array

from unmix.kernels import FloatArray, IntArray

#: spectra at a time, so that a block stays in the cache
_BLOCK = 512


def weighted_sums(rows: FloatArray, first: IntArray, weights: FloatArray) -> FloatArray:
    """Sums of ``weights[t, j] * rows[:, first[t] + j]`` over j, for every target t.

    Parameters
    ----------
    rows : ndarray, shape (spectra, channels), float32 or float64
        A missing channel (NaN) makes the sums missing that it takes part in.
    first : ndarray of int, shape (targets,)
        First channel of each stencil.
    weights : ndarray, shape (targets, stencil)

    Returns
    -------
    ndarray, shape (spectra, targets), dtype of ``rows``
        The same for a spectrum alone as in any company. Cost: spectra x targets x stencil multiplications.
    """
    targets, stencil = weights.shape
    columns = first[:, None] + np.arange(stencil)
    matrix = csr_array(
        (weights.ravel().astype(rows.dtype), columns.ravel(), np.arange(0, targets * stencil + 1, stencil)),
        shape=(targets, rows.shape[1]),
    )
    # a weight of zero asks nothing of its channel, which may then be missing
    matrix.eliminate_zeros()
    sums: FloatArray = np.empty((rows.shape[0], targets), dtype=rows.dtype)
    for low in range(0, rows.shape[0], _BLOCK):
        sums[low : low + _BLOCK] = (matrix @ rows[low : low + _BLOCK].T).T
    return sums
