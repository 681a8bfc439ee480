"""How a penalised baseline renews its weights from the residual, one spectrum at a time.

The same rules for many spectra side by side stand in ``whittaker_compiled``; the tests compare the two.
"""

from collections.abc import Callable
from typing import NamedTuple

import numpy as np

from unmix.kernels import FloatArray


class Fit(NamedTuple):
    """What a rule looks at."""

    #: spectrum, shape (m,)
    y: FloatArray
    #: curve, shape (m,)
    z: FloatArray
    #: weights given by the caller, shape (m,), zero where a channel is missing
    v: FloatArray
    #: weights that led to the curve, without those of the caller, shape (m,)
    w: FloatArray
    #: how many curves there have been
    step: int
    #: of the difference
    order: int
    #: what the rule is set to
    setting: float
    #: when the weights count as settled
    tolerance: float


def unchanged(fit: Fit) -> tuple[FloatArray, bool]:
    """Keep the weights: plain smoothing."""
    return fit.w, True


def asymmetric(fit: Fit) -> tuple[FloatArray, bool]:
    """Weight ``setting`` above the curve and 1 - setting below (Eilers and Boelens 2005).

    Settled when no more than ``tolerance`` of the channels change sides.
    """
    new = np.where(fit.y > fit.z, fit.setting, 1.0 - fit.setting)
    moved = np.count_nonzero((new != fit.w) & (fit.v > 0))
    return new, bool(moved <= fit.tolerance * fit.y.size)


def adaptive(fit: Fit) -> tuple[FloatArray, bool]:
    """Zero above the curve, exp(step |y - z| / sum |y - z|) below (Zhang, Chen and Liang 2010, eq. 9).

    Settled when the sum below the curve is under ``tolerance`` of the sum of |y| (eq. 10).
    """
    depth = np.where(fit.v > 0, np.maximum(fit.z - fit.y, 0.0), 0.0)
    total = float(depth.sum())
    size = float(np.abs(fit.y)[fit.v > 0].sum())
    if total <= fit.tolerance * size or np.count_nonzero(depth) <= fit.order:
        return fit.w, True
    return np.where(depth > 0, np.exp(fit.step * depth / total), 0.0), False


def logistic(fit: Fit) -> tuple[FloatArray, bool]:
    """A logistic step from 1 to 0 around 2 sd - mean of the residuals below the curve (Baek et al. 2015, eq. 12).

    Settled when the weights change by less than ``tolerance`` of their length.
    """
    residual = fit.y - fit.z
    below = residual[(residual < 0) & (fit.v > 0)]
    if below.size < 2:
        return fit.w, True
    mean, spread = float(below.mean()), float(below.std(ddof=1))
    if spread <= 0:
        return fit.w, True
    with np.errstate(over="ignore"):
        new = 1.0 / (1.0 + np.exp(2.0 * (residual - (2.0 * spread - mean)) / spread))
    seen = fit.v > 0
    change, length = (new - fit.w)[seen], fit.w[seen]
    return new, bool(change @ change <= fit.tolerance**2 * (length @ length))


#: the rules by name; their order is their number in the compiled kernel
RULES: dict[str, Callable[[Fit], tuple[FloatArray, bool]]] = {
    "none": unchanged,
    "asymmetric": asymmetric,
    "adaptive": adaptive,
    "logistic": logistic,
}
