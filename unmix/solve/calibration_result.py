"""Put labels, limits, figures of merit, verdict and reason on what the loops of a calibration found."""

from dataclasses import dataclass, fields
from typing import Any

import numpy as np
import xarray as xr

from unmix.diagnose.calibration import Figures, figures
from unmix.diagnose.outliers import distance_limit, estimated_traces, nearest, residual_limit
from unmix.errors import listed
from unmix.kernels import BoolArray, FloatArray
from unmix.solve.calibration_verdict import Evidence, judge
from unmix.solve.folds import Plan
from unmix.solve.latent_model import LatentModel, LeftOut
from unmix.solve.result import CAUTION
from unmix.spectra import labels_of, spectral_dim
from unmix.units import SPECTRAL_UNITS

#: a robust z of a left-out error above this proposes an outlier (Iglewicz and Hoaglin 1993)
_FAR = 3.5

_WORDS = {
    "error": "Root mean square error (SEC, SECV or SEP)", "bias": "Mean error", "bias_p": "p value of the bias",
    "corrected": "Standard deviation of the errors (corrected for bias)",
    "slope": "Slope of reference on predicted values", "intercept": "Intercept of reference on predicted values",
    "line_p": "Joint p value of slope 1 and intercept 0", "r2": "Coefficient of determination",
    "rpd": "Standard deviation of the reference over the error", "lowest": "Smallest reference value",
    "highest": "Largest reference value", "count": "Samples",
}  # fmt: skip


@dataclass(frozen=True)
class _Limits:
    q: float
    t2: float
    nearest: float


def assemble(
    samples: xr.DataArray, prepared: xr.DataArray, values: FloatArray, names: list[str], evidence: Evidence,
    level: float, weights: FloatArray | None,
) -> xr.Dataset:  # fmt: skip
    """The Dataset of a calibration, without units and provenance.

    Parameters
    ----------
    samples, prepared : DataArray, dims (sample, spectral)
        As given, and after the preparation.
    values : ndarray, shape (samples, properties)
    names : list of str
        Properties.
    evidence : Evidence
        ``remarks`` are added to it.
    level : float
        Of the limits of Q and T2.
    weights : ndarray or None

    Returns
    -------
    Dataset
    """
    model, left, choice = evidence.model, evidence.left, evidence.choice
    rows = np.asarray(prepared.values, dtype=np.float64)
    guarded = model.guard(rows)
    n, k = guarded.scores.shape
    held = left.model_of >= 0
    scaled = guarded.scores / np.sqrt(model.score_variance)
    near = nearest(scaled, scaled, itself=True)
    limits = _Limits(residual_limit(estimated_traces(left.residuals[held]), level), distance_limit(k, n, level),
                     float(near.max()))  # fmt: skip
    predicted = choice.predicted[:, choice.components]
    left_out = predicted.mean(axis=0)
    q = np.sum(left.residuals**2, axis=1)
    proposed = _outliers(values - left_out, guarded.t2, q, k, limits)
    sets = _figures(values, guarded.predicted, predicted, evidence, k)
    verdict, reason = judge(values, rows, sets, evidence, names)
    _remark(evidence, labels_of(samples), proposed, _twins(rows, evidence.plan))
    dim = spectral_dim(prepared)

    def over(dims: Any, array: Any, name: str, units: str = "1") -> tuple[Any, Any, dict[str, str]]:
        return dims, array, {"long_name": name, "units": units}

    data = {
        **_model_variables(model, left, dim),
        **{name: over(("set", "property"), [[getattr(one, name) for one in each] for each in sets.values()], words,
                      "1" if name in ("bias_p", "slope", "line_p", "r2", "rpd", "count") else "as property")
           for name, words in _WORDS.items()},
        **_choice_variables(evidence, values),
        "reference": over(("sample", "property"), values, "Reference value", "as property"),
        "fitted": over(("sample", "property"), guarded.predicted, "Fitted value", "as property"),
        "left_out": over(("sample", "property"), left_out, "Value predicted without the sample", "as property"),
        "weight": over("sample", np.ones(n) if weights is None else weights, "Weight in training"),
        "q_left_out": over("sample", q, "Q residual without the sample", "signal squared"),
        "t2_left_out": over("sample", left.t2, "Hotelling T2 without the sample"),
        "t2": over("sample", guarded.t2, "Hotelling T2"),
        "leverage": over("sample", _leverage(guarded.t2), "Leverage"),
        "nearest": over("sample", near, "Squared distance to the nearest other sample"),
        "outlier_reason": over("sample", proposed, "Why the sample is proposed as an outlier", ""),
        "q_limit": over((), limits.q, "Limit of Q (Jackson and Mudholkar 1979)", "signal squared"),
        "t2_limit": over((), limits.t2, "Limit of T2 of a new sample"),
        "nearest_limit": over((), limits.nearest, "Largest distance between neighbours in the calibration"),
        "permutation_p": over((), evidence.permutation_p, "p value of the permutation test"),
        "verdict": over((), verdict, "Verdict", ""),
        "reason": over((), reason, "Reason for the verdict", ""),
    }  # fmt: skip
    given_dim = spectral_dim(samples)
    data["original_axis"] = over("original_channel", np.asarray(samples[given_dim].values, dtype=np.float64),
                                 "Axis of the spectra as given", SPECTRAL_UNITS[given_dim])  # fmt: skip
    axis = np.asarray(prepared[dim].values, dtype=np.float64)
    coords = {"property": names, "sample": labels_of(samples), "set": list(sets), "latent": np.arange(1, k + 1),
              "components": np.arange(choice.predicted.shape[1]),
              dim: (dim, axis, {"units": SPECTRAL_UNITS[dim]})}  # fmt: skip
    attrs = {"kind": "calibration", "title": f"Calibration of {', '.join(names)}", "limit_level": float(level),
             "quantity": str(samples.attrs["quantity"]), "spectral": given_dim, "validation": evidence.plan.words,
             "suggested_components": choice.suggested, "permutations": evidence.permutations,
             "caution": CAUTION}  # fmt: skip
    return xr.Dataset(data, coords=coords, attrs=attrs)


def _remark(evidence: Evidence, labels: list[str], proposed: list[str], twins: BoolArray) -> None:
    """Name samples that stand out, and spectra that occur more than once."""
    odd = [label for label, why in zip(labels, proposed, strict=True) if why]
    if odd:
        evidence.remarks.append(f"Proposed as outliers, none was removed: {listed(odd)}.")
    if twins.any():
        evidence.remarks.append(f"Identical spectra were tested apart from each other: "
                                f"{listed(np.array(labels)[twins])}; errors may be too small.")  # fmt: skip


def _choice_variables(evidence: Evidence, values: FloatArray) -> dict[str, Any]:
    """How the number of latent variables was chosen."""

    def over(dims: Any, array: Any, name: str, units: str = "1") -> tuple[Any, Any, dict[str, str]]:
        return dims, array, {"long_name": name, "units": units}

    choice = evidence.choice
    return {
        "curve": over(("components", "property"), np.sqrt(np.nanmean((choice.predicted - values) ** 2, axis=(0, 2))),
                      "SECV with so many latent variables", "as property"),
        "curve_standard_error": over("components", choice.standard_error,
                                     "Standard error of the mean squared error, in variances of the reference"),
        "nested": over(("sample", "property"), evidence.outer, "Value predicted by the nested loop", "as property"),
        "nested_components": over("outer", evidence.outer_components, "Latent variables chosen in each outer fold"),
    }  # fmt: skip


def _model_variables(model: LatentModel, left: LeftOut, dim: str) -> dict[str, Any]:
    def over(dims: Any, array: Any, name: str, units: str = "1") -> tuple[Any, Any, dict[str, str]]:
        return dims, array, {"long_name": name, "units": units}

    parts = left.coefficients.shape[0]
    deviations = left.coefficients - left.coefficients.mean(axis=0)
    uncertainty = np.sqrt((parts - 1) / parts * np.sum(deviations**2, axis=0))
    scale = np.sqrt(np.nanmean(left.residuals**2, axis=0))
    return {
        "x_mean": over(dim, model.x_mean, "Mean of the prepared spectra", "signal"),
        "y_mean": over("property", model.y_mean, "Mean of the reference values", "as property"),
        "rotation": over((dim, "latent"), model.rotations, "Scores are centred spectra times these"),
        "loading": over((dim, "latent"), model.loadings, "Loadings of the spectra", "signal"),
        "y_loading": over(("property", "latent"), model.y_loadings, "Loadings of the properties", "as property"),
        "score_variance": over("latent", model.score_variance, "Variance of the scores"),
        "score": over(("sample", "latent"), model.known_scores, "Scores of the calibration samples"),
        "coefficient": over(("property", dim), model.coefficients.T, "Regression vector", "property per signal"),
        "coefficient_uncertainty": over(("property", dim), uncertainty.T, "Its standard uncertainty, by the jackknife",
                                        "property per signal"),
        "residual_scale": over(dim, scale, "Root mean square residual of left-out spectra", "signal"),
        "part_coefficient": over(("part", dim, "property"), left.coefficients,
                                 "Regression vector without some samples", "property per signal"),
        "part_intercept": over(("part", "property"), left.intercepts, "Intercept without some samples", "as property"),
        "part_of": over("sample", left.model_of, "Which of these models left the sample out, -1 for none"),
        "part_prediction": over(("sample", "property"), left.predicted, "Value from the model that left it out",
                                "as property"),
    }  # fmt: skip


def _leverage(t2: FloatArray) -> FloatArray:
    n = t2.size
    found: FloatArray = t2 / (n - 1) + 1.0 / n
    return found


def _figures(
    values: FloatArray, fitted: FloatArray, predicted: FloatArray, evidence: Evidence, k: int
) -> dict[str, list[Figures]]:
    count = values.shape[1]
    found = {
        "calibration": [figures(values[:, j], fitted[:, j], fitted=k + 1) for j in range(count)],
        "cross-validation": [_over_rounds(values[:, j], predicted[:, :, j]) for j in range(count)],
        "nested": [figures(values[:, j], evidence.outer[:, j]) for j in range(count)],
    }
    if evidence.test is not None:
        found["test"] = evidence.test
    return found


def _over_rounds(values: FloatArray, predicted: FloatArray) -> Figures:
    """Figures of each round; of several rounds the root mean square error, and the median of the rest."""
    each = [figures(values, one) for one in predicted]
    if len(each) == 1:
        return each[0]
    middle = {f.name: float(np.median([getattr(one, f.name) for one in each])) for f in fields(Figures)}
    error = float(np.sqrt(np.mean([one.error**2 for one in each])))
    return Figures(**{**middle, "error": error, "count": each[0].count})  # type: ignore[arg-type]


def _outliers(errors: FloatArray, t2: FloatArray, q: FloatArray, k: int, limits: _Limits) -> list[str]:
    """One sentence for each calibration sample that is unlike the others, empty for the rest."""
    n = len(errors)
    leverage, most = _leverage(t2), 3.0 * (k + 1) / n
    middle = np.nanmedian(errors, axis=0)
    spread = 1.4826 * np.nanmedian(np.abs(errors - middle), axis=0)
    with np.errstate(invalid="ignore", divide="ignore"):
        z = np.nanmax(np.where(spread > 0, np.abs(errors - middle) / spread, 0.0), axis=1, initial=0.0)
    found = []
    for i in range(n):
        why = []
        if leverage[i] > most:
            why.append(f"its leverage of {leverage[i]:.2g} is above {most:.2g}")
        if q[i] > limits.q:
            why.append(f"its spectrum, predicted without it, leaves {q[i] / limits.q:.2g} times the limit of Q")
        if z[i] > _FAR:
            why.append(f"its error, predicted without it, is {z[i]:.2g} robust standard deviations from the others")
        found.append("; ".join(why))
    return found


def _twins(rows: FloatArray, plan: Plan) -> BoolArray:
    """Samples whose very spectrum another sample has that was tested in another fold."""
    fold_of = np.full(len(rows), -1)
    for k, (_, test) in enumerate(plan.rounds[0]):
        fold_of[test] = k
    _, same = np.unique(rows, axis=0, return_inverse=True)
    same = same.ravel()
    found = np.zeros(len(rows), dtype=bool)
    for which in np.flatnonzero(np.bincount(same) > 1):
        members = same == which
        found[members] = np.unique(fold_of[members]).size > 1
    return found
