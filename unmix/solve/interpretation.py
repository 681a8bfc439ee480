"""``interpret``: what a calibration rests on; ``select_samples``: which samples to take for one."""

from typing import Any

import numpy as np
import xarray as xr

from unmix.diagnose.latent import importance, merit, selectivity_ratio
from unmix.errors import InputError, listed
from unmix.kernels.selection import distances, duplex, kennard_stone
from unmix.provenance import provenance
from unmix.solve.calibration import Calibration, matched, working
from unmix.solve.result import CAUTION
from unmix.spectra import labels_of, rows_of, spectral_dim

#: ways of choosing samples
METHODS = ("kennard-stone", "duplex", "y-aware")


def interpret(calibration: Calibration) -> xr.Dataset:
    """Say which channels a calibration rests on, how sensitive it is, and down to which value it sees anything.

    Parameters
    ----------
    calibration : Calibration
        From ``calibrate`` or ``load``.

    Returns
    -------
    Dataset
        Over (property, spectral): ``coefficient`` with ``coefficient_uncertainty`` (jackknife), ``importance`` (VIP),
        ``selectivity_ratio``, ``net_signal`` (net analyte signal of a unit). Over property: ``sensitivity``,
        ``analytical_sensitivity``, ``detection_low`` and ``detection_high``, the ends of the detection limit interval.

    Raises
    ------
    InputError
        For something that is no calibration.

    Notes
    -----
    Noise of a channel is the root mean square residual of spectra that were left out. The uncertainty of reference
    values is that given as ``reference_error``, else the error of cross-validation, which is larger.

    References
    ----------
    See ``unmix.diagnose.latent``.

    Examples
    --------
    >>> import pandas as pd
    >>> from unmix.solve.calibration import calibrate
    >>> from unmix.spectra import make_spectra
    >>> rng = np.random.default_rng(0)
    >>> amount = rng.random((30, 2))
    >>> bands = np.exp(-(((np.arange(50) - np.array([[15], [35]])) / 5) ** 2))
    >>> names = [f"s{i}" for i in range(30)]
    >>> spectra = make_spectra(amount @ bands + 1e-3 * rng.normal(size=(30, 50)), 1000 + 10 * np.arange(50),
    ...                        dim="wavelength", quantity="absorbance", labels=names)
    >>> found = interpret(calibrate(spectra, pd.DataFrame({"water": amount[:, 0]}, index=names), permutations=0))
    >>> int(found.wavelength[found.importance.values[0].argmax()])
    1150
    """
    if not isinstance(calibration, Calibration):
        raise InputError(f"calibration is a {type(calibration).__name__}",
                         accepted="give what unmix.calibrate or unmix.load returned")  # fmt: skip
    data, model = calibration.data, calibration.model
    dim = str(data["x_mean"].dims[0])
    coefficients = model.coefficients
    squares = model.score_variance * max(model.known_scores.shape[0] - 1, 1)
    residual = np.asarray(data["residual_scale"].values) ** 2
    leverage = np.asarray(data["leverage"].values)
    vip, ratio, net, rows = [], [], [], []
    for j, name in enumerate(calibration.properties):
        b = coefficients[:, j]
        vip.append(importance(model.rotations, model.y_loadings[j], squares))
        ratio.append(selectivity_ratio(b, model.known_scores, model.loadings, residual))
        net.append(b / (b @ b))
        known = float(data["reference_error"].values[j])
        error = known if np.isfinite(known) else float(data["error"].sel(set="cross-validation", property=name))
        rows.append(merit(b, float(np.sqrt(residual.mean())), error, data["reference"].values[:, j], leverage))
    units = [str(unit) for unit in data["property_unit"].values]
    unit = units[0] if len(set(units)) == 1 else "as property"
    signal = f"signal per {unit}"

    def curve(values: Any, text: str, of: str = "1") -> tuple[Any, Any, dict[str, str]]:
        return ("property", dim), np.asarray(values), {"long_name": text, "units": of}

    def figure(field: str, text: str, of: str) -> tuple[Any, Any, dict[str, str]]:
        return "property", [getattr(one, field) for one in rows], {"long_name": text, "units": of}

    found = xr.Dataset(
        {
            "coefficient": curve(coefficients.T, "Regression vector", f"{unit} per signal"),
            "coefficient_uncertainty": curve(data["coefficient_uncertainty"].values,
                                             "Standard uncertainty, by the jackknife", f"{unit} per signal"),
            "importance": curve(vip, "Variable importance in projection"),
            "selectivity_ratio": curve(ratio, "Selectivity ratio"),
            "net_signal": curve(net, "Net analyte signal of a unit", signal),
            "sensitivity": figure("sensitivity", "Sensitivity", signal),
            "analytical_sensitivity": figure("analytical_sensitivity", "Sensitivity over noise", f"1/({unit})"),
            "detection_low": figure("detection_low", "Detection limit, lower end of the interval", unit),
            "detection_high": figure("detection_high", "Detection limit, upper end of the interval", unit),
        },
        coords={"property": calibration.properties, dim: data[dim]},
    )  # fmt: skip
    names = ", ".join(calibration.properties)
    return found.assign_attrs(kind="interpretation", title=f"What the calibration of {names} rests on",
                              caution=CAUTION, **provenance("interpret", {}, calibration=data))  # fmt: skip


def select_samples(spectra: Any, count: int, *, method: str = "kennard-stone", reference: Any = None) -> xr.DataArray:
    """Choose samples that span a set, for calibration or for a test set that is like it.

    Parameters
    ----------
    spectra : DataArray, dims (sample, spectral)
        Without missing channels; prepare them as the calibration will.
    count : int
        How many.
    method : {'kennard-stone', 'duplex', 'y-aware'}
        Farthest points of the spectra; two like sets taken in turn, of which the second has ``count``; farthest points
        of spectra and reference values together.
    reference : DataFrame or DataArray, optional
        Reference values, for 'y-aware'.

    Returns
    -------
    DataArray of int, dims (choice,)
        Positions of the chosen samples in the order of their choice, labels beside them. None is removed.

    Raises
    ------
    InputError
        For another method, a count that cannot be, or missing channels.

    References
    ----------
    Kennard and Stone, Technometrics 11 (1969) 137. Snee, Technometrics 19 (1977) 415. Galvao et al., Talanta 67 (2005)
    736.

    Examples
    --------
    >>> from unmix.spectra import make_spectra
    >>> spectra = make_spectra([[0.0, 0], [1.0, 0], [5.0, 0], [10.0, 0]], [500, 510], dim="wavelength",
    ...                        quantity="absorbance", labels=list("abcd"))
    >>> select_samples(spectra, 3).label.values.tolist()
    ['a', 'd', 'c']
    """
    if method not in METHODS:
        raise InputError(f"method is {method!r}", accepted=f"give {listed(METHODS)}")
    given, _ = working(spectra)
    rows = np.asarray(rows_of(given), dtype=np.float64)
    n = rows.shape[0]
    most = n // 2 if method == "duplex" else n
    if isinstance(count, bool) or not isinstance(count, (int, np.integer)) or not 2 <= count <= most:
        raise InputError(f"count is {count!r} of {n} samples", accepted=f"give 2 to {most}")
    if not np.isfinite(rows).all():
        raise InputError(f"the spectra miss channels along '{spectral_dim(given)}'", accepted="leave them out")
    distance = distances(rows)
    if (method == "y-aware") != (reference is not None):
        raise InputError("reference values go with the method 'y-aware' and only with it", accepted="give both or none")
    if reference is not None:
        _, values, _, _ = matched(given, reference)
        if not np.isfinite(values).all():
            raise InputError("a sample has no reference value", accepted="leave it out")
        spread = np.where(values.std(axis=0) > 0, values.std(axis=0), 1.0)
        apart = distances(values / spread)
        distance = distance / (distance.max() or 1.0) + apart / (apart.max() or 1.0)
    chosen = duplex(distance, count)[1] if method == "duplex" else kennard_stone(distance, count)
    labels = np.array(labels_of(given))[chosen]
    return xr.DataArray(chosen, dims="choice", coords={"label": ("choice", labels)},
                        attrs={"long_name": "Chosen samples", "units": "1", "method": method})  # fmt: skip
