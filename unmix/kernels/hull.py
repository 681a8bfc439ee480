"""The lower convex hull of spectra: a rubber band stretched below each of them.

Few spectra are done here, many by the same code compiled in ``hull_compiled``.
"""

import numpy as np

from unmix.kernels import FloatArray, IntArray

#: values above which the compiled kernel repays loading it
MANY = 500_000


def band_below(x: FloatArray, y: FloatArray, corner: IntArray, below: FloatArray) -> None:
    """Write the lower hull of one spectrum (Andrew's monotone chain, 1979).

    Parameters
    ----------
    x : ndarray, shape (channels,)
        Strictly increasing.
    y : ndarray, shape (channels,)
        NaN marks a missing channel.
    corner : ndarray of int, shape (channels,)
        Work space.
    below : ndarray, shape (channels,)
        Overwritten with the hull; NaN beyond the first and last channel that is present.
    """
    top = 0
    for i in range(x.size):
        below[i] = np.nan
        if np.isnan(y[i]):
            continue
        while top >= 2:
            a, b = corner[top - 2], corner[top - 1]
            if (y[b] - y[a]) * (x[i] - x[b]) < (y[i] - y[b]) * (x[b] - x[a]):
                break
            top -= 1
        corner[top] = i
        top += 1
    for k in range(top - 1):
        a, b = corner[k], corner[k + 1]
        for i in range(a, b + 1):
            below[i] = y[a] + (y[b] - y[a]) * (x[i] - x[a]) / (x[b] - x[a])
    if top == 1:
        below[corner[0]] = y[corner[0]]


def bands_below(x: FloatArray, y: FloatArray) -> FloatArray:
    """The lower hulls of spectra (n, m); each as if it were alone. Cost O(n m)."""
    if y.size >= MANY:
        from unmix.kernels import hull_compiled  # noqa: PLC0415  numba loads only when it is worth it

        hulls: FloatArray = hull_compiled.bands_below(x, np.ascontiguousarray(y))
        return hulls
    below = np.empty_like(y)
    corner = np.empty(x.size, dtype=np.int64)
    for row in range(y.shape[0]):
        band_below(x, y[row], corner, below[row])
    return below
