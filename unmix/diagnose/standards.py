"""What errors of left-out standards say: the error of a prediction, outlying standards, bent lines."""

import numpy as np
from scipy import optimize, stats

from unmix.diagnose.spread import ErrorModel
from unmix.kernels import BoolArray, FloatArray

#: chance that a good standard among all is called outlying
_OUTLYING = 0.01


def error_model(found: list[FloatArray], amounts: FloatArray) -> ErrorModel:
    """Fit the error of every component to errors of left-out standards by maximum likelihood (normal errors).

    Parameters
    ----------
    found : list of ndarray, shape (standards, components)
        Amounts from one or more ways of leaving out.
    amounts : ndarray, shape (standards, components)
        The known ones.

    Returns
    -------
    ErrorModel
        Standards without the component count where some of it was found; where none was found the bound at zero has
        hidden the error.
    """
    k = amounts.shape[1]
    absolute, relative, freedom = np.zeros(k), np.zeros(k), np.ones(k)
    for j in range(k):
        value = np.concatenate([one[:, j] for one in found])
        known = np.tile(amounts[:, j], len(found))
        counts = (known > 0) | (value > 0)
        absolute[j], relative[j] = _fit(value[counts] - known[counts], known[counts])
        freedom[j] = max(int(np.count_nonzero(amounts[:, j])) - 2, 1)
    return ErrorModel(absolute, relative, freedom)


def _fit(error: FloatArray, amount: FloatArray) -> tuple[float, float]:
    size = float(np.sqrt(np.mean(error**2)))
    top = float(amount.max(initial=0.0))
    if size == 0 or top == 0:
        return size, 0.0

    def minus_log_likelihood(parameters: FloatArray) -> float:
        variance = np.exp(2 * parameters[0]) + (np.exp(parameters[1]) * amount / top) ** 2
        return float(0.5 * np.sum(np.log(variance) + (error / size) ** 2 / variance))

    starts = ([0.0, -3.0], [-2.0, 0.0])
    best = min((optimize.minimize(minus_log_likelihood, x, method="Nelder-Mead") for x in starts),
               key=lambda done: float(done.fun))  # fmt: skip
    return float(size * np.exp(best.x[0])), float(size * np.exp(best.x[1]) / top)


def outlying(errors: FloatArray, model: ErrorModel, amounts: FloatArray, *, among: int) -> BoolArray:
    """Standards whose error when left out is beyond what the others allow, with Bonferroni's correction.

    Parameters
    ----------
    errors : ndarray, shape (standards, components)
    model : ErrorModel
        From errors in which these standards had no part.
    amounts : ndarray, shape (standards, components)
    among : int
        How many errors the worst was taken from.

    Returns
    -------
    ndarray of bool, shape (standards,)
    """
    size = model.at(amounts)
    z = np.divide(np.abs(errors), size, out=np.zeros_like(errors), where=size > 0)
    limit = stats.t.ppf(1.0 - _OUTLYING / (2.0 * among), np.maximum(model.freedom, 3.0))
    return np.asarray((z > limit).any(axis=1))


def bent(errors: FloatArray, amounts: FloatArray) -> FloatArray:
    """P value, component by component, that its errors bend with the amount (t test of a quadratic term).

    Parameters
    ----------
    errors : ndarray, shape (standards, components)
        Of standards left out one by one.
    amounts : ndarray, shape (standards, components)

    Returns
    -------
    ndarray, shape (components,)
        NaN where fewer than six standards or fewer than four levels hold the component.
    """
    p = np.full(amounts.shape[1], np.nan)
    for j in range(amounts.shape[1]):
        rows = amounts[:, j] > 0
        x, y = amounts[rows, j], errors[rows, j]
        if rows.sum() < 6 or np.unique(x).size < 4 or not np.any(y):
            continue
        columns = np.vander(x / x.max(), 3)
        solution, _, _, _ = np.linalg.lstsq(columns, y, rcond=None)
        freedom = x.size - 3
        variance = np.sum((y - columns @ solution) ** 2) / freedom * np.linalg.inv(columns.T @ columns)[0, 0]
        p[j] = 2.0 * stats.t.sf(abs(solution[0]) / np.sqrt(variance), freedom) if variance > 0 else np.nan
    return p


def upper_limit(values: FloatArray, level: float = 0.99) -> float:
    """Limit for one future value, from values taken as log-normal (prediction interval, one-sided)."""
    logs = np.log(np.maximum(values, np.finfo(float).tiny))
    n = logs.size
    reach = stats.t.ppf(level, n - 1) * logs.std(ddof=1) * np.sqrt(1.0 + 1.0 / n)
    return float(np.exp(logs.mean() + reach))
