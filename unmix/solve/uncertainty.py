"""Combined uncertainty of amounts and what each input quantity contributes, in the terms of the GUM (JCGM 100:2008).

The spectrum's noise, the pure spectra, path length, dilution and what was given about the amounts are input quantities;
each contributes the product of its standard uncertainty and its sensitivity coefficient.
"""

from typing import NamedTuple

import numpy as np

from unmix.kernels import FloatArray
from unmix.kernels.gls import GlsFit

#: input quantities, in the order of the last dimension of ``Combined.contribution``
SOURCES = ("noise of the spectrum", "pure spectra", "noise of the pure spectra", "path length", "dilution",
           "constraints", "unexplained bands", "between samples")  # fmt: skip


class Inputs(NamedTuple):
    """Standard uncertainties of the input quantities beside the noise of the spectrum.

    Attributes
    ----------
    pure : ndarray, shape (components,)
        Relative, of each pure spectrum as a whole.
    pure_noise : ndarray, shape (components,)
        Standard deviation of a channel of each pure spectrum per unit amount.
    path, dilution : float
        Relative.
    """

    pure: FloatArray
    pure_noise: FloatArray
    path: float = 0.0
    dilution: float = 0.0


class Scale(NamedTuple):
    """Relative standard uncertainties of what all amounts of a sample are divided by or multiplied with."""

    path_uncertainty: float = 0.0
    dilution_uncertainty: float = 0.0


class Sensitivity(NamedTuple):
    """What the amounts of a chunk of spectra depend on, beside the noise.

    Attributes
    ----------
    amounts : ndarray, shape (spectra, components)
        As reported.
    response : ndarray, shape (spectra, components, components), or None
        Change of each amount (first) for a unit more of each component (last) in the spectrum; None for the identity.
    given : ndarray, shape (spectra, components), or None
        Standard uncertainty from that of constraints.
    """

    amounts: FloatArray
    response: FloatArray | None = None
    given: FloatArray | None = None


class Combined(NamedTuple):
    """Contributions and their combination, in units of amount.

    Attributes
    ----------
    contribution : ndarray, shape (spectra, components, ``SOURCES``)
    spread : ndarray, shape (spectra, components)
        Combined standard uncertainty: the root of the sum of squares.
    freedom : ndarray, shape (spectra, components)
        Effective degrees of freedom (JCGM 100:2008, equation G.2b); only the noise has few.
    correlation : ndarray, shape (spectra, components, components)
    """

    contribution: FloatArray
    spread: FloatArray
    freedom: FloatArray
    correlation: FloatArray


def combine(
    noise: FloatArray,
    structured: FloatArray,
    freedom: FloatArray,
    factor: FloatArray,
    sensitivity: Sensitivity,
    inputs: Inputs,
    pure_noise: tuple[FloatArray, FloatArray],
) -> Combined:
    """Combine what is known about the uncertainty of the amounts of a chunk of spectra.

    Parameters
    ----------
    noise : ndarray, shape (spectra, components)
        Standard uncertainty from the noise of the spectrum alone.
    structured : ndarray, shape (spectra, components)
        The same from a residual that is no noise; takes its place where it is larger.
    freedom : ndarray, shape (spectra, 1)
        Degrees of freedom of the noise.
    factor : ndarray, shape (spectra or 1, components, directions)
        Its outer product is proportional to the covariance from noise.
    sensitivity : Sensitivity
    inputs : Inputs
    pure_noise : (ndarray, ndarray), shapes (spectra, 1) and (spectra, components)
        Variance that noise of the pure spectra adds, as a share of that of the noise (which may hold it already, as a
        negative share), and what it takes from the amounts.

    Returns
    -------
    Combined

    References
    ----------
    JCGM 100:2008, clause 5 and annex G. W. A. Fuller, Measurement Error Models (1987), chapter 1, for the
    attenuation by noise of the pure spectra.
    """
    c = sensitivity.amounts
    n, k = c.shape
    share, bias = pure_noise
    added = np.maximum(share, 0.0)
    part = np.zeros((n, k, len(SOURCES)))
    response = sensitivity.response
    pure = (c * inputs.pure)[:, None, :] * (np.eye(k) if response is None else response)
    common = c if response is None else np.einsum("nij,nj->ni", response, c)
    # endless (amount not determined) and unknown uncertainties stay those of noise
    finite = np.where(np.isfinite(noise), noise, 0.0)
    part[..., 0] = np.where(np.isfinite(noise), finite * np.sqrt(np.where(share < 0, 1.0 + share, 1.0)), noise)
    part[..., 1] = np.sqrt(np.sum(pure**2, axis=2))
    part[..., 2] = np.hypot(finite * np.sqrt(np.where(share < 0, -share, added)), bias)
    part[..., 3], part[..., 4] = np.abs(common) * inputs.path, np.abs(common) * inputs.dilution
    if sensitivity.given is not None:
        part[..., 5] = sensitivity.given
    with np.errstate(invalid="ignore"):
        more = np.maximum(structured**2 - noise**2 * (1.0 + added), 0.0)
        part[..., 6] = np.sqrt(np.where(np.isfinite(noise), more, 0.0))
    spread = np.sqrt(np.sum(part**2, axis=2))
    return Combined(part, spread, _effective(spread, part[..., [0, 2, 6]], freedom),
                    _correlation(noise, factor, spread, pure, common, inputs))  # fmt: skip


def _effective(spread: FloatArray, few: FloatArray, freedom: FloatArray) -> FloatArray:
    """Effective degrees of freedom: parts of one residual count as one quantity, the others are known without end."""
    from_residual = np.sum(few**2, axis=2)
    with np.errstate(invalid="ignore", divide="ignore"):
        grown = freedom * (spread**2 / from_residual) ** 2
    return np.where(np.isfinite(grown) & (from_residual > 0), grown, np.where(from_residual > 0, freedom, np.inf))


def _correlation(
    noise: FloatArray, factor: FloatArray, spread: FloatArray, pure: FloatArray, common: FloatArray, inputs: Inputs
) -> FloatArray:
    """Correlation of amounts; what the covariance lacks of the standard uncertainties counts as uncorrelated."""
    k = noise.shape[1]
    with np.errstate(invalid="ignore", divide="ignore"):
        length = np.linalg.norm(factor, axis=2, keepdims=True)
        unit = np.nan_to_num(factor / np.where(length > 0, length, 1.0))
        covariance = (unit @ unit.transpose(0, 2, 1)) * (noise[:, :, None] * noise[:, None, :])
        covariance = covariance + pure @ pure.transpose(0, 2, 1)
        covariance += (inputs.path**2 + inputs.dilution**2) * common[:, :, None] * common[:, None, :]
        scale = spread[:, :, None] * spread[:, None, :]
        found = np.clip(np.where(scale > 0, covariance / scale, 0.0), -1.0, 1.0)
    found = np.where(np.isfinite(scale), found, np.nan)
    place = np.arange(k)
    found[:, place, place] = np.where(np.isnan(spread), np.nan, 1.0)
    return found


def noise_of_pure(
    solved: GlsFit, weight: FloatArray, amounts: FloatArray, sizes: FloatArray, sigma: FloatArray, *, known: bool
) -> tuple[FloatArray, FloatArray]:
    """What noise of the pure spectra does to a fit: to the variance of its noise, and to the amounts.

    Parameters
    ----------
    solved : GlsFit
    weight : ndarray, shape (channels,)
    amounts : ndarray, shape (spectra, components)
    sizes : ndarray, shape (components,)
        Standard deviation of a channel of each pure spectrum per unit amount.
    sigma : ndarray, shape (spectra,)
        Standard deviation of the whitened noise.
    known : bool
        Whether the noise was given, so that noise of the pure spectra comes on top; else the residual holds it.

    Returns
    -------
    share : ndarray, shape (spectra, 1)
        See :func:`combine`; below zero where the noise holds it.
    bias : ndarray, shape (spectra, components)
    """
    n, k = amounts.shape
    if not sizes.any():
        return np.zeros((n, 1)), np.zeros((n, k))
    used = weight != 0
    unit = float(np.median(weight[used])) ** 2 * np.sum(solved.filter**2, axis=1)
    with np.errstate(invalid="ignore", divide="ignore"):
        share = np.nan_to_num(np.sum((amounts * sizes) ** 2, axis=1) * unit / sigma**2)
    factor = np.nan_to_num(solved.factor[:, -k:], posinf=0.0)
    outer = factor @ factor.transpose(0, 2, 1)
    bias = np.abs(np.einsum("nij,nj->ni", np.broadcast_to(outer, (n, k, k)),
                            used.sum() * unit[:, None] * sizes**2 * amounts))  # fmt: skip
    return (share if known else -np.minimum(share, 1.0))[:, None], bias
