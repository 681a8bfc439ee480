"""Which few spectra of a library make up a spectrum, on plain arrays; the estimator for pipelines.

The sets are searched by ``kernels.search``; here the baseline is projected out, the noise found and whitened, and the
sets weighed. The labelled function stands in ``identify``.
"""

from functools import cached_property
from typing import Any, NamedTuple, Self

import numpy as np
from sklearn.base import BaseEstimator, TransformerMixin
from sklearn.utils.validation import check_is_fitted, validate_data

from unmix.errors import InputError
from unmix.kernels import BoolArray, FloatArray, IntArray
from unmix.kernels.linalg import polynomial_terms
from unmix.kernels.nnls import nnls
from unmix.kernels.noise import autoregression, block_power, local_noise, whiten
from unmix.kernels.search import Found, Pursuit, penalties, screened, search
from unmix.solve.options import check_baseline

#: spectra that the pursuit keeps of a big library at each step, and size from which it is screened first
_KEPT, _BIG = 60, 400
#: coordinates in which a big library is screened at most, and the share of its energy that they are to hold
_COORDINATES, _ENERGY = 256, 0.9999
#: rounds in which noise and sets are found in turn
_ROUNDS = 3
#: relative error of a spectrum that nobody can exclude, and which must not be enough to exchange two members
_EXCHANGED = 0.01
#: sum of squares, as a share of the whole, below which a residual is rounding
_ROUNDING = 1e-20
#: spectra with less than this share of their energy outside the baseline cannot be told from it
_FLAT = 1e-6


class Sets(NamedTuple):
    """What may make up one spectrum.

    Attributes
    ----------
    members : list of tuple of int
        The likeliest first; an empty tuple is the baseline alone.
    weight : ndarray, shape (sets,)
        Share of the evidence, of all sets that were looked at.
    sure : float
        Share of the evidence of all sets that hold the members of the likeliest.
    noise : float
        Standard deviation of a channel about the likeliest set.
    """

    members: list[tuple[int, ...]]
    weight: FloatArray
    sure: float
    noise: float


class Library:
    """Spectra of a library on the channels of the samples, ready to be searched.

    Parameters
    ----------
    spectra : ndarray, shape (library, channels)
        NaN where one does not reach.
    axis : ndarray, shape (channels,)
    baseline : int or None
    """

    def __init__(self, spectra: FloatArray, axis: FloatArray, baseline: int | None) -> None:
        self.spectra = spectra
        self.free = polynomial_terms(axis, baseline)
        self.reaches: BoolArray = np.asarray(np.isfinite(spectra).all(axis=1))

    def near_twins(self, member: int, allowed: BoolArray) -> list[int]:
        """Members that an error of a hundredth in a spectrum of the library would exchange for this one."""
        x = self._reduced[0]
        length = np.einsum("ij,ij->i", x, x)
        cosine = (x @ x[member]) / np.sqrt(np.maximum(length * length[member], np.finfo(np.float32).tiny))
        near = (1.0 - cosine**2 < _EXCHANGED**2) & (cosine > 0) & allowed & self.reaches
        return [int(i) for i in np.flatnonzero(near) if i != member]

    @cached_property
    def _reduced(self) -> tuple[FloatArray, FloatArray]:
        """The library in few coordinates that hold nearly all of its energy, and these as (channels, coordinates)."""
        x = _coordinates(np.nan_to_num(self.spectra), np.zeros(self.spectra.shape[1]), self.free, np.float32)[0]
        if x.shape[0] <= _BIG:
            return x, np.eye(x.shape[1], dtype=np.float32)
        size, axes = np.linalg.eigh(x.T @ x)
        share = np.cumsum(size[::-1]) / max(float(size.sum()), np.finfo(float).tiny)
        count = min(int(np.searchsorted(share, _ENERGY)) + 1, _COORDINATES)
        kept: FloatArray = axes[:, ::-1][:, :count].astype(np.float32)
        return x @ kept, kept

    def search(
        self, y: FloatArray, *, most: int, allowed: BoolArray, required: tuple[int, ...] = (), number: int = 10
    ) -> Sets:
        """Find the sets of members that explain a spectrum.

        Parameters
        ----------
        y : ndarray, shape (channels,)
            NaN marks a missing channel.
        most : int
            Members of a set.
        allowed : ndarray of bool, shape (library,)
        required : tuple of int
            Members that are certainly there.
        number : int
            Sets to return at most.

        Returns
        -------
        Sets
        """
        used = np.isfinite(y)
        basis = self.free[used]
        may = (allowed & self.reaches) | np.isin(np.arange(len(allowed)), required)
        places: IntArray = np.flatnonzero(may)
        if places.size > _BIG:
            if used.all():
                x, axes = self._reduced
                data: FloatArray = _coordinates(np.empty((0, y.size)), y, self.free, np.float64)[1] @ axes
            else:
                x, data, _ = _coordinates(self.spectra[:, used], y[used], basis, np.float32)
            places = screened(x, data, may, most, _KEPT, required)
        rows = self.spectra[places][:, used].astype(np.float64)
        must = tuple(int(i) for i in np.searchsorted(places, sorted(required)))
        found, noise = self._rounds(rows, y[used], basis, most, must, int(allowed.sum()))
        weight = np.exp(-0.5 * (found.criterion - found.criterion[0]))
        weight /= weight.sum()
        top = set(found.members[0])
        sure = float(sum(w for w, one in zip(weight, found.members, strict=True) if top <= set(one)))
        named = [tuple(int(places[i]) for i in one) for one in found.members[:number]]
        return Sets(named, weight[:number], sure, noise)

    def _rounds(
        self, rows: FloatArray, y: FloatArray, basis: FloatArray, most: int, must: tuple[int, ...], choices: int
    ) -> tuple[Found, float]:
        """Search, find the noise about the best set, and search in its metric; in white noise first."""
        p = y.size
        every = np.ones(p, dtype=bool)
        white, data = rows, y
        free, length = basis, 1.0
        sigma2 = local_noise(y[None]) ** 2
        penalty = penalties(most, max(choices, 1), p)
        found = Found([()], np.zeros(1), np.zeros(1))
        for turn in range(_ROUNDS):
            x, z, _ = _coordinates(white, data, free, np.float64)
            found = search(Pursuit(x, z, np.ones(len(x), dtype=bool)), penalty, sigma2, required=must)
            best = found.members[0]
            freedom = max(p / length - len(best) - basis.shape[1], 1.0)
            rest = _residual(rows[list(best)], y, basis)
            # what is left of numbers that fit to the last digit is rounding, not noise
            if turn == _ROUNDS - 1 or rest @ rest <= _ROUNDING * float(y @ y):
                break
            about = float(found.squares[0]) / freedom
            power = block_power(rest[None], every)
            model = None if power is None else autoregression(power, np.array([p]))
            if model is not None and model.order[0] > 0:
                white, data, free = (whiten(np.atleast_2d(one)[None], model, every)[0] for one in (rows, y, basis.T))
                data, free = data[0], free.T
                about = float(np.sum(_residual(white[list(best)], data, free) ** 2)) / freedom
            # a residual that holds an unlisted compound counts as noise, or it would be built from what is at hand
            sigma2 = max(about, np.finfo(float).tiny)
        return found, float(np.sqrt(np.mean(_residual(rows[list(found.members[0])], y, basis) ** 2)))


def _coordinates(rows: FloatArray, y: FloatArray, basis: FloatArray, kind: Any) -> tuple[FloatArray, FloatArray,
FloatArray]:
    """Library rows of unit length and the data, what the baseline can imitate taken out; lengths of the rows."""
    x, z = rows.astype(kind), y.astype(np.float64)
    whole = np.sqrt(np.einsum("ij,ij->i", x, x))
    if basis.shape[1]:
        q = np.linalg.qr(basis)[0]
        z = z - q @ (q.T @ z)
        flat = q.astype(kind)
        x = x - (x @ flat) @ flat.T
    length = np.sqrt(np.einsum("ij,ij->i", x, x))
    alive = length > _FLAT * np.where(whole > 0, whole, 1.0)
    x = np.where(alive[:, None], x / np.where(alive, length, 1.0)[:, None], 0.0).astype(kind)
    return x, z, length


def _residual(members: FloatArray, y: FloatArray, basis: FloatArray) -> FloatArray:
    a = np.vstack([basis.T, members]).T
    left: FloatArray = y - a @ np.linalg.lstsq(a, y, rcond=1e-12)[0] if a.shape[1] else y
    return left


class LibrarySearch(TransformerMixin, BaseEstimator):
    """Amounts of the few members of a library that make up each spectrum, zero for all others.

    Parameters
    ----------
    max_components : int
        Members of a mixture at most.
    baseline : int or None
        Order of the polynomial fitted beside them; None for none.

    Attributes
    ----------
    library_ : ndarray, shape (members, channels)
    n_features_in_ : int
        Number of channels.

    Notes
    -----
    ``fit(X)`` takes the rows of X as the library. For candidates, intervals and verdicts use ``unmix.identify``.

    References
    ----------
    Bruckstein, Elad and Zibulevsky, IEEE Trans. Inf. Theory 54 (2008) 4813.

    Examples
    --------
    >>> rows = np.exp(-(((np.arange(60) - np.array([[15], [25], [40]])) / 4) ** 2))
    >>> LibrarySearch(baseline=None).fit(rows).transform([2.0 * rows[0] + rows[2]]).round(3)
    array([[2., 0., 1.]])
    """

    def __init__(self, *, max_components: int = 6, baseline: int | None = 1) -> None:
        self.max_components = max_components
        self.baseline = baseline

    def fit(self, X: Any, y: Any = None) -> Self:
        """Take the rows of X as the library.

        Parameters
        ----------
        X : array_like, shape (members, channels)
        y : ignored

        Returns
        -------
        LibrarySearch

        Raises
        ------
        InputError
            When an option is out of range.
        """
        del y
        check_baseline(self.baseline)
        check_most(self.max_components)
        self.library_: FloatArray = validate_data(self, X, dtype=np.float64)
        self._library = Library(self.library_, np.arange(float(self.n_features_in_)), self.baseline)
        self._n_features_out = self.library_.shape[0]
        return self

    def transform(self, X: Any) -> FloatArray:
        """Amounts of the members.

        Parameters
        ----------
        X : array_like, shape (spectra, channels)

        Returns
        -------
        ndarray, shape (spectra, members)
        """
        check_is_fitted(self)
        spectra = validate_data(self, X, dtype=np.float64, reset=False)
        found = np.zeros((spectra.shape[0], self.library_.shape[0]))
        free = self._library.free
        q = np.linalg.qr(free)[0] if free.shape[1] else np.empty((free.shape[0], 0))
        for i, row in enumerate(spectra):
            sets = self._library.search(row, most=self.max_components, allowed=self._library.reaches, number=1)
            best = list(sets.members[0])
            if best:
                a = self.library_[best].T
                found[i, best] = nnls(a - q @ (q.T @ a), (row - q @ (q.T @ row))[None])[0]
        return found


def check_most(value: Any) -> None:
    """Raise InputError unless it is a whole number from 1 to 20."""
    if isinstance(value, bool) or not isinstance(value, (int, np.integer)) or not 1 <= value <= 20:
        raise InputError(f"max_components is {value!r}", accepted="give a whole number from 1 to 20")
