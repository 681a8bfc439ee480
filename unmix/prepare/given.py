"""Numbers a channel that a step is given as a parameter or learns from the spectra, on the step's own axis.

What a step does with them belongs to the step.
"""

from typing import Any

import numpy as np
import xarray as xr

from unmix.errors import AxisError, InputError
from unmix.kernels import FloatArray
from unmix.prepare.step import Step, require_same_axis
from unmix.spectra import check_spectra, spectral_dim


def on_axis(step: Step, value: Any, name: str) -> FloatArray:
    """Spectra given as a parameter, as (spectra, channels) on the axis that the step was fitted on.

    Raises
    ------
    AxisError, InputError
        When they are on another grid, or hold a missing channel.
    """
    owner = f"{type(step).__name__}: {name}"
    if isinstance(value, xr.DataArray):
        value = check_spectra(value, name=name)
        dim = spectral_dim(value, name=name)
        if step.dim_:
            require_same_axis(owner, (step.dim_, step.axis_), (dim, np.asarray(value[dim].values, dtype=np.float64)))
    rows = np.atleast_2d(np.asarray(value, dtype=np.float64))
    rows = rows.reshape(-1, rows.shape[-1])
    if rows.shape[-1] != step.axis_.size:
        raise AxisError(f"{owner} has {rows.shape[-1]} channels but the spectra have {step.axis_.size}",
                        accepted="give it on the axis of the spectra")  # fmt: skip
    if not np.isfinite(rows).all():
        at = int(np.nonzero(~np.isfinite(rows))[1][0])
        raise InputError(f"{owner} has no finite value at channel {at + 1} of {step.axis_.size}",
                         accepted="give a complete spectrum")  # fmt: skip
    return rows


def channel_means(step: Step, rows: FloatArray) -> FloatArray:
    """The mean of each channel over the spectra that have it.

    Raises
    ------
    InputError
        When a channel is missing in every spectrum.
    """
    count = np.isfinite(rows).sum(axis=0)
    if not count.all():
        at = int(np.flatnonzero(count == 0)[0])
        raise InputError(f"{type(step).__name__} cannot learn from channel {at + 1} of {count.size}, which is missing "
                         "in every spectrum", accepted="leave it out with Regions first")  # fmt: skip
    means: FloatArray = np.nansum(rows, axis=0) / count
    return means
