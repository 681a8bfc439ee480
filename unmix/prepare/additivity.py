"""Whether prepared spectra still obey Beer and Lambert, asked by whoever turns them into amounts.

Each step declares it for itself; the refusal and its words are here.
"""

from collections.abc import Iterable

import numpy as np
import xarray as xr

from unmix.errors import InputError
from unmix.prepare.step import Step


def require_additive(steps: Iterable[Step], purpose: str, spectra: xr.DataArray | None = None) -> None:
    """Refuse steps, or spectra that went through steps, that do not keep Beer-Lambert additivity.

    Parameters
    ----------
    steps : iterable of Step
    purpose : str
        What needs additivity, such as ``quantify``.
    spectra : DataArray, optional
        Checked for missing channels and for steps taken earlier.

    Raises
    ------
    InputError
        Naming the step, the reason and the alternative.
    """
    if spectra is not None and "additivity" in spectra.attrs:
        raise InputError(f"{purpose} needs spectra in which contributions add up, but additivity was "
                         f"{spectra.attrs['additivity']}", accepted="give the spectra as they were before")  # fmt: skip
    incomplete = spectra is not None and bool(np.isnan(spectra.values).any())
    for step in steps:
        name = type(step).__name__
        if not step.additive:
            raise InputError(f"{purpose} needs spectra in which contributions add up, and {name} does not keep that: "
                             f"{step.lost_because}", accepted=step.instead)  # fmt: skip
        if incomplete and step.complete_only:
            raise InputError(f"{purpose}: {name} is the same linear map for samples and pure spectra only where no "
                             "channel is missing, and channels are missing",
                             accepted="leave those channels out of all spectra with Regions first")  # fmt: skip
