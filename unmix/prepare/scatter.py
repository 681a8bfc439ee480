"""Scatter: what grain size, path and offset do to a whole spectrum, divided and subtracted away.

All of these scale every spectrum by its own factor, so none keeps Beer-Lambert additivity, except the extended
correction without its division. Scaling by one chosen size belongs in ``scale``.
"""

from collections.abc import Mapping
from typing import Any, ClassVar

import numpy as np

from unmix.errors import InputError
from unmix.kernels import FloatArray
from unmix.kernels.missing import patterns
from unmix.kernels.polynomial import basis
from unmix.prepare.accept import Rule, flag, spectrum, whole
from unmix.prepare.given import channel_means, on_axis
from unmix.prepare.step import Step

#: a spread or slope below this part of the spectrum's size is rounding
_ROUNDING = 1e-12

_INSTEAD = "leave the scale and put baseline terms into the fit (baseline=0, 1 or 2)"


class StandardNormalVariate(Step):
    """Subtract from each spectrum its mean and divide by its standard deviation.

    Over the channels that are present; missing ones stay missing. A constant spectrum has no scale and comes out
    missing, with a warning.

    References
    ----------
    Barnes, Dhanoa and Lister, Appl. Spectrosc. 43 (1989) 772.

    Examples
    --------
    >>> StandardNormalVariate().fit_transform([[1.0, 2.0, 3.0]])
    array([[-1.,  0.,  1.]])
    """

    lost_because = "every spectrum is divided by its own standard deviation"
    instead = _INSTEAD
    no_answer = "that are constant"
    least_channels = 2

    def _apply(self, rows: FloatArray) -> FloatArray:
        present = np.isfinite(rows)
        count = present.sum(axis=1, keepdims=True)
        centred = rows - _over(np.nansum(rows, axis=1, keepdims=True), count)
        spread = np.sqrt(_over(np.nansum(centred**2, axis=1, keepdims=True), count - 1))
        return _over(centred, np.where(spread > _ROUNDING * _size(rows), spread, np.nan))


class RobustNormalVariate(Step):
    """Subtract from each spectrum its median and divide by its interquartile range over 1.349.

    Like ``StandardNormalVariate``, to which it is equal on average for normally distributed values, but a strong
    band in few channels does not move the others. A spectrum with half of its channels equal comes out missing.

    References
    ----------
    After Guo, Wu and Massart, Anal. Chim. Acta 382 (1999) 87, who use one percentile for both.

    Examples
    --------
    >>> RobustNormalVariate().fit_transform([[0.0, 1.0, 2.0, 3.0, 400.0]])[0, :4].round(4)
    array([-1.349 , -0.6745,  0.    ,  0.6745])
    """

    lost_because = "every spectrum is divided by its own interquartile range"
    instead = _INSTEAD
    no_answer = "of which half of the channels are equal"
    least_channels = 2

    def _apply(self, rows: FloatArray) -> FloatArray:
        answer = np.full_like(rows, np.nan)
        some = np.isfinite(rows).any(axis=1)
        if some.any():
            low, middle, high = np.nanpercentile(rows[some], [25, 50, 75], axis=1)[..., None]
            spread = (high - low) / 1.349
            answer[some] = _over(rows[some] - middle, np.where(spread > _ROUNDING * _size(rows[some]), spread, np.nan))
        return answer


class MultiplicativeScatterCorrection(Step):
    """Subtract the offset and divide by the slope of each spectrum on a reference spectrum.

    Over the channels that are present; missing ones stay missing.

    Parameters
    ----------
    reference : DataArray or array_like, shape (channels,), optional
        None takes the mean of the spectra seen in ``fit``.

    Attributes
    ----------
    reference_ : ndarray, shape (channels,)

    References
    ----------
    Geladi, MacDougall and Martens, Appl. Spectrosc. 39 (1985) 491.

    Examples
    --------
    >>> MultiplicativeScatterCorrection(reference=[0.0, 1.0, 2.0]).fit_transform([[3.0, 5.0, 7.0]])
    array([[0., 1., 2.]])
    """

    lost_because = "every spectrum is divided by its own slope on the reference"
    instead = _INSTEAD
    no_answer = "that have nothing of the reference"
    least_channels = 2
    accepts: ClassVar[Mapping[str, Rule]] = {"reference": spectrum().or_none("the mean of the spectra")}

    def __init__(self, reference: Any = None) -> None:
        self.reference = reference

    @property
    def learns(self) -> bool:
        """Whether the reference is the mean of the spectra."""
        return self.reference is None

    def _learned(self) -> dict[str, Any]:
        return {"reference": self.reference_.tolist()}

    def _learn(self, rows: FloatArray, y: Any) -> None:
        del y
        self.reference_ = _reference(self, self.reference, rows)

    def _apply(self, rows: FloatArray) -> FloatArray:
        present = np.isfinite(rows)
        count = present.sum(axis=1, keepdims=True)
        shape = np.where(present, self.reference_, np.nan)
        mean = _over(np.nansum(rows, axis=1, keepdims=True), count)
        shape = shape - _over(np.nansum(shape, axis=1, keepdims=True), count)
        centred = rows - mean
        norm = np.nansum(shape**2, axis=1, keepdims=True)
        slope = _over(np.nansum(centred * shape, axis=1, keepdims=True), norm)
        size = np.sqrt(_over(np.nansum(centred**2, axis=1, keepdims=True), norm))
        # (rows - offset) / slope, written so that the reference itself comes back to rounding
        slope = np.where((np.abs(slope) > 1e-9 * size) & (slope != 0), slope, np.nan)
        middle = _over(np.nansum(np.where(present, self.reference_, 0.0), axis=1, keepdims=True), count)
        return centred / slope + middle


class ExtendedScatterCorrection(Step):
    """Fit each spectrum by a reference, a polynomial and known interferents; keep the reference and the residual.

    y = b reference + polynomial + sum g_i interferent_i + residual becomes reference + residual / b.

    Parameters
    ----------
    order : int
        Of the polynomial along the axis: 0 offset only, 2 for wavelength-dependent scatter.
    reference : DataArray or array_like, shape (channels,), optional
        None takes the mean of the spectra seen in ``fit``.
    interferents : DataArray or array_like, shape (interferents, channels), optional
        Spectra of what is to be taken out.
    scale : bool
        Divide by b. Without it the correction is one linear map, y - polynomial - interferents, and keeps
        additivity between spectra that miss the same channels.

    Attributes
    ----------
    reference_ : ndarray, shape (channels,)

    References
    ----------
    Martens and Stark, J. Pharm. Biomed. Anal. 9 (1991) 625. Afseth and Kohler, Chemom. Intell. Lab. Syst. 117
    (2012) 92.

    Examples
    --------
    >>> reference = [0.0, 1.0, 4.0, 1.0, 0.0]
    >>> step = ExtendedScatterCorrection(order=1, reference=reference)
    >>> step.fit_transform([[1.0, 4.0, 11.0, 6.0, 5.0]])[0, 1:4].round(6)
    array([1., 4., 1.])
    """

    lost_because = "every spectrum is divided by its own factor on the reference"
    instead = "give scale=False, or put baseline terms into the fit (baseline=0, 1 or 2)"
    no_answer = "that have nothing of the reference, or too few channels"
    complete_only = True
    least_channels = 2
    accepts: ClassVar[Mapping[str, Rule]] = {
        "order": whole(least=0),
        "reference": spectrum().or_none("the mean of the spectra"),
        "interferents": spectrum().or_none("none"),
        "scale": flag(),
    }

    def __init__(self, order: int = 2, reference: Any = None, interferents: Any = None, scale: bool = True) -> None:
        self.order = order
        self.reference = reference
        self.interferents = interferents
        self.scale = scale

    @property
    def additive(self) -> bool:
        """True without the division."""
        return not self.scale

    @property
    def learns(self) -> bool:
        """Whether the reference is the mean of the spectra."""
        return self.reference is None

    def _learned(self) -> dict[str, Any]:
        return {"reference": self.reference_.tolist()}

    def _learn(self, rows: FloatArray, y: Any) -> None:
        del y
        self.reference_ = _reference(self, self.reference, rows)
        others = [basis(self.axis_, self.order)]
        if self.interferents is not None:
            others.append(on_axis(self, self.interferents, "interferents").T)
        self._model = np.column_stack([self.reference_, *others])
        self._length = np.linalg.norm(self._model, axis=0)
        self._length[self._length == 0] = 1.0
        rank = np.linalg.matrix_rank(self._model / self._length)
        if rank < self._model.shape[1]:
            raise InputError(f"ExtendedScatterCorrection: of {self._model.shape[1]} terms only {rank} can be told "
                             f"apart on {self.axis_.size} feature(s)",
                             accepted="lower order, or leave out interferents that resemble the reference")  # fmt: skip

    def _apply(self, rows: FloatArray) -> FloatArray:
        answer = np.full_like(rows, np.nan)
        for members, present in patterns(np.isfinite(rows)):
            model = self._model[present] / self._length
            if model.shape[0] < model.shape[1]:
                continue
            solve = np.linalg.pinv(model) / self._length[:, None]
            amounts = rows[np.ix_(members, present)] @ solve.T
            rest = rows[members] - amounts[:, 1:] @ self._model[:, 1:].T
            factor = amounts[:, :1]
            size = _over(_size(rows[members]), np.abs(self.reference_).max())
            usable = np.abs(factor) > _ROUNDING * size
            answer[members] = rest / np.where(usable, factor, np.nan) if self.scale else rest
        return answer


def _reference(step: Step, given: Any, rows: FloatArray) -> FloatArray:
    name = type(step).__name__
    reference: FloatArray = channel_means(step, rows) if given is None else on_axis(step, given, "reference")[0]
    if np.ptp(reference) <= _ROUNDING * np.abs(reference).max():
        raise InputError(f"{name}: the reference is constant over {reference.size} feature(s)",
                         accepted="give a spectrum with bands")  # fmt: skip
    return reference


def _size(rows: FloatArray) -> FloatArray:
    """Largest absolute value of each row, as a column; zero where all is missing."""
    return np.asarray(np.abs(np.nan_to_num(rows)).max(axis=1, keepdims=True))


def _over(above: Any, below: Any) -> FloatArray:
    """A quotient that is missing, without complaint, where the divisor is zero."""
    with np.errstate(divide="ignore", invalid="ignore"):
        quotient: FloatArray = above / np.where(np.asarray(below) == 0, np.nan, below)
    return quotient
