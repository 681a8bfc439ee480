"""Carbon dioxide and water vapour of the air in infrared spectra, found by where their lines stand.

Each is looked for as a pattern at its known place, and again at the same pattern moved aside: only what fits the known
place, and clearly better than the others, is reported. Positions are those of the ground-state bands near 2349 cm-1
(CO2, antisymmetric stretch) and of the strongest lines of the H2O bands near 1595 and 3756 cm-1, rounded to 1 cm-1.
"""

from typing import NamedTuple

import numpy as np
from scipy.ndimage import uniform_filter1d

from unmix.kernels import FloatArray

#: maxima and widths of the two branches of CO2 at room temperature, cm-1, and their relative heights
_CO2 = ((2361.0, 8.0, 1.0), (2339.0, 11.0, 0.9))
_CO2_WINDOW = (2250.0, 2450.0)

_WATER = (
    (1370.0, 1880.0, (1374, 1387, 1396, 1419, 1437, 1457, 1473, 1490, 1507, 1522, 1540, 1559, 1570, 1576, 1617, 1636,
                      1647, 1653, 1670, 1684, 1696, 1700, 1718, 1734, 1751, 1772, 1793, 1830, 1845, 1869)),
    (3560.0, 3910.0, (3568, 3588, 3629, 3649, 3676, 3690, 3712, 3736, 3751, 3802, 3821, 3839, 3854, 3903)),
)  # fmt: skip

#: wider spacing than this does not resolve the patterns, cm-1
_COARSEST = 4.0
#: how far the pattern is moved to see what chance gives, and how far the true one may be off, cm-1
_ASIDE, _OFF = 80, 2
#: share of the detrended window that CO2 must explain, and its height in noise
_EXPLAINED, _ABOVE_NOISE = 0.5, 10.0
#: correlation that water vapour must reach, and in standard deviations of the moved patterns
_CORRELATED, _SURE = 0.35, 4.0


class Atmosphere(NamedTuple):
    """What of the air is in each spectrum.

    Attributes
    ----------
    carbon_dioxide : ndarray, shape (spectra,)
        Height of the band near 2361 cm-1 in absorbance; negative where the background held more of it, 0 where none
        was found, NaN where the axis does not show it.
    water_vapour : ndarray, shape (spectra,)
        Correlation with the pattern of lines, likewise signed, 0 and NaN.
    """

    carbon_dioxide: FloatArray
    water_vapour: FloatArray


def atmosphere(axis: FloatArray, absorbance: FloatArray, noise: FloatArray) -> Atmosphere:
    """Look for carbon dioxide and water vapour in infrared spectra.

    Parameters
    ----------
    axis : ndarray, shape (channels,)
        Wavenumbers in cm-1, increasing.
    absorbance : ndarray, shape (spectra, channels)
        Missing channels are bridged by straight lines; a spectrum that is missing altogether shows nothing.
    noise : ndarray, shape (spectra,)
        Standard deviation of a channel.

    Returns
    -------
    Atmosphere
    """
    bridged = np.zeros(absorbance.shape)
    for row, whole in zip(absorbance, bridged, strict=True):
        known = np.isfinite(row)
        if known.any():
            whole[:] = np.interp(axis, axis[known], row[known])
    water = np.array([_pattern(axis, bridged, np.array(lines), low, high) for low, high, lines in _WATER])
    # The stronger of the two bands, NaN only where the axis shows neither
    stronger = np.abs(np.nan_to_num(water)).argmax(axis=0)
    vapour = np.where(np.isnan(water).all(axis=0), np.nan, np.nan_to_num(water)[stronger, np.arange(len(bridged))])
    return Atmosphere(_carbon_dioxide(axis, bridged, noise), vapour)


def _part(axis: FloatArray, low: float, high: float) -> slice | None:
    """The channels of a window; None where the axis does not cover it finely enough."""
    start, stop = np.searchsorted(axis, [low, high])
    if stop - start < 24 or axis[0] > low or axis[-1] < high or np.diff(axis[start:stop]).max() > 2 * _COARSEST:
        return None
    return slice(int(start), int(stop)) if np.median(np.diff(axis[start:stop])) <= _COARSEST else None


def _carbon_dioxide(axis: FloatArray, absorbance: FloatArray, noise: FloatArray) -> FloatArray:
    part = _part(axis, *_CO2_WINDOW)
    if part is None:
        return np.full(len(absorbance), np.nan)
    x = axis[part]
    shifts = np.arange(-50, 51)
    trend = np.linalg.qr(np.vander((x - 2350) / 100, 4))[0]
    rows = absorbance[:, part] - absorbance[:, part] @ trend @ trend.T
    places = x[None, :] - shifts[:, None]
    pattern = np.sum([height * np.exp(-(((places - at) / width) ** 2)) for at, width, height in _CO2], axis=0)
    pattern -= pattern @ trend @ trend.T
    height = rows @ pattern.T / (pattern**2).sum(axis=1)
    total = (rows**2).sum(axis=1, keepdims=True)
    explained = height**2 * (pattern**2).sum(axis=1) / np.where(total > 0, total, np.inf)
    best = explained.argmax(axis=1)
    each = np.arange(len(rows))
    found = (explained[each, best] >= _EXPLAINED) & (np.abs(shifts[best]) <= _OFF)
    tall = height[each, best]
    return np.where(found & (np.abs(tall) > _ABOVE_NOISE * np.nan_to_num(noise)), tall, 0.0)


def _pattern(axis: FloatArray, absorbance: FloatArray, lines: FloatArray, low: float, high: float) -> FloatArray:
    """Correlation of the fine structure with lines at their place, 0 where moved lines fit nearly as well."""
    part = _part(axis, low, high)
    if part is None:
        return np.full(len(absorbance), np.nan)
    x = axis[part]
    spacing = float(np.median(np.diff(x)))
    width = max(3.0, 1.2 * spacing)
    window = max(3, 2 * round(6 / spacing) + 1)
    fine = _without_bands(absorbance[:, part], window)
    # Edges of strong bands must not outweigh the lines
    limit = 3 * 1.4826 * np.median(np.abs(fine), axis=1, keepdims=True)
    fine = np.clip(fine, -limit, limit)
    shifts = np.arange(-_ASIDE, _ASIDE + 1)
    pattern = _without_bands(_lines(x[None, :] - shifts[:, None], lines, width), window)
    scale = np.sqrt((fine**2).sum(axis=1)[:, None] * (pattern**2).sum(axis=1))
    score = fine @ pattern.T / np.where(scale > 0, scale, np.inf)
    near = score[:, np.abs(shifts) <= _OFF]
    best = near[np.arange(len(near)), np.abs(near).argmax(axis=1)]
    chance = score[:, np.abs(shifts) > 3 * _OFF].std(axis=1)
    return np.where(np.abs(best) >= np.maximum(_CORRELATED, _SURE * chance), best, 0.0)


def _lines(x: FloatArray, lines: FloatArray, width: float) -> FloatArray:
    at = np.searchsorted(lines, x).clip(1, lines.size - 1)
    near = np.minimum(np.abs(x - lines[at - 1]), np.abs(x - lines[at]))
    shape: FloatArray = np.exp(-((near / width) ** 2))
    return shape


def _without_bands(values: FloatArray, window: int) -> FloatArray:
    slow: FloatArray = uniform_filter1d(uniform_filter1d(values, window, axis=-1), window, axis=-1)
    return values - slow
