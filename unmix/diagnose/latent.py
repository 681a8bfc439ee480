"""What a latent-variable calibration rests on: importance of channels, net analyte signal, detection limits."""

from typing import NamedTuple

import numpy as np

from unmix.kernels import FloatArray


def importance(rotations: FloatArray, y_loadings: FloatArray, score_squares: FloatArray) -> FloatArray:
    """Variable importance in projection (VIP).

    Parameters
    ----------
    rotations : ndarray, shape (channels, k)
        Scores are centred spectra times these.
    y_loadings : ndarray, shape (k,)
    score_squares : ndarray, shape (k,)
        Sum of squares of each score.

    Returns
    -------
    ndarray, shape (channels,)
        Mean square 1; above 1 a channel counts more than the average one.

    References
    ----------
    Wold, Johansson and Cocchi in: 3D QSAR in Drug Design (1993), 523. Chong and Jun, Chemom. Intell. Lab. Syst. 78
    (2005) 103. The weights are the orthonormal basis of the rotations, which span the same nested spaces.
    """
    weights = np.linalg.qr(rotations)[0]
    explained = y_loadings**2 * score_squares
    found: FloatArray = np.sqrt(rotations.shape[0] * (weights**2 @ explained) / explained.sum())
    return found


def selectivity_ratio(
    coefficients: FloatArray, scores: FloatArray, loadings: FloatArray, residual_variance: FloatArray
) -> FloatArray:
    """Selectivity ratio: variance of a channel along the target projection over the rest of its variance.

    Parameters
    ----------
    coefficients : ndarray, shape (channels,)
    scores : ndarray, shape (samples, k)
    loadings : ndarray, shape (channels, k)
    residual_variance : ndarray, shape (channels,)
        Of the spectra about the model.

    Returns
    -------
    ndarray, shape (channels,)

    References
    ----------
    Kvalheim, J. Chemometrics 24 (2010) 496. Rajalahti et al., Chemom. Intell. Lab. Syst. 95 (2009) 35.
    """
    t = scores @ (loadings.T @ coefficients)
    modelled = scores @ loadings.T
    p = modelled.T @ t / (t @ t)
    degrees = max(scores.shape[0] - 1, 1)
    along = p**2 * (t @ t) / degrees
    rest = np.sum((modelled - np.outer(t, p)) ** 2, axis=0) / degrees + residual_variance
    ratio: FloatArray = np.divide(along, rest, out=np.full_like(along, np.inf), where=rest > 0)
    return ratio


class Merit(NamedTuple):
    """Figures of merit of one property.

    Attributes
    ----------
    sensitivity : float
        Net analyte signal of a unit of the property, 1 / ||b||.
    analytical_sensitivity : float
        Sensitivity over the noise of a channel: the reciprocal is the smallest difference that noise lets be seen.
    detection_low, detection_high : float
        Ends of the detection limit interval.
    """

    sensitivity: float
    analytical_sensitivity: float
    detection_low: float
    detection_high: float


def merit(
    coefficients: FloatArray, noise: float, reference_sd: float, values: FloatArray, leverage: FloatArray
) -> Merit:
    """Sensitivity and detection limit interval.

    Parameters
    ----------
    coefficients : ndarray, shape (channels,)
    noise : float
        Standard deviation of a channel.
    reference_sd : float
        Standard deviation of a reference value.
    values : ndarray, shape (samples,)
        Reference values of the calibration samples.
    leverage : ndarray, shape (samples,)

    Returns
    -------
    Merit
        The detection limits are NaN where the calibrated values do not start near zero, whose distance from the middle
        the leverage of a blank rests on (mean of the values at or below zero).

    References
    ----------
    Allegrini and Olivieri, Anal. Chem. 86 (2014) 7858. Lorber, Anal. Chem. 58 (1986) 1167, for the net analyte signal.
    """
    sensitivity = 1.0 / float(np.linalg.norm(coefficients))
    mean = float(values.mean())
    centred = values - mean
    if mean <= 0:
        return Merit(sensitivity, sensitivity / noise if noise > 0 else np.inf, np.nan, np.nan)
    low = mean**2 / float(np.sum(centred**2))
    high = float(np.max(leverage + low * (1.0 - (centred / mean) ** 2)))
    signal = (noise / sensitivity) ** 2
    ends = [3.3 * np.sqrt(signal + h * signal + h * reference_sd**2) for h in (low, max(high, low))]
    return Merit(sensitivity, sensitivity / noise if noise > 0 else np.inf, float(ends[0]), float(ends[1]))
