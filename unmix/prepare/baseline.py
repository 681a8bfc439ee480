"""Baselines estimated from each spectrum and taken away.

An estimated baseline takes part of every band with it, a different part for sample and pure spectrum, so none of
these keeps Beer-Lambert additivity except a polynomial fitted to fixed regions. For amounts put baseline terms into
the fit instead.
"""

import warnings
from abc import abstractmethod
from collections.abc import Mapping, Sequence
from typing import Any, ClassVar

import numpy as np

from unmix.errors import InputError, UnmixWarning
from unmix.kernels import BoolArray, FloatArray
from unmix.kernels.hull import bands_below
from unmix.kernels.polynomial import fitted, fitted_below
from unmix.prepare.accept import Rule, number, regions, whole
from unmix.prepare.axis import region_mask
from unmix.prepare.step import Step
from unmix.units import SPECTRAL_UNITS

_LOST = "the baseline is estimated from each spectrum and takes a different part of the bands with it"
_INSTEAD = "put baseline terms into the fit (baseline=0, 1 or 2), or take a derivative with SavitzkyGolay"


class Baseline(Step):
    """What all baselines share: the curve itself can be had, and is taken away."""

    lost_because = _LOST
    instead = _INSTEAD
    no_answer = "with too few channels"

    @abstractmethod
    def _curves(self, rows: FloatArray) -> FloatArray:
        """Baselines of rows, also at missing channels where they can be had."""

    def baseline(self, X: Any) -> Any:
        """The baselines that ``transform`` takes away.

        Parameters
        ----------
        X : DataArray, dims (..., spectral), or array_like, shape (..., channels)
            The spectra as they were before.

        Returns
        -------
        DataArray or ndarray
            As ``X``.
        """
        return self._through(X, self._curves, mark=False)

    def _apply(self, rows: FloatArray) -> FloatArray:
        return rows - self._curves(rows)


def tell_unsettled(step: Step, open_rows: BoolArray, iterations: int) -> None:
    """Warn when an iteration ended at its cap."""
    if open_rows.any():
        count = f"{np.count_nonzero(open_rows)} of {open_rows.size} spectra"
        warnings.warn(f"{type(step).__name__}: the baselines of {count} had not settled after {iterations} iterations; "
                      "raise iterations or tolerance", UnmixWarning, stacklevel=6)  # fmt: skip


class PolynomialBaseline(Baseline):
    """Take away a polynomial, fitted to chosen regions or to the lower edge of the whole spectrum.

    With ``regions`` the fit is one least-squares fit to these channels, a linear map that keeps additivity between
    spectra that miss the same channels. Without, it is repeated on the lower of spectrum and fit until it settles.

    Parameters
    ----------
    order : int
        Of the polynomial: 0 an offset, 1 a line.
    regions : list of (low, high), optional
        Where there is nothing but baseline, in units of the axis.
    iterations : int
        Fits at most where no regions are given.
    tolerance : float
        Settled when the fit moves by less than this part of the range of the spectrum.

    References
    ----------
    Lieber and Mahadevan-Jansen, Appl. Spectrosc. 57 (2003) 1363.

    Examples
    --------
    >>> PolynomialBaseline(order=1, regions=[(0, 1), (4, 5)]).fit_transform([[1.0, 2, 8, 9, 5, 6]])[0, 2:4].round(6)
    array([5., 5.])
    """

    complete_only = True
    accepts: ClassVar[Mapping[str, Rule]] = {
        "order": whole(least=0),
        "regions": regions().or_none("the lower edge of the whole spectrum"),
        "iterations": whole(least=1),
        "tolerance": number(least=0),
    }

    def __init__(
        self,
        order: int = 1,
        regions: Sequence[tuple[float, float]] | None = None,
        iterations: int = 500,
        tolerance: float = 1e-4,
    ) -> None:
        self.order = order
        self.regions = regions
        self.iterations = iterations
        self.tolerance = tolerance

    @property
    def additive(self) -> bool:
        """True where regions are given."""
        return self.regions is not None

    def _learn(self, rows: FloatArray, y: Any) -> None:
        del rows, y
        self._used = np.ones(self.axis_.size, dtype=np.bool_)
        if self.regions is not None:
            self._used = region_mask(self.axis_, self.regions, SPECTRAL_UNITS.get(self.dim_, ""))
        if np.count_nonzero(self._used) <= self.order:
            raise InputError(f"PolynomialBaseline: order is {self.order}, too high for "
                             f"{np.count_nonzero(self._used)} feature(s)",
                             accepted="give a lower order or wider regions")  # fmt: skip

    def _curves(self, rows: FloatArray) -> FloatArray:
        if self.regions is not None:
            return fitted(rows, self.axis_, self.order, self._used)
        curves, count, settled = fitted_below(rows, self.axis_, self.order, self._used, self.iterations, self.tolerance)
        tell_unsettled(self, ~settled & (count > 0), self.iterations)
        return curves


class RubberBand(Baseline):
    """Take away the lower convex hull, as if a rubber band were stretched below the spectrum.

    It has no parameters, follows no concave baseline, and lies along the lower edge of the noise. Missing channels
    are passed over and stay missing.

    References
    ----------
    Andrew, Inf. Process. Lett. 9 (1979) 216, for the hull.

    Examples
    --------
    >>> RubberBand().fit_transform([[1.0, 2.0, 5.0, 4.0, 5.0]])
    array([[0., 0., 2., 0., 0.]])
    """

    def _curves(self, rows: FloatArray) -> FloatArray:
        return bands_below(self.axis_, rows)
