"""Options that several questions share, checked in one place."""

from typing import Any

import numpy as np
import xarray as xr

from unmix.errors import InputError
from unmix.spectra import as_absorbance, spectral_dim


def check_baseline(baseline: Any) -> None:
    """Raise InputError unless the baseline is None or a whole order from 0 to 20."""
    if baseline is None:
        return
    whole = isinstance(baseline, (int, np.integer)) and not isinstance(baseline, bool)
    if not whole or not 0 <= baseline <= 20:
        raise InputError(f"baseline is {baseline!r}", accepted="give None, or the order of a polynomial from 0 to 20")


def check_level(level: Any) -> None:
    """Raise InputError unless the level is a coverage between 0 and 1."""
    if isinstance(level, bool) or not isinstance(level, (int, float, np.number)) or not 0.0 < level < 1.0:
        raise InputError(f"level is {level!r}", accepted="give a coverage between 0 and 1, such as 0.95")


def check_noise(noise: Any) -> None:
    """Raise InputError unless the noise is None or holds standard deviations above zero."""
    if noise is None:
        return
    try:
        values = np.asarray(noise, dtype=float)
    except (TypeError, ValueError):
        values = np.array([np.nan])
    if not (np.isfinite(values).all() and (values > 0).all()):
        shown = noise if np.ndim(noise) == 0 else "an array with values at or below zero or missing"
        raise InputError(f"noise is {shown!r}", accepted="give a standard deviation above zero, one or one a channel")


def check_flag(name: str, value: Any) -> None:
    """Raise InputError unless the value is True or False."""
    if not isinstance(value, (bool, np.bool_)):
        raise InputError(f"{name} is {value!r}", accepted="give True or False")


def check_share(name: str, value: Any) -> float:
    """A relative standard uncertainty; raise InputError unless it is a number from 0 to below 1."""
    if isinstance(value, bool) or not isinstance(value, (int, float, np.number)) or not 0 <= value < 1:
        raise InputError(f"{name} is {value!r}", accepted="give a relative standard uncertainty, such as 0.01 for 1%")
    return float(value)


def check_dilution(value: Any) -> None:
    """Raise InputError unless the dilution is a number from 1."""
    if isinstance(value, bool) or not isinstance(value, (int, float, np.number)) or not 1 <= value < np.inf:
        raise InputError(f"dilution is {value!r}",
                         accepted="give the volume after it over that before it, such as 10")  # fmt: skip


def noise_of_channels(noise: Any, spectra: xr.DataArray) -> xr.DataArray | None:
    """Known noise on the channels of the spectra as given; None stays None.

    Returns
    -------
    DataArray or None
        One standard deviation a channel, dims (spectral,), or repeated scans, dims (scan, spectral).

    Raises
    ------
    InputError
        When it is neither one number, nor one for every channel, nor two scans or more on the axis of the spectra.
    """
    axis = spectra[spectral_dim(spectra)]
    if isinstance(noise, xr.DataArray) and noise.ndim > 1:
        return _scans(noise, axis)
    check_noise(noise)
    if noise is None:
        return None
    values = np.asarray(noise, dtype=float)
    if values.ndim > 1 or (values.ndim == 1 and values.size not in (1, axis.size)):
        raise InputError(f"noise has shape {values.shape} but the spectra have {axis.size} channels",
                         accepted="give one standard deviation, one for every channel of the spectra, or repeated "
                         "scans as labelled spectra")  # fmt: skip
    return xr.DataArray(np.broadcast_to(values, axis.shape), dims=axis.dims, coords={axis.name: axis.values})


def _scans(noise: xr.DataArray, axis: xr.DataArray) -> xr.DataArray:
    scans, _ = as_absorbance(noise, name="noise")
    dim = str(axis.dims[0])
    if dim not in scans.dims or scans.sizes[dim] != axis.size or not np.allclose(scans[dim], axis, rtol=1e-9):
        raise InputError("the scans given as noise are on another axis than the spectra",
                         accepted="give scans measured as the samples are")  # fmt: skip
    values = np.asarray(scans.values, dtype=float).reshape(-1, axis.size)
    if values.shape[0] < 2 or not np.isfinite(values).all():
        raise InputError(f"noise holds {values.shape[0]} scans" + (
            "" if np.isfinite(values).all() else " with missing channels"), accepted="give two complete scans or more")
    return xr.DataArray(values, dims=("scan", dim), coords={dim: axis.values})
