"""Second passes: what a first fit teaches about the channels of one spectrum, and the fit with it.

Noise that is constant in transmittance grows as ten to the absorbance, so channels are weighed by the fitted
absorbance; stray light bends a saturated spectrum, so it is taken off and what is uncertain about it joins the fit.
"""

from dataclasses import dataclass

import numpy as np

from unmix.diagnose.verdict import GROWING
from unmix.errors import InputError
from unmix.kernels import BoolArray, FloatArray
from unmix.kernels.stray import fit_stray
from unmix.solve.analysis import Progress, analyse
from unmix.solve.answer import Answer, Settings

#: how noise depends on the light: constant in absorbance; constant in transmittance (detector); as its root (source)
NOISE_MODELS = ("constant", "detector", "source")

#: share of the exponent 10^A by which each model's noise grows
_GROWTH = {"constant": 0.0, "detector": 1.0, "source": 0.5}

#: absorbance at the top of a spectrum below which stray light is not looked for
_DARK_ENOUGH = 0.7

#: absorbance up to which a first fit is little bent by stray light
_STRAIGHT = 0.7

#: fall of the sum of squares that stray light must bring, and its least share
_GAIN = 2.0
_LEAST = 1e-5

#: no absorbance is below this; a fit on few channels may say so of others
_BRIGHTEST = -5.0

#: a spike: so many noise levels from the fit, its neighbours within this share of it, on so many channels at least
_SPIKE = 7.0
_BESIDE = 0.35
_FEWEST_CHANNELS = 50

#: channels within this of the highest absorbance that stray light allows are left out
_BENT = 0.3

#: relative noise of the transmittance from which the logarithm bends its mean by half of a percent
_TOO_DARK = 0.1


@dataclass(frozen=True)
class Light:
    """What is known about the light of each spectrum.

    Attributes
    ----------
    model : str
        One of ``NOISE_MODELS``.
    bends : bool
        Whether the spectra are absorbance as measured, which stray light can bend.
    bent : ndarray of bool, shape (spectra, channels)
        Channels near a flat top, left out of the first fit.
    plateau : ndarray, shape (spectra,)
        Absorbance of a flat top; NaN without one.
    """

    model: str
    bends: bool
    bent: BoolArray
    plateau: FloatArray


def noise_model(given: str | None, *, measured_as_transmittance: bool) -> str:
    """Model of the noise: the one given, else constant in what was measured.

    Raises
    ------
    InputError
        When the name is not known.
    """
    if given is None:
        return "detector" if measured_as_transmittance else "constant"
    if given not in NOISE_MODELS:
        raise InputError(f"noise_model is {given!r}", accepted=f"give one of {', '.join(NOISE_MODELS)}")
    return given


def solve(
    y: FloatArray,
    used: BoolArray,
    noise: FloatArray | float,
    signal: FloatArray,
    free: FloatArray,
    settings: Settings,
    light: Light,
    progress: Progress | None = None,
) -> Answer:
    """Solve all spectra, and once more those whose weights or design depend on their own fit.

    Parameters
    ----------
    y : ndarray, shape (spectra, channels)
    used : ndarray of bool, shape (spectra, channels)
    noise : float or ndarray, shape (channels,)
        Standard deviation of a channel in the light of a clear sample; 1 where unknown.
    signal, free, settings, progress
        As for :func:`unmix.solve.analysis.analyse`.
    light : Light

    Returns
    -------
    Answer
    """
    weight = np.where(used, 1.0 / np.asarray(noise), 0.0)
    straight = used & ~light.bent
    growth = _GROWTH[light.model]
    quiet = growth == 0 and not np.isfinite(light.plateau).any()
    answer = analyse(
        y, np.where(straight, weight, 0.0), signal, free, settings, progress if quiet else None
    )
    even = weight * 10.0 ** (-growth * np.clip(np.nan_to_num(answer.fitted), 0.0, 6.0))
    spikes = _spikes(y, straight, answer.fitted, even) & ~answer.blank[:, None]
    used, straight = used & ~spikes, straight & ~spikes
    for spiked in np.flatnonzero(spikes.any(axis=1)):
        row = np.where(straight[spiked], weight[spiked], 0.0)[None]
        one = analyse(y[spiked : spiked + 1], row, signal, free, settings.of(int(spiked)))
        answer.put(int(spiked), one)
    answer.spikes[:] = spikes.sum(axis=1)
    answer.residual_growth[:] = _residual_growth(y, straight, answer.fitted)
    answer.stray_light[:] = np.nan_to_num(10.0**-light.plateau)
    columns = np.hstack([free, signal])
    for i in range(y.shape[0]):
        if settings.axis is not None and np.isfinite(answer.noise_level[i]):
            _move_axis(i, y[i], np.where(straight[i], even[i], 0.0), free, settings, answer)
            if answer.axis[i]:
                continue
        stray = 0.0
        if light.bends and np.isfinite(answer.noise_level[i]):
            stray = _stray_of(i, y, used, columns, answer, light)
        if stray or (growth > 0 and np.isfinite(answer.noise_level[i])):
            one = _again(y[i], weight[i], stray, growth, columns, free.shape[1], settings.of(i), answer, i)
            answer.put(i, one)
            answer.spikes[i] = spikes[i].sum()
            answer.stray_light[i] = stray
            answer.residual_growth[i] = 1.0
        if progress and not quiet:
            progress(i + 1)
    return answer


def _move_axis(
    i: int, y: FloatArray, weight: FloatArray, free: FloatArray, settings: Settings, answer: Answer
) -> None:
    """Fit the axis of one spectrum, and the spectrum with what is uncertain about its axis as further free terms.

    Where the data determine nothing of the axis, the answer stays as it is.
    """
    fitter = settings.axis
    if fitter is None:
        return
    moved = fitter.fit(np.nan_to_num(y), weight, free)
    if moved is None:
        answer.axis[i] = fitter.nothing()
        return
    one = analyse(y[None], moved.weight[None], moved.signal, np.hstack([free, moved.columns]), settings.of(i),
                  n_baseline=free.shape[1])  # fmt: skip
    answer.put(i, one)
    answer.residual_growth[i] = 1.0
    answer.axis[i] = fitter.report(moved, *one.extra[0])


def _again(
    y: FloatArray,
    weight: FloatArray,
    stray: float,
    growth: float,
    columns: FloatArray,
    n_free: int,
    settings: Settings,
    answer: Answer,
    i: int,
) -> Answer:
    """Fit one spectrum with weights from its first fit, stray light taken off."""
    free, signal = columns[:, :n_free], columns[:, n_free:]
    dark = np.clip(_without_stray(answer.fitted[i], stray), 0.0, 6.0)
    # where stray light counts, the detector's noise is what limits the channels beside
    relative = 10.0 ** ((1.0 if stray else growth) * dark)
    row = weight / relative
    # the level of a clear channel, from the first fit, tells where the light is too weak
    clear = answer.noise_level[i] / np.median(relative[answer.used[i]])
    too_dark = np.log(10.0) * clear * relative > _TOO_DARK
    if (row[~too_dark] != 0).sum() > columns.shape[1]:
        row = np.where(too_dark, 0.0, row)
    if not stray:
        return analyse(y[None], row[None], signal, free, settings)
    bent = np.where(_with_stray(dark, stray) > -np.log10(stray) - _BENT, 0.0, row)
    row = bent if (bent != 0).sum() > columns.shape[1] + 1 else row
    with_stray = np.hstack([free, (stray * (10.0**dark - 1.0))[:, None]])
    one = analyse(_without_stray(y[None], stray), row[None], signal, with_stray, settings,
                  n_baseline=n_free)  # fmt: skip
    one.fitted[0] = _with_stray(one.fitted[0], stray)
    return one


def _stray_of(i: int, y: FloatArray, used: BoolArray, columns: FloatArray, answer: Answer, light: Light) -> float:
    """Share of stray light of a spectrum, 0 where the data do not ask for it."""
    flat = np.isfinite(light.plateau[i])
    suspicious = answer.residual_growth[i] > GROWING or abs(answer.misfit_z[i]) > answer.misfit_limit[i]
    top = np.max(y[i], initial=0.0, where=np.isfinite(y[i]))
    if not flat and not (suspicious and top > _DARK_ENOUGH and not answer.blank[i]):
        return 0.0
    keep = used[i]
    low = keep & (np.nan_to_num(y[i], nan=np.inf) < _STRAIGHT)
    if low.sum() < 2 * columns.shape[1]:
        low = keep
    start = np.linalg.lstsq(columns[low], y[i, low], rcond=1e-12)[0]
    first = 10.0 ** -float(light.plateau[i]) if flat else 10.0 ** -(top + 0.5)
    found = fit_stray(y[i, keep], columns[keep], start, first)
    if found.gain > _GAIN and found.share > _LEAST:
        return found.share
    return first if flat else 0.0


def _spikes(y: FloatArray, used: BoolArray, fitted: FloatArray, even: FloatArray) -> BoolArray:
    """Single channels far from the fit between two that are near it: no band is that narrow.

    ``even`` is what makes the noise of all channels alike.
    """
    rest = np.where(used & np.isfinite(fitted), (np.nan_to_num(y) - np.nan_to_num(fitted)) * even, 0.0)
    found = np.zeros(y.shape, dtype=bool)
    if y.shape[1] < _FEWEST_CHANNELS:
        return found
    level = np.median(np.abs(rest), axis=1, keepdims=True) / 0.6745
    size = np.abs(rest)
    beside = np.maximum(size[:, :-2], size[:, 2:])
    found[:, 1:-1] = (size[:, 1:-1] > _SPIKE * level) & (beside < _BESIDE * size[:, 1:-1]) & (level > 0)
    # where every hundredth channel stands out, it is the model that is wrong
    return np.asarray(found & (found.sum(axis=1, keepdims=True) <= max(1, y.shape[1] // 100)))


def _residual_growth(y: FloatArray, used: BoolArray, fitted: FloatArray) -> FloatArray:
    """Residual where the fit is above 60% of its maximum over that where it is below 30%, as standard deviations."""
    counts = used & np.isfinite(fitted)
    residual = np.where(counts, np.nan_to_num(y) - np.nan_to_num(fitted), 0.0) ** 2
    top = np.max(np.nan_to_num(fitted), axis=1, initial=0.0)[:, None]
    high, low = counts & (fitted > 0.6 * top), counts & (fitted < 0.3 * top)
    n_high, n_low = high.sum(axis=1), low.sum(axis=1)
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio = np.sqrt((residual * high).sum(axis=1) / n_high / ((residual * low).sum(axis=1) / n_low))
    grown: FloatArray = np.where((n_high >= 8) & (n_low >= 20), np.nan_to_num(ratio, nan=1.0), 1.0)
    return grown


def _without_stray(absorbance: FloatArray, stray: float) -> FloatArray:
    """Absorbance without a share of stray light; far on the plateau it is cut off, those channels do not count."""
    light = 10.0 ** -np.maximum(absorbance, _BRIGHTEST) * (1.0 + stray) - stray
    straight: FloatArray = -np.log10(np.maximum(light, 0.1 * stray if stray else np.finfo(float).tiny))
    return straight


def _with_stray(absorbance: FloatArray, stray: float) -> FloatArray:
    """Absorbance as it is measured in the presence of a share of stray light."""
    light = 10.0 ** -np.maximum(absorbance, _BRIGHTEST)
    bent: FloatArray = -np.log10((light + stray) / (1.0 + stray))
    return bent
