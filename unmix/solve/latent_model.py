"""What predicts: the arrays of a latent-variable model, and what they say of rows of prepared spectra."""

from dataclasses import dataclass

import numpy as np

from unmix.diagnose.outliers import nearest
from unmix.kernels import FloatArray
from unmix.kernels.pls import PLSFit

#: bytes of spectra that are worked on at a time, so that they stay in the cache
_BLOCK = 2_000_000


@dataclass(frozen=True)
class Guarded:
    """Predictions and distances of spectra, NaN in rows with a missing channel.

    Shapes: predicted (samples, properties), scores (samples, k), q, t2 and nearest (samples,), projected (samples,
    columns).
    """

    predicted: FloatArray
    scores: FloatArray
    q: FloatArray
    t2: FloatArray
    nearest: FloatArray
    projected: FloatArray


@dataclass(frozen=True)
class LatentModel:
    """A calibration with a fixed number of latent variables, as plain arrays.

    Shapes: x_mean (channels,), y_mean (properties,), rotations and loadings (channels, k), y_loadings (properties, k),
    score_variance (k,), known_scores (calibration samples, k).
    """

    x_mean: FloatArray
    y_mean: FloatArray
    rotations: FloatArray
    loadings: FloatArray
    y_loadings: FloatArray
    score_variance: FloatArray
    known_scores: FloatArray

    @classmethod
    def from_fit(cls, fit: PLSFit, samples: int) -> "LatentModel":
        """The model of a fit; ``samples`` is the sum of the weights."""
        k = fit.rank
        return cls.from_arrays(fit.x_mean, fit.y_mean, fit.rotations[:, :k], fit.loadings[:, :k], fit.y_loadings[:, :k],
                               fit.score_squares[:k] / max(samples - 1, 1), fit.scores[:, :k])  # fmt: skip

    @classmethod
    def from_arrays(cls, *arrays: FloatArray) -> "LatentModel":
        """The model of arrays in the order of the fields, in a layout of its own.

        A stored model and the one it was stored from then give the same bits.
        """
        return cls(*(np.array(one, dtype=np.float64, order="C") for one in arrays))

    @property
    def coefficients(self) -> FloatArray:
        """Shape (channels, properties): predicted = y_mean + (x - x_mean) @ coefficients."""
        found: FloatArray = self.rotations @ self.y_loadings.T
        return found

    def guard(self, rows: FloatArray, columns: FloatArray | None = None) -> Guarded:
        """Predict rows and say how far they are from the calibration.

        Parameters
        ----------
        rows : ndarray, shape (samples, channels)
            Prepared spectra.
        columns : ndarray, shape (channels, columns), optional
            Further vectors that the centred rows are multiplied with in the same pass over them.

        Returns
        -------
        Guarded
        """
        n, k = rows.shape[0], self.rotations.shape[1]
        both = self.rotations if columns is None else np.concatenate([self.rotations, columns], axis=1)
        onto, q = np.empty((n, both.shape[1])), np.empty(n)
        size = max(1, _BLOCK // (8 * rows.shape[1]))
        # two arrays that stay in the cache, instead of new ones for every block
        centred, modelled = np.empty((2, min(size, n), rows.shape[1]))
        known_part = np.ascontiguousarray(self.loadings.T)
        for start in range(0, n, size):
            part = rows[start : start + size]
            one, other, at = centred[: len(part)], modelled[: len(part)], slice(start, start + len(part))
            np.subtract(part, self.x_mean, out=one)
            np.matmul(one, both, out=onto[at])
            np.matmul(onto[at, :k], known_part, out=other)
            np.subtract(one, other, out=one)
            q[at] = np.einsum("ij,ij->i", one, one)
        scores = np.ascontiguousarray(onto[:, :k])
        scale = np.sqrt(self.score_variance)
        scaled = scores / scale
        t2: FloatArray = np.einsum("ij,ij->i", scaled, scaled)
        known = np.isfinite(t2)
        near = np.full(n, np.nan)
        near[known] = nearest(scaled[known], self.known_scores / scale)
        return Guarded(self.y_mean + scores @ self.y_loadings.T, scores, q, t2, near, onto[:, k:])

    def residuals(self, rows: FloatArray) -> FloatArray:
        """What the latent variables leave of each spectrum, shape (samples, channels)."""
        centred = np.asarray(rows, dtype=np.float64) - self.x_mean
        left: FloatArray = centred - (centred @ self.rotations) @ self.loadings.T
        return left

    def distance_shares(self, rows: FloatArray) -> FloatArray:
        """Contribution of each channel to T2, shape (samples, channels); they add up to T2 and may be negative."""
        centred = np.asarray(rows, dtype=np.float64) - self.x_mean
        shares: FloatArray = centred * ((centred @ self.rotations / self.score_variance) @ self.rotations.T)
        return shares


@dataclass(frozen=True)
class LeftOut:
    """Models that left samples out, and what they say of these samples.

    Attributes
    ----------
    coefficients : ndarray, shape (models, channels, properties)
    intercepts : ndarray, shape (models, properties)
        predicted = intercept + x @ coefficients.
    model_of : ndarray of int, shape (samples,)
    predicted : ndarray, shape (samples, properties)
    residuals : ndarray, shape (samples, channels)
        Of the spectra, each from the model that left it out.
    t2 : ndarray, shape (samples,)
    """

    coefficients: FloatArray
    intercepts: FloatArray
    model_of: np.ndarray[tuple[int, ...], np.dtype[np.int64]]
    predicted: FloatArray
    residuals: FloatArray
    t2: FloatArray
