"""``transfer``: a calibration made on one instrument, for spectra of another."""

import json
from typing import Any

import numpy as np
import xarray as xr
from scipy.stats import t as student

from unmix.diagnose.standards import upper_limit
from unmix.errors import InputError, listed
from unmix.kernels import FloatArray
from unmix.kernels.transfer import apply_piecewise, piecewise
from unmix.method import Method
from unmix.prepare.transfer import Standardisation
from unmix.solve.calibration import Calibration, working
from unmix.spectra import labels_of, rows_of, spectral_dim

#: windows and numbers of principal components that are tried
_WINDOWS = (1, 3, 5, 9, 15, 25)
_COMPONENTS = (1, 2, 3, 4, 5)

#: fewest samples measured on both instruments
_FEWEST = 4


def transfer(
    calibration: Calibration, spectra: Any, like: Any, *, window: int | None = None, components: int | None = None
) -> Calibration:
    """Make a calibration fit for another instrument, from a few samples measured on both.

    Parameters
    ----------
    calibration : Calibration
    spectra : DataArray, dims (sample, spectral)
        Samples on the new instrument; its axis may be another one.
    like : DataArray, dims (sample, spectral)
        The same samples on the instrument of the calibration, matched by label.
    window : int, optional
        Channels of the new instrument that make one channel of the old (piecewise direct standardisation); all of them
        make direct standardisation. By default the best of 1 to 25 when samples are left out.
    components : int, optional
        Principal components of a window; likewise the best of 1 to 5.

    Returns
    -------
    Calibration
        Takes spectra of the new instrument. ``data["transfer_uncertainty"]`` is the standard uncertainty that the
        transfer adds, found from samples left out of it; predictions hold it in their intervals. The limit of Q is
        widened to what left-out samples reach.

    Raises
    ------
    InputError, AxisError
        For fewer than four common samples, labels that do not match, missing channels, or spectra that the calibration
        does not fit.

    References
    ----------
    Wang, Veltkamp and Kowalski, Anal. Chem. 63 (1991) 2750.

    Examples
    --------
    >>> import pandas as pd
    >>> from unmix.solve.calibration import calibrate
    >>> from unmix.solve.prediction import predict
    >>> from unmix.spectra import make_spectra
    >>> rng = np.random.default_rng(0)
    >>> amount = rng.random((30, 2))
    >>> bands = np.exp(-(((np.arange(50) - np.array([[20], [30]])) / 8) ** 2))
    >>> names = [f"s{i}" for i in range(30)]
    >>> def measured(gain):
    ...     values = gain * (amount @ bands) + 1e-4 * rng.normal(size=(30, 50))
    ...     return make_spectra(values, np.arange(1000, 1500, 10), dim="wavelength", quantity="absorbance",
    ...                         labels=names)
    >>> first, second = measured(1.0), measured(0.9)
    >>> made = calibrate(first, pd.DataFrame({"water": amount[:, 0]}, index=names), permutations=0)
    >>> moved = transfer(made, second[:8], first[:8])
    >>> bool((abs(predict(moved, second[8:]).predicted.values[:, 0] - amount[8:, 0]) < 0.01).all())
    True
    """
    source, target, axes, dim = _pairs(calibration, spectra, like)
    n = source.shape[0]
    windows = _asked(window, "window", [w for w in _WINDOWS if w <= source.shape[1]], source.shape[1])
    numbers = _asked(components, "components", [k for k in _COMPONENTS if k <= n - 2], n - 2)
    expected = _predicted(calibration, target, dim)
    best = min(((w, k) for w in windows for k in numbers), key=lambda one: _score(source, target, axes, *one))
    left = _left_out(source, target, axes, *best)
    moved = _predicted(calibration, left, dim)
    uncertainty = np.sqrt(np.mean((moved - expected) ** 2, axis=0) * n / (n - 1))
    made = piecewise(source, target, axes[0], axes[1], *best)
    step = Standardisation(made.first.tolist(), made.weights.tolist(), made.offset.tolist(), axes[1].tolist())
    given, _ = working(spectra)
    frozen = Method([step, *calibration.preparation.steps], calibration.preparation.name).fit(given)
    q = calibration.model.guard(_prepared(calibration, left, dim)).q
    data = calibration.data.copy(deep=True).drop_vars("original_axis").assign(
        original_axis=("original_channel", axes[0], calibration.data["original_axis"].attrs),
        transfer_uncertainty=("property", uncertainty, {"long_name": "Standard uncertainty added by the transfer",
                                                        "units": "as property"}),
        transfer_freedom=((), n - 1, {"long_name": "Degrees of freedom of it", "units": "1"}),
    )  # fmt: skip
    data["q_limit"] = data["q_limit"].copy(data=max(float(data["q_limit"]), upper_limit(q)))
    notes = [f"transferred to another instrument by {n} samples: windows of {best[0]} channels, {best[1]} principal "
             "components", *json.loads(data.attrs.get("notes", "[]"))]  # fmt: skip
    data = data.assign_attrs(preparation=frozen.to_text(), notes=json.dumps(notes))
    return Calibration(data, frozen)


def reach_of_transfer(data: xr.Dataset, level: float) -> FloatArray | None:
    """Half-width that a transfer adds to intervals, one a property; None where there was none."""
    if "transfer_uncertainty" not in data:
        return None
    quantile = float(student.ppf(0.5 + level / 2.0, float(data["transfer_freedom"])))
    reach: FloatArray = quantile * np.asarray(data["transfer_uncertainty"].values, dtype=float)
    return reach


def _pairs(calibration: Calibration, spectra: Any, like: Any) -> tuple[FloatArray, FloatArray, Any, str]:
    if not isinstance(calibration, Calibration):
        raise InputError(f"calibration is a {type(calibration).__name__}",
                         accepted="give what unmix.calibrate or unmix.load returned")  # fmt: skip
    given, _ = working(spectra)
    known, _, _ = calibration.prepare(like)
    dim = spectral_dim(given)
    if dim != spectral_dim(known):
        raise InputError(f"the new spectra run along '{dim}' and the old ones along '{spectral_dim(known)}'",
                         accepted="convert one of them")  # fmt: skip
    names, others = labels_of(given), labels_of(known)
    shared = [name for name in names if name in others]
    if len(shared) < _FEWEST:
        few = f"{listed(names[:3])} and {listed(others[:3])}"
        raise InputError(f"{len(shared)} samples have a label in both sets (of {few})",
                         accepted=f"give {_FEWEST} or more samples measured on both instruments")  # fmt: skip
    source = np.asarray(rows_of(given), dtype=np.float64)[[names.index(name) for name in shared]]
    target = np.asarray(rows_of(known), dtype=np.float64)[[others.index(name) for name in shared]]
    if not (np.isfinite(source).all() and np.isfinite(target).all()):
        raise InputError("a spectrum for the transfer misses a channel", accepted="give complete spectra")
    axes = tuple(np.asarray(one[dim].values, dtype=np.float64) for one in (given, known))
    return source, target, axes, dim


def _asked(given: int | None, what: str, usual: list[int], most: int) -> list[int]:
    if given is None:
        return usual
    if isinstance(given, bool) or not isinstance(given, (int, np.integer)) or not 1 <= given <= most:
        raise InputError(f"{what} is {given!r}", accepted=f"give a whole number from 1 to {most}")
    return [int(given)]


def _left_out(source: FloatArray, target: FloatArray, axes: Any, window: int, components: int) -> FloatArray:
    """Every sample as the old instrument would have measured it, from a map made without it."""
    found = np.empty_like(target)
    for i in range(source.shape[0]):
        rest = np.arange(source.shape[0]) != i
        made = piecewise(source[rest], target[rest], axes[0], axes[1], window, components)
        found[i] = apply_piecewise(made, source[[i]])[0]
    return found


def _score(source: FloatArray, target: FloatArray, axes: Any, window: int, components: int) -> float:
    return float(np.sum((_left_out(source, target, axes, window, components) - target) ** 2))


def _prepared(calibration: Calibration, rows: FloatArray, dim: str) -> FloatArray:
    axis = calibration.data["original_axis"].values
    quantity = str(calibration.data.attrs["quantity"])
    made = xr.DataArray(rows, dims=("sample", dim), coords={dim: axis}, attrs={"quantity": quantity})
    prepared = calibration.preparation.apply(made) if calibration.preparation.steps else made
    return np.asarray(prepared.values, dtype=np.float64)


def _predicted(calibration: Calibration, rows: FloatArray, dim: str) -> FloatArray:
    return calibration.model.guard(_prepared(calibration, rows, dim)).predicted
