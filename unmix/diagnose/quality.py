"""What can be said about one spectrum before anything is solved: noise, gaps, flat tops, impossible values, the air.

Thresholds are stated beside each; nothing is changed, and no component needs to be known.
"""

from typing import NamedTuple

import numpy as np
import xarray as xr

from unmix.diagnose.atmosphere import Atmosphere, atmosphere
from unmix.diagnose.saturation import saturated
from unmix.kernels import BoolArray, FloatArray
from unmix.spectra import labels_of, rows_of, spectral_dim
from unmix.units import SPECTRAL_UNITS, quantity_unit, to_absorbance

#: values beyond what is possible by less than this many standard deviations of the noise, or this part of full scale,
#: are noise or a small offset
_BEYOND_NOISE, _BEYOND_SCALE = 5.0, 0.02
#: channels at or above this part of a plateau are counted to it
_TOP = 0.95
#: as many equal values in a row at the very top are a clipped signal
_CLIPPED = 4
#: norm of the weights 1, -3, 3, -1 of a third difference
_THIRD = np.sqrt(20.0)


def channel_noise(values: FloatArray) -> FloatArray:
    """Standard deviation of white noise in a channel, from third differences, which smooth bands leave small.

    Parameters
    ----------
    values : ndarray, shape (spectra, channels)
        NaN where missing.

    Returns
    -------
    ndarray, shape (spectra,)
        1.4826 times the median absolute third difference over the norm of its weights; NaN for fewer than 8 channels.
        Smoothed or interpolated data give less than the noise that was measured.
    """
    if values.shape[-1] < 8:
        return np.full(values.shape[0], np.nan)
    with np.errstate(invalid="ignore"):
        third = np.abs(np.diff(values.astype(np.float64), 3, axis=-1))
    third[~np.isfinite(third)] = np.nan
    noise = np.full(values.shape[0], np.nan)
    some = np.isfinite(third).any(axis=-1)
    noise[some] = 1.4826 * np.nanmedian(third[some], axis=-1) / _THIRD
    return noise


def quality(spectra: xr.DataArray) -> xr.Dataset:
    """Facts about each spectrum that decide how far it can be trusted.

    Parameters
    ----------
    spectra : DataArray, dims (..., spectral)
        As they were read; the quantity may be text that is not understood.

    Returns
    -------
    Dataset, dim ``spectrum``
        ``noise`` (standard deviation of a channel, in the unit of the ordinate), ``missing``, ``saturated`` (channels
        of a flat top), ``plateau`` (its absorbance), ``negative`` and ``impossible`` (channels),
        ``carbon_dioxide`` (absorbance at 2361 cm-1), ``water_vapour`` (correlation with its lines; both 0 where none
        was found, NaN where the axis does not show them) and ``remark``: sentences on all that is doubtful, empty
        where nothing is.

    Examples
    --------
    >>> from unmix.spectra import make_spectra
    >>> spectra = make_spectra([[0.1, -0.4, 0.2]], [500, 510, 520], dim="wavelength", quantity="absorbance")
    >>> str(quality(spectra).remark.values[0])
    '1 channel below zero, down to -0.4 at 510 nm'
    """
    dim = spectral_dim(spectra)
    quantity = str(spectra.attrs.get("quantity", ""))
    axis = np.asarray(spectra[dim].values, dtype=np.float64)
    values = np.asarray(rows_of(spectra), dtype=np.float64)
    noise = channel_noise(values)
    absorbance = _as_absorbance(values, quantity)
    bent = np.zeros(values.shape, dtype=bool)
    plateau = np.full(values.shape[0], np.nan)
    air = Atmosphere(plateau, plateau)
    if absorbance is not None:
        _, plateau = saturated(absorbance)
        bent = absorbance >= _TOP * plateau[:, None]
        if dim == "wavenumber":
            air = atmosphere(axis, absorbance, channel_noise(absorbance))
    elif quantity == "intensity":
        bent = _clipped(values)
    low, high = _bounds(values, noise, quantity)
    negative = values < low[:, None]
    impossible = (values > high[:, None]) | np.isinf(values)
    remarks = []
    for i, row in enumerate(values):
        sentences = _remarks(axis, row, dim, quantity, _Masks(negative[i], impossible[i], bent[i]), float(plateau[i]))
        sentences += _air("carbon dioxide near 2361 cm-1", float(air.carbon_dioxide[i]), "absorbance")
        sentences += _air("lines of water vapour", float(air.water_vapour[i]), "correlation")
        remarks.append("; ".join(sentences))
    unit = quantity_unit(quantity, str(spectra.attrs.get("per", "")))
    along = ("spectrum",)

    def counted(mask: BoolArray, name: str) -> xr.Variable:
        return xr.Variable(along, np.count_nonzero(mask, axis=1), {"units": "channels", "long_name": name})

    return xr.Dataset(
        {
            "noise": (along, noise, {"units": unit, "long_name": "standard deviation of a channel"}),
            "missing": counted(np.isnan(values), "missing channels"),
            "saturated": counted(bent, "channels of a flat top"),
            "plateau": (along, plateau, {"units": "1", "long_name": "absorbance of the flat top"}),
            "negative": counted(negative, "channels below zero"),
            "impossible": counted(impossible, "channels with impossible values"),
            "carbon_dioxide": (along, air.carbon_dioxide, {"units": "1", "long_name": "absorbance near 2361 cm-1"}),
            "water_vapour": (along, air.water_vapour, {"units": "1", "long_name": "correlation with its lines"}),
            "remark": (along, remarks, {"long_name": "what is doubtful"}),
        },
        coords={"label": (along, labels_of(spectra))},
    )  # fmt: skip


def _as_absorbance(values: FloatArray, quantity: str) -> FloatArray | None:
    """Absorbance where the quantity is one on an absolute scale."""
    if quantity == "transmittance":
        return to_absorbance(values)[0]
    return values if quantity == "absorbance" else None


def _bounds(values: FloatArray, noise: FloatArray, quantity: str) -> tuple[FloatArray, FloatArray]:
    """Below and above which values are impossible, noise and a small offset aside."""
    slack = _BEYOND_NOISE * np.nan_to_num(noise)
    none = np.full(values.shape[0], np.inf)
    if quantity in ("transmittance", "reflectance"):
        slack = np.maximum(slack, _BEYOND_SCALE)
        return -slack, 1 + slack
    if quantity in ("absorbance", "absorptivity"):
        finite = np.where(np.isfinite(values), values, 0)
        scale = finite.max(axis=1) if quantity == "absorptivity" else np.ones(values.shape[0])
        return -np.maximum(slack, _BEYOND_SCALE * np.abs(scale)), none
    return -none, none


def _clipped(values: FloatArray) -> BoolArray:
    """Channels of a run of equal values at the very top of a signal."""
    clipped = np.zeros(values.shape, dtype=bool)
    for i, row in enumerate(values):
        top = row == np.nanmax(row) if np.isfinite(row).any() else clipped[i]
        edges = np.flatnonzero(np.diff(np.concatenate([[0], top.astype(np.int8), [0]]))).reshape(-1, 2)
        for left, right in edges[edges[:, 1] - edges[:, 0] >= _CLIPPED]:
            clipped[i, left:right] = True
    return clipped


class _Masks(NamedTuple):
    """Doubtful channels of one spectrum."""

    negative: BoolArray
    impossible: BoolArray
    bent: BoolArray


def _remarks(axis: FloatArray, row: FloatArray, dim: str, quantity: str, masks: _Masks, plateau: float) -> list[str]:
    negative, impossible, bent = masks
    unit = SPECTRAL_UNITS[dim]
    found: list[str] = []
    missing = np.isnan(row)
    if missing.any():
        found.append(f"{_channels(missing)} missing{_range(axis, missing, unit)}")
    if bent.any():
        top = f"flat top at absorbance {plateau:.3g}" if np.isfinite(plateau) else "clipped signal"
        found.append(f"{top}, {_channels(bent)}{_range(axis, bent, unit)}")
    if negative.any():
        at = int(np.nanargmin(np.where(negative, row, np.nan)))
        found.append(f"{_channels(negative)} below zero, down to {row[at]:.3g} at {axis[at]:g} {unit}")
    infinite = np.isinf(row)
    if infinite.any():
        found.append(f"{_channels(infinite)} infinite")
    if (impossible & ~infinite).any():
        at = int(np.nanargmax(np.where(infinite, np.nan, row)))
        found.append(f"{_channels(impossible & ~infinite)} above full {quantity}, up to {row[at]:.3g} at "
                     f"{axis[at]:g} {unit}")  # fmt: skip
    return found


def _air(what: str, value: float, word: str) -> list[str]:
    if np.isnan(value) or value == 0:
        return []
    side = "" if value > 0 else ", more of it in the background than in the sample"
    return [f"{what} ({word} {value:.2g}{side})"]


def _channels(mask: BoolArray) -> str:
    n = int(np.count_nonzero(mask))
    return f"{n} channel" if n == 1 else f"{n} channels"


def _range(axis: FloatArray, mask: BoolArray, unit: str) -> str:
    at = axis[mask]
    return f" at {at[0]:g} {unit}" if at.size == 1 else f" between {at[0]:g} and {at[-1]:g} {unit}"
