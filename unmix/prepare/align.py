"""Spectra moved along the axis until they lie on a reference.

Interpolation onto fixed channels belongs in ``resolution``.
"""

import warnings
from collections.abc import Mapping
from typing import Any, ClassVar

import numpy as np
import xarray as xr

from unmix.errors import UnmixWarning
from unmix.kernels import FloatArray
from unmix.kernels.alignment import fit_moves
from unmix.kernels.resample import interpolate
from unmix.prepare.accept import Rule, number, spectrum
from unmix.prepare.given import channel_means, on_axis
from unmix.prepare.step import Step
from unmix.spectra import check_spectra


class Align(Step):
    """Shift, and if so wanted stretch, each spectrum along the axis until it lies on a reference.

    Offset and height are free in the fit. Channels that would have to come from outside the axis are missing
    afterwards.

    Parameters
    ----------
    reference : DataArray or array_like, shape (channels,), optional
        None takes the mean of the spectra seen in ``fit``.
    max_shift : float, optional
        The largest shift, in units of the axis. None allows two channels.
    max_stretch : float
        The largest move of the ends against the middle, in units of the axis; 0 allows none.

    Attributes
    ----------
    reference_ : ndarray, shape (channels,)

    Examples
    --------
    >>> x = np.arange(60.0)
    >>> band = lambda centre: np.exp(-(((x - centre) / 6) ** 2))
    >>> step = Align(reference=band(30.0), max_shift=3.0).fit([band(31.5)])
    >>> step.moves([band(31.5)]).round(2)
    array([[1.5, 0. ]])
    """

    lost_because = "every spectrum is moved by its own shift"
    instead = "correct the axis of the instrument once, by the same shift for all spectra"
    no_answer = "without a band to go by"
    least_channels = 2
    accepts: ClassVar[Mapping[str, Rule]] = {
        "reference": spectrum().or_none("the mean of the spectra"),
        "max_shift": number(least=0).or_none("two channels"),
        "max_stretch": number(least=0),
    }

    def __init__(self, reference: Any = None, max_shift: float | None = None, max_stretch: float = 0.0) -> None:
        self.reference = reference
        self.max_shift = max_shift
        self.max_stretch = max_stretch

    @property
    def learns(self) -> bool:
        """Whether the reference is the mean of the spectra."""
        return self.reference is None

    def _learned(self) -> dict[str, Any]:
        return {"reference": self.reference_.tolist()}

    def _learn(self, rows: FloatArray, y: Any) -> None:
        del y
        self.reference_ = (
            channel_means(self, rows) if self.reference is None else on_axis(self, self.reference, "reference")[0]
        )
        spacing = (self.axis_[-1] - self.axis_[0]) / (self.axis_.size - 1)
        self._max_shift = 2.0 * spacing if self.max_shift is None else float(self.max_shift)

    def moves(self, X: Any) -> Any:
        """Shift and stretch found for each spectrum, in units of the axis.

        Parameters
        ----------
        X : DataArray, dims (..., spectral), or array_like, shape (..., channels)

        Returns
        -------
        DataArray, dims (..., move), or ndarray, shape (..., 2)
            Positive when the spectrum lies at higher positions than the reference; NaN without a band to go by.
        """
        if isinstance(X, xr.DataArray):
            spectra = check_spectra(X)
            self._same_axis(spectra)
            found = self._moves(np.asarray(spectra.values, dtype=np.float64).reshape(-1, self.axis_.size))
            dims, coords = (
                spectra.dims[:-1],
                {n: c for n, c in spectra.coords.items() if spectra.dims[-1] not in c.dims},
            )
            return xr.DataArray(
                found.reshape(*spectra.shape[:-1], 2),
                dims=(*dims, "move"),
                coords={**coords, "move": ["shift", "stretch"]},
            )
        values = self._plain(X, reset=False)
        return self._moves(values.reshape(-1, values.shape[-1]).astype(np.float64)).reshape(*values.shape[:-1], 2)

    def _moves(self, rows: FloatArray) -> FloatArray:
        moves, settled = fit_moves(rows, self.axis_, self.reference_, self._max_shift, float(self.max_stretch))
        known = np.isfinite(moves[:, 0])
        bound = known & (np.abs(moves[:, 0]) >= self._max_shift) & (self._max_shift > 0)
        if bound.any() or not settled[known].all():
            warnings.warn(f"Align: {np.count_nonzero(bound)} spectra stop at max_shift {self._max_shift:g} and "
                          f"{np.count_nonzero(known & ~settled)} had not settled, of {known.size}",
                          UnmixWarning, stacklevel=6)  # fmt: skip
        return moves

    def _apply(self, rows: FloatArray) -> FloatArray:
        moves = self._moves(rows)
        lever = 2.0 * (self.axis_ - self.axis_[0]) / (self.axis_[-1] - self.axis_[0]) - 1.0
        answer = np.full_like(rows, np.nan)
        for row in np.flatnonzero(np.isfinite(moves[:, 0])):
            at = self.axis_ + moves[row, 0] + moves[row, 1] * lever
            answer[row] = interpolate(self.axis_, rows[row], at)
        return answer
