"""Is something missing from the list of components? The score test for one more band, and the harm it does.

For a band template g, z(g) = g'r / (sigma ||g - Hg||) with r the whitened residual and H the projector on the
whitened design: the score test of Rao (Proc. Camb. Philos. Soc. 44 (1948) 50) for one more column, here for
every position and several widths at once. The limit is the quantile of the largest |z| over all of them,
simulated.
"""

from functools import lru_cache
from typing import NamedTuple, Protocol

import numpy as np
from numpy.typing import NDArray
from scipy import fft

from unmix.kernels import FloatArray, IntArray
from unmix.kernels.linalg import polynomial_terms

#: chance of at least one band flagged in a spectrum whose model is right
FALSE_ALARM = 0.01

#: degrees of freedom below which a missing band cannot be told from noise
FEWEST_FREEDOM = 8

#: a template is left out where less than this share of its energy is outside the design
_HIDDEN = 0.05

#: bands taken out one after the other in one spectrum
MAX_BANDS = 8


class Templates(NamedTuple):
    """Gaussian bands of unit length, each width on a grid of positions a third of the width apart.

    Attributes
    ----------
    widths : ndarray, shape (widths,)
        Full widths at half height, in channels: 3, 6, 12, ...
    strides : list of int
        Spacing of the positions of each width, in channels.
    places : list of slice
        Where each width's positions stand on the axis "places" that all widths share.
    transform : list of ndarray, complex64
        Conjugate transform of each centred template, cut where the template has no more power.
    shapes : list of ndarray
        The templates themselves, of odd length.
    n_channels, n_fft : int
    """

    widths: FloatArray
    strides: list[int]
    places: list[slice]
    transform: list[NDArray[np.complex64]]
    shapes: list[FloatArray]
    n_channels: int
    n_fft: int


class Bands(NamedTuple):
    """Bands that the model does not explain in one spectrum, the strongest first.

    Attributes
    ----------
    channel, width, height, score : ndarray, shape (bands,)
        Position (channel index), full width at half height (channels), height (units of the data) and z.
    shift : ndarray, shape (bands, terms)
        What each band adds to each fitted term as long as it is not in the model.
    """

    channel: IntArray
    width: FloatArray
    height: FloatArray
    score: FloatArray
    shift: FloatArray


@lru_cache(maxsize=32)
def templates(n_channels: int) -> Templates:
    """Band templates for spectra of a number of channels, at widths a factor of two apart.

    The narrowest is 3 channels wide, the widest an eighth of the range (and at most 128 channels).
    """
    widest = min(max(n_channels / 8.0, 3.0), 128.0)
    count = int(np.log2(widest / 3.0)) + 1
    widths = 3.0 * 2.0 ** np.arange(count)
    strides = [2**i for i in range(count)]
    reach = [int(np.ceil(1.3 * w)) for w in widths]
    # the shorter transforms of the coarser grids need a length that their stride divides
    n_fft = strides[-1] * fft.next_fast_len(-(-(n_channels + 2 * max(reach)) // strides[-1]), real=True)
    n_fft += n_fft % 2 * strides[-1]
    places, shapes, transform = [], [], []
    at = 0
    for w, h, stride in zip(widths, reach, strides, strict=True):
        shape = np.exp(-4.0 * np.log(2.0) * (np.arange(-h, h + 1) / w) ** 2)
        shapes.append(shape / np.linalg.norm(shape))
        row = np.zeros(n_fft)
        row[: h + 1], row[n_fft - h :] = shapes[-1][h:], shapes[-1][:h]
        transform.append((np.conj(fft.rfft(row))[: n_fft // stride // 2 + 1] / stride).astype(np.complex64))
        size = -(-n_channels // stride)
        places.append(slice(at, at + size))
        at += size
    return Templates(widths, strides, places, transform, shapes, n_channels, n_fft)


def correlate(x: FloatArray, t: Templates) -> FloatArray:
    """Inner product of every row with every template at every place.

    Worked in single precision: a score needs three digits.

    Parameters
    ----------
    x : ndarray, shape (..., channels)
    t : Templates

    Returns
    -------
    ndarray, shape (..., places), float32
    """
    spectrum = fft.rfft(x.astype(np.float32), n=t.n_fft, axis=-1)
    out = np.empty((*x.shape[:-1], t.places[-1].stop), dtype=np.float32)
    for place, stride, kernel in zip(t.places, t.strides, t.transform, strict=True):
        size = t.n_fft // stride
        product = fft.irfft(spectrum[..., : size // 2 + 1] * kernel, n=size, axis=-1)
        out[..., place] = product[..., : place.stop - place.start]
    return out


def template_energy(weight: FloatArray, t: Templates, lags: int) -> FloatArray:
    """Energy of each template at each place under channel weights, by lag of the inverse covariance.

    Parameters
    ----------
    weight : ndarray, shape (channels,)
        What data and design were multiplied by; zero on unused channels.
    t : Templates
    lags : int

    Returns
    -------
    ndarray, shape (lags, places)
        Entry d is the sum of g(s) w(s) g(s + d) w(s + d) over pairs of channels of an unbroken run; off the main
        diagonal it counts twice.
    """
    used = weight != 0
    out = np.empty((lags, t.places[-1].stop))
    for d in range(lags):
        pairs = weight[: weight.size - d] * weight[d:]
        for e in range(1, d):
            pairs = pairs * used[e : weight.size - d + e]
        spectrum = fft.rfft(pairs, n=t.n_fft)
        for place, stride, shape in zip(t.places, t.strides, t.shapes, strict=True):
            product = np.zeros(t.n_fft)
            pair = shape[: max(shape.size - d, 0)] * shape[d:]
            product[(np.arange(pair.size) - shape.size // 2) % t.n_fft] = pair
            full = fft.irfft(spectrum * np.conj(fft.rfft(product)), n=t.n_fft)[: t.n_channels : stride]
            out[d, place] = full if d == 0 else 2.0 * full
    return out


def denominators(energy: FloatArray, projected: FloatArray, t: Templates) -> FloatArray:
    """||g - Hg|| at every place; NaN where the band hides in the design or outside the channels.

    Parameters
    ----------
    energy : ndarray, shape (..., places)
        ||g||^2 of the whitened templates.
    projected : ndarray, shape (..., places)
        ||Q'g||^2.
    t : Templates
    """
    left = energy - projected
    full = np.empty(energy.shape)
    for place in t.places:
        part = energy[..., place]
        full[..., place] = np.maximum(part, np.median(part, axis=-1, keepdims=True))
    outside = left <= _HIDDEN * full
    return np.where(outside, np.nan, np.sqrt(np.where(outside, 1.0, left)))


def largest(score: FloatArray) -> tuple[FloatArray, IntArray]:
    """The signed score that is largest in size for each spectrum, and its place.

    Parameters
    ----------
    score : ndarray, shape (spectra, places)
        NaN is passed over; a spectrum without any score gets 0.
    """
    known = np.nan_to_num(score)
    best: IntArray = np.abs(known).argmax(axis=1)
    return known[np.arange(known.shape[0]), best], best


def band_at(place: int, t: Templates) -> tuple[int, int]:
    """Index of the width and channel of a place."""
    w = next(i for i, s in enumerate(t.places) if place < s.stop)
    return w, min((place - t.places[w].start) * t.strides[w], t.n_channels - 1)


@lru_cache(maxsize=128)
def null_limit(n_channels: int, n_terms: int, false_alarm: float = FALSE_ALARM, seed: int = 20260101) -> float:
    """Limit of the largest |z| for a right model, simulated once for a number of channels and fitted terms.

    White noise is projected off as many polynomial terms as the model has; the form of the design hardly matters.
    The quantile comes from a Gumbel distribution with the simulated mean and variance (extreme values: Gumbel,
    Statistics of Extremes (1958)).

    Returns
    -------
    float
    """
    rng = np.random.default_rng(seed)
    t = templates(n_channels)
    q = np.linalg.qr(polynomial_terms(np.linspace(-1.0, 1.0, n_channels), n_terms - 1))[0] if n_terms else None
    energy = template_energy(np.ones(n_channels), t, 1)[0]
    projected = np.zeros_like(energy) if q is None else np.sum(correlate(q.T, t) ** 2, axis=0)
    below = denominators(energy, projected, t)
    found = []
    block = max(1, min(200, 2_000_000 // (below.size + 1)))
    for _ in range(-(-600 // block)):
        r = rng.standard_normal((block, n_channels))
        if q is not None:
            r -= (r @ q) @ q.T
        sigma = np.sqrt(np.sum(r**2, axis=1) / (n_channels - n_terms))
        z = correlate(r, t) / below / sigma[:, None]
        found.append(np.abs(largest(z)[0]))
    top = np.concatenate(found)
    beta = top.std(ddof=1) * np.sqrt(6.0) / np.pi
    return float(top.mean() - np.euler_gamma * beta - beta * np.log(-np.log1p(-false_alarm)))


class FilterPair:
    """Weights and whitening filters of some spectra on rows of channels, and their transposes.

    Parameters
    ----------
    coefficients : ndarray, shape (spectra, order + 1)
        Of the prediction error filters, 1 first.
    weight : ndarray, shape (channels,)
        What data and design were multiplied by before the filter; zero on unused channels.
    """

    def __init__(self, coefficients: FloatArray, weight: FloatArray) -> None:
        self.coefficients = coefficients[:, None, :]
        self.weight = weight
        self._used = weight != 0

    def forward(self, x: FloatArray) -> FloatArray:
        """Weigh and filter rows, shape (spectra or 1, rows, channels); unused channels come out as zero."""
        weighed = x * self.weight
        out = weighed * self.coefficients[..., :1]
        for j in range(1, self.coefficients.shape[-1]):
            out[..., j:] += self.coefficients[..., j : j + 1] * weighed[..., :-j]
        return np.where(self._used, out, 0.0)

    def transpose(self, x: FloatArray) -> FloatArray:
        """Filter rows backwards, then weigh them, shape (spectra or 1, rows, channels)."""
        out = x * self.coefficients[..., :1]
        for j in range(1, self.coefficients.shape[-1]):
            out[..., :-j] += self.coefficients[..., j : j + 1] * x[..., j:]
        return out * self.weight


class Filters(Protocol):
    """Whitening of rows of channels and its transpose: :class:`FilterPair`, or a metric."""

    def forward(self, x: FloatArray) -> FloatArray:
        """Rows as the whitened data see them."""
        ...

    def transpose(self, x: FloatArray) -> FloatArray:
        """The transpose of ``forward``."""
        ...


class Whitened(NamedTuple):
    """One spectrum's fit in whitened form, as the search for bands needs it.

    Attributes
    ----------
    residual : ndarray, shape (channels,)
        Whitened residual, zero on unused channels.
    basis : ndarray, shape (terms, channels)
        Orthonormal basis of the whitened design, as rows.
    factor : ndarray, shape (terms, terms)
        Fitted terms = factor @ (basis @ whitened data).
    filters : Filters
        Of this spectrum alone.
    energy : ndarray, shape (places,)
        ||Wg||^2 of the templates.
    freedom : float
        Degrees of freedom of the residual.
    """

    residual: FloatArray
    basis: FloatArray
    factor: FloatArray
    filters: Filters
    energy: FloatArray
    freedom: float


def unexplained_bands(fit: Whitened, t: Templates, limit: float) -> Bands:
    """Take out unexplained bands one by one, at most ``MAX_BANDS``, until none is above the limit.

    Parameters
    ----------
    fit : Whitened
    t : Templates
    limit : float
        Of |z|.
    """
    residual, freedom = fit.residual.copy(), fit.freedom
    extra = np.empty((0, residual.size))
    projected = np.sum(correlate(fit.filters.transpose(fit.basis[None])[0], t) ** 2, axis=0)
    found: list[tuple[int, float, float, float, FloatArray]] = []
    while len(found) < MAX_BANDS and freedom > FEWEST_FREEDOM:
        sigma = np.sqrt(np.sum(residual**2) / freedom)
        if sigma == 0:
            break
        along_templates = correlate(fit.filters.transpose(residual[None, None])[0, 0], t)
        score, place = largest((along_templates / denominators(fit.energy, projected, t) / sigma)[None])
        if abs(score[0]) <= limit:
            break
        w, c = band_at(int(place[0]), t)
        whitened = fit.filters.forward(placed(t, w, c)[None, None])[0, 0]
        along = fit.basis @ whitened
        rest = whitened - along @ fit.basis
        rest -= (extra @ rest) @ extra
        length = float(np.linalg.norm(rest))
        if length <= 1e-6 * np.linalg.norm(whitened):
            break
        unit = rest / length
        amount = float(unit @ residual) / length
        found.append((c, float(t.widths[w]), amount * float(t.shapes[w].max()), float(score[0]),
                      amount * (fit.factor @ along)))  # fmt: skip
        residual = residual - (unit @ residual) * unit
        extra = np.vstack([extra, unit])
        projected = projected + correlate(fit.filters.transpose(unit[None, None])[0, 0], t) ** 2
        freedom -= 1
    channel_, width_, height_, score_, shift_ = zip(*found, strict=True) if found else ((), (), (), (), ())
    shift = np.array(shift_, dtype=float).reshape(len(found), fit.factor.shape[0])
    return Bands(np.array(channel_, dtype=int), np.array(width_, dtype=float), np.array(height_, dtype=float),
                 np.array(score_, dtype=float), shift)  # fmt: skip


def placed(t: Templates, width: int, channel: int) -> FloatArray:
    """A template on the full axis, cut at the ends."""
    full = np.zeros(t.n_channels)
    shape = t.shapes[width]
    h = shape.size // 2
    low, high = max(channel - h, 0), min(channel + h + 1, t.n_channels)
    full[low:high] = shape[low - channel + h : high - channel + h]
    return full
