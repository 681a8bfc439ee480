"""Known pure spectra on plain arrays: patterns of usable channels, the fit, its intervals and its misfit.

The estimator and the labelled function stand in ``known``; the sentences of the verdict in ``diagnose.verdict``.
"""

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.signal import lfilter

from unmix.diagnose.conditioning import dependent_groups, design_figures
from unmix.diagnose.limits import interval, limits, quantile
from unmix.diagnose.residual import (
    FEWEST_FREEDOM,
    Bands,
    FilterPair,
    Templates,
    Whitened,
    correlate,
    denominators,
    largest,
    null_limit,
    template_energy,
    templates,
    unexplained_bands,
)
from unmix.kernels import BoolArray, FloatArray, IntArray
from unmix.kernels.gls import CHUNK, Design, GlsFit, fit, independent_stride, make_design

#: the limit of the misfit score grows by this where a correlation was estimated, since the estimate is not exact
#: (set so that right models are flagged in at most 2% of the cases; table in DEVELOPERS.md)
COLOURED = 1.12

#: called with the number of spectra finished so far
Progress = Callable[[int], None]


@dataclass(frozen=True)
class Settings:
    """Options of the analysis.

    ``noise`` is the known standard deviation of one channel, a scalar or one a channel; None estimates it.
    """

    level: float = 0.95
    nonnegative: bool = True
    noise: FloatArray | None = None


#: arrays of an answer by shape: amounts (spectra, components), curves (spectra, channels), figures (spectra,)
AMOUNTS = ("concentration", "standard_uncertainty", "lower", "upper", "critical_level", "detection_limit",
           "quantification_limit", "misfit_harm", "negative")  # fmt: skip
CURVES = ("fitted", "baseline")
FIGURES = ("noise_level", "noise_correlation_length", "freedom", "misfit_z", "misfit_limit")


@dataclass
class Answer:
    """Arrays of the answer, one row a spectrum, NaN where a spectrum could not be answered.

    Shapes: (spectra, components) for the amounts, (spectra, channels) for curves, (spectra,) for the rest.
    Amounts are per unit path; ``bands`` holds positions and widths in channels.
    """

    concentration: FloatArray
    standard_uncertainty: FloatArray
    lower: FloatArray
    upper: FloatArray
    critical_level: FloatArray
    detection_limit: FloatArray
    quantification_limit: FloatArray
    misfit_harm: FloatArray
    negative: FloatArray
    fitted: FloatArray
    baseline: FloatArray
    noise_level: FloatArray
    noise_correlation_length: FloatArray
    freedom: FloatArray
    misfit_z: FloatArray
    misfit_limit: FloatArray
    bands: list[Bands | None]
    groups: list[list[tuple[float, list[int]]]]

    @classmethod
    def empty(cls, n: int, k: int, p: int) -> "Answer":
        """All NaN, no bands."""
        shapes = dict.fromkeys(AMOUNTS, (n, k)) | dict.fromkeys(CURVES, (n, p)) | dict.fromkeys(FIGURES, (n,))
        arrays: dict[str, Any] = {name: np.full(shape, np.nan) for name, shape in shapes.items()}
        return cls(**arrays, bands=[None] * n, groups=[[] for _ in range(n)])


def analyse(
    y: FloatArray,
    used: BoolArray,
    signal: FloatArray,
    free: FloatArray,
    pure_uncertainty: FloatArray,
    settings: Settings,
    progress: Progress | None = None,
) -> Answer:
    """Solve every spectrum and judge its fit.

    Parameters
    ----------
    y : ndarray, shape (spectra, channels)
    used : ndarray of bool, shape (spectra, channels)
        Channels that count; the others may hold anything.
    signal : ndarray, shape (channels, components)
        Pure spectra per unit amount.
    free : ndarray, shape (channels, baseline terms)
    pure_uncertainty : ndarray, shape (components,)
        Relative standard uncertainty of each pure spectrum.
    settings : Settings
    progress : callable, optional

    Returns
    -------
    Answer
        Each row depends on its own spectrum alone, never on the others of the batch.
    """
    n, p = y.shape
    answer = Answer.empty(n, signal.shape[1], p)
    signal = np.where(np.isfinite(signal), signal, 0.0)
    done = 0
    for rows, pattern in patterns(used):
        m = free.shape[1] + signal.shape[1]
        if int(pattern.sum()) >= m:
            groups = dependent_groups(design_figures(signal[pattern], free[pattern]), signal.shape[1])
            for row in rows:
                answer.groups[row] = groups
            solver = _Pattern(signal, free, pattern, pure_uncertainty, settings)
            for start in range(0, rows.size, CHUNK):
                part = rows[start : start + CHUNK]
                solver.solve(np.where(pattern, y[part], 0.0), part, answer)
                done += part.size
                if progress:
                    progress(done)
        else:
            done += rows.size
    return answer


def patterns(used: BoolArray) -> Iterator[tuple[IntArray, BoolArray]]:
    """Rows that share a pattern of used channels, and the pattern."""
    if used.shape[0] and (used == used[0]).all():
        yield np.arange(used.shape[0]), used[0]
        return
    packed = np.packbits(used, axis=1)
    _, first, which = np.unique(packed, axis=0, return_index=True, return_inverse=True)
    for g, at in enumerate(first):
        yield np.flatnonzero(which.reshape(-1) == g), used[at]


class _Pattern:
    """All that spectra with one pattern of used channels share, and the work on a chunk of them."""

    def __init__(
        self,
        signal: FloatArray,
        free: FloatArray,
        used: BoolArray,
        pure_uncertainty: FloatArray,
        settings: Settings,
    ) -> None:
        self.settings = settings
        self.pure_uncertainty = pure_uncertainty
        self.columns = np.hstack([free, signal])
        self.n_free = free.shape[1]
        self.used = used
        noise = settings.noise
        # known noise that differs between channels is met by weights; 1 then is its standard deviation
        self.weight = None if noise is None else 1.0 / np.broadcast_to(noise, used.shape)
        self._strides: dict[int, _Strided] = {}

    def strided(self, stride: int) -> "_Strided":
        """Design and templates on every ``stride``-th channel."""
        if stride not in self._strides:
            a, used = self.columns[::stride], self.used[::stride]
            if self.weight is not None:
                a = a * self.weight[::stride, None]
            nonnegative = self.settings.nonnegative
            design = make_design(a[:, self.n_free :], a[:, : self.n_free], used, nonnegative=nonnegative)
            self._strides[stride] = _Strided(design)
        return self._strides[stride]

    def solve(self, y: FloatArray, rows: IntArray, answer: Answer) -> None:
        """Solve a chunk and write its rows into the answer."""
        known = self.weight is not None
        if self.weight is not None:
            y = y * self.weight
        whole = self.strided(1)
        stride = np.ones(rows.size, dtype=int) if known else independent_stride(y, whole.design)
        fewest = self.columns.shape[1] + FEWEST_FREEDOM
        for s in np.unique(stride):
            part = np.flatnonzero(stride == s)
            shared = self.strided(int(s))
            if s > 1 and int(shared.design.used.sum()) < fewest:
                s, shared = 1, whole  # noqa: PLW2901  too few channels would be left
            for group, solved in fit(y[part][:, :: int(s)], shared.design, correlated=not known):
                self._write(solved, shared, int(s), rows[part[group]], answer)

    def _write(self, solved: GlsFit, shared: "_Strided", stride: int, rows: IntArray, answer: Answer) -> None:
        f, settings = self.n_free, self.settings
        known = self.weight is not None
        freedom = float(shared.design.freedom)
        sigma = np.ones(rows.size) if known else solved.sigma
        relative = np.linalg.norm(solved.factor[:, f:], axis=2)
        with np.errstate(invalid="ignore"):
            at_zero = sigma[:, None] * relative
        at_zero = np.where(np.isinf(relative), np.inf, at_zero)
        trust = np.inf if known else freedom
        amounts, reported = solved.terms[:, f:], solved.solution[:, f:]
        limit = shared.limit * (COLOURED if solved.filter.shape[1] > 1 else 1.0)
        scores, bands = self._misfit(solved, shared, sigma, limit)
        harm, structured = _harm(solved, shared, bands, f)
        spread = np.maximum(at_zero, structured)
        spread = np.sqrt(spread**2 + (reported * self.pure_uncertainty) ** 2)
        ends = interval(amounts, spread, np.asarray(trust), level=settings.level, reported=reported,
                        nonnegative=settings.nonnegative)  # fmt: skip
        lower = ends.lower - harm
        answer.concentration[rows] = reported
        answer.standard_uncertainty[rows] = np.sqrt(spread**2 + (harm / quantile(0.975, np.asarray(trust))) ** 2)
        answer.lower[rows] = np.maximum(lower, 0.0) if settings.nonnegative else lower
        answer.upper[rows] = ends.upper + harm
        found = limits(at_zero, np.asarray(trust))
        answer.critical_level[rows], answer.detection_limit[rows] = found.critical, found.detection
        answer.quantification_limit[rows] = found.quantification
        answer.misfit_harm[rows] = harm
        with np.errstate(invalid="ignore", divide="ignore"):
            answer.negative[rows] = np.where(at_zero > 0, amounts / at_zero, 0.0)
        answer.baseline[rows] = solved.solution[:, :f] @ self.columns[:, :f].T
        answer.fitted[rows] = solved.solution @ self.columns.T
        with np.errstate(invalid="ignore"):
            answer.noise_level[rows] = self._level(solved, sigma)
        answer.noise_correlation_length[rows] = solved.length * stride
        answer.freedom[rows] = freedom
        answer.misfit_z[rows], answer.misfit_limit[rows] = scores, limit
        for row, found_bands in zip(rows, bands, strict=True):
            if found_bands is not None:
                answer.bands[row] = found_bands._replace(
                    channel=found_bands.channel * stride, width=found_bands.width * stride,
                    shift=found_bands.shift[:, f:],
                )  # fmt: skip

    def _level(self, solved: GlsFit, sigma: FloatArray) -> FloatArray:
        """Standard deviation of the noise of one channel, from that of the innovations."""
        if self.weight is not None:
            typical = float(np.median(1.0 / self.weight[self.used]))
            return solved.sigma * typical
        bins = 1024
        power = 1.0 / np.abs(np.fft.rfft(solved.filter, n=bins, axis=1)) ** 2
        mean = (power[:, 0] + power[:, -1] + 2.0 * power[:, 1:-1].sum(axis=1)) / bins
        level: FloatArray = sigma * np.sqrt(mean)
        return level

    def _misfit(
        self, solved: GlsFit, shared: "_Strided", sigma: FloatArray, limit: float
    ) -> tuple[FloatArray, list[Bands | None]]:
        n, freedom = solved.terms.shape[0], float(shared.design.freedom)
        if freedom < FEWEST_FREEDOM:
            return np.full(n, np.nan), [None] * n
        filters = FilterPair(solved.filter, shared.design.used)
        along = correlate(filters.transpose(solved.residual[:, None])[:, 0], shared.templates)
        energy = shared.energy(filters)
        if solved.filter.shape[1] == 1:
            projected = np.sum(correlate(solved.basis, shared.templates) ** 2, axis=1)
        else:
            projected = np.sum(correlate(filters.transpose(solved.basis), shared.templates) ** 2, axis=1)
        safe = np.where(sigma > 0, sigma, np.inf)
        z = along / denominators(energy, projected) / safe[:, None, None]
        score, _, _ = largest(z)
        bands: list[Bands | None] = [None] * n
        for i in np.flatnonzero(np.abs(score) > limit):
            one = Whitened(
                solved.residual[i],
                solved.basis[min(i, solved.basis.shape[0] - 1)],
                solved.factor[min(i, solved.factor.shape[0] - 1)],
                FilterPair(solved.filter[i : i + 1], shared.design.used),
                energy[min(i, energy.shape[0] - 1)],
                freedom,
            )
            bands[i] = unexplained_bands(one, shared.templates, limit)
        return score, bands


class _Strided:
    """Design of a pattern at one spacing of channels, with the templates of the misfit test."""

    def __init__(self, design: Design) -> None:
        self.design = design
        self.templates: Templates = templates(design.used.size)
        self._lags: FloatArray = np.empty((0,))
        self.limit = float("nan")
        if design.freedom >= FEWEST_FREEDOM:
            # the number of channels is rounded so that patterns of nearly equal size share a simulation
            size = int(design.used.sum())
            step = max(1, 2 ** (size.bit_length() - 5))
            self.limit = null_limit(max(size // step * step, design.reduced.rank + 1), design.reduced.rank)

    def energy(self, filters: FilterPair) -> FloatArray:
        """||Wg||^2 of every template for each spectrum's filter, (spectra or 1, widths, channels)."""
        coefficients = filters.coefficients[:, 0]
        lags = coefficients.shape[1]
        if self._lags.shape[0] < lags:
            self._lags = template_energy(self.design.used, self.templates, lags)
        if lags == 1:
            return self._lags[:1]
        precision = np.stack(
            [np.sum(coefficients[:, : lags - d] * coefficients[:, d:], axis=1) for d in range(lags)], axis=1
        )
        total: FloatArray = np.tensordot(precision, self._lags[:lags], axes=1)
        return total


def _harm(
    solved: GlsFit, shared: _Strided, bands: list[Bands | None], f: int
) -> tuple[FloatArray, FloatArray]:
    """Harm of the unexplained bands to each amount, and the uncertainty from a structured residual.

    The second carries the residual's own autocovariance at all lags through the map from data to amounts; both are
    zero where no band was found.
    """
    n, k = solved.terms.shape[0], solved.terms.shape[1] - f
    harm, structured = np.zeros((n, k)), np.zeros((n, k))
    for i, found in enumerate(bands):
        if found is None or found.channel.size == 0:
            continue
        shift = found.shift[:, f:]
        harm[i] = np.maximum(np.abs(shift.sum(axis=0)), np.abs(shift).max(axis=0))
        filters = FilterPair(solved.filter[i : i + 1], shared.design.used)
        factor = solved.factor[min(i, solved.factor.shape[0] - 1), f:]
        reader = factor @ filters.transpose(solved.basis[min(i, solved.basis.shape[0] - 1)][None])[0]
        size = 2 * solved.residual.shape[1]
        rest = solved.residual[i]
        if solved.filter.shape[1] > 1:
            rest = _unfilter(rest, solved.filter[i])
        power = np.abs(np.fft.rfft(rest, n=size)) ** 2 / max(shared.design.freedom, 1)
        gain = np.abs(np.fft.rfft(np.where(np.isfinite(reader), reader, 0.0), n=size, axis=1)) ** 2
        weights = np.full(power.size, 2.0)
        weights[[0, -1]] = 1.0
        structured[i] = np.sqrt((gain * power * weights).sum(axis=1) / size)
    return harm, structured


def _unfilter(residual: FloatArray, coefficients: FloatArray) -> FloatArray:
    """The residual before whitening."""
    before: FloatArray = lfilter([1.0], coefficients, residual)
    return before
