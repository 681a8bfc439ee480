"""Looking after a calibration: is it still right, adjust it, compare two, chart predictions over time."""

import json
from typing import Any

import numpy as np
import xarray as xr
from scipy import stats

from unmix.diagnose.upkeep import Adjustment, adjustment, chart, randomisation_p
from unmix.errors import InputError, listed
from unmix.kernels import FloatArray
from unmix.provenance import provenance
from unmix.solve.calibration import Calibration, matched
from unmix.solve.options import check_level
from unmix.solve.prediction import predict
from unmix.solve.result import CAUTION
from unmix.spectra import labels_of

#: fewest samples that a calibration is judged by
_FEWEST = 5


def check_calibration(calibration: Calibration, spectra: Any, reference: Any, *, level: float = 0.95) -> xr.Dataset:
    """Judge a calibration by new samples with reference values, and say whether a bias or slope is called for.

    Parameters
    ----------
    calibration : Calibration
    spectra : DataArray, dims (sample, spectral)
    reference : DataFrame, Series or DataArray
        Reference values, matched by name.
    level : float
        Of the tests and intervals.

    Returns
    -------
    Dataset
        Over property: ``error`` (SEP), ``expected_error`` (that of validation), ``bias``, ``bias_p``, ``slope``,
        ``intercept``, ``slope_p``, ``advised``, ``error_after``, ``inside`` (share of reference values inside their
        intervals); over (sample, property) ``predicted`` and ``reference``; ``verdict`` and ``reason``.

    Raises
    ------
    InputError
        For fewer than five samples, or values that match nothing.

    References
    ----------
    ASTM E1655.

    Examples
    --------
    >>> import pandas as pd
    >>> from unmix.solve.calibration import calibrate
    >>> from unmix.spectra import make_spectra
    >>> rng = np.random.default_rng(0)
    >>> amount = rng.random((40, 2))
    >>> bands = np.exp(-(((np.arange(50) - np.array([[20], [30]])) / 8) ** 2))
    >>> names = [f"s{i}" for i in range(40)]
    >>> spectra = make_spectra(amount @ bands + 1e-3 * rng.normal(size=(40, 50)), 1000 + 10 * np.arange(50),
    ...                        dim="wavelength", quantity="absorbance", labels=names)
    >>> known = pd.DataFrame({"water": amount[:, 0] + 0.01 * rng.normal(size=40)}, index=names)
    >>> made = calibrate(spectra[:30], known[:30], permutations=0)
    >>> check_calibration(made, spectra[30:], known[30:]).advised.values.tolist()
    ['none']
    """
    check_level(level)
    found, values, names = _against(calibration, spectra, reference, level)
    rows = [adjustment(values[:, j], found["predicted"].values[:, j], level) for j in range(len(names))]
    expected = _expected(calibration)
    inside = ((found["lower"].values <= values) & (values <= found["upper"].values)).mean(axis=0)
    unit = _unit(calibration)
    verdict, reason = _judge(calibration.properties, rows, expected, inside, level, len(values), unit)

    def over(values: Any, text: str, units: str = "1") -> tuple[Any, Any, dict[str, str]]:
        return "property", values, {"long_name": text, "units": units}

    words = {"error": ("Root mean square error of prediction (SEP)", unit),
             "bias": ("Mean of reference less predicted", unit),
             "bias_p": ("p value of the bias", "1"), "slope": ("Slope of reference on predicted", "1"),
             "intercept": ("Intercept of reference on predicted", unit), "slope_p": ("p value of the slope", "1"),
             "advised": ("Adjustment that is called for", ""),
             "error_after": ("Error after it, samples left out", unit)}  # fmt: skip
    data = {name: over([getattr(row, name) for row in rows], text, of) for name, (text, of) in words.items()}
    data["expected_error"] = over(expected, "Error of validation", unit)
    data["inside"] = over(inside, "Share of reference values inside their intervals")
    both = ("sample", "property")
    data["predicted"] = (both, found["predicted"].values, {"long_name": "Predicted value", "units": unit})
    data["reference"] = (both, values, {"long_name": "Reference value", "units": unit})
    data["verdict"] = ((), verdict, {"long_name": "Verdict", "units": ""})
    data["reason"] = ((), reason, {"long_name": "Reason for the verdict", "units": ""})
    coords = {"property": names, "sample": labels_of(found["predicted"])}
    return xr.Dataset(data, coords=coords, attrs={
        "kind": "check", "title": f"Check of the calibration of {', '.join(names)}", "level": level, "caution": CAUTION,
        **provenance("check_calibration", {"level": level}, spectra=spectra),
    })  # fmt: skip


def adjust(calibration: Calibration, checked: xr.Dataset, *, by: str | None = None) -> Calibration:
    """A calibration with the bias, or slope and bias, that a check called for.

    Parameters
    ----------
    calibration : Calibration
        The one that was checked.
    checked : Dataset
        From :func:`check_calibration`.
    by : {'bias', 'slope and bias'}, optional
        What to do to all properties, whatever was advised; by default what was advised for each.

    Returns
    -------
    Calibration
        Predictions and intervals are adjusted alike; validation figures stay those of the first calibration, and a note
        says so.

    Raises
    ------
    InputError
        When nothing was called for and nothing is asked for, or the check is of other properties.

    Examples
    --------
    >>> import pandas as pd
    >>> from unmix.solve.calibration import calibrate
    >>> from unmix.spectra import make_spectra
    >>> rng = np.random.default_rng(0)
    >>> amount = rng.random((40, 2))
    >>> bands = np.exp(-(((np.arange(50) - np.array([[20], [30]])) / 8) ** 2))
    >>> names = [f"s{i}" for i in range(40)]
    >>> spectra = make_spectra(amount @ bands + 1e-3 * rng.normal(size=(40, 50)), 1000 + 10 * np.arange(50),
    ...                        dim="wavelength", quantity="absorbance", labels=names)
    >>> known = pd.DataFrame({"water": amount[:, 0] + 0.01 * rng.normal(size=40)}, index=names)
    >>> made = calibrate(spectra[:30], known[:30], permutations=0)
    >>> checked = check_calibration(made, 0.9 * spectra[30:].assign_attrs(quantity="absorbance"), known[30:])
    >>> type(adjust(made, checked)).__name__
    'Calibration'
    """
    names = calibration.properties
    if not isinstance(checked, xr.Dataset) or checked.attrs.get("kind") != "check" or (
        [str(name) for name in checked["property"].values] != names
    ):  # fmt: skip
        raise InputError("checked is not a check of this calibration", accepted="give what check_calibration returned")
    if by not in (None, "bias", "slope and bias"):
        raise InputError(f"by is {by!r}", accepted="give 'bias' or 'slope and bias'")
    what = [by or str(one) for one in checked["advised"].values]
    if all(one == "none" for one in what):
        raise InputError("the check calls for no adjustment, and one without need adds noise",
                         accepted="leave the calibration, or ask for by='bias'")  # fmt: skip
    slope = np.where([one == "slope and bias" for one in what], checked["slope"].values, 1.0)
    shift = np.select([[one == "slope and bias" for one in what], [one == "bias" for one in what]],
                      [checked["intercept"].values, checked["bias"].values], 0.0)  # fmt: skip
    d = calibration.data
    b, a = xr.DataArray(slope, dims="property"), xr.DataArray(shift, dims="property")
    new = {name: d[name] * b for name in ("y_loading", "coefficient", "part_coefficient")}
    new |= {name: d[name] * b + a for name in ("y_mean", "part_intercept")}
    new["coefficient_uncertainty"] = d["coefficient_uncertainty"] * abs(b)
    # errors of left-out samples, from which intervals are made, grow and shrink with the slope
    new["part_prediction"] = d["reference"] + (d["part_prediction"] - d["reference"]) * b
    data = d.assign({name: array.transpose(*d[name].dims).assign_attrs(d[name].attrs) for name, array in new.items()})
    told = "; ".join(f"{name} by {one} ({start:.4g} + {rise:.4g} x)" for name, one, start, rise in
                     zip(names, what, shift, slope, strict=True) if one != "none")  # fmt: skip
    count = checked.sizes["sample"]
    notes = [f"adjusted after {count} new samples: {told}; the validation figures are those before it",
             *json.loads(d.attrs.get("notes", "[]"))]  # fmt: skip
    return Calibration(data.assign_attrs(notes=json.dumps(notes)), calibration.preparation)


def compare_calibrations(
    first: Calibration, second: Calibration, spectra: Any, reference: Any, *, level: float = 0.95, seed: int = 0
) -> xr.Dataset:
    """Compare two calibrations on the same samples, which neither was made from.

    Parameters
    ----------
    first, second : Calibration
        Of the same properties.
    spectra : DataArray, dims (sample, spectral)
    reference : DataFrame, Series or DataArray
    level : float
        Of the test.
    seed : int
        Of the random signs.

    Returns
    -------
    Dataset
        Over property: ``first_error``, ``second_error``, ``p`` (randomisation test of the squared errors), ``better``
        (empty where the difference may be chance).

    Raises
    ------
    InputError
        For calibrations of other properties, or fewer than five samples.

    References
    ----------
    van der Voet, Chemom. Intell. Lab. Syst. 25 (1994) 313.

    Examples
    --------
    >>> import pandas as pd
    >>> from unmix.solve.calibration import calibrate
    >>> from unmix.spectra import make_spectra
    >>> rng = np.random.default_rng(0)
    >>> amount = rng.random((40, 2))
    >>> bands = np.exp(-(((np.arange(50) - np.array([[20], [30]])) / 8) ** 2))
    >>> names = [f"s{i}" for i in range(40)]
    >>> spectra = make_spectra(amount @ bands + 1e-3 * rng.normal(size=(40, 50)), 1000 + 10 * np.arange(50),
    ...                        dim="wavelength", quantity="absorbance", labels=names)
    >>> known = pd.DataFrame({"water": amount[:, 0] + 0.01 * rng.normal(size=40)}, index=names)
    >>> made = calibrate(spectra[:30], known[:30], permutations=0)
    >>> one = calibrate(spectra[:30], known[:30], n_components=1, permutations=0)
    >>> compare_calibrations(made, one, spectra[30:], known[30:]).better.values.tolist()
    ['first']
    """
    check_level(level)
    if first.properties != second.properties:
        raise InputError(f"the calibrations predict {listed(first.properties)} and {listed(second.properties)}",
                         accepted="give two of the same properties")  # fmt: skip
    ours, values, names = _against(first, spectra, reference, level)
    theirs, _, _ = _against(second, spectra, reference, level)
    errors = [values - found["predicted"].values for found in (ours, theirs)]
    size = [np.sqrt(np.mean(e**2, axis=0)) for e in errors]
    p = [randomisation_p(errors[0][:, j], errors[1][:, j], shuffles=9999, seed=seed) for j in range(len(names))]
    better = ["" if one >= 1 - level else ("first" if a < b else "second")
              for one, a, b in zip(p, size[0], size[1], strict=True)]  # fmt: skip
    unit = _unit(first)

    def over(values: Any, text: str, units: str) -> tuple[Any, Any, dict[str, str]]:
        return "property", values, {"long_name": text, "units": units}

    return xr.Dataset(
        {"first_error": over(size[0], "SEP of the first", unit),
         "second_error": over(size[1], "SEP of the second", unit),
         "p": over(p, "p value that they are equal", "1"), "better": over(better, "The better one", "")},
        coords={"property": names},
        attrs={"kind": "comparison", "title": "Two calibrations on the same samples", "level": level,
               "caution": CAUTION, **provenance("compare_calibrations", {"level": level}, seed=seed, spectra=spectra)},
    )  # fmt: skip


def drift(calibration: Calibration, spectra: Any, reference: Any = None, *, weight: float = 0.2) -> xr.Dataset:
    """Charts over time of how unlike the calibration spectra are, and of the bias where reference values exist.

    Parameters
    ----------
    calibration : Calibration
    spectra : DataArray, dims (time or sample, spectral)
        In the order of time.
    reference : DataFrame, Series or DataArray, optional
        Reference values of some of them.
    weight : float
        Of the newest reading in the exponentially weighted mean, above 0 and up to 1.

    Returns
    -------
    Dataset
        Over the leading dimension: ``q_chart``, ``t2_chart`` and, over property too, ``bias_chart``, in standard
        deviations, with ``q_limit``, ``q_alarm`` and so on; ``first_alarm`` (chart). One point in about a thousand
        alarms by chance.

    Raises
    ------
    InputError
        For a weight out of range or spectra with more than one leading dimension.

    Notes
    -----
    Q is standardised through the distribution of the left-out calibration samples (log-normal), T2 through its F
    distribution, errors by the error of validation.

    References
    ----------
    Roberts, Technometrics 1 (1959) 239.

    Examples
    --------
    >>> import pandas as pd
    >>> from unmix.solve.calibration import calibrate
    >>> from unmix.spectra import make_spectra
    >>> rng = np.random.default_rng(0)
    >>> amount = rng.random((40, 2))
    >>> bands = np.exp(-(((np.arange(50) - np.array([[20], [30]])) / 8) ** 2))
    >>> names = [f"s{i}" for i in range(40)]
    >>> spectra = make_spectra(amount @ bands + 1e-3 * rng.normal(size=(40, 50)), 1000 + 10 * np.arange(50),
    ...                        dim="wavelength", quantity="absorbance", labels=names)
    >>> known = pd.DataFrame({"water": amount[:, 0] + 0.01 * rng.normal(size=40)}, index=names)
    >>> made = calibrate(spectra[:30], known[:30], permutations=0)
    >>> int(drift(made, spectra[30:]).q_alarm.sum())
    0
    """
    if isinstance(weight, bool) or not isinstance(weight, (int, float)) or not 0 < weight <= 1:
        raise InputError(f"weight is {weight!r}", accepted="give a number above 0 and up to 1")
    found = predict(calibration, spectra)
    if found["q_residual"].ndim != 1:
        raise InputError(f"the spectra have the dimensions {listed(found['q_residual'].dims)}",
                         accepted="give spectra along one dimension, in the order of time")  # fmt: skip
    dim = str(found["q_residual"].dims[0])
    data: dict[str, Any] = {}
    known = np.log(np.maximum(calibration.data["q_left_out"].values, np.finfo(float).tiny))
    with np.errstate(invalid="ignore", divide="ignore"):
        z = (np.log(found["q_residual"].values) - np.nanmean(known)) / np.nanstd(known, ddof=1)
    n, k = known.size, calibration.n_components
    data |= _charted("q", z[:, None], (weight, n), (dim,), "Q")
    scaled = found["t2"].values * n * (n - k) / (k * (n**2 - 1.0))
    z = stats.norm.isf(np.clip(stats.f.sf(scaled, k, n - k), 1e-15, 1.0 - 1e-15))
    data |= _charted("t2", z[:, None], (weight, n), (dim,), "Hotelling T2")
    if reference is not None:
        _, values, names, _ = matched(spectra, reference)
        order = [names.index(name) for name in calibration.properties]
        z = (values[:, order] - found["predicted"].values) / _expected(calibration)
        data |= _charted("bias", z, (weight, calibration.data.sizes["sample"]), (dim, "property"), "Bias")
    first = {name: _first(data[f"{name}_alarm"][1]) for name in ("q", "t2", "bias") if f"{name}_alarm" in data}
    words = {"long_name": "First point that alarms, -1 for none", "units": "1"}
    data["first_alarm"] = ("chart", list(first.values()), words)
    coords = {name: c for name, c in found.coords.items() if set(c.dims) <= {dim}}
    return xr.Dataset(data, coords={**coords, "chart": list(first), "property": calibration.properties}, attrs={
        "kind": "drift", "title": "Drift of a calibration", "weight": weight, "caution": CAUTION,
        **provenance("drift", {"weight": weight}, spectra=spectra),
    })  # fmt: skip


def _charted(key: str, z: FloatArray, how: tuple[float, int], dims: tuple[str, ...], words: str) -> dict[str, Any]:
    parts = [chart(column, *how) for column in z.T]
    shape = z.shape if len(dims) > 1 else z.shape[:1]
    told = {"chart": f"{words}, moving average in standard deviations", "chart_limit": f"Limit of the chart of {words}",
            "chart_alarm": f"Alarm of the chart of {words}"}  # fmt: skip
    values: dict[str, list[Any]] = {"chart": [p.value for p in parts], "chart_limit": [p.limit for p in parts],
              "chart_alarm": [p.alarm for p in parts]}  # fmt: skip
    return {f"{key}_{name.removeprefix('chart_') if name != 'chart' else name}":
            (dims, np.stack(values[name], axis=1).reshape(shape), {"long_name": told[name], "units": "1"})
            for name in values}  # fmt: skip


def _first(alarm: Any) -> int:
    any_ = np.asarray(alarm).reshape(len(alarm), -1).any(axis=1)
    return int(any_.argmax()) if any_.any() else -1


def _against(
    calibration: Calibration, spectra: Any, reference: Any, level: float
) -> tuple[xr.Dataset, FloatArray, list[str]]:
    """Predictions and reference values of the samples that have both."""
    found = predict(calibration, spectra, level=level)
    _, values, names, _ = matched(spectra, reference)
    absent = [name for name in calibration.properties if name not in names]
    if absent:
        raise InputError(f"reference has no column {listed(absent)}", accepted="name its columns as the properties")
    values = values[:, [names.index(name) for name in calibration.properties]]
    kept = np.flatnonzero(np.isfinite(values).all(axis=1) & np.isfinite(found["predicted"].values).all(axis=1))
    if kept.size < _FEWEST:
        raise InputError(f"{kept.size} samples have a prediction and a reference value",
                         accepted=f"give {_FEWEST} or more")  # fmt: skip
    dim = found["predicted"].dims[0]
    return found.isel({dim: kept}), values[kept], calibration.properties


def _expected(calibration: Calibration) -> FloatArray:
    expected: FloatArray = np.asarray(calibration.data["error"].sel(set="cross-validation").values, dtype=float)
    return expected


def _unit(calibration: Calibration) -> str:
    units = {str(unit) for unit in calibration.data["property_unit"].values}
    return units.pop() if len(units) == 1 else "as property"


def _judge(
    names: list[str], rows: list[Adjustment], expected: FloatArray, inside: FloatArray, level: float, n: int, unit: str
) -> tuple[str, str]:
    said, grade = [], 0
    behind = "" if unit == "1" else f" {unit}"
    for name, row, usual, share in zip(names, rows, expected, inside, strict=True):
        if row.advised != "none":
            grade = max(grade, 1)
            tests = f"bias {row.bias:.3g}{behind}, p = {row.bias_p:.2g}; slope {row.slope:.3g}, p = {row.slope_p:.2g}"
            said.append(f"{name} calls for a {row.advised} adjustment ({tests}), which takes the error from "
                        f"{row.error:.3g} to {row.error_after:.3g}{behind}.")  # fmt: skip
        p = float(stats.f.sf((row.error / usual) ** 2, n, max(n, 20))) if usual > 0 else 1.0
        if p < 0.01:
            grade = max(grade, 2 if row.error > 3 * usual else 1)
            said.append(f"The error of {name}, {row.error:.3g}{behind}, is larger than that of validation, {usual:.3g}"
                        f"{behind}.")  # fmt: skip
        if stats.binom.cdf(round(share * n), n, level) < 0.01:
            grade = max(grade, 1)
            said.append(f"Only {share:.0%} of the reference values of {name} lie inside their {level:.0%} intervals.")
    if not said:
        return "supported", f"{n} new samples agree with the calibration: no adjustment is called for."
    return ("supported", "doubtful", "unsupported")[grade], " ".join(said)
