"""Saturated channels: bands whose tops are flat because the detector sees no more light."""

import numpy as np
from numpy.lib.stride_tricks import sliding_window_view

from unmix.kernels import BoolArray, FloatArray

#: absorbance below which a flat top is taken for the shape of the spectrum
_DARK = 1.5

#: at or above this share of its run above 70% of the maximum, the part above 95% is a plateau (Gaussian 0.38,
#: Lorentzian 0.35)
_PLATEAU = 0.7

#: fewest channels of a plateau
_FEWEST = 4

#: how far below the plateau the straight line between amount and absorbance has its end
_MARGIN = 1.5

#: what tells a plateau from bands that happen to merge: noise on it this many times that elsewhere, since noise grows
#: as ten to the absorbance, or a middle half that is level to this share
_ROUGH = 4.0
_LEVEL = 0.005


def saturated(absorbance: FloatArray) -> tuple[BoolArray, FloatArray]:
    """Channels of each spectrum that stray light or the end of the detector's range has bent.

    A spectrum is saturated when the widest run of channels above 70% of its maximum holds mostly channels above
    95% of the level of its top, which no line shape does, and when this plateau is rougher than the rest of the
    spectrum or quite level. Then everything within 1.5 absorbance units of the plateau (or half of it, if that is
    less) counts as bent: with stray light as the cause, a share s of the light, the plateau lies at -log10 s, and 1.5
    units below it the measured absorbance is still wrong by 3% of the light (common practice, no source, for the
    margin).

    Parameters
    ----------
    absorbance : ndarray, shape (spectra, channels)
        NaN is passed over.

    Returns
    -------
    channels : ndarray of bool, shape (spectra, channels)
    plateau : ndarray, shape (spectra,)
        Absorbance of the plateau; NaN where there is none.
    """
    filled = np.where(np.isfinite(absorbance), absorbance, -np.inf)
    top = filled.max(axis=1)
    plateau = np.full(absorbance.shape[0], np.nan)
    for i in np.flatnonzero(np.isfinite(top) & (top >= _DARK)):
        level = _plateau(filled[i], _FEWEST)
        if level is None:
            # noise on a plateau can hide it; a running median keeps wide flat tops and loses the spikes
            level = _plateau(_running_median(filled[i]), 2 * _FEWEST)
        if level is not None:
            plateau[i] = level
    end = plateau - np.minimum(_MARGIN, 0.5 * plateau)
    return filled >= np.where(np.isfinite(end), end, np.inf)[:, None], plateau


def _plateau(spectrum: FloatArray, fewest: int) -> float | None:
    """Level of a flat top, looked for in the widest band that reaches 90% of the highest; None without one."""
    top = spectrum.max()
    if not np.isfinite(top):
        return None
    edges = np.diff(np.concatenate([[False], spectrum >= 0.7 * top, [False]]))
    runs = np.flatnonzero(edges).reshape(-1, 2)
    runs = runs[[spectrum[left:right].max() >= 0.9 * top for left, right in runs]]
    left, right = runs[np.argmax(runs[:, 1] - runs[:, 0])]
    run = spectrum[left:right]
    # noise is left on the plateau, so its level is the median of the upper part and not the maximum
    level = float(np.median(run[run >= 0.9 * run.max()]))
    flat = np.count_nonzero(run >= 0.95 * level)
    clear_ends = left > 0 and right < spectrum.size
    if flat < fewest or flat < _PLATEAU * run.size or not (clear_ends or flat >= 3 * _FEWEST):
        return None
    return level if _unlike_bands(run[run >= 0.9 * level], spectrum, level) else None


def _unlike_bands(top: FloatArray, spectrum: FloatArray, level: float) -> bool:
    """Whether a plateau is too level or too rough for bands that merge."""
    inner = float(np.subtract(*np.percentile(top, [75, 25])))
    return inner <= _LEVEL * level or _roughness(top) > _ROUGH * _roughness(spectrum[np.isfinite(spectrum)])


def _roughness(values: FloatArray) -> float:
    """Typical second difference, which bands leave small and noise does not."""
    return float(np.median(np.abs(np.diff(values, 2)))) if values.size > 2 else 0.0



def _running_median(values: FloatArray) -> FloatArray:
    """Median of five channels around each, the ends repeated."""
    wide = np.pad(values, 2, mode="edge")
    middle: FloatArray = np.median(sliding_window_view(wide, 5), axis=-1)
    return middle
