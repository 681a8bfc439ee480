"""Stray light from the shape of a spectrum: nonlinear least squares in transmittance, where the noise is even.

Legend: A = a x absorbance of the model (a: channels x terms, x: terms), s share of stray light, T = (10^-A + s) /
(1 + s) measured transmittance.
"""

from typing import NamedTuple

import numpy as np

from unmix.kernels import FloatArray

#: Gauss-Newton steps; each is damped until the sum of squares falls
_STEPS = 25
_HALVINGS = 12


class StrayFit(NamedTuple):
    """Stray light of one spectrum.

    Attributes
    ----------
    share : float
        Stray light as a share of the light, not negative.
    gain : float
        Sum of squares without stray light over that with it.
    terms : ndarray, shape (terms,)
        The linear terms of the fit with stray light.
    """

    share: float
    gain: float
    terms: FloatArray


def fit_stray(absorbance: FloatArray, a: FloatArray, start: FloatArray, share: float) -> StrayFit:
    """Fit the linear terms together with the share of stray light.

    Parameters
    ----------
    absorbance : ndarray, shape (channels,)
        Measured, finite.
    a : ndarray, shape (channels, terms)
        Design.
    start : ndarray, shape (terms,)
        Terms to start from.
    share : float
        Stray light to start from.

    Returns
    -------
    StrayFit
    """
    light = 10.0**-absorbance
    size = np.linalg.norm(a, axis=0)
    size[size == 0] = 1.0
    _, _, without = _descend(light, a / size, start * size, 0.0, fixed=True)
    terms, found, with_stray = _descend(light, a / size, start * size, max(share, 1e-6), fixed=False)
    gain = without / with_stray if with_stray > 0 else np.inf
    return StrayFit(found, float(gain), terms / size)


def _descend(
    light: FloatArray, a: FloatArray, x: FloatArray, s: float, *, fixed: bool
) -> tuple[FloatArray, float, float]:
    residual, through = _residual(light, a, x, s)
    best = float(residual @ residual)
    for _ in range(_STEPS):
        jacobian = -np.log(10.0) * through[:, None] * a / (1.0 + s)
        if not fixed:
            jacobian = np.hstack([jacobian, ((1.0 - through) / (1.0 + s) ** 2)[:, None]])
        step = np.linalg.lstsq(jacobian, residual, rcond=1e-12)[0]
        for halving in range(_HALVINGS):
            part = 0.5**halving
            x_new = x + part * step[: x.size]
            s_new = s if fixed else min(max(s + part * step[-1], 0.0), 0.5)
            residual_new, through_new = _residual(light, a, x_new, s_new)
            size = float(residual_new @ residual_new)
            if size < best:
                break
        else:
            break
        done = size > best * (1.0 - 1e-6)
        x, s, residual, through, best = x_new, s_new, residual_new, through_new, size
        if done:
            break
    return x, s, best


def _residual(light: FloatArray, a: FloatArray, x: FloatArray, s: float) -> tuple[FloatArray, FloatArray]:
    through = 10.0 ** -np.clip(a @ x, -1.0, 30.0)
    return light - (through + s) / (1.0 + s), through
