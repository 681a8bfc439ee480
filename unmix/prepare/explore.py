"""What a choice does to spectra: one step with several values of one parameter, side by side.

Choosing by a score belongs to whoever has something to score.
"""

from collections.abc import Sequence
from typing import Any

import numpy as np
import xarray as xr
from sklearn.base import clone

from unmix.errors import InputError, suggestion
from unmix.prepare.baseline import Baseline
from unmix.prepare.step import Step
from unmix.spectra import check_spectra


def try_values(step: Step, spectra: Any, parameter: str, values: Sequence[Any]) -> xr.Dataset:
    """Spectra prepared with each of several values of one parameter of a step.

    Parameters
    ----------
    step : Step
        Its other parameters stay as they are.
    spectra : DataArray, dims (..., spectral)
    parameter : str
        The name of the parameter.
    values : sequence
        What it is set to in turn.

    Returns
    -------
    Dataset
        ``prepared`` with the parameter as its first dimension; for a baseline also ``baseline``; for a penalised
        baseline or smoother also ``cutoff``, the wave length in units of the axis that keeps half its height.

    Raises
    ------
    InputError
        For a parameter that the step does not have, or whatever the step refuses.

    Examples
    --------
    >>> from unmix.prepare import SavitzkyGolay
    >>> from unmix.spectra import make_spectra
    >>> spectra = make_spectra([[0, 1, 4, 9, 16]], range(5), dim="wavelength", quantity="absorbance")
    >>> tried = try_values(SavitzkyGolay(order=1), spectra, "window", [3, 5])
    >>> tried.prepared.sel(window=3).values.round(2)
    array([[-0.33,  1.67,  4.67,  9.67, 15.67]])
    """
    names = list(step.get_params(deep=False))
    if parameter not in names:
        raise InputError(f"{type(step).__name__} has no parameter '{parameter}'{suggestion(parameter, names)}",
                         accepted=f"it has {', '.join(names) or 'none'}")  # fmt: skip
    if not values:
        raise InputError("no value is given to try", accepted="give at least one")
    spectra = check_spectra(spectra)
    found: dict[str, list[Any]] = {}
    for value in values:
        one: Step = clone(step)
        one.set_params(**{parameter: value})
        found.setdefault("prepared", []).append(one.fit_transform(spectra))
        if isinstance(one, Baseline):
            found.setdefault("baseline", []).append(one.baseline(spectra))
        if hasattr(one, "cutoff_"):
            found.setdefault("cutoff", []).append(xr.DataArray(one.cutoff_))
    tried = {name: _beside(parts, parameter) for name, parts in found.items()}
    return xr.Dataset(tried).assign_coords({parameter: _labels(values)})


def _beside(parts: Sequence[xr.DataArray], parameter: str) -> xr.DataArray:
    # a value may change the channels: those of all are kept, missing where a value has none
    return xr.concat(parts, parameter, join="outer", combine_attrs="drop_conflicts")


def _labels(values: Sequence[Any]) -> Any:
    """The values where they are numbers or words, else their text."""
    plain = all(isinstance(value, int | float | str | np.number) for value in values)
    return list(values) if plain else [str(value) for value in values]
