"""Which channels are used: regions by physical units, and samples and pure spectra on one axis.

What changes the values at a channel on purpose (baselines, smoothing, scaling) belongs beside this module.
"""

from collections.abc import Sequence
from typing import Any

import numpy as np
import xarray as xr

from unmix.errors import AxisError, InputError, listed
from unmix.kernels import BoolArray, FloatArray
from unmix.kernels.resample import holes, interpolate, locate
from unmix.spectra import as_pure, check_spectra, spectral_dim
from unmix.units import SPECTRAL_UNITS


def common_axis(spectra: Any, pure: Any) -> tuple[xr.DataArray, xr.DataArray, list[str]]:
    """Bring samples and pure spectra together on the channels of the samples that both cover.

    The samples keep their own channels and are cut to the overlap; the pure spectra are interpolated onto
    them where their grid differs, inside their own range only. Measured values of a sample are never
    interpolated.

    Parameters
    ----------
    spectra : DataArray, dims (..., spectral)
        The samples.
    pure : DataArray, dims (component, spectral)
        The pure spectra, on one axis in ``cm-1`` or ``nm``; NaN marks a channel that cannot be used.

    Returns
    -------
    spectra : DataArray
        The samples on the shared channels, coordinates and attributes kept.
    pure : DataArray
        The pure spectra on the same channels; NaN only where a spectrum has no value on either side.
    notes : list of str
        One sentence for everything that was cut, converted or interpolated.

    Raises
    ------
    AxisError
        When the axes cannot be compared, do not overlap, or share fewer than two channels.
    InputError
        When a pure spectrum has no value at all, or for whatever breaks the data contract.

    Notes
    -----
    Wavelength and wavenumber are converted by 1e7 / x, which takes wavelengths as in vacuum; in air they are
    shorter by about 0.03%, 0.15 nm at 500 nm.

    Examples
    --------
    >>> from unmix.spectra import make_spectra
    >>> samples = make_spectra([[1, 2, 3, 4]], [400, 410, 420, 430], dim="wavelength", quantity="absorbance")
    >>> pure = make_spectra([[2, 4, 6]], [395, 405, 415], dim="wavelength", quantity="absorbance",
    ...                     leading="component", labels=["dye"])
    >>> samples, pure, notes = common_axis(samples, pure)
    >>> samples.wavelength.values, pure.values
    (array([400., 410.]), array([[3., 5.]]))
    >>> print(notes[0])
    2 of 4 channels of the spectra lie outside the range of the pure spectra (395 to 415 nm) and were left out
    """
    spectra = check_spectra(spectra)
    pure = as_pure(pure)
    dim = spectral_dim(spectra)
    unit = SPECTRAL_UNITS[dim]
    notes: list[str] = []
    axis = np.asarray(spectra[dim].values, dtype=np.float64)
    pure_axis, values = _pure_on_dim(pure, dim, notes)
    low, high, limits = _pure_range(pure, pure_axis, values, unit)
    left, _ = locate(pure_axis[low : high + 1], axis)
    inside = left >= 0
    _require_overlap(inside, axis, (pure_axis[low], pure_axis[high]), dim)
    if not inside.all():
        notes.append(
            f"{np.count_nonzero(~inside)} of {axis.size} channels of the spectra lie outside the range of "
            f"the pure spectra ({limits}) and were left out"
        )
    unmeasured = inside & _in_hole(pure_axis, axis)
    if unmeasured.any():
        inside &= ~unmeasured
        _require_overlap(inside, axis, (pure_axis[low], pure_axis[high]), dim)
        notes.append(
            f"{np.count_nonzero(unmeasured)} channels of the spectra, {axis[unmeasured][0]:g} to "
            f"{axis[unmeasured][-1]:g} {unit}, lie where the pure spectra have no channels and were left out"
        )
    if not inside.all():
        spectra, axis = spectra.isel({dim: inside}), axis[inside]
    left, right = locate(pure_axis, axis)
    moved = np.count_nonzero(left != right)
    if moved:
        notes.append(
            f"the pure spectra were interpolated from their {pure_axis.size} channels "
            f"({pure_axis[0]:g} to {pure_axis[-1]:g} {unit}) onto {moved} channels of the spectra"
        )
        values = interpolate(pure_axis, values, axis)
    else:
        values = values[:, left]
    return spectra, _like(pure, values, spectra[dim]), notes


def _in_hole(pure_axis: FloatArray, axis: FloatArray) -> BoolArray:
    """Channels of the samples between two recorded regions of the pure spectra."""
    left, right = locate(pure_axis, axis)
    return np.asarray((left != right) & np.append(holes(pure_axis), False)[left])


def _pure_on_dim(pure: xr.DataArray, dim: str, notes: list[str]) -> tuple[FloatArray, FloatArray]:
    """Axis and values of the pure spectra in the samples' spectral dimension, increasing."""
    own = spectral_dim(pure, name="pure")
    axis = np.asarray(pure[own].values, dtype=np.float64)
    values: FloatArray = np.asarray(pure.values)
    if own == dim:
        return axis, values
    if "raman_shift" in (own, dim):
        raise AxisError(
            f"the spectra run along '{dim}' but the pure spectra along '{own}', and a Raman shift is not a "
            "position in an absorption spectrum",
            accepted="give both of one kind",
        )
    if axis[0] <= 0:
        raise AxisError(f"pure: {own} {axis[0]:g} {SPECTRAL_UNITS[own]} cannot be converted to {dim}",
                        accepted="give positions above zero")  # fmt: skip
    notes.append(
        f"the axis of the pure spectra was converted from {own} in {SPECTRAL_UNITS[own]} to {dim} in "
        f"{SPECTRAL_UNITS[dim]} (1e7 / x, in vacuum)"
    )
    return (1e7 / axis)[::-1], values[:, ::-1]


def _pure_range(pure: xr.DataArray, axis: FloatArray, values: FloatArray, unit: str) -> tuple[int, int, str]:
    """First and last channel that every pure spectrum reaches, and the same in words."""
    present = np.isfinite(values)
    names = pure["component"].values
    empty = [str(name) for name, row in zip(names, present, strict=True) if not row.any()]
    if empty:
        raise InputError(f"pure spectrum {listed(empty)} has no value at any channel",
                         accepted="leave it out or give its spectrum")  # fmt: skip
    first = present.argmax(axis=1)
    last = axis.size - 1 - present[:, ::-1].argmax(axis=1)
    low, high = int(first.max()), int(last.min())
    if low > high:
        starts, ends = str(names[first.argmax()]), str(names[last.argmin()])
        raise AxisError(f"pure spectrum '{ends}' ends at {axis[high]:g} {unit} but '{starts}' starts at "
                        f"{axis[low]:g} {unit}", accepted="give pure spectra that overlap")  # fmt: skip
    text = f"{axis[low]:g} to {axis[high]:g} {unit}"
    limiting = sorted({str(names[i]) for i in np.flatnonzero((first > 0) | (last < axis.size - 1))})
    return low, high, text + (f", limited by {listed(limiting)}" if limiting else "")


def _require_overlap(inside: BoolArray, axis: FloatArray, pure_range: tuple[float, float], dim: str) -> None:
    shared = np.count_nonzero(inside)
    if shared >= min(2, axis.size):
        return
    unit = SPECTRAL_UNITS[dim]
    found = "no channel" if shared == 0 else "only one channel"
    raise AxisError(
        f"the spectra ({axis[0]:g} to {axis[-1]:g} {unit}) and the pure spectra ({pure_range[0]:g} to "
        f"{pure_range[1]:g} {unit}) share {found}",
        accepted="give pure spectra that cover the range of the samples, and check the units of both axes",
    )


def _like(pure: xr.DataArray, values: FloatArray, coord: xr.DataArray) -> xr.DataArray:
    """Pure spectra with new values and axis; what does not run along the axis is kept."""
    dim = str(coord.dims[0])
    kept = {name: c for name, c in pure.coords.items() if c.dims in ((), ("component",))}
    return xr.DataArray(
        values,
        dims=("component", dim),
        coords={**kept, dim: (dim, coord.values, {"units": SPECTRAL_UNITS[dim]})},
        attrs=pure.attrs,
        name=pure.name,
    )


def region_mask(axis: FloatArray, regions: Sequence[tuple[float, float]], unit: str) -> BoolArray:
    """Channels inside any of the regions, bounds included.

    Raises
    ------
    InputError
        For a region that is not a pair, not finite, or ends before it starts.
    AxisError
        For a region that reaches beyond the axis by more than one channel, or that holds no channel.
    """
    mask = np.zeros(axis.size, dtype=np.bool_)
    accepted = "give a list of (low, high), for example [(1650, 1800)]"
    if isinstance(regions, str) or not len(regions):
        raise InputError(f"regions: {regions!r} names no region", accepted=accepted)
    reach = (axis[1] - axis[0], axis[-1] - axis[-2]) if axis.size > 1 else (0.0, 0.0)
    for region in regions:
        try:
            low, high = (float(bound) for bound in region)
        except (TypeError, ValueError):
            raise InputError(f"regions: {region!r} is not a pair of numbers", accepted=accepted) from None
        text = f"regions: ({low:g}, {high:g}) {unit}"
        if not (np.isfinite(low) and np.isfinite(high)):
            raise InputError(f"{text} is not finite", accepted=accepted)
        if low > high:
            raise InputError(f"{text} ends before it starts",
                             accepted=f"give (low, high), for example ({high:g}, {low:g})")  # fmt: skip
        here = (axis >= low) & (axis <= high)
        if low < axis[0] - reach[0] or high > axis[-1] + reach[1]:
            raise AxisError(
                f"{text} reaches beyond the axis, which runs from {axis[0]:g} to {axis[-1]:g} {unit}",
                accepted="narrow the region or give a longer spectrum",
            )
        if not here.any():
            raise AxisError(f"{text} holds no channel", accepted="widen it to at least one channel spacing")
        mask |= here
    return mask


def select_regions(spectra: xr.DataArray, regions: Sequence[tuple[float, float]] | None) -> xr.DataArray:
    """The channels inside the given regions, bounds included.

    Parameters
    ----------
    spectra : DataArray, dims (..., spectral)
    regions : sequence of (low, high), or None
        In the unit of the axis (cm-1 or nm); they may overlap. None keeps every channel.

    Returns
    -------
    DataArray
        Coordinates and attributes kept.

    Raises
    ------
    InputError, AxisError
        When a region is not a pair (low, high), lies beyond the axis, or holds no channel.

    Examples
    --------
    >>> from unmix.spectra import make_spectra
    >>> spectra = make_spectra([[1, 2, 3, 4]], [400, 410, 420, 430], dim="wavelength", quantity="absorbance")
    >>> select_regions(spectra, [(405, 420)]).wavelength.values
    array([410., 420.])
    """
    spectra = check_spectra(spectra)
    if regions is None:
        return spectra
    dim = spectral_dim(spectra)
    mask = region_mask(np.asarray(spectra[dim].values, dtype=np.float64), regions, SPECTRAL_UNITS[dim])
    return spectra.isel({dim: mask})
