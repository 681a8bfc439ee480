"""Scale: each spectrum by one chosen size, or each channel by its spread over the spectra.

Corrections that fit a model to the spectrum belong in ``scatter``.
"""

from collections.abc import Mapping
from typing import Any, ClassVar

import numpy as np

from unmix.errors import InputError
from unmix.kernels import FloatArray
from unmix.kernels.missing import patterns
from unmix.prepare.accept import Rule, choice, number, region, spectrum
from unmix.prepare.axis import region_mask
from unmix.prepare.given import channel_means, on_axis
from unmix.prepare.step import Step
from unmix.units import SPECTRAL_UNITS

#: a size below this part of the spectrum's largest possible one is rounding
_ROUNDING = 1e-12


class Normalise(Step):
    """Divide each spectrum by its size.

    Over the channels that are present; missing ones stay missing. A spectrum of size zero comes out missing, with
    a warning.

    Parameters
    ----------
    by : {'area', 'maximum', 'length', 'band', 'standard'}
        The integral over the axis, the largest value, the Euclidean length, the integral over ``region``, or the
        area of the band in ``region`` above the straight line between the region's first and last channel, as for
        an internal standard.
    region : (low, high), optional
        In units of the axis; for 'band' and 'standard'.
    to : float
        The size of every spectrum afterwards, such as the known amount of an internal standard.

    Examples
    --------
    >>> Normalise("area", to=4.0).fit_transform([[0.0, 1.0, 0.0]])
    array([[0., 4., 0.]])
    >>> Normalise("standard", region=(0, 2)).fit_transform([[1.0, 3.0, 1.0, 5.0]])
    array([[0.5, 1.5, 0.5, 2.5]])
    """

    lost_because = "every spectrum is divided by its own size"
    instead = "leave the scale; an internal standard can be quantified as one more component"
    no_answer = "of size zero"
    accepts: ClassVar[Mapping[str, Rule]] = {
        "by": choice("area", "maximum", "length", "band", "standard"),
        "region": region().or_none("the whole axis"),
        "to": number(above=0),
    }

    def __init__(self, by: str = "area", region: tuple[float, float] | None = None, to: float = 1.0) -> None:
        self.by = by
        self.region = region
        self.to = to

    def _learn(self, rows: FloatArray, y: Any) -> None:
        del rows, y
        bounded = self.by in ("band", "standard")
        if bounded != (self.region is not None):
            raise InputError(f"Normalise: by is '{self.by}' and region is {self.region}",
                             accepted="give a region with 'band' and 'standard', and only with these")  # fmt: skip
        self._used = np.ones(self.axis_.size, dtype=np.bool_)
        if self.region is not None:
            self._used = region_mask(self.axis_, [self.region], SPECTRAL_UNITS.get(self.dim_, ""))
        least = {"standard": 3, "maximum": 1, "length": 1}.get(self.by, 2)
        if np.count_nonzero(self._used) < least:
            raise InputError(f"Normalise: '{self.by}' needs {least} channels, but there are "
                             f"{np.count_nonzero(self._used)} feature(s)", accepted="give a wider region")  # fmt: skip

    def _apply(self, rows: FloatArray) -> FloatArray:
        size = np.full((rows.shape[0], 1), np.nan)
        for members, present in patterns(np.isfinite(rows) & self._used):
            if not present.any():
                continue
            part, axis = rows[np.ix_(members, present)], self.axis_[present]
            found, largest = self._size(part, axis)
            size[members, 0] = np.where(np.abs(found) > _ROUNDING * largest, found, np.nan)
        return np.asarray(rows / size * self.to)

    def _size(self, part: FloatArray, axis: FloatArray) -> tuple[FloatArray, FloatArray]:
        """The size of each spectrum, and the largest that its values could have."""
        if self.by == "maximum":
            return part.max(axis=1), np.abs(part).max(axis=1)
        if self.by == "length":
            return np.sqrt(np.einsum("ij,ij->i", part, part)), np.abs(part).max(axis=1)
        if self.by == "standard":
            along = (axis - axis[0]) / ((axis[-1] - axis[0]) or 1.0)
            part = part - part[:, :1] * (1 - along) - part[:, -1:] * along
        return np.asarray(np.trapezoid(part, axis, axis=1)), np.asarray(np.trapezoid(np.abs(part), axis, axis=1))


class _ByChannel(Step):
    """What centring and scaling of channels share: numbers learned over the spectra, or given."""

    _divides: ClassVar[bool] = True
    instead = "leave it out; a fit to pure spectra needs no centring"
    lost_because = "an average spectrum is subtracted, which is not part of any component"

    @property
    def learns(self) -> bool:
        """Whether the numbers come from the spectra."""
        return any(value is None for value in self.get_params(deep=False).values())

    def _learned(self) -> dict[str, Any]:
        return {name: getattr(self, f"{name}_").tolist() for name in self.get_params(deep=False)}

    def _learn(self, rows: FloatArray, y: Any) -> None:
        del y
        given = self.get_params(deep=False)
        self.mean_ = channel_means(self, rows) if given["mean"] is None else on_axis(self, given["mean"], "mean")[0]
        if not self._divides:
            return
        if given["scale"] is None:
            centred = rows - channel_means(self, rows)
            count = np.isfinite(rows).sum(axis=0)
            spread = np.sqrt(np.nansum(centred**2, axis=0) / np.maximum(count - 1, 1))
            constant = spread <= _ROUNDING * np.max(np.abs(np.nan_to_num(rows)), axis=0)
            self.scale_: FloatArray = np.where(constant, 1.0, self._scale_of(spread))
            return
        self.scale_ = on_axis(self, given["scale"], "scale")[0]
        if (self.scale_ <= 0).any():
            raise InputError(f"{type(self).__name__}: scale is {self.scale_.min():g} at a channel",
                             accepted="give numbers above 0")  # fmt: skip

    def _scale_of(self, spread: FloatArray) -> FloatArray:
        return spread

    def _apply(self, rows: FloatArray) -> FloatArray:
        return (rows - self.mean_) / self.scale_ if self._divides else rows - self.mean_


class MeanCentre(_ByChannel):
    """Subtract the mean of each channel over the spectra seen in ``fit``.

    Parameters
    ----------
    mean : DataArray or array_like, shape (channels,), optional
        None takes the mean of the spectra.

    Attributes
    ----------
    mean_ : ndarray, shape (channels,)

    Examples
    --------
    >>> MeanCentre().fit_transform([[1.0, 2.0], [3.0, 6.0]])
    array([[-1., -2.],
           [ 1.,  2.]])
    """

    _divides = False
    accepts: ClassVar[Mapping[str, Rule]] = {"mean": spectrum().or_none("the mean of the spectra")}

    def __init__(self, mean: Any = None) -> None:
        self.mean = mean


class AutoScale(_ByChannel):
    """Centre each channel and divide by its standard deviation over the spectra seen in ``fit``.

    A channel that is constant is centred only.

    Parameters
    ----------
    mean, scale : DataArray or array_like, shape (channels,), optional
        None takes mean and standard deviation of the spectra.

    Attributes
    ----------
    mean_, scale_ : ndarray, shape (channels,)

    Examples
    --------
    >>> AutoScale().fit_transform([[1.0, 2.0], [3.0, 6.0], [5.0, 10.0]])
    array([[-1., -1.],
           [ 0.,  0.],
           [ 1.,  1.]])
    """

    accepts: ClassVar[Mapping[str, Rule]] = {
        "mean": spectrum().or_none("the mean of the spectra"),
        "scale": spectrum().or_none("the standard deviation of the spectra"),
    }

    def __init__(self, mean: Any = None, scale: Any = None) -> None:
        self.mean = mean
        self.scale = scale


class ParetoScale(_ByChannel):
    """Centre each channel and divide by the square root of its standard deviation over the spectra in ``fit``.

    Between no scaling and ``AutoScale``: strong channels keep more weight, noisy ones gain less. A channel that is
    constant is centred only.

    Parameters
    ----------
    mean, scale : DataArray or array_like, shape (channels,), optional
        None takes mean and root of the standard deviation of the spectra.

    Attributes
    ----------
    mean_, scale_ : ndarray, shape (channels,)

    References
    ----------
    van den Berg et al., BMC Genomics 7 (2006) 142.

    Examples
    --------
    >>> ParetoScale().fit_transform([[1.0, 2.0], [5.0, 10.0], [9.0, 18.0]])[:, 0]
    array([-2.,  0.,  2.])
    """

    accepts: ClassVar[Mapping[str, Rule]] = {
        "mean": spectrum().or_none("the mean of the spectra"),
        "scale": spectrum().or_none("the root of the standard deviation of the spectra"),
    }

    def __init__(self, mean: Any = None, scale: Any = None) -> None:
        self.mean = mean
        self.scale = scale

    def _scale_of(self, spread: FloatArray) -> FloatArray:
        return np.sqrt(spread)
