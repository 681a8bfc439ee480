"""What ``assemble`` asks of a way to solve, and the one with known pure spectra."""

from typing import Any, Protocol

import numpy as np

from unmix.diagnose.saturation import saturated
from unmix.kernels import BoolArray, FloatArray
from unmix.kernels.linalg import polynomial_terms
from unmix.kernels.noise import noise_of_scans
from unmix.solve.analysis import Progress
from unmix.solve.answer import Answer, Settings
from unmix.solve.axis import AxisFitter, AxisQuestion
from unmix.solve.constraints import Constraints
from unmix.solve.passes import Light, solve
from unmix.solve.uncertainty import Inputs


class Solver(Protocol):
    """A way to solve spectra for amounts per unit path.

    Attributes
    ----------
    pure : ndarray, shape (components, channels)
        Pure spectra per unit amount and path; NaN marks a channel that cannot be used.
    free : ndarray, shape (channels, terms)
        Baseline terms in the fit.
    nonnegative : bool
    noise : ndarray or None
        Known standard deviation of a channel.
    """

    pure: FloatArray
    free: FloatArray
    nonnegative: bool
    noise: FloatArray | None

    def analyse(
        self,
        y: FloatArray,
        used: BoolArray,
        *,
        inputs: Inputs | None = None,
        resolution: float = 1e-12,
        detect_saturation: bool = False,
        progress: Progress | None = None,
    ) -> Answer:
        """Solve spectra (rows of y) on the used channels."""
        ...


class KnownModel:
    """Known pure spectra, baseline terms and what is known about the noise.

    Parameters
    ----------
    pure : ndarray, shape (components, channels)
    axis : ndarray, shape (channels,)
        Positions, for the baseline.
    baseline : int or None
    nonnegative : bool
    level : float
    noise : array_like or None
        Standard deviation of a channel, one or one a channel.
    noise_model : str
        One of :data:`unmix.solve.passes.NOISE_MODELS`.
    scans : ndarray, shape (scans, channels), optional
        Repeated scans of one sample, from which level and correlation of the noise are taken.
    relative_noise : ndarray, shape (channels,), optional
        How the noise of one channel compares with that of others, where its level is not known.
    constraints : Constraints, optional
        What is known about the amounts.
    axis_fit : AxisQuestion, optional
        Which axis errors between spectra and pure spectra are fitted.
    """

    def __init__(
        self,
        pure: FloatArray,
        axis: FloatArray,
        *,
        baseline: int | None,
        nonnegative: bool,
        level: float,
        noise: Any,
        noise_model: str,
        scans: FloatArray | None = None,
        relative_noise: FloatArray | None = None,
        constraints: Constraints | None = None,
        axis_fit: AxisQuestion | None = None,
    ) -> None:
        self.pure = pure
        self.free = polynomial_terms(np.asarray(axis, dtype=float), baseline)
        self.nonnegative = nonnegative
        self.level = level
        self.noise: FloatArray | None = None if noise is None else np.asarray(noise, dtype=float)
        self.noise_model = noise_model
        self.relative_noise = relative_noise
        self.constraints = constraints
        self.fitter = None if axis_fit is None else AxisFitter(pure.T, np.asarray(axis, dtype=float), axis_fit)
        self.scans = None if scans is None else noise_of_scans(scans, self.free)
        if self.scans is not None:
            self.noise = np.asarray(self.scans.channel)

    def analyse(
        self,
        y: FloatArray,
        used: BoolArray,
        *,
        inputs: Inputs | None = None,
        resolution: float = 1e-12,
        detect_saturation: bool = False,
        progress: Progress | None = None,
    ) -> Answer:
        """Solve spectra.

        Parameters
        ----------
        y : ndarray, shape (spectra, channels)
        used : ndarray of bool, shape (spectra, channels)
            Channels that count.
        inputs : Inputs, optional
            Uncertainties of pure spectra, path and dilution.
        resolution : float
            Rounding of the numbers relative to the largest of a spectrum, below which nothing is a misfit.
        detect_saturation : bool
            Whether the spectra are absorbance, in which flat tops show saturation.
        progress : callable, optional
            Called with the number of spectra finished.

        Returns
        -------
        Answer
        """
        counts = used & np.isfinite(y) & np.isfinite(self.pure).all(axis=0)
        bent, plateau = np.zeros(y.shape, dtype=bool), np.full(y.shape[0], np.nan)
        if detect_saturation:
            bent, plateau = saturated(np.where(counts, y, np.nan))
        settings = Settings(self.level, self.nonnegative, known_noise=self.noise is not None, scans=self.scans,
                            resolution=resolution, constraints=self.constraints, inputs=inputs,
                            axis=self.fitter)  # fmt: skip
        noise: FloatArray | float = 1.0 if self.relative_noise is None else self.relative_noise
        if self.noise is not None:
            noise = self.noise
        if self.scans is not None:
            noise = self.scans.innovation
        return solve(y, counts, noise, self.pure.T, self.free, settings,
                     Light(self.noise_model, detect_saturation, bent, plateau), progress)  # fmt: skip
