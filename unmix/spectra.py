"""The data contract: build a labelled array of spectra, check it, and say what is wrong with it.

Everything that enters a solver passes here once; what comes out has the spectral dimension last, a strictly
increasing finite axis, a known unit and a known quantity, and inner code trusts it.
"""

import re
import warnings
from collections import Counter
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import xarray as xr

from unmix.errors import AxisError, InputError, UnitError, UnmixWarning, listed
from unmix.kernels import FloatArray
from unmix.units import QUANTITIES, SPECTRAL_UNITS, to_absorbance

#: what gives away the unit of an absorptivity: a power of -1, an area, or a length under a stroke
_NO_AMOUNT = re.compile(r"-\s*[12]\b|\u207b|[(/][^)/]*\b[cmuk]?m\b\s*\)|/\s*[cmuk]?m\b|^c?m2")

#: the words for the three spectral dimensions in a message
_DIMS = "'wavenumber' (cm-1), 'wavelength' (nm) or 'raman_shift' (cm-1)"


def make_spectra(
    values: Any,
    axis: Any,
    *,
    dim: str,
    quantity: str,
    leading: str = "sample",
    labels: Sequence[str] | None = None,
    coords: Mapping[str, Any] | None = None,
    attrs: Mapping[str, Any] | None = None,
) -> xr.DataArray:
    """Build labelled spectra that keep the data contract.

    Parameters
    ----------
    values : array_like, shape (channels,) or (spectra, channels)
        The ordinates; NaN marks a missing channel.
    axis : array_like, shape (channels,)
        The abscissae in the unit of ``dim``, in either direction; the result increases.
    dim : {'wavenumber', 'wavelength', 'raman_shift'}
        The spectral dimension, which also sets the unit.
    quantity : {'absorbance', 'transmittance', 'reflectance', 'absorptivity', 'intensity'}
        What the numbers are.
    leading : str
        Name of the dimension in front.
    labels : sequence of str, optional
        One name a spectrum, kept as the coordinate ``label`` (as ``component`` where that is the dimension).
    coords : mapping, optional
        Further coordinates along the leading dimension, name to values.
    attrs : mapping, optional
        Further attributes.

    Returns
    -------
    DataArray, dims (leading, dim)

    Raises
    ------
    AxisError, UnitError, InputError
        When the result would break the contract.

    Examples
    --------
    >>> make_spectra([[0.1, 0.4, 0.2]], [700, 600, 500], dim="wavelength", quantity="absorbance").values
    array([[0.2, 0.4, 0.1]])
    """
    array = np.atleast_2d(np.asarray(values))
    if array.dtype != np.float32:
        array = array.astype(np.float64)
    points = np.asarray(axis, dtype=np.float64)
    if array.shape[-1] != points.size:
        raise AxisError(f"the spectra have {array.shape[-1]} channels but the axis has {points.size} values")
    if points.size > 1 and points[0] > points[-1]:
        points, array = points[::-1], array[..., ::-1]
    along: dict[str, Any] = {name: (leading, list(entries)) for name, entries in (coords or {}).items()}
    if labels is not None:
        along["component" if leading == "component" else "label"] = (leading, [str(text) for text in labels])
    along[dim] = (dim, points, {"units": SPECTRAL_UNITS.get(dim, "")})
    built = xr.DataArray(
        array, dims=(leading, dim), coords=along, attrs={"quantity": quantity, **(attrs or {})}
    )
    return check_spectra(built)


def spectral_dim(spectra: xr.DataArray, *, name: str = "spectra") -> str:
    """The spectral dimension of a labelled array.

    Raises
    ------
    AxisError
        When there is none, or more than one.
    """
    found = [str(dim) for dim in spectra.dims if dim in SPECTRAL_UNITS]
    if len(found) != 1:
        shown = listed(spectra.dims)
        raise AxisError(
            f"{name} has {'no' if not found else 'more than one'} spectral dimension (its dimensions are {shown})",
            accepted=f"name one dimension {_DIMS}",
        )
    return found[0]


def check_spectra(spectra: Any, *, name: str = "spectra") -> xr.DataArray:
    """Check labelled spectra against the data contract and put them into its form.

    Parameters
    ----------
    spectra : DataArray
        One spectrum (spectral dimension only), a set, an image or a process record.
    name : str
        What the messages call the array.

    Returns
    -------
    DataArray
        Spectral dimension last, axis increasing, floating point; a single spectrum gets ``sample`` of size 1.

    Raises
    ------
    InputError
        Not a DataArray, empty, or not numeric.
    AxisError
        No usable spectral axis.
    UnitError
        An axis unit or a quantity that is not of the contract.
    """
    if not isinstance(spectra, xr.DataArray):
        raise InputError(f"{name} is a {type(spectra).__name__}, not labelled spectra",
                         accepted="read files with unmix.read or build them with spectra.make_spectra")  # fmt: skip
    dim = spectral_dim(spectra, name=name)
    if spectra.size == 0:
        raise InputError(f"{name} is empty (shape {spectra.shape})")
    if spectra.dtype.kind not in "fiu":
        raise InputError(f"{name} holds {spectra.dtype} values, not numbers")
    _check_quantity(spectra, name)
    if dim not in spectra.coords:
        raise AxisError(f"{name} has no values along '{dim}'", accepted=f"give it a coordinate '{dim}'")
    units = spectra[dim].attrs.get("units", SPECTRAL_UNITS[dim])
    if units != SPECTRAL_UNITS[dim]:
        raise UnitError(f"{name}: the axis '{dim}' is in '{units}'", accepted=f"give it in {SPECTRAL_UNITS[dim]}")
    if spectra.ndim == 1:
        spectra = spectra.expand_dims("sample")
    if spectra.dims[-1] != dim:
        spectra = spectra.transpose(..., dim)
    if spectra.dtype.kind != "f":
        spectra = spectra.astype(np.float64)
    return _increasing(spectra, dim, name)


def _check_quantity(spectra: xr.DataArray, name: str) -> None:
    quantity = spectra.attrs.get("quantity", "absorbance")
    if quantity not in QUANTITIES:
        raise UnitError(f"{name} holds '{quantity}', which is not a quantity that can be worked with",
                        accepted=f"attrs['quantity'] is one of {', '.join(QUANTITIES)}")  # fmt: skip


def _increasing(spectra: xr.DataArray, dim: str, name: str) -> xr.DataArray:
    axis = np.asarray(spectra[dim].values, dtype=np.float64)
    unit = SPECTRAL_UNITS[dim]
    if not np.isfinite(axis).all():
        at = int(np.flatnonzero(~np.isfinite(axis))[0])
        raise AxisError(f"{name}: the axis '{dim}' is not finite at channel {at + 1} of {axis.size}")
    step = np.diff(axis)
    if step.size and (step < 0).all():
        spectra, axis, step = spectra.isel({dim: slice(None, None, -1)}), axis[::-1], -step[::-1]
    if step.size and not (step > 0).all():
        at = int(np.flatnonzero(step <= 0)[0])
        raise AxisError(
            f"{name}: the axis '{dim}' does not run one way, {axis[at]:g} {unit} is followed by "
            f"{axis[at + 1]:g} {unit} at channel {at + 2} of {axis.size}",
            accepted="sort the channels and keep each position once",
        )
    if spectra[dim].attrs.get("units") != unit:
        spectra = spectra.assign_coords({dim: (dim, axis, {"units": unit})})
    return spectra


def as_absorbance(spectra: xr.DataArray, *, name: str = "spectra") -> tuple[xr.DataArray, list[str]]:
    """Checked spectra as absorbance (absorptivity stays), with a list of what was assumed or lost.

    Raises
    ------
    UnitError
        For reflectance and intensity, in which amounts are not additive.
    """
    notes: list[str] = []
    spectra = check_spectra(spectra, name=name)
    if "quantity" not in spectra.attrs:
        notes.append(f"{name} does not say what its numbers are (attrs['quantity']); taken as absorbance")
        warnings.warn(notes[-1], UnmixWarning, stacklevel=3)
        return spectra.assign_attrs(quantity="absorbance"), notes
    quantity = spectra.attrs["quantity"]
    if quantity in ("absorbance", "absorptivity"):
        return spectra, notes
    if quantity != "transmittance":
        raise UnitError(f"{name} holds {quantity}, in which the contributions of components do not add up",
                        accepted="give absorbance or transmittance")  # fmt: skip
    values, lost = to_absorbance(spectra.values)
    if lost:
        notes.append(f"{name}: {lost} of {values.size} values have a transmittance at or below zero; left out")
    return spectra.copy(data=values).assign_attrs(quantity="absorbance", measured_as="transmittance"), notes


def as_pure(pure: Any, *, name: str = "pure") -> xr.DataArray:
    """Checked pure spectra with dims (component, spectral) and distinct names.

    Spectra with another leading dimension are taken as pure spectra named by their coordinate ``label``; a single
    spectrum may be named by a coordinate ``component`` without dimension.

    Raises
    ------
    InputError
        Missing, empty or duplicate names, or more than one leading dimension.
    UnitError
        ``attrs["per"]`` is not an amount but the unit of an absorptivity.
    """
    found: xr.DataArray = check_spectra(pure, name=name)
    if found.ndim != 2:
        raise InputError(f"{name} has dimensions {listed(found.dims)}", accepted="give (component, spectral)")
    leading = str(found.dims[0])
    if leading != "component":
        named = [c for c in ("label", "component", leading) if c in found.coords and found[c].dims in ((leading,), ())]
        if not named or found[named[0]].size != found.sizes[leading]:
            raise InputError(f"{name} has no component names", accepted="give it a coordinate 'component'")
        along = np.atleast_1d(found[named[0]].values).astype(str)
        found = found.drop_vars([c for c in ("label", "component", leading) if c in found.coords])
        found = found.rename({leading: "component"}).assign_coords(component=("component", along))
    if "component" not in found.coords:
        raise InputError(f"{name} has no component names", accepted="give it a coordinate 'component'")
    names = [str(text) for text in found["component"].values]
    if not all(text.strip() for text in names):
        at = next(i for i, text in enumerate(names) if not text.strip())
        raise InputError(f"{name}: spectrum {at + 1} of {len(names)} has an empty component name",
                         accepted="give every pure spectrum a name of its own")  # fmt: skip
    double = sorted(text for text, uses in Counter(names).items() if uses > 1)
    if double:
        raise InputError(f"{name}: component name {listed(double)} appears more than once",
                         accepted="give every pure spectrum a name of its own")  # fmt: skip
    _check_per(found.attrs.get("per", ""), name)
    return found


def _check_per(per: Any, name: str) -> None:
    """Refuse the unit of an absorptivity where an amount is asked for; its reading would be a guess."""
    if not isinstance(per, str) or _NO_AMOUNT.search(per):
        raise UnitError(f"{name}: attrs['per'] is {per!r}, which is not a unit of amount",
                        accepted="give the unit amount such as 'g/L' or 'mol/L', with a path unit behind it "
                                 "where that is not cm, such as 'umol/mol m'")  # fmt: skip


def labels_of(spectra: xr.DataArray) -> list[str]:
    """A name for every spectrum: its label, else its file, else its index along the leading dimensions."""
    leading = spectra.dims[:-1]
    shape = tuple(spectra.sizes[dim] for dim in leading)
    if len(leading) == 1:
        for coord in ("label", str(leading[0]), "file"):
            if coord in spectra.coords and spectra[coord].dims == leading:
                return [str(text) for text in spectra[coord].values]
    return [", ".join(f"{dim} {i + 1}" for dim, i in zip(leading, at, strict=True)) for at in np.ndindex(shape)]


def rows_of(spectra: xr.DataArray) -> FloatArray:
    """The values as (spectra, channels), all leading dimensions flattened."""
    array: FloatArray = np.asarray(spectra.values)
    return array.reshape(-1, array.shape[-1])
