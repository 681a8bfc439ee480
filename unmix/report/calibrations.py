"""Predictions and calibrations as rows: one row a predicted value, one row a property and set of samples."""

import math

import numpy as np
import xarray as xr

from unmix.report.view import Row
from unmix.spectra import labels_of

#: columns of the table of predictions, in their order
PREDICTION_COLUMNS = (
    "sample", "file", "property", "predicted", "unit", "lower", "upper", "level", "outside_range", "q_residual",
    "q_limit", "t2", "t2_limit", "nearest", "nearest_limit", "verdict", "reason",
)  # fmt: skip

_FIGURES = ("error", "bias", "bias_p", "corrected", "slope", "intercept", "line_p", "r2", "rpd", "lowest", "highest")

#: columns of the table of figures of merit
FIGURE_COLUMNS = ("property", "unit", "set", "samples", "latent_variables", *_FIGURES, "verdict", "reason")


def prediction_rows(data: xr.Dataset) -> list[Row]:
    """One row a sample and property.

    Parameters
    ----------
    data : Dataset
        From ``predict``.

    Returns
    -------
    list of dict
        Keys as in :data:`PREDICTION_COLUMNS`.
    """
    leading = [str(dim) for dim in data["predicted"].dims if dim != "property"]
    samples = labels_of(data["predicted"].transpose(*leading, "property"))
    named = "file" in data.coords and data["file"].dims == tuple(leading)
    files = [str(file) for file in data["file"].values.ravel()] if named else [""] * len(samples)
    values = {name: _flat(data[name], leading) for name in ("predicted", "lower", "upper", "outside_range")}
    figures = {name: _flat(data[name], leading) for name in ("q_residual", "t2", "nearest", "verdict", "reason")}
    limits = {name: _number(data[name].item()) for name in ("q_limit", "t2_limit", "nearest_limit")}
    units = data["property_unit"].values
    found: list[Row] = []
    for i, sample in enumerate(samples):
        for j, name in enumerate(data["property"].values):
            row: Row = {"sample": sample, "file": files[i], "property": str(name), "unit": _unit(units[j])}
            row |= {key: _number(values[key][i, j]) for key in ("predicted", "lower", "upper")}
            row |= {key: _number(figures[key][i]) for key in ("q_residual", "t2", "nearest")} | limits
            row |= {"level": float(data.attrs["level"]), "outside_range": bool(values["outside_range"][i, j])}
            row |= {key: str(figures[key][i]) for key in ("verdict", "reason")}
            found.append(row)
    return found


def figure_rows(data: xr.Dataset) -> list[Row]:
    """One row a property and set of samples.

    Parameters
    ----------
    data : Dataset
        Of a calibration.

    Returns
    -------
    list of dict
        Keys as in :data:`FIGURE_COLUMNS`.
    """
    said: Row = {"verdict": str(data["verdict"].item()), "reason": str(data["reason"].item())}
    found: list[Row] = []
    for j, name in enumerate(data["property"].values):
        unit = _unit(data["property_unit"].values[j])
        for which in data["set"].values:
            one = data.sel(set=which).isel(property=j)
            row: Row = {"property": str(name), "unit": unit, "set": str(which), "samples": float(one["count"].item()),
                        "latent_variables": float(data.sizes["latent"])}  # fmt: skip
            found.append(row | {key: _number(one[key].item()) for key in _FIGURES} | said)
    return found


def _flat(variable: xr.DataArray, leading: list[str]) -> np.ndarray[tuple[int, ...], np.dtype[np.generic]]:
    """Leading dimensions as one."""
    rest = [str(dim) for dim in variable.dims if dim not in leading]
    values = np.asarray(variable.transpose(*leading, *rest).values)
    return values.reshape(-1, *values.shape[len(leading) :])


def _number(value: object) -> float | None:
    number = float(value)  # type: ignore[arg-type]
    return number if math.isfinite(number) else None


def _unit(unit: object) -> str:
    return "" if str(unit) == "1" else str(unit)
