"""Penalised baselines: smooth curves that give little weight to what lies above them, all on one solver.

Polynomials and the rubber band belong in ``baseline``.
"""

from collections.abc import Mapping
from typing import Any, ClassVar

import numpy as np

from unmix.errors import InputError
from unmix.kernels import FloatArray
from unmix.kernels.whittaker import cutoff_of_penalty, penalty_of_cutoff, reweighted
from unmix.prepare.accept import Rule, number, spectrum, whole
from unmix.prepare.baseline import Baseline, tell_unsettled
from unmix.prepare.given import on_axis

#: the default penalty passes half of a wave as long as this part of the range; see DEVELOPERS.md, Baselines
DEFAULT_CUTOFF = 1 / 6


class _Penalised(Baseline):
    """What the penalised baselines share: one solver, one default penalty, weights and a cap."""

    _rule: ClassVar[str]
    accepts: ClassVar[Mapping[str, Rule]] = {
        "penalty": number(above=0).or_none("the one that passes half of a wave of a sixth of the range"),
        "difference": whole(least=1, most=3),
        "iterations": whole(least=1),
        "tolerance": number(least=0),
        "weights": spectrum().or_none("equal weights"),
    }
    penalty: float | None
    difference: int
    iterations: int
    tolerance: float
    weights: Any

    def _setting(self) -> float:
        return 0.0

    def _learn(self, rows: FloatArray, y: Any) -> None:
        del rows, y
        channels = self.axis_.size
        if channels <= self.difference:
            raise InputError(f"{type(self).__name__} needs more than {self.difference} channels for difference "
                             f"{self.difference}, but there are {channels} feature(s)",
                             accepted="give longer spectra or a lower difference")  # fmt: skip
        default = penalty_of_cutoff(DEFAULT_CUTOFF * channels, self.difference)
        self.penalty_ = self.penalty if self.penalty is not None else default
        spacing = (self.axis_[-1] - self.axis_[0]) / (channels - 1)
        self.cutoff_ = cutoff_of_penalty(self.penalty_, self.difference) * spacing
        self.weights_: FloatArray = np.ones(channels)
        if self.weights is not None:
            self.weights_ = on_axis(self, self.weights, "weights")[0]
            if (self.weights_ < 0).any() or np.count_nonzero(self.weights_) <= self.difference:
                raise InputError(f"{type(self).__name__}: weights are negative, or zero almost everywhere",
                                 accepted="give one weight from 0 a channel")  # fmt: skip

    def _curves(self, rows: FloatArray) -> FloatArray:
        rule = (self._rule, self._setting())
        curves, count, settled = reweighted(
            rows, self.weights_, self.axis_, self.penalty_, self.difference, rule, self.iterations, self.tolerance
        )
        open_rows = ~settled & (count > 0)
        tell_unsettled(self, open_rows, self.iterations)
        return curves


class AsymmetricLeastSquares(_Penalised):
    """Take away a smooth curve that gives little weight to channels above it.

    Missing channels have no weight and stay missing.

    Parameters
    ----------
    penalty : float, optional
        Weight of the squared differences of the curve (often called lambda). None takes the one that passes half
        of a wave as long as a sixth of the axis, which follows from the number of channels; the attribute
        ``cutoff_`` says in units of the axis what any choice passes.
    asymmetry : float
        Weight of a channel above the curve, between 0 and 1; one below has 1 - asymmetry. Usual are 0.001 to 0.1.
    difference : int
        Order of the penalised difference, 1 to 3. Uneven spacing enters the differences.
    iterations : int
        Solutions at most.
    tolerance : float
        Part of the channels that may still change sides when the curve counts as settled.
    weights : array_like or DataArray, shape (channels,), optional
        A further weight for each channel, 0 where nothing is known of the baseline.

    Attributes
    ----------
    penalty_, cutoff_ : float
        The penalty used, and the wave length in units of the axis that keeps half its height in the curve.

    References
    ----------
    Eilers, Anal. Chem. 76 (2004) 404. Eilers and Boelens, Baseline correction with asymmetric least squares
    smoothing (2005).

    Examples
    --------
    >>> x = np.linspace(0, 1, 200)
    >>> spectrum = 2 + x + np.exp(-(((x - 0.5) / 0.03) ** 2))
    >>> flat = AsymmetricLeastSquares(penalty=1e6, asymmetry=0.001).fit_transform([spectrum])
    >>> flat[0, [20, 99, 180]].round(2)
    array([0.  , 0.99, 0.  ])
    """

    _rule = "asymmetric"
    accepts: ClassVar[Mapping[str, Rule]] = {
        **_Penalised.accepts,
        "asymmetry": number(above=0, most=1),
    }

    def __init__(
        self,
        penalty: float | None = None,
        asymmetry: float = 0.01,
        difference: int = 2,
        iterations: int = 50,
        tolerance: float = 0.0,
        weights: Any = None,
    ) -> None:
        self.penalty = penalty
        self.asymmetry = asymmetry
        self.difference = difference
        self.iterations = iterations
        self.tolerance = tolerance
        self.weights = weights

    def _setting(self) -> float:
        return self.asymmetry


class AdaptiveReweighted(_Penalised):
    """Take away a smooth curve that ignores what lies above it and weighs what lies below ever more (airPLS).

    Missing channels have no weight and stay missing.

    Parameters
    ----------
    penalty : float, optional
        As in ``AsymmetricLeastSquares``.
    difference : int
        Order of the penalised difference, 1 to 3.
    iterations : int
        Solutions at most.
    tolerance : float
        Settled when what lies below the curve adds up to less than this part of the spectrum.
    weights : array_like or DataArray, shape (channels,), optional
        A further weight for each channel.

    Attributes
    ----------
    penalty_, cutoff_ : float
        As in ``AsymmetricLeastSquares``.

    References
    ----------
    Zhang, Chen and Liang, Analyst 135 (2010) 1138; the exponent is taken positive, so that depth below the curve
    adds weight.

    Examples
    --------
    >>> x = np.linspace(0, 1, 200)
    >>> spectrum = 2 + x + np.exp(-(((x - 0.5) / 0.03) ** 2))
    >>> AdaptiveReweighted(penalty=1e6).fit_transform([spectrum])[0, [20, 99, 180]].round(2)
    array([0.  , 0.99, 0.  ])
    """

    _rule = "adaptive"

    def __init__(
        self,
        penalty: float | None = None,
        difference: int = 2,
        iterations: int = 50,
        tolerance: float = 1e-3,
        weights: Any = None,
    ) -> None:
        self.penalty = penalty
        self.difference = difference
        self.iterations = iterations
        self.tolerance = tolerance
        self.weights = weights


class AsymmetricallyReweighted(_Penalised):
    """Take away a smooth curve through the noise of the baseline, its weights a logistic step (arPLS).

    The step is placed by mean and standard deviation of the residuals below the curve, so that the curve runs
    through the middle of the noise and not along its lower edge. Missing channels have no weight and stay missing.

    Parameters
    ----------
    penalty : float, optional
        As in ``AsymmetricLeastSquares``.
    difference : int
        Order of the penalised difference, 1 to 3.
    iterations : int
        Solutions at most.
    tolerance : float
        Settled when the weights change by less than this part of their length.
    weights : array_like or DataArray, shape (channels,), optional
        A further weight for each channel.

    Attributes
    ----------
    penalty_, cutoff_ : float
        As in ``AsymmetricLeastSquares``.

    References
    ----------
    Baek, Park, Ahn and Choo, Analyst 140 (2015) 250.

    Examples
    --------
    >>> x = np.linspace(0, 1, 200)
    >>> noise = np.random.default_rng(0).normal(scale=0.02, size=200)
    >>> spectrum = 2 + x + noise + np.exp(-(((x - 0.5) / 0.03) ** 2))
    >>> flat = AsymmetricallyReweighted(penalty=1e6).fit_transform([spectrum])
    >>> bool(abs(flat[0, :60].mean()) < 0.005)
    True
    """

    _rule = "logistic"

    def __init__(
        self,
        penalty: float | None = None,
        difference: int = 2,
        iterations: int = 100,
        tolerance: float = 1e-3,
        weights: Any = None,
    ) -> None:
        self.penalty = penalty
        self.difference = difference
        self.iterations = iterations
        self.tolerance = tolerance
        self.weights = weights


def penalty_for(cutoff: float, axis: Any, *, difference: int = 2) -> float:
    """The penalty whose curve keeps half of a wave of the given length: what a penalty means, the other way round.

    Parameters
    ----------
    cutoff : float
        Wave length in units of the axis.
    axis : array_like, shape (channels,)
        Positions of the channels.
    difference : int
        Order of the penalised difference.

    Returns
    -------
    float

    Raises
    ------
    InputError
        For a wave of two channels or fewer.

    Examples
    --------
    >>> round(penalty_for(200.0, np.arange(400.0, 4000.0, 2.0)))
    64205
    """
    positions = np.asarray(axis, dtype=np.float64)
    spacing = abs(positions[-1] - positions[0]) / (positions.size - 1)
    if not cutoff > 2 * spacing:
        raise InputError(f"cutoff is {cutoff:g}, but a wave needs more than two channels ({2 * spacing:g})",
                         accepted="give a longer one")  # fmt: skip
    return penalty_of_cutoff(cutoff / spacing, difference)
