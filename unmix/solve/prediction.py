"""``predict``: values of new spectra from a calibration, each with an interval, two distances, and a verdict."""

import json
from dataclasses import dataclass
from functools import partial
from typing import Any

import numpy as np
import xarray as xr

from unmix.chunked import by_block, is_chunked
from unmix.diagnose.jackknife import jackknife_plus, samples_for
from unmix.diagnose.outliers import region_at_fault
from unmix.errors import InputError, listed
from unmix.kernels import BoolArray, FloatArray, IntArray
from unmix.provenance import provenance
from unmix.solve.calibration import Calibration
from unmix.solve.latent_model import Guarded
from unmix.solve.options import check_level
from unmix.solve.result import CAUTION
from unmix.solve.transfer import reach_of_transfer
from unmix.spectra import rows_of, spectral_dim
from unmix.units import SPECTRAL_UNITS

#: so many times a limit, a spectrum has nothing in common with the calibration
_STRANGE = 10.0

#: variables of the result whose names a coordinate must not have
RESERVED = frozenset({
    "predicted", "lower", "upper", "outside_range", "q_residual", "q_limit", "t2", "t2_limit", "nearest",
    "nearest_limit", "q_position", "t2_position", "verdict", "reason", "property", "lowest", "highest",
})  # fmt: skip

_FINE = "The spectrum is like those of the calibration, and the value lies within its range."


def predict(calibration: Calibration, spectra: Any, *, level: float = 0.95) -> xr.Dataset:
    """Predict properties of spectra, and say for each spectrum whether the calibration may be trusted with it.

    Parameters
    ----------
    calibration : Calibration
        From ``calibrate`` or ``load``.
    spectra : DataArray, dims (..., spectral)
        On the axis of the calibration; NaN marks a missing channel.
    level : float
        Coverage of the intervals.

    Returns
    -------
    Dataset
        Over (sample, property): ``predicted``, ``lower``, ``upper``, ``outside_range``. Over sample: ``q_residual``,
        ``t2``, ``nearest``, ``q_position`` and ``t2_position`` (where on the axis an excess comes from, NaN without
        one), ``verdict`` and ``reason``. Limits: ``q_limit``, ``t2_limit``, ``nearest_limit``; ``lowest`` and
        ``highest`` (property): the calibrated range.

    Raises
    ------
    InputError, AxisError
        For something that is no calibration, another axis, or another quantity.

    Notes
    -----
    Intervals are jackknife+ (CV+ where samples were left out in groups): they assume nothing of the errors but that new
    samples are exchangeable with those of the calibration. Q is the squared residual of the spectrum, T2 its distance
    within the model, ``nearest`` the distance to the nearest calibration sample. Beyond a limit the verdict is
    ``doubtful``; ten times beyond, or where a channel is missing, ``unsupported``.

    References
    ----------
    Barber, Candes, Ramdas and Tibshirani, Ann. Stat. 49 (2021) 486. Jackson and Mudholkar, Technometrics 21 (1979)
    341. ASTM E1655.

    Examples
    --------
    >>> import pandas as pd
    >>> from unmix.solve.calibration import calibrate
    >>> from unmix.spectra import make_spectra
    >>> rng = np.random.default_rng(0)
    >>> amount = rng.random((30, 2))
    >>> bands = np.exp(-(((np.arange(50) - np.array([[20], [30]])) / 8) ** 2))
    >>> spectra = make_spectra(amount @ bands + 1e-3 * rng.normal(size=(30, 50)), 1000 + 10 * np.arange(50),
    ...                        dim="wavelength", quantity="absorbance", labels=[f"s{i}" for i in range(30)])
    >>> known = pd.DataFrame({"water": amount[:, 0]}, index=spectra["label"].values)
    >>> found = predict(calibrate(spectra, known, permutations=0), spectra[:2])
    >>> bool((abs(found.predicted.values[:, 0] - amount[:2, 0]) < 0.01).all()), found.verdict.values.tolist()
    (True, ['supported', 'supported'])
    """
    if not isinstance(calibration, Calibration):
        raise InputError(f"calibration is a {type(calibration).__name__}",
                         accepted="give what unmix.calibrate or unmix.load returned")  # fmt: skip
    check_level(level)
    if is_chunked(spectra):
        return by_block(partial(predict, calibration, level=level), spectra)
    given, prepared, assumptions = calibration.prepare(spectra)
    _refuse_taken(given)
    rows = rows_of(prepared)
    guarded = calibration.model.guard(rows, _columns(calibration))
    lower, upper = _intervals(calibration, guarded, level)
    judged = _judge(calibration, prepared, rows, guarded, lower, level)
    leading, shape = given.dims[:-1], given.shape[:-1]
    data, names = calibration.data, calibration.properties
    units = [str(unit) for unit in data["property_unit"].values]
    unit = units[0] if len(set(units)) == 1 else "as property"
    dim = spectral_dim(prepared)

    def amounts(array: Any, words: str, of: str = unit) -> tuple[Any, Any, dict[str, str]]:
        return (*leading, "property"), array.reshape(*shape, len(names)), {"long_name": words, "units": of}

    def figure(array: Any, words: str, of: str = "1") -> tuple[Any, Any, dict[str, str]]:
        return leading, np.asarray(array).reshape(shape), {"long_name": words, "units": of}

    def limit(name: str, dims: Any = (), of: str | None = None) -> tuple[Any, Any, dict[str, str]]:
        attrs = {"long_name": data[name].attrs["long_name"], "units": of or data[name].attrs["units"]}
        return dims, data[name].values, attrs

    ranges = data[["lowest", "highest"]].sel(set="calibration")
    variables = {
        "predicted": amounts(guarded.predicted, "Predicted value"),
        "lower": amounts(lower, "Lower end of the interval"),
        "upper": amounts(upper, "Upper end of the interval"),
        "outside_range": amounts(judged.outside, "Outside the calibrated range", "1"),
        "q_residual": figure(guarded.q, "Squared residual of the spectrum (Q)", "signal squared"),
        "q_limit": limit("q_limit"),
        "t2": figure(guarded.t2, "Hotelling T2"),
        "t2_limit": limit("t2_limit"),
        "nearest": figure(guarded.nearest, "Squared distance to the nearest calibration sample"),
        "nearest_limit": limit("nearest_limit"),
        "q_position": figure(judged.q_position, "Where most of an excess of Q comes from", SPECTRAL_UNITS[dim]),
        "t2_position": figure(judged.t2_position, "Where most of an excess of T2 comes from", SPECTRAL_UNITS[dim]),
        "verdict": figure(judged.verdict, "Verdict", ""),
        "reason": figure(judged.reason, "Reason for the verdict", ""),
        "lowest": ("property", ranges["lowest"].values, {"long_name": "Smallest calibrated value", "units": unit}),
        "highest": ("property", ranges["highest"].values, {"long_name": "Largest calibrated value", "units": unit}),
        "property_unit": ("property", units, {"long_name": "Unit", "units": ""}),
    }
    given_dim = spectral_dim(given)
    coords = {str(name): c for name, c in given.coords.items() if given_dim not in c.dims}
    notes = json.loads(given.attrs.get("notes", "[]"))
    if data["verdict"].item() != "supported":
        notes.insert(0, f"The calibration itself is {data['verdict'].item()}: {data['reason'].item()}")
    attrs = {"kind": "prediction", "title": f"Prediction of {', '.join(names)}", "level": float(level),
             "limit_level": data.attrs["limit_level"], "caution": CAUTION, "notes": json.dumps(notes),
             "assumptions": json.dumps(assumptions), "n_components": calibration.n_components,
             "calibration_verdict": str(data["verdict"].item()), "calibration_created": data.attrs["created"],
             "calibration_inputs": data.attrs["inputs"], "preparation": data.attrs["preparation"],
             **provenance("predict", {"level": level}, spectra=given)}  # fmt: skip
    return xr.Dataset(variables, coords={**coords, "property": names}, attrs=attrs)


def _refuse_taken(given: xr.DataArray) -> None:
    taken = sorted(str(name) for name in given.coords if name in RESERVED)
    if taken:
        raise InputError(f"spectra have a coordinate {listed(taken)}, the name of a variable of the result",
                         accepted="rename or drop it")  # fmt: skip


def _columns(calibration: Calibration) -> FloatArray:
    """Regression vectors of the models that left samples out, shape (channels, parts x properties)."""
    slopes = calibration.data["part_coefficient"].values
    return np.ascontiguousarray(np.moveaxis(slopes, 1, 0).reshape(slopes.shape[1], -1))


def _intervals(calibration: Calibration, guarded: Guarded, level: float) -> tuple[FloatArray, FloatArray]:
    """Both ends, from the centred rows times :func:`_columns`; NaN where a channel is missing."""
    data, projected = calibration.data, guarded.projected
    part_of = data["part_of"].values
    held = part_of >= 0
    slopes = data["part_coefficient"].values
    at_mean = data["part_intercept"].values + np.einsum("p,kpm->km", data["x_mean"].values, slopes)
    errors = np.abs(data["part_prediction"].values - data["reference"].values)[held]
    values = projected.reshape(len(projected), *at_mean.shape) + at_mean
    missing = np.isnan(projected).any(axis=1)
    lower, upper = np.empty((2, len(projected), at_mean.shape[1]))
    for j in range(at_mean.shape[1]):
        lower[:, j], upper[:, j] = jackknife_plus(values[:, :, j], errors[:, j], part_of[held], level)
    lower[missing], upper[missing] = np.nan, np.nan
    more = reach_of_transfer(data, level)
    if more is not None:
        middle = guarded.predicted
        lower, upper = middle - np.hypot(middle - lower, more), middle + np.hypot(upper - middle, more)
    return lower, upper


@dataclass
class _Judged:
    """Verdicts, reasons and places at fault of flattened samples."""

    verdict: np.ndarray[Any, Any]
    reason: np.ndarray[Any, Any]
    outside: BoolArray
    q_position: FloatArray
    t2_position: FloatArray


def _judge(
    calibration: Calibration,
    prepared: xr.DataArray,
    rows: FloatArray,
    guarded: Guarded,
    lower: FloatArray,
    level: float,
) -> _Judged:
    data, n = calibration.data, rows.shape[0]
    limits = {"q": float(data["q_limit"]), "t2": float(data["t2_limit"]), "nearest": float(data["nearest_limit"])}
    ranges = data[["lowest", "highest"]].sel(set="calibration")
    low, high = ranges["lowest"].values, ranges["highest"].values
    names, units = calibration.properties, [str(unit) for unit in data["property_unit"].values]
    with np.errstate(invalid="ignore"):
        outside: BoolArray = np.logical_or(guarded.predicted < low, guarded.predicted > high)
        far: dict[str, BoolArray] = {name: getattr(guarded, name) > limit for name, limit in limits.items()}
        strange = (guarded.q > _STRANGE * limits["q"]) | (guarded.t2 > _STRANGE * limits["t2"])
    missing = ~np.isfinite(guarded.q)
    endless: BoolArray = np.asarray(np.isinf(lower).any(axis=1))
    doubt = outside.any(axis=1) | far["q"] | far["t2"] | far["nearest"] | endless
    verdict = np.where(missing | strange, "unsupported", np.where(doubt, "doubtful", "supported")).astype(object)
    reason = np.full(n, _FINE, dtype=object)
    q_position, t2_position = np.full(n, np.nan), np.full(n, np.nan)
    dim = spectral_dim(prepared)
    axis, unit = np.asarray(prepared[dim].values, dtype=np.float64), SPECTRAL_UNITS[dim]
    for i in np.flatnonzero(missing | doubt):
        if missing[i]:
            reason[i] = _missing(rows[i], axis, unit)
            continue
        why = []
        if far["q"][i]:
            share = calibration.model.residuals(rows[i : i + 1])[0] ** 2
            words, q_position[i] = _excess(share, axis, unit)
            why.append(f"The spectrum holds something that the calibration does not know: Q is "
                       f"{_times(guarded.q[i] / limits['q'])} times its limit, {words}.")  # fmt: skip
        if far["t2"][i]:
            share = calibration.model.distance_shares(rows[i : i + 1])[0]
            words, t2_position[i] = _excess(share, axis, unit)
            why.append(f"The sample lies beyond those of the calibration: T2 is {_times(guarded.t2[i] / limits['t2'])} "
                       f"times its limit, {words}.")  # fmt: skip
        elif far["nearest"][i]:
            why.append(f"No calibration sample is near: the nearest is {_times(guarded.nearest[i] / limits['nearest'])}"
                       " times as far as any two neighbours of the calibration.")  # fmt: skip
        for j in np.flatnonzero(outside[i]):
            why.append(f"{names[j]} is predicted as {guarded.predicted[i, j]:.4g}, outside the calibrated range of "
                       f"{low[j]:.4g} to {high[j]:.4g}{'' if units[j] == '1' else ' ' + units[j]}.")  # fmt: skip
        if endless[i]:
            why.append(f"The calibration has too few samples for an interval at {level:g}: it takes "
                       f"{samples_for(level)}.")  # fmt: skip
        reason[i] = " ".join(why)
    return _Judged(verdict.astype(str), reason.astype(str), outside, q_position, t2_position)


def _times(ratio: float) -> str:
    return f"{ratio:.2g}" if ratio < 100 else f"{ratio:.0f}"


def _missing(row: FloatArray, axis: FloatArray, unit: str) -> str:
    absent: IntArray = np.flatnonzero(~np.isfinite(row))
    if absent.size == row.size:
        return "Nothing could be predicted: the prepared spectrum has no value."
    return (f"Nothing could be predicted: {absent.size} of {row.size} channels are missing, the first at "
            f"{axis[absent[0]]:g} {unit}.")  # fmt: skip


def _excess(share: FloatArray, axis: FloatArray, unit: str) -> tuple[str, float]:
    """Where an excess comes from, in words, and the position of the channel that adds most."""
    first, last, part = region_at_fault(share)
    top = first + int(np.nanargmax(share[first : last + 1]))
    return f"{part:.0%} of it from {axis[first]:g} to {axis[last]:g} {unit}", float(axis[top])
