"""All spectra that share one pattern of channel weights: design, fit, misfit test and what they do to the amounts."""

import numpy as np
from scipy.linalg import solve_banded

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
from unmix.kernels import FloatArray, IntArray
from unmix.kernels.gls import Design, GlsFit, fit, independent_stride, make_design
from unmix.kernels.noise import ENOUGH, short_correlation
from unmix.solve.answer import Answer, Settings
from unmix.solve.constrained import constrain
from unmix.solve.uncertainty import SOURCES, Inputs, Sensitivity, combine, noise_of_pure

#: the limit of the misfit score grows by this where a correlation was estimated, since the estimate is not exact
#: (set so that right models are flagged in at most 2% of the cases; table in DEVELOPERS.md)
COLOURED = 1.12


class Pattern:
    """Designs of one pattern of channel weights, and the work on a chunk of its spectra.

    Parameters
    ----------
    signal : ndarray, shape (channels, components)
    free : ndarray, shape (channels, baseline terms)
    weight : ndarray, shape (channels,)
        Zero on channels that do not count.
    settings : Settings
    n_baseline : int, optional
        How many of the free columns, from the first, are baseline; all by default.
    """

    def __init__(
        self,
        signal: FloatArray,
        free: FloatArray,
        weight: FloatArray,
        settings: Settings,
        n_baseline: int | None = None,
    ) -> None:
        self.settings = settings
        k = signal.shape[1]
        self.inputs = settings.inputs or Inputs(np.zeros(k), np.zeros(k))
        self.columns = np.hstack([free, signal])
        self.n_free = free.shape[1]
        self.n_baseline = self.n_free if n_baseline is None else n_baseline
        self.weight = weight
        self._strides: dict[int, _Strided] = {}

    def strided(self, stride: int) -> "_Strided":
        """Design and templates on every ``stride``-th channel."""
        if stride not in self._strides:
            a = self.columns[::stride]
            design = make_design(a[:, self.n_free :], a[:, : self.n_free], self.weight[::stride],
                                 nonnegative=self.settings.nonnegative)  # fmt: skip
            self._strides[stride] = _Strided(design)
        return self._strides[stride]

    def solve(self, y: FloatArray, rows: IntArray, answer: Answer) -> None:
        """Solve a chunk and write its rows into the answer.

        Parameters
        ----------
        y : ndarray, shape (spectra, channels)
            Zero on channels that do not count.
        rows : ndarray of int, shape (spectra,)
            Where they stand in the answer.
        answer : Answer
        """
        known = self.settings.known_noise
        y = y * self.weight
        top = np.abs(y).max(axis=1, initial=0.0)
        whole = self.strided(1)
        scans = self.settings.scans
        if scans is not None:
            stride = np.full(rows.size, scans.stride)
        else:
            stride = np.ones(rows.size, dtype=int) if known else independent_stride(y, whole.design)
        fewest = self.columns.shape[1] + FEWEST_FREEDOM
        for every in np.unique(stride):
            part, shared, step = np.flatnonzero(stride == every), self.strided(int(every)), int(every)
            if step > 1 and int(shared.design.used.sum()) < fewest:
                shared, step = whole, 1  # too few channels would be left
            for group, solved in fit(
                y[part][:, ::step], shared.design, correlated=not known, known=scans.model if scans else None
            ):
                self._write(solved, shared, step, rows[part[group]], top[part[group]], answer)

    def _worth(
        self, solved: GlsFit, shared: "_Strided", freedom: float
    ) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Correlation length, what uncertainties grow by for its sake, and the degrees of freedom, (spectra, 1).

        A correlation found from few independent channels is found too small, since the fit has taken its share; by
        simulation the estimates then scatter sqrt(n / (n - 1.7 m)) times as far, n independent channels, m terms.
        """
        length, n = solved.length, solved.terms.shape[0]
        if self.settings.known_noise:
            return length, np.ones(n), np.full((n, 1), np.inf)
        channels, m = float(shared.design.used.sum()), float(shared.design.reduced.rank)
        widening = np.ones(n)
        if solved.filter.shape[1] == 1:
            if channels >= ENOUGH:
                return length, widening, np.full((n, 1), freedom)
            length = short_correlation(solved.residual, shared.design.used, solved.basis[0])
            # the fit took the noise for white; smooth columns then are uncertain by the root of the length
            widening = np.sqrt(length)
        worth = channels / length
        grow = np.where(length > 1.0, np.sqrt(worth / np.maximum(worth - 1.7 * m, 0.2 * worth)), 1.0)
        return length, widening * grow, np.where(length > 1.0, np.maximum(worth - m, 1.0), freedom)[:, None]

    def _write(
        self, solved: GlsFit, shared: "_Strided", stride: int, rows: IntArray, largest_value: FloatArray, answer: Answer
    ) -> None:
        f, settings = self.n_free, self.settings
        freedom = float(shared.design.freedom)
        # a residual below the rounding of the numbers is no noise, and must not make rounding a misfit
        rounding = settings.resolution * largest_value
        sigma = np.ones(rows.size) if settings.known_noise else np.maximum(solved.sigma, rounding)
        answer.blank[rows] = solved.sigma <= rounding
        length, widening, trust = self._worth(solved, shared, freedom)
        sensitivity, checks = Sensitivity(solved.solution[:, f:]), None
        if settings.constraints is not None:
            made = constrain(solved, shared.design, self.columns[::stride], settings.constraints, rows, sigma, trust,
                             nonnegative=settings.nonnegative)  # fmt: skip
            solved, checks = made.solved, made.checks
            sensitivity = Sensitivity(solved.solution[:, f:], made.response, made.given)
        relative = np.linalg.norm(solved.factor[:, f:], axis=2)
        with np.errstate(invalid="ignore"):
            at_zero = np.where(np.isinf(relative), np.inf, sigma[:, None] * relative)
        amounts, reported = solved.terms[:, f:], solved.solution[:, f:]
        limit = shared.limit * (COLOURED if solved.filter.shape[1] > 1 else 1.0)
        scores, bands = shared.misfit(solved, sigma, limit)
        harm, structured = _harm(solved, shared, bands, f)
        at_zero = at_zero * widening[:, None]
        pure_noise = noise_of_pure(solved, shared.design.weight, reported, self.inputs.pure_noise, sigma,
                                   known=settings.known_noise)  # fmt: skip
        whole = combine(at_zero, structured, trust, solved.factor[:, f:], sensitivity, self.inputs, pure_noise)
        spread = whole.spread
        ends = interval(amounts, spread, whole.freedom, level=settings.level, reported=reported,
                        nonnegative=settings.nonnegative)  # fmt: skip
        found = limits(at_zero, trust)
        answer.concentration[rows] = reported + 0.0  # no negative zero
        by_bands = harm / quantile(0.5 + settings.level / 2, trust)
        answer.standard_uncertainty[rows] = np.hypot(spread, by_bands)
        whole.contribution[..., SOURCES.index("unexplained bands")] = np.hypot(
            whole.contribution[..., SOURCES.index("unexplained bands")], by_bands
        )
        answer.contribution[rows], answer.correlation[rows] = whole.contribution, whole.correlation
        answer.trust[rows] = trust[:, 0]
        lower = ends.lower - harm
        answer.lower[rows] = np.maximum(lower, 0.0) if settings.nonnegative else lower
        answer.upper[rows] = ends.upper + harm
        answer.critical_level[rows], answer.detection_limit[rows] = found.critical, found.detection
        answer.quantification_limit[rows] = found.quantification
        answer.misfit_harm[rows], answer.unbounded[rows] = harm, amounts
        with np.errstate(invalid="ignore", divide="ignore"):
            answer.negative[rows] = np.where(at_zero > 0, amounts / at_zero, 0.0)
        answer.baseline[rows] = solved.solution[:, : self.n_baseline] @ self.columns[:, : self.n_baseline].T
        answer.fitted[rows] = solved.solution @ self.columns.T
        answer.noise_level[rows] = _channel_noise(solved) * float(np.median(1.0 / self.weight[self.weight != 0]))
        answer.noise_correlation_length[rows] = length * stride
        answer.freedom[rows] = freedom
        beside = slice(self.n_baseline, f)
        size_beside = sigma[:, None] * np.linalg.norm(np.nan_to_num(solved.factor[:, beside]), axis=2)
        for i, row in enumerate(rows):
            answer.extra[row] = solved.terms[i, beside], size_beside[i] * widening[i]
        for row, check in zip(rows, checks or [], strict=bool(checks)):
            answer.checks[row] = check
        answer.misfit_z[rows], answer.misfit_limit[rows] = scores, limit
        for row, one in zip(rows, bands, strict=True):
            if one is not None:
                answer.bands[row] = one._replace(channel=one.channel * stride, width=one.width * stride,
                                                 shift=_finite(one.shift[:, f:]))  # fmt: skip


def _channel_noise(solved: GlsFit) -> FloatArray:
    """Standard deviation of the noise of one weighed channel, from that of the innovations."""
    bins = 1024
    power = 1.0 / np.abs(np.fft.rfft(solved.filter, n=bins, axis=1)) ** 2
    mean = (power[:, 0] + power[:, -1] + 2.0 * power[:, 1:-1].sum(axis=1)) / bins
    level: FloatArray = solved.sigma * np.sqrt(mean)
    return level


class _Strided:
    """Design of a pattern at one spacing of channels, with the templates of the misfit test."""

    def __init__(self, design: Design) -> None:
        self.design = design
        self.templates: Templates = templates(design.weight.size)
        self._lags: FloatArray = np.empty((0,))
        self.limit = float("nan")
        if design.freedom >= FEWEST_FREEDOM:
            # the number of channels is rounded so that patterns of nearly equal size share a simulation
            size = int(design.used.sum())
            step = max(1, 2 ** (size.bit_length() - 5))
            self.limit = null_limit(max(size // step * step, design.reduced.rank + 1), design.reduced.rank)

    def energy(self, filters: FilterPair) -> FloatArray:
        """||Wg||^2 of every template for each spectrum's filter, (spectra or 1, places)."""
        coefficients = filters.coefficients[:, 0]
        lags = coefficients.shape[1]
        if self._lags.shape[0] < lags:
            self._lags = template_energy(self.design.weight, self.templates, lags)
        if lags == 1:
            return self._lags[:1]
        precision = np.stack(
            [np.sum(coefficients[:, : lags - d] * coefficients[:, d:], axis=1) for d in range(lags)], axis=1
        )
        total: FloatArray = precision @ self._lags[:lags]
        return total

    def misfit(self, solved: GlsFit, sigma: FloatArray, limit: float) -> tuple[FloatArray, list[Bands | None]]:
        """Largest signed score of each spectrum, and the bands of those beyond the limit."""
        n, freedom = solved.terms.shape[0], float(self.design.freedom)
        if freedom < FEWEST_FREEDOM:
            return np.full(n, np.nan), [None] * n
        filters = FilterPair(solved.filter, self.design.weight)
        along = correlate(filters.transpose(solved.residual[:, None])[:, 0], self.templates)
        energy = self.energy(filters)
        basis = solved.basis if solved.filter.shape[1] == 1 else filters.transpose(solved.basis)
        if solved.filter.shape[1] == 1:
            basis = basis * self.design.weight
        projected = np.sum(correlate(basis, self.templates) ** 2, axis=1)
        safe = np.where(sigma > 0, sigma, np.inf)
        score, _ = largest(along / denominators(energy, projected, self.templates) / safe[:, None])
        bands: list[Bands | None] = [None] * n
        for i in np.flatnonzero(np.abs(score) > limit):
            bands[i] = unexplained_bands(self.one(solved, int(i), energy), self.templates, limit)
        return score, bands

    def one(self, solved: GlsFit, i: int, energy: FloatArray) -> Whitened:
        """One spectrum of a fit, as the search for bands takes it."""
        return Whitened(
            solved.residual[i],
            solved.basis[min(i, solved.basis.shape[0] - 1)],
            solved.factor[min(i, solved.factor.shape[0] - 1)],
            FilterPair(solved.filter[i : i + 1], self.design.weight),
            energy[min(i, energy.shape[0] - 1)],
            float(self.design.freedom),
        )


def _harm(solved: GlsFit, shared: _Strided, bands: list[Bands | None], f: int) -> tuple[FloatArray, FloatArray]:
    """Harm of the unexplained bands to each amount, and the uncertainty from a structured residual.

    The second carries the residual's own autocovariance at all lags through the map from data to amounts; both are
    zero where no band was found.
    """
    n, k = solved.terms.shape[0], solved.terms.shape[1] - f
    harm, structured = np.zeros((n, k)), np.zeros((n, k))
    for i, found in enumerate(bands):
        if found is None or found.channel.size == 0:
            continue
        shift = _finite(found.shift[:, f:])
        harm[i] = np.maximum(np.abs(shift.sum(axis=0)), np.abs(shift).max(axis=0))
        filters = FilterPair(solved.filter[i : i + 1], shared.design.weight)
        factor = _finite(solved.factor[min(i, solved.factor.shape[0] - 1), f:])
        reader = factor @ filters.transpose(solved.basis[min(i, solved.basis.shape[0] - 1)][None])[0]
        size = 2 * solved.residual.shape[1]
        rest = _unfiltered(solved.residual[i], solved.filter[i])
        rest = np.divide(rest, shared.design.weight, out=np.zeros_like(rest), where=shared.design.used)
        power = np.abs(np.fft.rfft(rest, n=size)) ** 2 / max(shared.design.freedom, 1)
        gain = np.abs(np.fft.rfft(np.where(np.isfinite(reader), reader, 0.0), n=size, axis=1)) ** 2
        weights = np.full(power.size, 2.0)
        weights[[0, -1]] = 1.0
        structured[i] = np.sqrt((gain * power * weights).sum(axis=1) / size)
    return harm, structured


def _finite(shift: FloatArray) -> FloatArray:
    """Shifts of amounts, zero for a component that the design does not determine: its interval is infinite anyway."""
    known: FloatArray = np.nan_to_num(shift, posinf=0.0, neginf=0.0)
    return known


def _unfiltered(residual: FloatArray, coefficients: FloatArray) -> FloatArray:
    """The residual before the whitening filter: the recursion that undoes it, as a banded triangular system."""
    bands = np.repeat(coefficients[:, None], residual.size, axis=1)
    before: FloatArray = solve_banded((coefficients.size - 1, 0), bands, residual)
    return before
