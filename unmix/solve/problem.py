"""Spectra, reference values and a preparation for the loops of validation; test samples never teach a preparation."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import TypeAlias

import numpy as np
import xarray as xr

from unmix.errors import InputError, UnmixError, listed
from unmix.kernels import FloatArray, IntArray
from unmix.kernels.pls import cross_validate, fit
from unmix.method import Method
from unmix.solve.folds import Fold
from unmix.solve.latent_model import LatentModel, LeftOut
from unmix.spectra import labels_of, spectral_dim
from unmix.units import SPECTRAL_UNITS

#: called with the part that is done and the whole
Progress: TypeAlias = Callable[[int, int], None]


@dataclass(frozen=True)
class Problem:
    """What a calibration is made from.

    Attributes
    ----------
    samples : DataArray, dims (sample, spectral)
    values : ndarray, shape (samples, properties)
    method : Method
        As given: what its steps learn, they learn anew from each training set.
    weights : ndarray, shape (samples,), or None
    """

    samples: xr.DataArray
    values: FloatArray
    method: Method
    weights: FloatArray | None = None

    @classmethod
    def make(
        cls, samples: xr.DataArray, values: FloatArray, method: Method, weights: FloatArray | None = None
    ) -> "Problem":
        """Prepare at once what needs no learning, so that it is done only once.

        Raises
        ------
        InputError
            When a prepared spectrum has a missing channel.
        """
        if method.learns:
            return cls(samples, values, method, weights)
        prepared = method.apply(samples) if method.steps else samples
        require_complete(prepared)
        return cls(prepared, values, Method(), weights)

    def subset(self, rows: IntArray) -> "Problem":
        """The problem of some samples."""
        weights = None if self.weights is None else self.weights[rows]
        return Problem(self.samples[rows], self.values[rows], self.method, weights)

    def rows(self, train: IntArray, test: IntArray) -> tuple[FloatArray, FloatArray]:
        """Training and test spectra after a preparation that learnt from the training spectra alone.

        Raises
        ------
        InputError
            Naming the samples left out, when the preparation fails.
        """
        if not self.method.learns:
            values = np.asarray(self.samples.values, dtype=np.float64)
            return values[train], values[test]
        try:
            fitted = self.method.fit(self.samples[train])
            one, other = fitted.apply(self.samples[train]), fitted.apply(self.samples[test])
            require_complete(one)
            require_complete(other)
        except UnmixError as error:
            left = listed(np.array(labels_of(self.samples))[test])
            raise InputError(f"the preparation failed when {left} was left out: {error}") from error
        return np.asarray(one.values, dtype=np.float64), np.asarray(other.values, dtype=np.float64)

    def cross(self, most: int, folds: list[Fold]) -> FloatArray:
        """Predictions of the test samples with 0 (the mean) to ``most`` latent variables.

        Returns
        -------
        ndarray, shape (most + 1, samples, properties)
            NaN where a sample is not tested.
        """
        n, m = self.values.shape
        found = np.full((most + 1, n, m), np.nan)
        for train, test in folds:
            shares = None if self.weights is None else self.weights[train]
            found[0, test] = np.average(self.values[train], axis=0, weights=shares)
        if not self.method.learns:
            x = np.asarray(self.samples.values, dtype=np.float64)
            found[1:] = cross_validate(x, self.values, most, folds, self.weights)
            return found
        for train, test in folds:
            one, other = self.rows(train, test)
            both = np.concatenate([one, other])
            place = (np.arange(train.size), np.arange(train.size, len(both)))
            order = np.concatenate([train, test])
            shares = None if self.weights is None else self.weights[order]
            found[1:, test] = cross_validate(both, self.values[order], most, [place], shares)[:, place[1]]
        return found

    def leave_out(self, components: int, folds: list[Fold]) -> LeftOut:
        """Models of a fixed number of latent variables, each without the test samples of a fold."""
        n, m = self.values.shape
        model_of = np.full(n, -1, dtype=np.int64)
        predicted, t2 = np.full((n, m), np.nan), np.full(n, np.nan)
        residuals: FloatArray | None = None
        coefficients, intercepts = [], []
        for k, (train, test) in enumerate(folds):
            one, other = self.rows(train, test)
            shares = None if self.weights is None else self.weights[train]
            model = LatentModel.from_fit(fit(one, self.values[train], components, shares), train.size)
            guarded = model.guard(other)
            if residuals is None:
                residuals = np.full((n, one.shape[1]), np.nan)
            residuals[test] = model.residuals(other)
            predicted[test], t2[test], model_of[test] = guarded.predicted, guarded.t2, k
            coefficients.append(model.coefficients)
            intercepts.append(model.y_mean - model.x_mean @ model.coefficients)
        left = np.empty((n, 0)) if residuals is None else residuals
        return LeftOut(np.array(coefficients), np.array(intercepts), model_of, predicted, left, t2)


def require_complete(spectra: xr.DataArray) -> None:
    """Raise InputError, naming sample and channel, when a value is missing."""
    values = np.asarray(spectra.values)
    finite = np.isfinite(values)
    if finite.all():
        return
    row, channel = np.argwhere(~finite)[0]
    dim = spectral_dim(spectra)
    held = int((~finite).any(axis=1).sum())
    more = f" ({held} of {len(values)} spectra miss a channel)" if held > 1 else ""
    raise InputError(f"spectrum '{labels_of(spectra)[row]}' has no value at {spectra[dim].values[channel]:g} "
                     f"{SPECTRAL_UNITS[dim]}{more}",
                     accepted="leave the channel out (a Regions step) or the sample")  # fmt: skip
