"""The estimator for pipelines and cross-validation: amounts from known or learnt pure spectra on plain arrays."""

from typing import Any, Self

import numpy as np
from sklearn.base import BaseEstimator, MultiOutputMixin, RegressorMixin
from sklearn.utils.validation import check_is_fitted, validate_data

from unmix.errors import InputError
from unmix.kernels import FloatArray
from unmix.solve.answer import Answer
from unmix.solve.model import KnownModel
from unmix.solve.options import check_baseline, check_level, check_noise
from unmix.solve.passes import noise_model as models


class KnownSpectra(MultiOutputMixin, RegressorMixin, BaseEstimator):
    """Amounts of known components by non-negative least squares with baseline terms in the fit.

    Parameters
    ----------
    baseline : int or None
        Order of the polynomial fitted beside the components (0 offset, 1 line, ...); None for no baseline.
    nonnegative : bool
        Whether amounts are bounded at zero.
    level : float
        Coverage of the intervals.
    noise : float or array_like of shape (channels,), optional
        Known standard deviation of a channel; estimated from the residual, with its correlation, when None.
    noise_model : {'constant', 'detector', 'source'}, optional
        How the noise depends on the light: constant in absorbance (the default), constant in transmittance, or as the
        root of the transmittance; ``noise`` then is that of a clear channel.
    axis : array_like of shape (channels,), optional
        Positions of the channels, for the baseline; evenly spaced when None.

    Attributes
    ----------
    pure_ : ndarray, shape (components, channels)
        Pure spectra per unit amount.
    n_features_in_ : int
        Number of channels.

    Notes
    -----
    ``fit(X)`` takes the rows of X as the pure spectra of unit amounts; ``fit(X, y)`` learns the pure spectra from
    spectra X of known amounts y by classical least squares.

    References
    ----------
    Lawson and Hanson, Solving Least Squares Problems (1974). Haaland and Easterling, Appl. Spectrosc. 34 (1980)
    539, for baseline terms inside a classical least squares fit.

    Examples
    --------
    >>> pure = [[1.0, 0.5, 0.1, 0.0], [0.0, 0.2, 1.0, 0.3]]
    >>> KnownSpectra(baseline=None).fit(pure).predict([[2.0, 1.4, 2.2, 0.6]]).round(6)
    array([[2., 2.]])
    """

    def __init__(
        self,
        *,
        baseline: int | None = 1,
        nonnegative: bool = True,
        level: float = 0.95,
        noise: Any = None,
        noise_model: str | None = None,
        axis: Any = None,
    ) -> None:
        self.baseline = baseline
        self.nonnegative = nonnegative
        self.level = level
        self.noise = noise
        self.noise_model = noise_model
        self.axis = axis

    def __sklearn_tags__(self) -> Any:
        tags = super().__sklearn_tags__()
        tags.target_tags.required = False
        # amounts bounded at zero cannot follow the signed targets of the general checks
        tags.regressor_tags.poor_score = True
        return tags

    def fit(self, X: Any, y: Any = None) -> Self:
        """Take or learn the pure spectra.

        Parameters
        ----------
        X : array_like, shape (spectra, channels)
            Pure spectra when ``y`` is None, otherwise spectra of known amounts.
        y : array_like, shape (spectra,) or (spectra, components), optional
            Amounts.

        Returns
        -------
        KnownSpectra

        Raises
        ------
        InputError
            When an option is out of range, the axis does not fit the spectra, or the amounts do not determine
            the pure spectra.
        """
        self._check()
        if y is None:
            spectra = validate_data(self, X, dtype=np.float64)
            pure = spectra
            self._flat = False
        else:
            spectra, amounts = validate_data(self, X, y, dtype=np.float64, multi_output=True, y_numeric=True)
            self._flat = amounts.ndim == 1
            amounts = amounts.reshape(spectra.shape[0], -1).astype(np.float64)
            pure, _, rank, _ = np.linalg.lstsq(amounts, spectra, rcond=None)
            if rank < amounts.shape[1]:
                raise InputError(
                    f"{amounts.shape[0]} spectra whose amounts have rank {rank} do not determine "
                    f"{amounts.shape[1]} pure spectra",
                    accepted="give standards in which every component varies on its own",
                )
        channels = spectra.shape[1]
        positions = np.arange(channels, dtype=float) if self.axis is None else np.asarray(self.axis, dtype=float)
        if positions.shape != (channels,):
            raise InputError(f"axis has shape {positions.shape} but the spectra have {channels} channels")
        self.pure_: FloatArray = pure
        self._model = KnownModel(pure, positions, baseline=self.baseline, nonnegative=self.nonnegative,
                                 level=self.level, noise=self.noise,
                                 noise_model=self.noise_model or "constant")  # fmt: skip
        return self

    def predict(self, X: Any) -> FloatArray:
        """Amounts of the components; NaN where a spectrum has fewer usable channels than there are unknowns.

        Parameters
        ----------
        X : array_like, shape (spectra, channels)

        Returns
        -------
        ndarray, shape (spectra, components), or (spectra,) when the amounts given to ``fit`` were flat
        """
        check_is_fitted(self)
        spectra = validate_data(self, X, dtype=np.float64, reset=False)
        amounts = self.analyse(spectra).concentration
        return amounts[:, 0] if self._flat else amounts

    def analyse(self, X: Any) -> Answer:
        """Amounts with intervals, limits, fit and misfit, as plain arrays.

        Parameters
        ----------
        X : array_like, shape (spectra, channels)
            NaN marks a missing channel.

        Returns
        -------
        Answer
        """
        check_is_fitted(self)
        spectra = np.asarray(X, dtype=np.float64)
        return self._model.analyse(spectra, np.isfinite(spectra))

    def _check(self) -> None:
        check_baseline(self.baseline)
        check_level(self.level)
        check_noise(self.noise)
        models(self.noise_model, measured_as_transmittance=False)
