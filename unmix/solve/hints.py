"""Which spectrum of a library would explain what a fit leaves over: a lead for the chemist, not an identification."""

from dataclasses import dataclass

import numpy as np

from unmix.kernels import BoolArray, FloatArray

#: share of the residual that a spectrum must explain to be named
_WORTH_NAMING = 0.3


@dataclass(frozen=True)
class Hint:
    """The best spectrum of the library: its place, and the share of the residual's energy that it explains."""

    index: int
    share: float


def best_addition(
    residual: FloatArray, used: BoolArray, design: FloatArray, library: FloatArray
) -> Hint | None:
    """The library spectrum whose addition to the model would explain most of a residual, in a positive amount.

    Parameters
    ----------
    residual : ndarray, shape (channels,)
    used : ndarray of bool, shape (channels,)
    design : ndarray, shape (channels, terms)
        What is in the model already.
    library : ndarray, shape (spectra, channels)
        NaN counts as zero.

    Returns
    -------
    Hint or None
        None when none explains a third of the residual.
    """
    q = np.linalg.qr(design[used])[0]
    candidates = np.nan_to_num(library[:, used])
    apart = candidates - (candidates @ q) @ q.T
    rest = residual[used] - q @ (q.T @ residual[used])
    length = np.linalg.norm(apart, axis=1)
    # what lies in the model to rounding explains nothing new
    new = length > 1e-6 * np.maximum(np.linalg.norm(candidates, axis=1), np.finfo(float).tiny)
    along = np.divide(apart @ rest, length, out=np.zeros(length.size), where=new)
    energy = float(rest @ rest)
    if energy == 0 or not np.any(along > 0):
        return None
    best = int(np.argmax(along))
    share = float(along[best] ** 2 / energy)
    return Hint(best, share) if share >= _WORTH_NAMING else None
