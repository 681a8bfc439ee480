"""Smoothing and derivatives: linear maps, the same for samples and pure spectra, so additivity is kept.

Baselines belong in ``baseline``, though some of them smooth too.
"""

from collections.abc import Mapping
from typing import Any, ClassVar

import numpy as np
from scipy.optimize import minimize_scalar

from unmix.errors import InputError
from unmix.kernels import FloatArray
from unmix.kernels.localfit import gap_weights, polynomial_weights
from unmix.kernels.missing import patterns
from unmix.kernels.stencil import weighted_sums
from unmix.kernels.whittaker import cutoff_of_penalty, leverages, penalty_of_cutoff, smooth
from unmix.prepare.accept import Rule, number, whole
from unmix.prepare.step import Step

#: spectra that choose a penalty; more would not change it
_VOTERS = 256


class SavitzkyGolay(Step):
    """Smooth or differentiate by a polynomial fitted around each channel.

    The fit uses the positions of the channels, so uneven axes are legal, a derivative is per unit of the axis
    (per cm-1, per nm; per channel for a plain array), and at the ends the last full window is read off-centre. A
    missing channel makes every channel missing whose window holds it: a fit around the gap would be another
    linear map than that of the pure spectra.

    Parameters
    ----------
    window : int
        Odd number of channels in a fit.
    order : int
        Of the polynomial, below ``window``.
    derivative : int
        0 smooths, 1 and more differentiate; at most ``order``.

    References
    ----------
    Savitzky and Golay, Anal. Chem. 36 (1964) 1627. Gorry, Anal. Chem. 62 (1990) 570, for the ends.

    Examples
    --------
    >>> slope = SavitzkyGolay(window=3, order=1, derivative=1).fit_transform([[0.0, 1.0, 4.0, 9.0]])
    >>> slope.round(6)
    array([[2., 2., 4., 4.]])
    """

    accepts: ClassVar[Mapping[str, Rule]] = {
        "window": whole(least=1, odd=True),
        "order": whole(least=0),
        "derivative": whole(least=0),
    }

    def __init__(self, window: int = 11, order: int = 2, derivative: int = 0) -> None:
        self.window = window
        self.order = order
        self.derivative = derivative

    def _learn(self, rows: FloatArray, y: Any) -> None:
        del rows, y
        channels = self.axis_.size
        if self.window > channels:
            raise InputError(f"SavitzkyGolay: window is {self.window}, but there are {channels} feature(s)",
                             accepted=f"give an odd whole number to {channels}")  # fmt: skip
        if self.order >= self.window:
            raise InputError(f"SavitzkyGolay: order is {self.order}, too high for a window of {self.window} channels",
                             accepted=f"give an order below {self.window}")  # fmt: skip
        if self.derivative > self.order:
            raise InputError(f"SavitzkyGolay: derivative is {self.derivative}, but a polynomial of order {self.order} "
                             "has none", accepted=f"give an order of {self.derivative} or more")  # fmt: skip
        self._first, self._weights = polynomial_weights(self.axis_, self.window, self.order, self.derivative)

    def _apply(self, rows: FloatArray) -> FloatArray:
        return weighted_sums(rows, self._first, self._weights)


class GapDerivative(Step):
    """Differentiate by the means of separated segments of channels.

    The channels at either end on which the segments do not fit are left out of the result. On any axis the
    result is exact for polynomials up to the order of the derivative. A missing channel makes the channels
    missing whose segments hold it.

    Parameters
    ----------
    segment : int
        Odd number of channels whose mean is taken.
    gap : int
        Odd number of channels between two segments.
    derivative : int
        1 or 2, per unit of the axis.

    References
    ----------
    Norris and Williams, Cereal Chem. 61 (1984) 158.

    Examples
    --------
    >>> GapDerivative(segment=1, gap=1).fit_transform([[0.0, 1.0, 4.0, 9.0, 16.0]])
    array([[2., 4., 6.]])
    """

    accepts: ClassVar[Mapping[str, Rule]] = {
        "segment": whole(least=1, odd=True),
        "gap": whole(least=1, odd=True),
        "derivative": whole(least=1, most=2),
    }

    def __init__(self, segment: int = 5, gap: int = 5, derivative: int = 1) -> None:
        self.segment = segment
        self.gap = gap
        self.derivative = derivative

    def _learn(self, rows: FloatArray, y: Any) -> None:
        del rows, y
        width = self.derivative * (self.segment + self.gap) + self.segment
        if width > self.axis_.size:
            raise InputError(f"GapDerivative: segments of {self.segment} and gaps of {self.gap} channels span {width} "
                             f"channels, but there are {self.axis_.size} feature(s)",
                             accepted="give shorter ones")  # fmt: skip
        self._first, self._weights, self.kept_ = gap_weights(self.axis_, self.segment, self.gap, self.derivative)
        self.axis_out_ = self.axis_[self.kept_]

    def _apply(self, rows: FloatArray) -> FloatArray:
        return weighted_sums(rows, self._first, self._weights)


class WhittakerSmoother(Step):
    """Smooth by a penalty on the roughness of the curve, chosen by cross-validation where none is given.

    A missing channel has no weight and stays missing. Because the curve reaches over it, additivity is kept only
    between spectra that miss the same channels.

    Parameters
    ----------
    penalty : float, optional
        Weight of the squared differences. None takes the one with the smallest error of prediction of left-out
        channels, over the spectra seen in ``fit`` (at most 256 of them, those that miss the same channels as most
        do). Where neighbouring channels share their noise this smooths too little: give the penalty then.
    difference : int
        Order of the penalised difference, 1 to 3.

    Attributes
    ----------
    penalty_ : float
        The penalty used.
    cutoff_ : float
        The wave length, in units of the axis, that keeps half its height.

    References
    ----------
    Whittaker, Proc. Edinburgh Math. Soc. 41 (1923) 63. Eilers, Anal. Chem. 75 (2003) 3631.

    Examples
    --------
    >>> step = WhittakerSmoother(penalty=1e6)
    >>> step.fit_transform([[0.0, 2.0, 1.0, 3.0]]).round(3)
    array([[0.3, 1.1, 1.9, 2.7]])
    """

    complete_only = True
    no_answer = "with too few channels"
    accepts: ClassVar[Mapping[str, Rule]] = {
        "penalty": number(above=0).or_none("the one that cross-validation chooses"),
        "difference": whole(least=1, most=3),
    }

    def __init__(self, penalty: float | None = None, difference: int = 2) -> None:
        self.penalty = penalty
        self.difference = difference

    @property
    def learns(self) -> bool:
        """Whether the penalty is chosen from the spectra."""
        return self.penalty is None

    def _learned(self) -> dict[str, Any]:
        return {"penalty": self.penalty_}

    def _learn(self, rows: FloatArray, y: Any) -> None:
        del y
        if self.axis_.size <= self.difference:
            raise InputError(f"WhittakerSmoother needs more than {self.difference} channels for difference "
                             f"{self.difference}, but there are {self.axis_.size} feature(s)",
                             accepted="give longer spectra or a lower difference")  # fmt: skip
        self.penalty_ = self.penalty if self.penalty is not None else self._choose(rows)
        spacing = (self.axis_[-1] - self.axis_[0]) / (self.axis_.size - 1)
        self.cutoff_ = cutoff_of_penalty(self.penalty_, self.difference) * spacing

    def _choose(self, rows: FloatArray) -> float:
        groups = patterns(np.isfinite(rows))
        members, present = max(groups, key=lambda group: group[0].size)
        seen: FloatArray = rows[members[:: max(1, members.size // _VOTERS)]]
        axis = self.axis_
        if np.count_nonzero(present) <= self.difference:
            raise InputError("WhittakerSmoother: most spectra miss too many channels to choose a penalty",
                             accepted="give penalty")  # fmt: skip
        v = present.astype(np.float64)

        def error(log_penalty: float) -> float:
            penalty = 10.0**log_penalty
            rest = (seen - smooth(seen, v, axis, penalty, self.difference))[:, present]
            left = np.maximum(1.0 - leverages(v, axis, penalty, self.difference)[present], 1e-12)
            return float(np.mean((rest / left) ** 2))

        low = np.log10(penalty_of_cutoff(2.5, self.difference))
        high = np.log10(penalty_of_cutoff(2.0 * axis.size, self.difference))
        grid = np.linspace(low, high, 13)
        best = int(np.argmin([error(at) for at in grid]))
        bounds = (grid[max(best - 1, 0)], grid[min(best + 1, grid.size - 1)])
        return float(10.0 ** minimize_scalar(error, bounds=bounds, method="bounded", options={"xatol": 0.02}).x)

    def _apply(self, rows: FloatArray) -> FloatArray:
        curves = smooth(rows, np.ones(self.axis_.size), self.axis_, self.penalty_, self.difference)
        return np.where(np.isfinite(rows), curves, np.nan)
