"""Intervals from models that left samples out: their coverage rests on exchangeable samples, not on a law of errors."""

import math

import numpy as np

from unmix.kernels import FloatArray, IntArray


def jackknife_plus(
    predictions: FloatArray, errors: FloatArray, model_of: IntArray, level: float
) -> tuple[FloatArray, FloatArray]:
    """Both ends of the jackknife+ interval (CV+ when several samples share a left-out model).

    Parameters
    ----------
    predictions : ndarray, shape (samples, models)
        What each left-out model predicts for the new samples.
    errors : ndarray, shape (calibration,)
        Absolute error of each calibration sample, predicted by the model that left it out.
    model_of : ndarray of int, shape (calibration,)
        Which model that was.
    level : float
        Coverage of the interval.

    Returns
    -------
    lower, upper : ndarray, shape (samples,)
        Infinite where the calibration has too few samples for the level.

    Notes
    -----
    The k-th smallest of prediction - error and the (n + 1 - k)-th smallest of prediction + error, with k =
    floor((1 - level) (n + 1)). For exchangeable samples at least 2 level - 1 of new values are covered whatever
    the errors are, and close to ``level`` in practice.

    References
    ----------
    Barber, Candes, Ramdas and Tibshirani, Ann. Stat. 49 (2021) 486.

    Examples
    --------
    >>> low, high = jackknife_plus(np.full((1, 20), 5.0), np.arange(20) / 10, np.arange(20), 0.9)
    >>> low.round(6), high.round(6)
    (array([3.2]), array([6.8]))
    """
    n, samples = errors.size, predictions.shape[0]
    # the level is a decimal fraction: 0.1 x 20 must count as 2 though it is a rounding below
    k = math.floor((1.0 - level) * (n + 1) + 1e-9)
    lower, upper = np.full(samples, -np.inf), np.full(samples, np.inf)
    if k < 1:
        return lower, upper
    of, far = _candidates(errors, model_of, k)
    block = max(1, 100_000 // far.size)
    for start in range(0, samples, block):
        part = slice(start, start + block)
        centre = predictions[part][:, of]
        lower[part] = np.partition(centre - far, k - 1, axis=1)[:, k - 1]
        upper[part] = -np.partition(-centre - far, k - 1, axis=1)[:, k - 1]
    return lower, upper


def _candidates(errors: FloatArray, model_of: IntArray, k: int) -> tuple[IntArray, FloatArray]:
    """The k largest errors of every model: the others cannot be among the k outermost ends."""
    order = np.argsort(-errors, kind="stable")
    kept = np.concatenate([order[model_of[order] == model][:k] for model in np.unique(model_of)])
    return model_of[kept], errors[kept]


def samples_for(level: float) -> int:
    """Fewest calibration samples with which an interval of this level has an end."""
    return math.ceil(1.0 / (1.0 - level) - 1.0 - 1e-9)
