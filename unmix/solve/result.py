"""Put labels, units, verdicts and reasons on the arrays of an answer."""

from typing import Any

import numpy as np
import xarray as xr

from unmix.diagnose.conditioning import design_figures
from unmix.diagnose.residual import Bands
from unmix.diagnose.verdict import Band, Evidence, Words, judge
from unmix.errors import InputError, listed
from unmix.kernels import BoolArray, FloatArray
from unmix.solve.analysis import Progress
from unmix.solve.answer import Answer
from unmix.solve.hints import best_addition
from unmix.solve.model import Solver
from unmix.solve.paths import Paths
from unmix.solve.uncertainty import SOURCES, Inputs, Scale
from unmix.spectra import rows_of, spectral_dim
from unmix.units import SPECTRAL_UNITS

#: share of the squared residual that a shift of the axis must explain to be named
_LIKE_SHIFT = 1.0 / 3.0

#: shown wherever a result is shown
CAUTION = (
    "A computed composition does not replace a validated method. Where a result can affect the safety of people, "
    "product or plant, follow local rules and have it confirmed by licensed practice."
)

#: what bare pure spectra leave open
REPRODUCIBILITY = (
    "Only pure spectra were given: how well measurements repeat from sample to sample is unknown and not part of "
    "the intervals, apart from what the residual of each sample shows."
)

#: variable -> (long name, whether it is in units of amount)
_AMOUNTS = {
    "concentration": "Concentration",
    "standard_uncertainty": "Standard uncertainty of the concentration",
    "lower": "Lower end of the interval",
    "upper": "Upper end of the interval",
    "critical_level": "Critical level: above it the component counts as detected",
    "detection_limit": "Detection limit",
    "quantification_limit": "Quantification limit",
    "misfit_harm": "Possible shift by unexplained bands, included in the interval",
}

#: variables of the result whose names a coordinate must not have
RESERVED = frozenset({
    *_AMOUNTS, "detected", "measured", "fitted", "residual", "baseline", "used", "noise_level",
    "noise_correlation_length", "misfit_z", "misfit_limit", "stray_light", "spikes", "channels_used",
    "channels_missing", "channels_saturated", "effective_channels", "lack_of_fit", "path_factor", "verdict",
    "reason", "suggestion", "misfit_position", "misfit_width", "misfit_height", "misfit_score", "pure_signal",
    "variance_inflation", "selectivity", "confused_with", "condition_index", "component", "contribution", "correlation",
    "degrees_of_freedom", "source", "component_2",
})  # fmt: skip

_FIGURES = {
    "noise_level": ("Standard deviation of the noise of one channel", "signal"),
    "noise_correlation_length": ("Correlation length of the noise", "channels"),
    "misfit_z": ("Largest score of an unexplained band", "1"),
    "spikes": ("Isolated spikes, left out", "channels"),
    "stray_light": ("Stray light, as a share of the light", "1"),
    "misfit_limit": ("Limit of the score, at most one false alarm in a hundred spectra", "1"),
}


def assemble(
    samples: xr.DataArray,
    pure: xr.DataArray,
    solver: Solver,
    paths: Paths,
    progress: Progress | None,
    library: xr.DataArray | None = None,
    scale: Scale | None = None,
) -> xr.Dataset:
    """Run the estimator on labelled samples and label the answer.

    Parameters
    ----------
    samples : DataArray, dims (..., spectral)
    pure : DataArray, dims (component, spectral)
        On the same channels.
    solver : Solver
        With the pure spectra per unit path.
    paths : Paths
    progress : callable or None
    library : DataArray, dims (component, spectral), optional
        Spectra on the same channels, among which a missing component may be.
    scale : Scale, optional
        Uncertainty of the path and dilution.

    Returns
    -------
    Dataset
    """
    single = samples.dtype == np.float32
    rows = np.asarray(rows_of(samples), dtype=np.float64)
    present = np.isfinite(rows)
    usable = np.isfinite(solver.pure).all(axis=0)
    given = present & usable
    scale = Scale() if scale is None else scale
    inputs = Inputs(_along_pure(pure, "relative_uncertainty"), _along_pure(pure, "noise") / paths.weight,
                    scale.path_uncertainty, scale.dilution_uncertainty)  # fmt: skip
    bends = samples.attrs.get("quantity") == "absorbance" and "prepared" not in samples.attrs
    answer = solver.analyse(rows, given, inputs=inputs, resolution=1e-6 if single else 1e-12,
                            detect_saturation=bends, progress=progress)  # fmt: skip
    _per_path(answer, paths.factor)
    words = Words([str(c) for c in pure["component"].values], paths.amount_unit, SPECTRAL_UNITS[spectral_dim(samples)])
    lost_light = samples.attrs.get("measured_as") == "transmittance"
    judged = []
    for i in range(rows.shape[0]):
        missing = int((~present[i]).sum())
        evidence = _evidence(answer, i, samples, solver, paths)
        bent = answer.stray_light[i] > 0
        evidence.plateau = -float(np.log10(answer.stray_light[i])) if bent else np.nan
        evidence.channels_saturated = int((given[i] & ~answer.used[i]).sum() if bent else 0)
        evidence.channels_saturated += missing if lost_light else 0
        evidence.channels_missing = 0 if lost_light else missing
        left, whole = (rows[i] - answer.fitted[i])[answer.used[i]], rows[i, answer.used[i]]
        # what noise alone leaves is not unexplained
        noise = np.nan_to_num(answer.noise_level[i]) * np.sqrt(left.size)
        unexplained = np.sqrt(max(float(left @ left) - noise**2, 0.0))
        evidence.lack_of_fit = float(unexplained / max(np.linalg.norm(whole), np.finfo(float).tiny))
        evidence.blank = bool(answer.blank[i])
        above_baseline = (rows[i] - answer.baseline[i])[answer.used[i]]
        evidence.negative_share = float(np.mean(above_baseline < -0.05)) if above_baseline.size else 0.0
        if evidence.bands and answer.axis[i] is None:
            evidence.like_shift = _like_shift(rows[i] - answer.fitted[i], answer.fitted[i] - answer.baseline[i],
                                              samples[spectral_dim(samples)].values, answer.used[i])  # fmt: skip
        if library is not None and evidence.bands:
            evidence.suggestion = _suggestion(rows[i] - answer.fitted[i], answer.used[i], solver, library)
        judged.append((*judge(evidence, words), evidence))
    return _dataset(samples, pure, solver, paths, answer, judged)


def _like_shift(residual: FloatArray, signal: FloatArray, axis: FloatArray, used: BoolArray) -> float:
    """The shift that would explain a third or more of the squared residual; NaN where none does."""
    slope = -np.gradient(signal, axis) if axis.size > 1 else np.zeros(1)
    slope, rest = slope[used], residual[used]
    size = float(slope @ slope)
    if size == 0 or not np.isfinite(size):
        return float("nan")
    shift = float(slope @ rest) / size
    return shift if shift**2 * size > _LIKE_SHIFT * float(rest @ rest) else float("nan")


def _suggestion(residual: FloatArray, used: BoolArray, solver: Solver, library: xr.DataArray) -> str:
    design = np.hstack([solver.free, np.nan_to_num(solver.pure.T)])
    hint = best_addition(np.nan_to_num(residual), used, design, np.asarray(library.values, dtype=float))
    return "" if hint is None else f"{library['component'].values[hint.index]} ({hint.share:.0%} of the residual)"


def check_coordinates(samples: xr.DataArray) -> xr.DataArray:
    """Samples whose coordinates leave the names of a result free; a leading ``component`` becomes ``sample``.

    Raises
    ------
    InputError
        When a coordinate has the name of a variable of the result.
    """
    if "component" in samples.dims:
        samples = samples.rename(component="sample")
    taken = [str(name) for name in samples.coords if name in RESERVED]
    if taken:
        raise InputError(f"the spectra have a coordinate {listed(taken)}, the name of a variable of the result",
                         accepted="rename it, for example to known_concentration")  # fmt: skip
    return samples


def _along_pure(pure: xr.DataArray, name: str) -> FloatArray:
    """Uncertainties that stand beside the pure spectra; zero where none are given."""
    if name not in pure.coords:
        return np.zeros(pure.sizes["component"])
    given: FloatArray = np.asarray(pure[name].values, dtype=float)
    bad = ~(np.isfinite(given) & (given >= 0))
    if bad.any():
        j = int(bad.argmax())
        raise InputError(f"{name} of pure spectrum '{pure['component'].values[j]}' is {given[j]:g}",
                         accepted="give a standard uncertainty, as a fraction where relative, 0 if exact")  # fmt: skip
    return given


def _per_path(answer: Answer, factor: FloatArray) -> None:
    """Amounts were found per unit path; divide by each sample's path."""
    for name in _AMOUNTS:
        values = getattr(answer, name)
        values /= factor[:, None]
    answer.contribution /= factor[:, None, None]
    for i, found in enumerate(answer.bands):
        if found is not None:
            answer.bands[i] = found._replace(shift=found.shift / factor[i])


def _evidence(answer: Answer, i: int, samples: xr.DataArray, solver: Solver, paths: Paths) -> Evidence:
    axis = np.asarray(samples[spectral_dim(samples)].values, dtype=float)
    noise, used = solver.noise, answer.used[i]
    concentration = answer.concentration[i]
    with np.errstate(invalid="ignore"):
        detected = concentration > answer.critical_level[i]
    return Evidence(
        concentration=concentration,
        lower=answer.lower[i],
        upper=answer.upper[i],
        detected=np.asarray(detected),
        signal_length=np.linalg.norm(np.nan_to_num(solver.pure[:, used]), axis=1) * paths.factor[i],
        n_terms=solver.pure.shape[0] + solver.free.shape[1],
        channels_used=int(used.sum()),
        freedom=float(np.nan_to_num(answer.freedom[i], nan=-1.0)),
        noise_level=float(answer.noise_level[i]),
        noise_given=None if noise is None else float(np.median(np.asarray(noise, dtype=float))),
        misfit_z=float(answer.misfit_z[i]),
        misfit_limit=float(answer.misfit_limit[i]),
        bands=_bands(answer.bands[i], axis),
        harm=answer.misfit_harm[i],
        growth=float(answer.residual_growth[i]),
        excess=float(answer.residual_excess[i]),
        spikes=int(np.nan_to_num(answer.spikes[i])),
        stray=float(np.nan_to_num(answer.stray_light[i])),
        negative=answer.negative[i] if solver.nonnegative else np.zeros(0),
        unbounded=answer.unbounded[i] / paths.factor[i],
        correlation_length=float(answer.noise_correlation_length[i]),
        groups=answer.groups[i],
        checks=answer.checks[i],
        axis=answer.axis[i],
    )


def _bands(found: Bands | None, axis: FloatArray) -> list[Band]:
    if found is None:
        return []
    spacing = np.abs(np.gradient(axis)) if axis.size > 1 else np.ones(1)
    return [
        Band(float(axis[c]), float(w * spacing[c]), float(h), float(z), s) for c, w, h, z, s in zip(*found, strict=True)
    ]


def _dataset(
    samples: xr.DataArray,
    pure: xr.DataArray,
    solver: Solver,
    paths: Paths,
    answer: Answer,
    judged: list[tuple[str, str, Evidence]],
) -> xr.Dataset:
    dim = spectral_dim(samples)
    leading = tuple(str(d) for d in samples.dims[:-1])
    shape = tuple(samples.sizes[d] for d in leading)
    signal_unit = "arbitrary" if samples.attrs.get("quantity") == "intensity" else "absorbance"

    def over(values: Any, *more: str, name: str, units: str = "1") -> tuple[tuple[str, ...], Any, dict[str, str]]:
        array = np.asarray(values)
        return ((*leading, *more), array.reshape(*shape, *array.shape[1:]), {"long_name": name, "units": units})

    evidence, used = [e for _, _, e in judged], answer.used
    data: dict[str, Any] = {
        name: over(getattr(answer, name), "component", name=text, units=paths.amount_unit)
        for name, text in _AMOUNTS.items()
    }
    data["detected"] = over([e.detected for e in evidence], "component", name="Above the critical level")
    measured = np.asarray(rows_of(samples), dtype=np.float64)
    residual = np.where(used, measured - answer.fitted, np.nan)
    curves = {
        "measured": (measured, "Measured"),
        "fitted": (answer.fitted, "Fitted"),
        "residual": (residual, "Measured less fitted"),
        "baseline": (answer.baseline, "Fitted baseline"),
    }
    data |= {key: over(values, dim, name=text, units=signal_unit) for key, (values, text) in curves.items()}
    data["used"] = over(used, dim, name="Channel used in the fit")
    for key, (text, unit) in _FIGURES.items():
        data[key] = over(getattr(answer, key), name=text, units=signal_unit if unit == "signal" else unit)
    counts = {
        "channels_used": "Channels used",
        "channels_missing": "Channels without a value",
        "channels_saturated": "Saturated channels, left out",
    }
    for key, text in counts.items():
        data[key] = over([getattr(e, key) for e in evidence], name=text, units="channels")
    data["effective_channels"] = over(
        data["channels_used"][1].ravel() / answer.noise_correlation_length,
        name="Channels that carry independent noise", units="channels",
    )  # fmt: skip
    data["lack_of_fit"] = over(_lack_of_fit(residual, measured, used), name="Lack of fit", units="percent")
    data["path_factor"] = over(paths.factor, name="Path in units of the pure spectra's path, over the dilution")
    data["degrees_of_freedom"] = over(answer.trust, name="Degrees of freedom of the noise")
    data["contribution"] = over(answer.contribution, "component", "source", units=paths.amount_unit,
                                name="Contribution to the standard uncertainty")  # fmt: skip
    data["correlation"] = over(answer.correlation, "component", "component_2", name="Correlation of the errors")
    data["verdict"] = over([v for v, _, _ in judged], name="Verdict", units="")
    data["reason"] = over([r for _, r, _ in judged], name="Reason for the verdict", units="")
    data["suggestion"] = over([e.suggestion for e in evidence], name="Spectrum of the library that would explain most",
                              units="")  # fmt: skip
    data |= _axis_variables(answer, over, SPECTRAL_UNITS[dim])
    data |= _band_table(evidence, over, SPECTRAL_UNITS[dim], signal_unit)
    data |= _design(pure, solver, dim, signal_unit, paths)
    coords = {name: c for name, c in samples.coords.items() if name != dim}
    built = xr.Dataset(data, coords={
        **coords, "component": pure["component"].values, "component_2": pure["component"].values,
        "source": list(SOURCES), dim: samples[dim],
    })  # fmt: skip
    return built.assign_attrs(title="Composition from known pure spectra", caution=CAUTION,
                              reproducibility=REPRODUCIBILITY)  # fmt: skip


def _lack_of_fit(residual: FloatArray, measured: FloatArray, used: BoolArray) -> FloatArray:
    with np.errstate(invalid="ignore", divide="ignore"):
        signal = np.where(used, measured, np.nan)
        lack: FloatArray = 100.0 * np.sqrt(np.nansum(residual**2, axis=1) / np.nansum(signal**2, axis=1))
    return lack


def _axis_variables(answer: Answer, over: Any, unit: str) -> dict[str, Any]:
    """What the axis fit found, where it was asked for."""
    known = [report for report in answer.axis if report is not None]
    if not known:
        return {}
    words = {"shift": "Shift of the axis", "stretch": "Stretch of the axis", "broadening": "Width of the broadening"}
    table: dict[str, Any] = {}
    none = np.full(answer.concentration.shape[1], np.nan)
    for name in known[0]:
        pairs = [(none, none, False) if report is None else report[name] for report in answer.axis]
        units = "1" if name == "stretch" else unit
        table[f"axis_{name}"] = over([pair[0] for pair in pairs], "component", name=words[name], units=units)
        table[f"axis_{name}_uncertainty"] = over([pair[1] for pair in pairs], "component", units=units,
                                                 name=f"Standard uncertainty: {words[name].lower()}")  # fmt: skip
    return table


def _band_table(evidence: list[Evidence], over: Any, axis_unit: str, signal_unit: str) -> dict[str, Any]:
    most = max((len(e.bands) for e in evidence), default=0)
    names = {
        "misfit_position": ("position", "Position of an unexplained band", axis_unit),
        "misfit_width": ("width", "Full width at half height of an unexplained band", axis_unit),
        "misfit_height": ("height", "Height of an unexplained band", signal_unit),
        "misfit_score": ("score", "Score of an unexplained band", "1"),
    }
    table = {}
    for key, (field, text, unit) in names.items():
        values = np.full((len(evidence), most), np.nan)
        for i, e in enumerate(evidence):
            values[i, : len(e.bands)] = [getattr(b, field) for b in e.bands]
        table[key] = over(values, "misfit_band", name=text, units=unit)
    return table


def _design(pure: xr.DataArray, solver: Solver, dim: str, signal_unit: str, paths: Paths) -> dict[str, Any]:
    """Pure spectra as used and their conditioning on all usable channels."""
    usable = np.isfinite(solver.pure).all(axis=0)
    figures = design_figures(solver.pure.T[usable], solver.free[usable])
    names = pure["component"].values
    partner = [str(names[j]) if j >= 0 else "" for j in figures.partner]
    unit = f"{signal_unit} per {paths.amount_unit}"

    def along(values: Any, text: str, units: str = "1") -> tuple[str, Any, dict[str, str]]:
        return "component", np.asarray(values), {"long_name": text, "units": units}

    return {
        "pure_signal": (("component", dim), solver.pure,
                        {"long_name": "Pure spectrum per unit amount and path", "units": unit}),
        "variance_inflation": along(figures.inflation, "Variance inflation by overlap"),
        "selectivity": along(figures.selectivity, "Share of the pure spectrum that is its own"),
        "confused_with": along(partner, "Component it is most easily confused with", ""),
        "condition_index": ((), float(figures.indices.max()), {"long_name": "Largest condition index", "units": "1"}),
    }  # fmt: skip
