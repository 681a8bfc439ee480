"""Noise level and correlation from residuals, and whitening by an autoregressive model.

The residual is cut into overlapping tapered blocks; the median over blocks of the periodogram ignores the few
blocks in which a band was missed (methods as in Welch, IEEE Trans. Audio Electroacoust. 15 (1967) 70, with the
median in place of the mean). Its autocovariances give an autoregression by the Levinson recursion (Durbin, Rev.
Int. Stat. Inst. 28 (1960) 233), the order by the criterion of Schwarz (Ann. Stat. 6 (1978) 461).
"""

from typing import NamedTuple

import numpy as np

from unmix.kernels import BoolArray, FloatArray, IntArray

#: longest block, in channels; structure longer than this is not noise
BLOCK = 64

#: highest order of the autoregression
MAX_ORDER = 12

#: fewest channels from which a correlation is estimated; below, the noise is taken as white
ENOUGH = 96

#: bins at the low end that the fit of bands and baseline has touched; their power is filled in by the model
_TOUCHED = 2

#: power beyond the pass band, relative to the pass band, below which a spectrum counts as interpolated
_EMPTY = 2e-3


class Autoregression(NamedTuple):
    """Autoregressive noise of many spectra, with the lower-order predictors that start a segment.

    Attributes
    ----------
    order : ndarray, shape (spectra,), int
    predictor : ndarray, shape (spectra, orders + 1, orders)
        ``predictor[i, m, j]`` weighs the value j + 1 channels back in the predictor of order m.
    gain : ndarray, shape (spectra, orders + 1)
        Prediction variance of order m as a share of the variance of the noise.
    """

    order: IntArray
    predictor: FloatArray
    gain: FloatArray


def runs(used: BoolArray) -> list[tuple[int, int]]:
    """Start and end of each unbroken run of used channels."""
    edges = np.flatnonzero(np.diff(np.r_[False, used, False].astype(np.int8)))
    return [(int(a), int(b)) for a, b in zip(edges[::2], edges[1::2], strict=True)]


def block_power(residual: FloatArray, used: BoolArray) -> FloatArray | None:
    """Median-over-blocks power spectrum of each residual, scaled so that white noise of variance 1 gives 1.

    Parameters
    ----------
    residual : ndarray, shape (spectra, channels)
        Finite where used.
    used : ndarray, shape (channels,), bool
        Blocks do not reach across unused channels.

    Returns
    -------
    ndarray, shape (spectra, length // 2 + 1), or None
        None when there are too few channels or blocks for an estimate.
    """
    total = int(used.sum())
    if total < ENOUGH:
        return None
    length = BLOCK if total >= 4 * BLOCK else BLOCK // 2
    starts = np.concatenate(
        [np.arange(a, b - length + 1, length // 2) for a, b in runs(used)] or [np.empty(0, dtype=int)]
    ).astype(int)
    if starts.size < 4:
        return None
    taper = np.hanning(length + 2)[1:-1]
    blocks = residual[:, starts[:, None] + np.arange(length)] * taper
    power = np.abs(np.fft.rfft(blocks, axis=2)) ** 2 / np.sum(taper**2)
    # the median of a chi-square with two degrees of freedom is ln 2 of its mean; the two end bins have one
    middle: FloatArray = np.median(power, axis=1) / np.log(2.0)
    middle[:, [0, -1]] *= np.log(2.0) / 0.454936
    # a residual of exact zeros has no spectrum; any flat one will do
    return np.maximum(middle, np.finfo(float).tiny)


def interpolation_stride(power: FloatArray) -> IntArray:
    """How many channels stand for one independent one, from the empty top of the power spectrum.

    Zero filling by 2 leaves nothing above half the highest frequency, by 4 nothing above a quarter; then every
    second or fourth channel holds all the information.

    Parameters
    ----------
    power : ndarray, shape (spectra, bins)

    Returns
    -------
    ndarray of int, shape (spectra,)
        1, 2, 4 or 8.
    """
    bins = power.shape[1]
    stride = np.ones(power.shape[0], dtype=int)
    for s in (2, 4, 8):
        cut = int(np.ceil(1.25 * (bins - 1) / s)) + 1
        if cut >= bins - 2:
            continue
        below = np.median(power[:, _TOUCHED : max((bins - 1) // s, _TOUCHED + 1)], axis=1)
        empty = np.quantile(power[:, cut:], 0.9, axis=1) < _EMPTY * below
        stride[empty] = s
    return stride


def autoregression(power: FloatArray, n_channels: IntArray) -> Autoregression:
    """Fit an autoregression to block power spectra.

    Parameters
    ----------
    power : ndarray, shape (spectra, bins)
        From :func:`block_power`.
    n_channels : ndarray of int, shape (spectra,)
        Channels behind each spectrum, for the choice of the order.

    Returns
    -------
    Autoregression
    """
    power = power / power.mean(axis=1, keepdims=True)
    touched = np.arange(_TOUCHED)
    power[:, touched] = power[:, [_TOUCHED]]
    for _ in range(3):
        predictor, gain = _levinson(power)
        order = _best_order(gain, n_channels)
        model = _model_power(predictor, gain, order, 2 * (power.shape[1] - 1))
        # the model's own shape carries the power down to frequency zero
        level = power[:, _TOUCHED : _TOUCHED + 4].mean(axis=1) / model[:, _TOUCHED : _TOUCHED + 4].mean(axis=1)
        power[:, touched] = model[:, touched] * level[:, None]
    return Autoregression(order, predictor, gain)


def _levinson(power: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Predictors of every order up to the highest, all spectra at once."""
    covariance = np.fft.irfft(power, axis=1)
    rho = covariance[:, : MAX_ORDER + 1] / covariance[:, :1]
    n = power.shape[0]
    predictor = np.zeros((n, MAX_ORDER + 1, MAX_ORDER))
    gain = np.ones((n, MAX_ORDER + 1))
    for m in range(1, MAX_ORDER + 1):
        before = predictor[:, m - 1, : m - 1]
        inner = np.einsum("ij,ij->i", before, rho[:, m - 1 : 0 : -1])
        reflection = np.clip((rho[:, m] - inner) / gain[:, m - 1], -0.9999, 0.9999)
        predictor[:, m, : m - 1] = before - reflection[:, None] * before[:, ::-1]
        predictor[:, m, m - 1] = reflection
        gain[:, m] = gain[:, m - 1] * (1.0 - reflection**2)
    return predictor, gain


def _best_order(gain: FloatArray, n_channels: IntArray) -> IntArray:
    # tapering and the median leave about half of the channels' information on the spectrum's shape
    worth = 0.5 * n_channels[:, None]
    score = worth * np.log(gain) + np.arange(MAX_ORDER + 1) * np.log(np.maximum(worth, 2.0))
    best: IntArray = score.argmin(axis=1)
    return best


def _model_power(predictor: FloatArray, gain: FloatArray, order: IntArray, length: int) -> FloatArray:
    rows = np.arange(order.size)
    chosen = predictor[rows, order]
    error_filter = np.concatenate([np.ones((order.size, 1)), -chosen], axis=1)
    power: FloatArray = gain[rows, order][:, None] / np.abs(np.fft.rfft(error_filter, n=length, axis=1)) ** 2
    return power


def whiten(x: FloatArray, model: Autoregression, used: BoolArray) -> FloatArray:
    """Filter rows so that noise of the model becomes white with the variance of the noise itself.

    Within a run of used channels the first values are predicted from as many as there are, so that no channel
    is lost and nothing reaches across a gap. The result is scaled by the gain so that its level is that of the
    innovations of the chosen order.

    Parameters
    ----------
    x : ndarray, shape (spectra, ..., channels) or (1, ..., channels)
        Data or design columns; a first axis of length 1 is shared by all spectra of the model.
    model : Autoregression of those spectra, all of the same order
    used : ndarray, shape (channels,), bool
        Unused channels come out as zero.

    Returns
    -------
    ndarray, shape (spectra, ..., channels)
    """
    m = int(model.order[0])
    n = model.order.size
    lead = (n,) + (1,) * (x.ndim - 1)
    out = np.zeros((n, *x.shape[1:]))
    last = np.sqrt(model.gain[:, m])
    for start, stop in runs(used):
        for t in range(min(m, stop - start)):
            part = x[..., start + t] - sum(
                model.predictor[:, t, j].reshape(lead[:-1]) * x[..., start + t - 1 - j] for j in range(t)
            )
            out[..., start + t] = part * (last / np.sqrt(model.gain[:, t])).reshape(lead[:-1])
        if stop - start > m:
            body = out[..., start + m : stop]
            body += x[..., start + m : stop]
            for j in range(m):
                body -= model.predictor[:, m, j].reshape(lead) * x[..., start + m - 1 - j : stop - 1 - j]
    return out


def precision_lags(model: Autoregression) -> FloatArray:
    """Entries of the inverse covariance by lag, W'W of the filter away from the ends of a run.

    Returns
    -------
    ndarray, shape (spectra, orders + 1)
    """
    rows = np.arange(model.order.size)
    error_filter = np.concatenate([np.ones((rows.size, 1)), -model.predictor[rows, model.order]], axis=1)
    width = error_filter.shape[1]
    return np.stack(
        [np.einsum("ij,ij->i", error_filter[:, : width - d], error_filter[:, d:]) for d in range(width)], axis=1
    )


def correlation_length(model: Autoregression) -> FloatArray:
    """Integrated correlation, 1 + 2 sum of the autocorrelations, in channels.

    From the model's power at frequency zero over its mean power.

    Returns
    -------
    ndarray, shape (spectra,)
    """
    power = _model_power(model.predictor, model.gain, model.order, 1024)
    full = np.concatenate([power, power[:, -2:0:-1]], axis=1)
    length: FloatArray = power[:, 0] / full.mean(axis=1)
    return length


def short_correlation(residual: FloatArray, used: BoolArray, basis: FloatArray) -> FloatArray:
    """Correlation length of residuals too short for a power spectrum, from neighbours alone.

    The lag-one correlation r counts where it is beyond two standard errors, as that of a first-order autoregression,
    whose length is (1 + r) / (1 - r).

    Parameters
    ----------
    residual : ndarray, shape (spectra, channels)
    used : ndarray of bool, shape (channels,)
    basis : ndarray, shape (terms, channels)
        Orthonormal rows that the fit has taken out of the residual, and with them some of its correlation.

    Returns
    -------
    ndarray, shape (spectra,)
        1 or more, in channels.
    """
    pairs = used[1:] & used[:-1]
    both = np.einsum("ij,ij->i", residual[:, 1:][:, pairs], residual[:, :-1][:, pairs])
    power = np.einsum("ij,ij->i", residual[:, used], residual[:, used])
    n = max(int(used.sum()), 1)
    taken = float(np.sum(basis[:, 1:][:, pairs] * basis[:, :-1][:, pairs]))
    left = max(n - basis.shape[0], 1)
    with np.errstate(divide="ignore", invalid="ignore"):
        r = (np.nan_to_num(both / power) * left + taken) / max(int(pairs.sum()), 1)
    r = np.where(r > 2.0 / np.sqrt(n), np.minimum(r, 0.95), 0.0)
    length: FloatArray = (1.0 + r) / (1.0 - r)
    return length


class KnownNoise(NamedTuple):
    """Noise learnt from scans of one sample.

    Attributes
    ----------
    innovation : float
        Standard deviation of the whitened noise.
    channel : float
        Standard deviation of one channel.
    model : Autoregression
        Of one row.
    stride : int
        Spacing of channels that carry independent information.
    scans : int
    """

    innovation: float
    channel: float
    model: Autoregression
    stride: int
    scans: int


def noise_of_scans(scans: FloatArray, free: FloatArray) -> KnownNoise:
    """Level and correlation of the noise from repeated scans of one sample.

    Parameters
    ----------
    scans : ndarray, shape (scans, channels)
        Two or more, finite; their mean and their polynomial drift are taken out.
    free : ndarray, shape (channels, terms)
        The drift, such as the baseline terms of the fit.

    Returns
    -------
    KnownNoise
        White where there are too few channels for a correlation.
    """
    n, p = scans.shape
    apart = (scans - scans.mean(axis=0)) * np.sqrt(n / (n - 1.0))
    if free.shape[1]:
        q = np.linalg.qr(free)[0]
        apart = (apart - (apart @ q) @ q.T) * np.sqrt(p / max(p - free.shape[1], 1))
    channel = float(np.sqrt(np.mean(apart**2)))
    power = block_power(apart, np.ones(p, dtype=bool))
    stride = 1 if power is None else int(interpolation_stride(power.mean(axis=0, keepdims=True))[0])
    thinned = apart[:, ::stride]
    power = block_power(thinned, np.ones(thinned.shape[1], dtype=bool))
    if power is None:
        blank = np.zeros((1, MAX_ORDER + 1, MAX_ORDER))
        white = Autoregression(np.zeros(1, dtype=int), blank, np.ones((1, MAX_ORDER + 1)))
        return KnownNoise(channel, channel, white, stride, n)
    model = autoregression(power.mean(axis=0, keepdims=True), np.array([thinned.size]))
    rows = whiten(thinned, rows_like(model, n), np.ones(thinned.shape[1], dtype=bool))
    return KnownNoise(float(np.sqrt(np.mean(rows**2))), channel, model, stride, n)


def rows_like(model: Autoregression, n: int) -> Autoregression:
    """A model of one row, repeated for n spectra."""
    return Autoregression(*(np.repeat(part, n, axis=0) for part in model))  # type: ignore[arg-type]


def local_noise(y: FloatArray) -> float:
    """Noise of a channel from the third differences of the spectra, which smooth bands hardly touch.

    Parameters
    ----------
    y : ndarray, shape (spectra, channels)
        Four channels or more for an estimate; finite.

    Returns
    -------
    float
        Median over spectra and channels; never zero (the smallest step of the numbers at least).
    """
    least = float(np.finfo(y.dtype).eps * max(float(np.abs(y).max(initial=0.0)), 1e-12))
    if y.shape[1] < 4:
        return max(least, 1e-3 * float(np.abs(y).max(initial=0.0)))
    # the differences of white noise have variance 1 + 9 + 9 + 1
    return max(float(np.median(np.abs(np.diff(y, 3, axis=1)))) / 0.6745 / float(np.sqrt(20.0)), least)
