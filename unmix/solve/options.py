"""Options that several questions share, checked in one place."""

from typing import Any

import numpy as np
import xarray as xr

from unmix.errors import InputError
from unmix.spectra import spectral_dim


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


def noise_of_channels(noise: Any, spectra: xr.DataArray) -> xr.DataArray | None:
    """Known noise as one standard deviation a channel of the spectra as given; None stays None.

    Raises
    ------
    InputError
        When it is neither one number nor one for every channel, or not above zero.
    """
    check_noise(noise)
    if noise is None:
        return None
    axis = spectra[spectral_dim(spectra)]
    values = np.asarray(noise, dtype=float)
    if values.ndim > 1 or (values.ndim == 1 and values.size not in (1, axis.size)):
        raise InputError(f"noise has shape {values.shape} but the spectra have {axis.size} channels",
                         accepted="give one standard deviation, or one for every channel of the spectra")  # fmt: skip
    return xr.DataArray(np.broadcast_to(values, axis.shape), dims=axis.dims, coords={axis.name: axis.values})
