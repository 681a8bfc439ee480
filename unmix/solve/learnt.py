"""Amounts from learnt pure spectra: the fit in the metric of the between-sample variation, errors from standards."""

import json
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import xarray as xr

from unmix.diagnose.limits import interval, limits, quantile
from unmix.diagnose.residual import (
    Bands,
    Templates,
    Whitened,
    correlate,
    denominators,
    largest,
    template_energy,
    templates,
    unexplained_bands,
)
from unmix.diagnose.saturation import saturated
from unmix.diagnose.spread import ErrorModel
from unmix.errors import InputError
from unmix.kernels import BoolArray, FloatArray, IntArray
from unmix.kernels.gls import CHUNK, GlsFit, fit, make_design
from unmix.kernels.variation import Learnt, Metric, apply, metric
from unmix.prepare.axis import common_axis
from unmix.provenance import provenance
from unmix.solve.analysis import Progress, patterns
from unmix.solve.answer import Answer
from unmix.solve.options import check_level
from unmix.solve.paths import path_of, scale_to_path
from unmix.solve.result import assemble, check_coordinates
from unmix.solve.uncertainty import SOURCES, Inputs, Scale
from unmix.spectra import as_absorbance


class MetricFilter:
    """The metric as the search for bands takes a filter: symmetric, on the used channels of a longer axis."""

    def __init__(self, m: Metric, used: BoolArray) -> None:
        self.metric = m
        self.used = used

    def forward(self, x: FloatArray) -> FloatArray:
        """Rows, shape (..., channels), in the metric; zero on unused channels."""
        out = np.zeros(x.shape)
        inner = x[..., self.used]
        out[..., self.used] = apply(self.metric, inner.reshape(-1, inner.shape[-1])).reshape(inner.shape)
        return out

    transpose = forward

    def energy(self, t: Templates) -> FloatArray:
        """||Wg||^2 of every template, shape (places,)."""
        rows = np.zeros((self.metric.hidden.size, self.used.size))
        rows[:, self.used] = self.metric.directions * np.sqrt(self.metric.hidden)[:, None]
        whole: FloatArray = template_energy(self.used.astype(float), t, 1)[0]
        left: FloatArray = whole - np.sum(correlate(rows, t).astype(np.float64) ** 2, axis=0)
        return left


@dataclass
class LearntModel:
    """Learnt pure spectra with the errors of left-out standards, solving as :class:`KnownModel` does.

    ``score_limit`` and ``residual_limit`` are what standards reach when left out (99%).
    """

    pure: FloatArray
    modes: FloatArray
    floor: float
    errors: ErrorModel
    score_limit: float
    residual_limit: float
    level: float
    nonnegative: bool = True
    noise: FloatArray | None = None
    free: FloatArray = field(init=False)

    def __post_init__(self) -> None:
        self.free = np.empty((self.pure.shape[1], 0))

    def analyse(
        self,
        y: FloatArray,
        used: BoolArray,
        *,
        inputs: Inputs | None = None,
        resolution: float = 1e-12,  # noqa: ARG002  errors of standards are far above rounding
        detect_saturation: bool = False,
        progress: Progress | None = None,
    ) -> Answer:
        """Amounts with intervals, limits, fit and misfit, as plain arrays (see :class:`KnownModel`)."""
        learnt = Learnt(np.nan_to_num(self.pure), np.nan_to_num(self.modes), self.floor)
        answer = Answer.empty(y.shape[0], self.pure.shape[0], y.shape[1])
        bent, plateau = np.zeros(y.shape, dtype=bool), np.full(y.shape[0], np.nan)
        if detect_saturation:
            bent, plateau = saturated(np.where(used, y, np.nan))
        answer.stray_light[:] = np.nan_to_num(10.0**-plateau)
        answer.residual_growth[:] = 1.0
        complete: BoolArray = np.atleast_1d(np.isfinite(self.pure).all(axis=0))
        reference = self._reach(learnt, complete)
        done = 0
        for rows, weight in patterns((used & ~bent & complete).astype(float)):
            pattern: BoolArray = weight.astype(bool)
            if pattern.sum() > self.pure.shape[0]:
                widening = self._reach(learnt, pattern) / reference
                for start in range(0, rows.size, CHUNK):
                    part = rows[start : start + CHUNK]
                    self._solve(learnt, np.where(pattern, y[part], 0.0), pattern, widening, part, answer)
            done += rows.size
            if progress:
                progress(done)
        if inputs is not None:
            self._add(inputs, answer)
        return answer

    def _add(self, inputs: Inputs, answer: Answer) -> None:
        """Uncertainty of path and dilution; that of the pure spectra is in the errors of the standards."""
        amount = np.abs(answer.concentration)
        for name, size in (("path length", inputs.path), ("dilution", inputs.dilution)):
            answer.contribution[..., SOURCES.index(name)] = amount * size
        more = amount * np.hypot(inputs.path, inputs.dilution)
        if not more.any():
            return
        before = answer.standard_uncertainty.copy()
        answer.standard_uncertainty[:] = np.hypot(before, more)
        with np.errstate(invalid="ignore", divide="ignore"):
            grown = np.where(before > 0, answer.standard_uncertainty / before, 1.0)
        answer.lower[:] = answer.concentration - grown * (answer.concentration - answer.lower)
        answer.upper[:] = answer.concentration + grown * (answer.upper - answer.concentration)
        if self.nonnegative:
            answer.lower[:] = np.maximum(answer.lower, 0.0)

    def _reach(self, learnt: Learnt, used: BoolArray) -> FloatArray:
        """Standard uncertainty of each amount for a floor of 1, which grows as channels are lost."""
        weighed = apply(metric(learnt, used), learnt.pure[:, used])
        size: FloatArray = np.sqrt(np.diagonal(np.linalg.pinv(weighed @ weighed.T)))
        return size

    def _solve(
        self, learnt: Learnt, y: FloatArray, used: BoolArray, widening: FloatArray, rows: IntArray, answer: Answer
    ) -> None:
        filters = MetricFilter(metric(learnt, used), used)
        signal = filters.forward(np.where(used, learnt.pure, 0.0)).T
        design = make_design(signal, np.empty((used.size, 0)), used.astype(float), nonnegative=self.nonnegative)
        ((_, solved),) = fit(filters.forward(y), design, correlated=False)
        reported = solved.solution
        score, bands = self._misfit(solved, filters, float(design.freedom))
        shift = [np.zeros(reported.shape[1]) if b is None else np.abs(b.shift).max(axis=0, initial=0.0) for b in bands]
        harm = np.array(shift)
        spread = self.errors.at(reported) * np.maximum(widening, 1.0)
        ends = interval(reported, spread, self.errors.freedom, level=self.level, reported=reported,
                        nonnegative=self.nonnegative)  # fmt: skip
        found = limits(np.broadcast_to(self.errors.absolute * np.maximum(widening, 1.0), reported.shape),
                       self.errors.freedom)  # fmt: skip
        reach = quantile(0.5 + self.level / 2.0, self.errors.freedom)
        answer.concentration[rows] = reported
        answer.standard_uncertainty[rows] = np.hypot(spread, harm / reach)
        answer.lower[rows] = np.maximum(ends.lower - harm, 0.0) if self.nonnegative else ends.lower - harm
        answer.upper[rows] = ends.upper + harm
        answer.critical_level[rows], answer.detection_limit[rows] = found.critical, found.detection
        answer.quantification_limit[rows] = found.quantification
        parts = np.zeros((*reported.shape, len(SOURCES)))
        parts[..., SOURCES.index("between samples")] = spread
        parts[..., SOURCES.index("unexplained bands")] = harm / reach
        answer.contribution[rows], answer.trust[rows] = parts, np.min(self.errors.freedom)
        answer.misfit_harm[rows] = harm
        answer.negative[rows], answer.unbounded[rows] = 0.0, reported
        answer.baseline[rows] = 0.0
        answer.fitted[rows] = solved.solution @ learnt.pure
        rest = np.where(used, y - answer.fitted[rows], 0.0)
        answer.noise_level[rows] = np.sqrt(np.sum(rest**2, axis=1) / max(design.freedom, 1))
        answer.noise_correlation_length[rows] = 1.0
        answer.freedom[rows] = design.freedom
        answer.misfit_z[rows], answer.misfit_limit[rows] = score, self.score_limit
        answer.residual_excess[rows] = solved.sigma / self.residual_limit
        answer.used[rows] = used
        for row, one in zip(rows, bands, strict=True):
            answer.bands[row] = one

    def _misfit(self, solved: GlsFit, filters: MetricFilter, freedom: float) -> tuple[FloatArray, list[Bands | None]]:
        t = templates(filters.used.size)
        energy = filters.energy(t)
        projected = np.sum(correlate(filters.transpose(solved.basis[0]), t) ** 2, axis=0)
        safe = np.where(solved.sigma > 0, solved.sigma, np.inf)
        along = correlate(filters.transpose(solved.residual), t)
        score, _ = largest(along / denominators(energy, projected, t) / safe[:, None])
        bands: list[Bands | None] = [None] * score.size
        for i in np.flatnonzero(np.abs(score) > self.score_limit):
            one = Whitened(solved.residual[i], solved.basis[0], solved.factor[0], filters, energy, freedom)
            bands[i] = unexplained_bands(one, t, self.score_limit)
        return score, bands


def quantify_learnt(
    spectra: Any,
    learnt: xr.Dataset,
    *,
    nonnegative: bool,
    level: float,
    regions: Any,
    path_length: Any,
    dilution: float,
    scale: Scale,
    progress: Progress | None,
) -> xr.Dataset:
    """Run ``quantify`` with pure spectra from ``learn_pure``.

    Raises
    ------
    InputError
        When the Dataset is not one of ``learn_pure``, or regions are given that were not learnt.
    """
    if learnt.attrs.get("kind") != "learnt":
        raise InputError(f"pure is a Dataset of kind '{learnt.attrs.get('kind', 'unknown')}'",
                         accepted="give pure spectra as a DataArray, or the Dataset of learn_pure")  # fmt: skip
    if regions is not None:
        raise InputError("regions cannot be changed after learning, since the errors belong to them",
                         accepted="give them to learn_pure")  # fmt: skip
    check_level(level)
    samples, assumptions = as_absorbance(spectra, name="spectra")
    samples = check_coordinates(samples)
    given = samples
    k = learnt.sizes["component"]
    samples, rows, notes = common_axis(samples, _stacked(learnt))
    known = rows.isel(component=slice(0, k)).assign_attrs(rows.attrs)
    paths = path_of(given, known, path_length).diluted(dilution)
    pure = scale_to_path(known, paths)
    errors = ErrorModel(*(learnt[f"error_{name}"].values for name in ("absolute", "relative", "freedom")))
    errors = errors._replace(absolute=errors.absolute * paths.weight)
    solver = LearntModel(pure, rows.values[k:], float(learnt["floor"]), errors, float(learnt["score_limit"]),
                           float(learnt["residual_limit"]), level, nonnegative)  # fmt: skip
    n = learnt.sizes["sample"]
    result = assemble(samples, known, solver, paths, progress, scale=scale)
    settings = {"nonnegative": nonnegative, "level": level, "path_length": path_length, "dilution": dilution,
                **scale._asdict()}  # fmt: skip
    return result.assign_attrs(
        kind="quantify",
        level=level,
        baseline="none",
        reproducibility=f"The intervals rest on the errors of {n} standards that were left out one by one and in "
        "groups of like composition, so they hold the variation between samples that the standards show.",
        assumptions=json.dumps(assumptions + paths.assumptions),
        notes=json.dumps(notes + json.loads(given.attrs.get("notes", "[]"))),
        **provenance("quantify", settings, spectra=given, pure=learnt),
    )


def _stacked(learnt: xr.Dataset) -> xr.DataArray:
    """Pure spectra and modes in one array, so that they reach the samples' channels together."""
    dim = str(learnt["pure"].dims[-1])
    names = [str(c) for c in learnt["component"].values] + [f"\x00mode {i}" for i in range(learnt.sizes["mode"])]
    values = np.vstack([learnt["pure"].values, learnt["mode"].values])
    attrs = {name: learnt.attrs[name] for name in ("per", "quantity", "path_length") if name in learnt.attrs}
    return xr.DataArray(values, dims=("component", dim), coords={"component": names, dim: learnt[dim]}, attrs=attrs)
