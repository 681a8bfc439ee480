"""Path lengths: how the signal of a pure spectrum scales with the path of a sample."""

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import xarray as xr

from unmix.errors import InputError, UnitError
from unmix.kernels import FloatArray
from unmix.units import length_in_cm, path_factor, split_per


@dataclass(frozen=True)
class Paths:
    """Signal of component j in sample i = amount x ``factor[i]`` x ``weight[j]`` x its pure spectrum.

    Attributes
    ----------
    factor : ndarray, shape (spectra,)
        Path of each sample in the path unit of the pure spectra.
    weight : ndarray, shape (components,)
        What one pure spectrum is divided by to be per unit path.
    amount_unit : str
        Unit of the amounts.
    assumptions : list of str
        What was taken for granted.
    """

    factor: FloatArray
    weight: FloatArray
    amount_unit: str
    assumptions: list[str]

    def diluted(self, dilution: float) -> "Paths":
        """The same for amounts before the samples were diluted."""
        return replace(self, factor=self.factor / dilution)


def path_of(samples: xr.DataArray, pure: xr.DataArray, path_length: Any) -> Paths:
    """Work out the path factors from the argument, the samples and the unit of the pure spectra.

    Raises
    ------
    UnitError
        When a length is not positive, not a number or of an unknown unit.
    InputError
        When there are as many lengths as fit neither one nor every sample, or a path is given although the pure
        spectra say neither per which length nor at which length they are.
    """
    n = int(np.prod([samples.sizes[dim] for dim in samples.dims[:-1]]))
    k = pure.sizes["component"]
    unit, path_unit = split_per(str(pure.attrs.get("per", "1")))
    lengths, source = _sample_lengths(samples, path_length, n)
    assumptions = []
    if "per" not in pure.attrs:
        assumptions.append("the pure spectra do not say which amount they belong to (attrs['per']); "
                           "amounts are multiples of the amounts behind them")  # fmt: skip
    pure_quantity, quantity = pure.attrs.get("quantity"), samples.attrs.get("quantity")
    if quantity == "absorptivity":
        if pure_quantity != "absorptivity":
            raise UnitError("the spectra hold absorptivity but the pure spectra absorbance",
                            accepted="give both as absorptivity, or the spectra as absorbance")  # fmt: skip
        own_per = str(samples.attrs.get("per", pure.attrs.get("per", "1")))
        if split_per(own_per) != split_per(str(pure.attrs.get("per", "1"))):
            raise UnitError(f"the spectra hold absorptivity per '{own_per}' but the pure spectra per "
                            f"'{pure.attrs.get('per', '1')}'", accepted="give both per the same amount")  # fmt: skip
        return Paths(np.ones(n), np.ones(k), "1", assumptions)
    if pure_quantity == "absorptivity":
        if lengths is None:
            assumptions.append("no path length was given for the samples; taken as 1 cm")
            lengths = np.ones(n)
        return Paths(lengths * path_factor(path_unit), np.ones(k), unit, assumptions)
    own = _pure_lengths(pure, k)
    if own is not None and lengths is not None:
        return Paths(lengths, own, unit, assumptions)
    if source == "argument":
        raise InputError(
            "path_length is given, but the pure spectra hold absorbance and do not say at which path length",
            accepted="give the pure spectra as absorptivity, or with a coordinate 'path_length' in cm",
        )
    assumptions.append("samples and pure spectra are taken as measured at the same path length")
    return Paths(np.ones(n), np.ones(k), unit, assumptions)


def scale_to_path(pure: xr.DataArray, paths: Paths) -> FloatArray:
    """Pure spectra per unit amount and unit path, (components, channels)."""
    scaled: FloatArray = np.asarray(pure.values, dtype=np.float64) / paths.weight[:, None]
    return scaled


def _sample_lengths(samples: xr.DataArray, path_length: Any, n: int) -> tuple[FloatArray | None, str]:
    """Path of each sample in cm, and where it was found."""
    if path_length is not None:
        if isinstance(path_length, str) or np.ndim(path_length) == 0:
            return np.full(n, length_in_cm(path_length)), "argument"
        lengths = np.array([length_in_cm(one) for one in np.ravel(np.asarray(path_length))])
        if lengths.size != n:
            raise InputError(f"path_length has {lengths.size} values for {n} spectra",
                             accepted="give one for all or one each")  # fmt: skip
        return lengths, "argument"
    found = samples.coords.get("path_length", samples.attrs.get("path_length"))
    if found is None:
        return None, ""
    if isinstance(found, xr.DataArray):
        leading = samples.isel({samples.dims[-1]: 0}, drop=True)
        values = found.broadcast_like(leading).transpose(*leading.dims).values.ravel()
    else:
        values = np.full(n, found)
    if all(_missing(one) for one in values):
        return None, ""
    return np.array([length_in_cm(one, name="path_length of the spectra") for one in values]), "samples"


def _missing(length: Any) -> bool:
    return isinstance(length, (float, np.floating)) and bool(np.isnan(length))


def _pure_lengths(pure: xr.DataArray, k: int) -> FloatArray | None:
    found = pure.coords.get("path_length", pure.attrs.get("path_length"))
    if found is None:
        return None
    values = np.ravel(np.asarray(getattr(found, "values", found), dtype=float))
    if np.isnan(values).all():
        return None
    for one in values:
        length_in_cm(one, name="path_length of the pure spectra")
    return np.broadcast_to(values, (k,)).astype(float)
