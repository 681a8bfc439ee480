"""The estimator for pipelines and cross-validation: partial least squares on plain arrays.

Labelled spectra, intervals and guards are the business of ``calibration`` and ``prediction``.
"""

from typing import Any, Self

import numpy as np
from sklearn.base import BaseEstimator, MultiOutputMixin, RegressorMixin, TransformerMixin
from sklearn.utils.validation import check_is_fitted, validate_data

from unmix.diagnose.calibration import one_standard_error
from unmix.errors import InputError
from unmix.kernels import FloatArray
from unmix.kernels.pls import cross_validate, fit
from unmix.solve.folds import make_plan
from unmix.solve.validation import most_components, scaled_squares


class PLSCalibration(TransformerMixin, MultiOutputMixin, RegressorMixin, BaseEstimator):
    """Partial least squares regression of one or several properties, centred and not scaled.

    Parameters
    ----------
    n_components : int or None
        Latent variables; None takes the smallest number within one standard error of the best of cross-validation.
        More than the data hold are no error: ``n_components_`` says how many were found.
    max_components : int
        Largest number tried when it is chosen.
    folds : int
        Parts of the cross-validation that chooses.
    seed : int
        Of the random parts.

    Attributes
    ----------
    n_components_ : int
        Latent variables used.
    errors_ : ndarray, shape (numbers,)
        Mean squared error of cross-validation with 0, 1, 2, ... latent variables, in variances of the properties; empty
        when the number was given.
    coef_ : ndarray, shape (properties, channels)
        Shape (channels,) when ``y`` was flat.
    intercept_ : ndarray, shape (properties,), or float
    x_mean_ : ndarray, shape (channels,)
    x_rotations_, x_loadings_ : ndarray, shape (channels, n_components_)
    y_loadings_ : ndarray, shape (properties, n_components_)
    n_features_in_ : int

    References
    ----------
    Dayal and MacGregor, J. Chemometrics 11 (1997) 73.

    Examples
    --------
    >>> spectra = np.array([[0.1, 0.3, 0.2], [0.2, 0.5, 0.4], [0.3, 0.9, 0.5], [0.4, 1.1, 0.9]])
    >>> PLSCalibration(n_components=2).fit(spectra, spectra[:, 0] * 10).predict(spectra[:1]).round(2)
    array([1.09])
    """

    def __init__(
        self, n_components: int | None = None, *, max_components: int = 15, folds: int = 10, seed: int = 0
    ) -> None:
        self.n_components = n_components
        self.max_components = max_components
        self.folds = folds
        self.seed = seed

    def fit(self, X: Any, y: Any) -> Self:
        """Fit, choosing the number of latent variables first unless it is given.

        Parameters
        ----------
        X : array_like, shape (samples, channels)
        y : array_like, shape (samples,) or (samples, properties)

        Returns
        -------
        PLSCalibration

        Raises
        ------
        InputError
            When a parameter is out of range.
        """
        self._check()
        spectra, values = validate_data(self, X, y, dtype=np.float64, multi_output=True, y_numeric=True,
                                        ensure_min_samples=2)  # fmt: skip
        self._flat = values.ndim == 1
        reference = np.asarray(values, dtype=np.float64).reshape(len(spectra), -1)
        components = self.n_components
        self.errors_: FloatArray = np.empty(0)
        if components is None:
            components = self._choose(spectra, reference)
        model = fit(spectra, reference, int(components))
        k = max(model.rank, 1)
        self.n_components_ = k
        self.x_mean_ = model.x_mean
        self.x_rotations_, self.x_loadings_ = model.rotations[:, :k], model.loadings[:, :k]
        self.y_loadings_ = model.y_loadings[:, :k]
        slopes = self.y_loadings_ @ self.x_rotations_.T
        starts = model.y_mean - slopes @ model.x_mean
        self.coef_: FloatArray = slopes[0] if self._flat else slopes
        self.intercept_: Any = float(starts[0]) if self._flat else starts
        return self

    def predict(self, X: Any) -> FloatArray:
        """Values of the properties.

        Parameters
        ----------
        X : array_like, shape (samples, channels)

        Returns
        -------
        ndarray, shape (samples, properties), or (samples,) when ``y`` was flat
        """
        check_is_fitted(self)
        spectra = validate_data(self, X, dtype=np.float64, reset=False)
        found: FloatArray = spectra @ self.coef_.T + self.intercept_
        return found

    def transform(self, X: Any) -> FloatArray:
        """Scores on the latent variables, shape (samples, n_components_)."""
        check_is_fitted(self)
        spectra = validate_data(self, X, dtype=np.float64, reset=False)
        scores: FloatArray = (spectra - self.x_mean_) @ self.x_rotations_
        return scores

    def _choose(self, spectra: FloatArray, reference: FloatArray) -> int:
        plan = make_plan(len(spectra), "k-fold", folds=self.folds, seed=self.seed)
        most = most_components(spectra.shape[1], plan.rounds, self.max_components)
        varying = reference[:, reference.std(axis=0) > 0]
        if not varying.shape[1]:
            return 1
        predicted = np.empty((most + 1, *varying.shape))
        for train, test in plan.rounds[0]:
            predicted[0, test] = varying[train].mean(axis=0)
        predicted[1:] = cross_validate(spectra, varying, most, plan.rounds[0])
        squares = scaled_squares(predicted, varying)
        self.errors_ = squares.mean(axis=1)
        return max(one_standard_error(squares)[0], 1)

    def _check(self) -> None:
        for name, least in (("n_components", 1), ("max_components", 1), ("folds", 2)):
            value = getattr(self, name)
            whole = isinstance(value, (int, np.integer)) and not isinstance(value, bool)
            if not (whole and value >= least) and not (name == "n_components" and value is None):
                raise InputError(f"{name} is {value!r}", accepted=f"give a whole number from {least}")
