"""Amounts from known pure spectra: the estimator, and ``quantify`` for labelled spectra.

The numbers come from ``analysis``; this module checks the input, fits and puts labels on the answer.
"""

import json
from collections.abc import Sequence
from typing import Any, Self

import numpy as np
import xarray as xr
from sklearn.base import BaseEstimator, MultiOutputMixin, RegressorMixin
from sklearn.utils.validation import check_is_fitted, validate_data

from unmix.diagnose.saturation import saturated
from unmix.errors import InputError
from unmix.kernels import FloatArray
from unmix.kernels.linalg import polynomial_terms
from unmix.prepare.axis import common_axis, select_regions
from unmix.provenance import provenance
from unmix.solve.analysis import Progress
from unmix.solve.answer import Answer, Settings
from unmix.solve.learnt import quantify_learnt
from unmix.solve.options import check_baseline, check_level, check_noise
from unmix.solve.passes import Light, solve
from unmix.solve.passes import noise_model as models
from unmix.solve.paths import path_of, scale_to_path
from unmix.solve.result import assemble
from unmix.spectra import as_absorbance, as_pure, spectral_dim


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
        self._free = polynomial_terms(positions, self.baseline)
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

    def analyse(
        self,
        X: Any,
        used: Any = None,
        *,
        pure_uncertainty: Any = 0.0,
        detect_saturation: bool = False,
        progress: Progress | None = None,
    ) -> Answer:
        """Amounts with intervals, limits, fit and misfit, as plain arrays.

        Parameters
        ----------
        X : array_like, shape (spectra, channels)
        used : array_like of bool, shape (spectra, channels), optional
            Channels that count; by default the finite ones.
        pure_uncertainty : float or array_like, shape (components,)
            Relative standard uncertainty of the pure spectra.
        detect_saturation : bool
            Whether the spectra are absorbance, in which flat tops show saturation.
        progress : callable, optional
            Called with the number of spectra finished.

        Returns
        -------
        Answer
        """
        check_is_fitted(self)
        spectra = np.asarray(X, dtype=np.float64)
        counts = np.isfinite(spectra) if used is None else np.asarray(used, dtype=bool) & np.isfinite(spectra)
        counts = counts & np.isfinite(self.pure_).all(axis=0)
        noise = 1.0 if self.noise is None else np.asarray(self.noise, dtype=float)
        bent, plateau = np.zeros(spectra.shape, dtype=bool), np.full(spectra.shape[0], np.nan)
        if detect_saturation:
            bent, plateau = saturated(np.where(counts, spectra, np.nan))
        light = Light(models(self.noise_model, measured_as_transmittance=False), bent, plateau)
        settings = Settings(self.level, self.nonnegative, known_noise=self.noise is not None)
        relative = np.broadcast_to(np.asarray(pure_uncertainty, dtype=float), (self.pure_.shape[0],))
        return solve(spectra, counts, noise, self.pure_.T, self._free, relative, settings, light, progress)

    def _check(self) -> None:
        check_baseline(self.baseline)
        check_level(self.level)
        check_noise(self.noise)
        models(self.noise_model, measured_as_transmittance=False)


def quantify(
    spectra: Any,
    pure: Any,
    *,
    nonnegative: bool = True,
    baseline: int | None = 1,
    regions: Sequence[tuple[float, float]] | None = None,
    level: float = 0.95,
    noise: Any = None,
    noise_model: str | None = None,
    path_length: Any = None,
    progress: Progress | None = None,
) -> xr.Dataset:
    """Find how much of each known component is in each sample, how sure, and whether something is missing.

    Parameters
    ----------
    spectra : DataArray, dims (..., spectral)
        Samples as absorbance, transmittance (converted) or absorptivity; NaN marks a missing channel.
    pure : DataArray, dims (component, spectral)
        Pure spectra. ``attrs["per"]`` is the unit amount; absorptivity is per unit amount and path (per cm unless
        ``per`` names another length), absorbance is taken as that of one unit amount at the samples' path. The
        coordinate ``relative_uncertainty`` may say how well each is known. Interpolated to the samples' channels.
        A Dataset from ``learn_pure`` brings its own metric and errors; ``baseline`` and ``noise`` then play no part.
    nonnegative : bool
        Whether amounts are bounded at zero.
    baseline : int or None
        Order of the polynomial in the fit; None for none.
    regions : list of (low, high), optional
        Parts of the axis to use, in its unit.
    level : float
        Coverage of the intervals.
    noise : float or array_like, optional
        Known standard deviation of a channel, in absorbance.
    noise_model : {'constant', 'detector', 'source'}, optional
        How the noise depends on the light: constant in absorbance, constant in transmittance (the default for
        samples that come as transmittance), or as the root of the transmittance.
    path_length : float, str or sequence, optional
        Of the samples: centimetres or a text such as ``"25 um"``, one for all or one each. Takes precedence over
        the coordinate ``path_length``.
    progress : callable, optional
        Called with the number of spectra finished so far.

    Returns
    -------
    Dataset
        ``concentration``, ``standard_uncertainty``, ``lower``, ``upper``, ``detection_limit`` and more over
        (sample, component); ``fitted``, ``residual`` over (sample, spectral); ``verdict`` and ``reason`` over
        sample. Attributes hold assumptions, notes and provenance.

    Raises
    ------
    InputError, AxisError, UnitError
        When the spectra, pure spectra or options cannot be used together.

    References
    ----------
    Bro and de Jong, J. Chemometrics 11 (1997) 393. IUPAC: Currie, Pure Appl. Chem. 67 (1995) 1699, for the limits.

    Examples
    --------
    Chromium(III) and cobalt(II) from two wavelengths (Harvey, Analytical Chemistry 2.0, practice exercise 10.6):

    >>> from unmix.spectra import make_spectra
    >>> pure = make_spectra([[15.2, 0.533], [5.60, 5.07]], [400, 505], dim="wavelength", leading="component",
    ...                     quantity="absorptivity", labels=["Cr", "Co"], attrs={"per": "mol/L"})
    >>> sample = make_spectra([0.336, 0.187], [400, 505], dim="wavelength", quantity="absorbance")
    >>> found = quantify(sample, pure, baseline=None, noise=0.001, path_length=1)
    >>> [f"{value:.2e}" for value in found.concentration.values[0]]
    ['8.86e-03', '3.60e-02']
    """
    if isinstance(pure, xr.Dataset):
        return quantify_learnt(spectra, pure, nonnegative=nonnegative, level=level, regions=regions,
                               path_length=path_length, progress=progress)  # fmt: skip
    samples, assumptions = as_absorbance(spectra, name="spectra")
    known, more = as_absorbance(as_pure(pure), name="pure")
    assumptions += more
    given = samples
    samples, known, notes = common_axis(samples, known)
    if regions is not None:
        samples, known = select_regions(samples, regions), select_regions(known, regions)
    k, p = known.shape
    terms = k + (0 if baseline is None else baseline + 1)
    if p < terms:
        raise InputError(
            f"{p} channels cannot determine {terms} unknowns ({k} components"
            + (")" if baseline is None else f" and {terms - k} baseline terms)"),
            accepted="give more channels, fewer components or a lower baseline order (None for no baseline)",
        )
    paths = path_of(given, known, path_length)
    assumptions += paths.assumptions
    lost_light = samples.attrs.get("measured_as") == "transmittance"
    model = models(noise_model, measured_as_transmittance=lost_light)
    estimator = KnownSpectra(baseline=baseline, nonnegative=nonnegative, level=level, noise=noise,
                             noise_model=model, axis=samples[spectral_dim(samples)].values)  # fmt: skip
    estimator.fit(np.nan_to_num(scale_to_path(known, paths)))
    estimator.pure_ = scale_to_path(known, paths)
    settings = {"nonnegative": nonnegative, "baseline": baseline, "regions": regions, "level": level,
                "noise": noise, "noise_model": model, "path_length": path_length}  # fmt: skip
    result = assemble(samples, known, estimator, paths, progress)
    return result.assign_attrs(
        kind="quantify",
        level=level,
        baseline="none" if baseline is None else int(baseline),
        assumptions=json.dumps(assumptions),
        notes=json.dumps(notes + json.loads(given.attrs.get("notes", "[]"))),
        **provenance("quantify", settings, spectra=given, pure=pure),
    )


__all__ = ["KnownSpectra", "quantify"]
