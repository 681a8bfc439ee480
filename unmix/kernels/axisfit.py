"""Pure spectra as another instrument would have recorded them: shifted, stretched, broadened; and the best such fit.

Legend: a pure spectrum S becomes S(x - s - t (x - m)), with m the middle of the axis, after convolution with a Gaussian
of variance v. The parameters theta hold one column of (s, t, v) a group of components. Amounts and baseline are linear
and eliminated (variable projection); the Jacobian leaves out the derivative of the projector (Kaufman).
"""

from typing import NamedTuple

import numpy as np
from scipy.interpolate import make_interp_spline
from scipy.optimize import least_squares

from unmix.kernels import BoolArray, FloatArray

#: the parameters, in their order: shift and broadening in units of the axis, stretch relative
PARAMETERS = ("shift", "stretch", "broadening")

#: full width at half height of a Gaussian over its standard deviation
WIDTH = 2.0 * np.sqrt(2.0 * np.log(2.0))

#: an axis whose step is so many times the usual one has a gap
_GAP = 3.0


class Warp:
    """Pure spectra ready to be moved.

    Parameters
    ----------
    signal : ndarray, shape (channels, components)
    axis : ndarray, shape (channels,)
        Increasing.
    """

    def __init__(self, signal: FloatArray, axis: FloatArray) -> None:
        self.axis, self.count = axis, signal.shape[1]
        self.middle = 0.5 * (axis[0] + axis[-1])
        step = np.diff(axis)
        self.spacing = float(np.median(step))
        fine = 0.5 * float(step.min())
        count = min(int(np.ceil((axis[-1] - axis[0]) / fine)) + 1, 8 * axis.size)
        self.grid = np.linspace(axis[0], axis[-1], count)
        rows = make_interp_spline(axis, _filled(signal, axis), k=min(3, axis.size - 1), axis=0)(self.grid).T
        self._pad = max(count // 8, 1)
        # beyond the ends a spectrum goes on as its mirror image through the last value
        left = 2.0 * rows[:, :1] - rows[:, self._pad : 0 : -1]
        right = 2.0 * rows[:, -1:] - rows[:, -2 : -self._pad - 2 : -1]
        whole = np.hstack([left, rows, right])
        self._size = whole.shape[1]
        self._offset = left.shape[1]
        self._power = np.fft.rfft(whole, axis=1)
        self._square = (2.0 * np.pi * np.fft.rfftfreq(self._size, d=self.grid[1] - self.grid[0])) ** 2

    def moved(self, theta: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Spectra at some parameters, and their derivatives.

        Parameters
        ----------
        theta : ndarray, shape (3, components)
            Shift, stretch, variance of each component.

        Returns
        -------
        signal : ndarray, shape (channels, components)
        derivative : ndarray, shape (3, channels, components)
        """
        signal = np.empty((self.axis.size, theta.shape[1]))
        derivative = np.empty((3, *signal.shape))
        away = self.axis - self.middle
        for j, (shift, stretch, variance) in enumerate(theta.T):
            damped = self._power[j] * np.exp(-0.5 * self._square * variance)
            inside = slice(self._offset, self._offset + self.grid.size)
            rows = np.stack([np.fft.irfft(damped, n=self._size)[inside],
                             np.fft.irfft(-0.5 * self._square * damped, n=self._size)[inside]], axis=1)  # fmt: skip
            curve = make_interp_spline(self.grid, rows, k=3, axis=0)
            at = np.clip(self.axis - shift - stretch * away, self.grid[0], self.grid[-1])
            value, slope = curve(at), curve(at, nu=1)[:, 0]
            signal[:, j] = value[:, 0]
            derivative[0, :, j], derivative[1, :, j], derivative[2, :, j] = -slope, -slope * away, value[:, 1]
        return signal, derivative


def _filled(signal: FloatArray, axis: FloatArray) -> FloatArray:
    """The spectra with a straight line across channels that are missing."""
    whole = np.array(signal, dtype=np.float64)
    for column in whole.T:
        there = np.isfinite(column)
        column[~there] = np.interp(axis[~there], axis[there], column[there]) if there.any() else 0.0
    return whole


class AxisFit(NamedTuple):
    """Parameters found.

    Attributes
    ----------
    theta : ndarray, shape (3, components)
        Shift, stretch, variance; zero where not asked for.
    signal : ndarray, shape (channels, components)
        The pure spectra moved.
    columns : ndarray, shape (channels, parameters)
        What one unit of each free parameter adds to the spectrum.
    """

    theta: FloatArray
    signal: FloatArray
    columns: FloatArray


def reach_of(axis: FloatArray, reach: float) -> BoolArray:
    """Channels that lie farther than ``reach`` from every end of a stretch of neighbouring channels."""
    step = np.diff(axis)
    cuts = np.flatnonzero(step > _GAP * np.median(step)) + 1
    keep = np.zeros(axis.size, dtype=np.bool_)
    for part in np.split(np.arange(axis.size), cuts):
        keep[part] = (axis[part] >= axis[part[0]] + reach) & (axis[part] <= axis[part[-1]] - reach)
    return keep


def fit_axis(
    y: FloatArray, weight: FloatArray, free: FloatArray, warp: Warp, groups: FloatArray, bounds: FloatArray
) -> AxisFit:
    """Fit the parameters of one spectrum.

    Parameters
    ----------
    y : ndarray, shape (channels,)
    weight : ndarray, shape (channels,)
        Zero on channels that do not count.
    free : ndarray, shape (channels, terms)
        Baseline.
    warp : Warp
    groups : ndarray of bool, shape (parameters, 3, components)
        Which entries of theta each free parameter moves together.
    bounds : ndarray, shape (parameters, 2)

    Returns
    -------
    AxisFit

    References
    ----------
    Golub and Pereyra, SIAM J. Numer. Anal. 10 (1973) 413; Kaufman, BIT 15 (1975) 49.
    """
    used = weight != 0
    data = (y * weight)[used]
    basis = free[used] * weight[used, None]
    kept: dict[bytes, tuple[FloatArray, FloatArray]] = {}

    def parts(p: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        theta = np.einsum("a,aij->ij", p, groups.astype(float))
        key = p.tobytes()
        if key not in kept:
            kept.clear()
            kept[key] = warp.moved(theta)
        return theta, *kept[key]

    def solve(p: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        _, signal, derivative = parts(p)
        a = np.hstack([basis, signal[used] * weight[used, None]])
        q, r = np.linalg.qr(a)
        z = q.T @ data
        amounts = np.linalg.lstsq(r, z, rcond=1e-12)[0][basis.shape[1] :]
        return q, np.maximum(amounts, 0.0), derivative

    def columns(amounts: FloatArray, derivative: FloatArray) -> FloatArray:
        found: FloatArray = np.einsum("aij,icj,j->ca", groups.astype(float), derivative, amounts)
        return found

    def residual(p: FloatArray) -> FloatArray:
        q, _, _ = solve(p)
        rest: FloatArray = data - q @ (q.T @ data)
        return rest

    def jacobian(p: FloatArray) -> FloatArray:
        q, amounts, derivative = solve(p)
        moved = columns(amounts, derivative)[used] * weight[used, None]
        rest: FloatArray = -(moved - q @ (q.T @ moved))
        return rest

    scale = np.ptp(bounds, axis=1)
    start = np.clip(np.zeros(len(bounds)), bounds[:, 0] + 1e-6 * scale, bounds[:, 1] - 1e-6 * scale)
    size = float(np.linalg.norm(residual(start)))
    if size == 0:
        best = np.zeros(len(bounds))
    else:
        best = least_squares(residual, start, jacobian, (bounds[:, 0], bounds[:, 1]), x_scale=scale,
                             xtol=1e-7, ftol=1e-9, gtol=1e-9, max_nfev=60).x  # fmt: skip
    theta, signal, derivative = parts(best)
    _, amounts, _ = solve(best)
    return AxisFit(theta, signal, columns(amounts, derivative))
