"""Penalised least-squares smoothing, the one solver below every penalised baseline and smoother.

For a spectrum y with weights w at positions t the curve z minimises

    sum_i w_i (y_i - z_i)^2  +  penalty * sum_i (d! f_i)^2 (t_(i+d) - t_i) / d

with f_i the d-th divided difference of z through channels i to i + d and t in units of the mean spacing, so that
even spacing gives the usual matrix W + penalty D'D (Whittaker 1923; Eilers 2003, Anal. Chem. 75, 3631) and uneven
spacing approximates the same integral of the squared d-th derivative.

A few spectra are solved by LAPACK's banded Cholesky, so that nobody waits for a compiler; many go to
``whittaker_compiled``. The condition number of the matrix, about 16 penalty for d = 2, costs the plain banded
solution half of its digits at common penalties. Refinement with the residual taken through the divided
differences, which subtract neighbours and are therefore nearly exact, gives them back; where even that fails
(a penalty above 1e13 or so) the compiled kernel, which has no such limit, takes the few spectra too.

    t (m,) positions   y (n, m) spectra   v (m,) or (n, m) weights   d 1, 2 or 3   n spectra   m channels
"""

from math import factorial
from threading import Lock

import numpy as np
from scipy.linalg import LinAlgError, cho_solve_banded, cholesky_banded

from unmix.kernels import BoolArray, FloatArray, IntArray
from unmix.kernels.reweight import RULES, Fit

#: values above which the compiled kernel repays loading it (about a second)
MANY = 200_000

#: refinement stops at this part of the curve's height, or fails after so many steps
_REFINED = 1e-13
_REFINEMENTS = 6

#: numba's simplest threading layer may not be entered twice at a time
_ONE_AT_A_TIME = Lock()


class Differences:
    """The d-th divided differences of curves on one axis, scaled as in the penalty.

    Parameters
    ----------
    axis : ndarray, shape (m,)
        Strictly increasing, m > d.
    order : int
        d, from 1 to 3.
    """

    def __init__(self, axis: FloatArray, order: int) -> None:
        t = (axis - axis[0]) / (axis[-1] - axis[0]) * (axis.size - 1)
        self.order = order
        #: t_(i+k) - t_i for k = 1 .. d
        self.gaps = [t[k:] - t[:-k] for k in range(1, order + 1)]
        self.scale = factorial(order) ** 2 * self.gaps[-1] / order
        self.channels = axis.size

    def apply(self, z: FloatArray) -> FloatArray:
        """Divided differences along the first axis; (m, ...) to (m - d, ...)."""
        for gap in self.gaps:
            z = np.diff(z, axis=0) / _down(gap, z)
        return z

    def penalty_gradient(self, z: FloatArray) -> FloatArray:
        """D'D z for curves (m, ...), without forming the matrix."""
        f = self.apply(z)
        f = f * _down(self.scale, f)
        for gap in reversed(self.gaps):
            f = f / _down(gap, f)
            edge = np.zeros_like(f[:1])
            f = -np.diff(f, axis=0, prepend=edge, append=edge)
        return f

    def bands(self) -> FloatArray:
        """D'D as upper bands, shape (d + 1, m), the diagonal in the last row as LAPACK wants it."""
        d, rows = self.order, self.channels - self.order
        coefficients = np.ones((d + 1, rows))
        steps = self.gaps[0]
        position = np.concatenate([[0.0], np.cumsum(steps)])
        for j in range(d + 1):
            for k in range(d + 1):
                if k != j:
                    coefficients[j] /= position[j : j + rows] - position[k : k + rows]
        matrix = np.zeros((d + 1, self.channels))
        for j in range(d + 1):
            for k in range(j, d + 1):
                matrix[d - (k - j), k : k + rows] += self.scale * coefficients[j] * coefficients[k]
        return matrix

    def transitions(self) -> tuple[FloatArray, FloatArray]:
        """What the compiled kernel steps by: gaps (d, m - 1) and step weights (m - 1,), zero past the last term."""
        d, m = self.order, self.channels
        gaps = np.ones((d, m - 1))
        for k, gap in enumerate(self.gaps):
            gaps[k, : gap.size] = gap
        weights = np.zeros(m - 1)
        weights[: m - d] = self.scale / self.gaps[-1] ** 2
        return gaps, weights


def _down(vector: FloatArray, like: FloatArray) -> FloatArray:
    return vector.reshape(-1, *(1,) * (like.ndim - 1))


class _Solver:
    """Factor W + penalty D'D once and solve with refinement."""

    def __init__(self, differences: Differences, bands: FloatArray, penalty: float, w: FloatArray) -> None:
        self._differences, self._penalty, self._w = differences, penalty, w
        matrix = penalty * bands
        matrix[-1] += w
        self._factor = cholesky_banded(matrix, overwrite_ab=True, check_finite=False)

    def solve(self, right: FloatArray) -> FloatArray:
        """Curves for right-hand sides (m, ...), accurate to a few roundings of their height.

        Raises
        ------
        LinAlgError
            When the penalty is too large for the banded matrix to hold the weights beside it.
        """
        factor = (self._factor, False)
        w = _down(self._w, right)
        z: FloatArray = cho_solve_banded(factor, right, check_finite=False)
        for _ in range(_REFINEMENTS):
            rest = right - w * z - self._penalty * self._differences.penalty_gradient(z)
            change = cho_solve_banded(factor, rest, check_finite=False)
            z += change
            if np.abs(change).max() <= _REFINED * np.abs(z).max():
                return z
        raise LinAlgError(f"refinement did not converge at penalty {self._penalty:g}")


def smooth(y: FloatArray, v: FloatArray, axis: FloatArray, penalty: float, order: int) -> FloatArray:
    """Smoothed spectra for one penalty.

    Parameters
    ----------
    y : ndarray of float64, shape (n, m)
        NaN marks a missing channel.
    v : ndarray, shape (m,)
        Weights, at or above zero; missing channels get zero.
    axis : ndarray, shape (m,)
        Strictly increasing.
    penalty : float
        Above zero.
    order : int
        Of the difference, 1 to 3.

    Returns
    -------
    ndarray, shape (n, m)
        Defined at every channel; NaN for a spectrum with ``order`` channels or fewer. Cost O(n m).
    """
    whole: BoolArray = np.asarray(np.isfinite(y).all(axis=1))
    z = np.empty_like(y)
    if whole.any():
        differences = Differences(axis, order)
        try:
            solver = _Solver(differences, differences.bands(), penalty, v)
            z[whole] = solver.solve((v * y[whole]).T).T
        except LinAlgError:
            whole = np.zeros_like(whole)
    if not whole.all():
        z[~whole], _, _ = reweighted(y[~whole], v, axis, penalty, order, ("none", 0.0), 1, 0.0)
    return z


def reweighted(
    y: FloatArray,
    v: FloatArray,
    axis: FloatArray,
    penalty: float,
    order: int,
    rule: tuple[str, float],
    iterations: int,
    tolerance: float,
) -> tuple[FloatArray, IntArray, BoolArray]:
    """Smooth curves whose weights are renewed from the residual until they settle: penalised baselines.

    Parameters
    ----------
    y : ndarray of float64, shape (n, m)
        NaN marks a missing channel.
    v : ndarray, shape (m,)
        Weights, at or above zero, that multiply those of the rule.
    axis : ndarray, shape (m,)
        Strictly increasing.
    penalty : float
        Above zero.
    order : int
        Of the difference, 1 to 3.
    rule : (str, float)
        A name in ``reweight.RULES`` and its setting.
    iterations : int
        Solutions at most.
    tolerance : float
        When the rule counts the weights as settled.

    Returns
    -------
    z : ndarray, shape (n, m)
        The curves; NaN for a spectrum with ``order`` channels or fewer.
    count : ndarray of int, shape (n,)
        Solutions made.
    settled : ndarray of bool, shape (n,)
        Whether the weights settled within ``iterations``.

    Notes
    -----
    Every spectrum is solved as if it were alone: the answer does not depend on its company.
    """
    args = (y, v, Differences(axis, order), penalty, rule, iterations, tolerance)
    if y.size >= MANY:
        return _compiled(*args)
    try:
        return _one_by_one(*args)
    except LinAlgError:
        return _compiled(*args)


def _one_by_one(
    y: FloatArray,
    v: FloatArray,
    differences: Differences,
    penalty: float,
    rule: tuple[str, float],
    iterations: int,
    tolerance: float,
) -> tuple[FloatArray, IntArray, BoolArray]:
    name, setting = rule
    renew = RULES[name]
    bands = differences.bands()
    z = np.full_like(y, np.nan)
    count = np.zeros(y.shape[0], dtype=np.int64)
    settled = np.zeros(y.shape[0], dtype=np.bool_)
    for row in range(y.shape[0]):
        known = np.isfinite(y[row])
        weights, values = np.where(known, v, 0.0), np.where(known, y[row], 0.0)
        if np.count_nonzero(weights) <= differences.order:
            continue
        w: FloatArray = np.ones(y.shape[1])
        while count[row] < iterations and not settled[row]:
            count[row] += 1
            total = weights * w
            z[row] = _Solver(differences, bands, penalty, total).solve(total * values)
            fit = Fit(values, z[row], weights, w, int(count[row]), differences.order, setting, tolerance)
            w, settled[row] = renew(fit)
    return z, count, settled


def _compiled(
    y: FloatArray,
    v: FloatArray,
    differences: Differences,
    penalty: float,
    rule: tuple[str, float],
    iterations: int,
    tolerance: float,
) -> tuple[FloatArray, IntArray, BoolArray]:
    from unmix.kernels import whittaker_compiled  # noqa: PLC0415  numba loads only when it is worth it

    name, setting = rule
    gaps, weights = differences.transitions()
    code = list(RULES).index(name)
    with _ONE_AT_A_TIME:
        z, count, settled = whittaker_compiled.reweighted(
            np.ascontiguousarray(y), v, gaps, penalty * weights, code, setting, iterations, tolerance
        )
    return z, count, settled


def leverages(v: FloatArray, axis: FloatArray, penalty: float, order: int) -> FloatArray:
    """How much each channel determines its own smoothed value: the diagonal of (W + penalty D'D)^-1 W.

    Parameters
    ----------
    v : ndarray, shape (m,)
        Weights.
    axis, penalty, order
        As in ``smooth``.

    Returns
    -------
    ndarray, shape (m,)
        Their sum is the effective number of parameters. Cost O(m^2), in blocks of 512 columns.
    """
    found: FloatArray = np.empty(axis.size, dtype=np.float64)
    for low in range(0, axis.size, 512):
        block = np.arange(low, min(low + 512, axis.size))
        unit = np.zeros((block.size, axis.size))
        unit[block - low, block] = 1.0
        found[block] = smooth(unit, v, axis, penalty, order)[block - low, block]
    return found


def penalty_of_cutoff(cutoff: float, order: int) -> float:
    """The penalty under which a wave of ``cutoff`` channels (even spacing, weights 1) keeps half its height.

    From the response 1 / (1 + penalty (2 sin(pi / cutoff))^(2 d)) of the inner channels (Eilers 2003).
    """
    return float((2.0 * np.sin(np.pi / max(cutoff, 2.0))) ** (-2 * order))


def cutoff_of_penalty(penalty: float, order: int) -> float:
    """The wave length in channels that keeps half its height; the inverse of ``penalty_of_cutoff``."""
    return float(np.pi / np.arcsin(min(1.0, 0.5 * penalty ** (-0.5 / order))))
