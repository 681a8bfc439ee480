"""Spectra that miss the same channels, so that work on a pattern is done once.

Only the grouping belongs here; what is done with a pattern belongs to the kernel that does it.
"""

import numpy as np

from unmix.kernels import BoolArray, IntArray


def patterns(present: BoolArray) -> list[tuple[IntArray, BoolArray]]:
    """Group rows by which of their channels are present.

    Parameters
    ----------
    present : ndarray of bool, shape (spectra, channels)

    Returns
    -------
    list of (members, pattern)
        Row numbers, increasing, and the mask of shape (channels,) that they share. Cost O(spectra channels), and
        a sort where anything is missing.
    """
    if present.all():
        return [(np.arange(present.shape[0]), np.ones(present.shape[1], dtype=np.bool_))]
    distinct, which = np.unique(present, axis=0, return_inverse=True)
    return [(np.flatnonzero(which.ravel() == i), pattern) for i, pattern in enumerate(distinct)]
