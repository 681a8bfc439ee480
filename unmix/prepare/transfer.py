"""Spectra of one instrument as another would have measured them.

How the map between two instruments is found belongs to ``solve``; here it is only applied, as a step that a method can
hold and a calibration can be saved with.
"""

from collections.abc import Mapping
from typing import Any, ClassVar

import numpy as np

from unmix.errors import AxisError, InputError
from unmix.kernels import FloatArray
from unmix.kernels.stencil import weighted_sums
from unmix.prepare.accept import Rule, spectrum
from unmix.prepare.step import Step


class Standardisation(Step):
    """Piecewise direct standardisation with known weights: each new channel from a few old ones.

    One linear map with an offset, so amounts of a calibration made on the other instrument can be predicted; additivity
    is lost by the offset.

    Parameters
    ----------
    first : array_like of int, shape (targets,)
        First old channel of each new one.
    weights : array_like, shape (targets, window)
        Of the old channels from there on.
    offset : array_like, shape (targets,)
        Added to the sums.
    axis : array_like, shape (targets,)
        Positions of the new channels.

    References
    ----------
    Wang, Veltkamp and Kowalski, Anal. Chem. 63 (1991) 2750.

    Examples
    --------
    >>> step = Standardisation(first=[0, 1], weights=[[0.5, 0.5], [0.0, 2.0]], offset=[0.0, 1.0], axis=[0.5, 2.0])
    >>> step.fit_transform([[1.0, 3.0, 5.0]])
    array([[ 2., 11.]])
    """

    lost_because = "an offset between the instruments is added to every spectrum"
    instead = "measure the pure spectra on the instrument of the samples"
    complete_only = True
    accepts: ClassVar[Mapping[str, Rule]] = {
        "first": spectrum(), "weights": spectrum(), "offset": spectrum(), "axis": spectrum(),
    }  # fmt: skip

    def __init__(self, first: Any, weights: Any, offset: Any, axis: Any) -> None:
        self.first = first
        self.weights = weights
        self.offset = offset
        self.axis = axis

    def _learn(self, rows: FloatArray, y: Any) -> None:
        del rows, y
        targets = np.asarray(self.axis, dtype=np.float64)
        self._first = np.asarray(self.first).astype(np.intp)
        self._weights = np.atleast_2d(np.asarray(self.weights, dtype=np.float64))
        self._offset = np.asarray(self.offset, dtype=np.float64)
        if not self._first.shape == self._offset.shape == targets.shape == self._weights.shape[:1]:
            raise InputError(f"Standardisation: first, weights, offset and axis are for {self._first.size}, "
                             f"{self._weights.shape[0]}, {self._offset.size} and {targets.size} channels",
                             accepted="give one of each for every new channel")  # fmt: skip
        if self._first.min() < 0 or int(self._first.max()) + self._weights.shape[1] > self.axis_.size:
            raise AxisError(f"Standardisation: a window reaches beyond the spectra, which have {self.axis_.size} "
                            "feature(s)", accepted="give spectra of the instrument that it was made for")  # fmt: skip
        if targets.size > 1 and not (np.diff(targets) > 0).all():
            raise AxisError("Standardisation: axis does not increase from channel to channel", accepted="sort it")
        self.axis_out_ = targets

    def _apply(self, rows: FloatArray) -> FloatArray:
        return weighted_sums(rows, self._first, self._weights) + self._offset
