"""Which few of many spectra make up a mixture: non-negative matching pursuit with a beam, and exchange of members.

Legend: X (spectra x d) the library in any coordinates that keep inner products (channels, whitened channels, or a
reduced basis), its rows of unit length, baseline terms projected out; y (d,) the sample likewise. A set S of members is
valid when the least squares amounts of all its members are positive; any non-negative optimum over the library is
such a set. A set is judged by sum of squares / sigma^2 + penalty(size).

References
----------
Pati, Rezaiifar and Krishnaprasad, Proc. 27th Asilomar Conf. (1993) 40, for orthogonal matching pursuit. Bruckstein,
Elad and Zibulevsky, IEEE Trans. Inf. Theory 54 (2008) 4813, for its non-negative form. Chen and Chen, Biometrika 95
(2008) 759, for the penalty where members are chosen out of many.
"""

from typing import NamedTuple

import numpy as np
from scipy.special import gammaln

from unmix.kernels import BoolArray, FloatArray, IntArray

#: sets of each size kept alive
BEAM = 8

#: members tried as the next one of each set
TRIED = 12

#: sets of each size whose members are exchanged, and rounds of exchange
_EXCHANGED, _ROUNDS = 3, 3

#: sizes beyond the best one after which nothing better is expected
_PATIENCE = 2

#: a member is passed over where less than this share of its energy is outside the set (double, single precision)
_SAME, _SAME_SINGLE = 1e-9, 1e-4


class Found(NamedTuple):
    """Sets of members that were looked at, the best first.

    Attributes
    ----------
    members : list of tuple of int
        Indices of each set, increasing; the empty tuple is the baseline alone.
    squares : ndarray, shape (sets,)
        Sum of squares that each leaves.
    criterion : ndarray, shape (sets,)
    """

    members: list[tuple[int, ...]]
    squares: FloatArray
    criterion: FloatArray


def penalties(most: int, library: int, channels: float) -> FloatArray:
    """Extended Bayesian information criterion of sets of 0 to ``most`` members.

    Parameters
    ----------
    most : int
    library : int
        Spectra to choose from.
    channels : float
        Independent channels.

    Returns
    -------
    ndarray, shape (most + 1,)
        k ln(channels) + 2 ln C(library, k): the chance of a good fit grows with the number of choices.
    """
    k = np.arange(most + 1.0)
    choices = gammaln(library + 1.0) - gammaln(k + 1.0) - gammaln(np.maximum(library - k, 0.0) + 1.0)
    found: FloatArray = k * np.log(max(channels, 2.0)) + 2.0 * choices
    return found


class Pursuit:
    """A library and one sample in common coordinates; inner products of members are computed when first asked for.

    Parameters
    ----------
    x : ndarray, shape (spectra, d)
        Rows of unit length; rows of zeros are never chosen.
    y : ndarray, shape (d,)
    allowed : ndarray of bool, shape (spectra,)
        Members that may be chosen.
    """

    def __init__(self, x: FloatArray, y: FloatArray, allowed: BoolArray) -> None:
        self.x = x
        self.allowed = allowed & (np.einsum("ij,ij->i", x, x) > 0.5)
        self.cross: FloatArray = (x @ y.astype(x.dtype)).astype(np.float64)
        self.energy = float(y @ y)
        self._same = _SAME if x.dtype == np.float64 else _SAME_SINGLE
        self._gram = np.empty((32, x.shape[0]), dtype=x.dtype)
        self._at: dict[int, int] = {}

    def gram(self, sets: IntArray) -> FloatArray:
        """Inner products of the members of each set with the whole library, (sets, size, spectra)."""
        new = [int(j) for j in np.unique(sets) if int(j) not in self._at]
        if new:
            start = len(self._at)
            if start + len(new) > self._gram.shape[0]:
                grown = np.empty((2 * (start + len(new)), self.x.shape[0]), dtype=self.x.dtype)
                grown[:start] = self._gram[:start]
                self._gram = grown
            np.matmul(self.x[new], self.x.T, out=self._gram[start : start + len(new)])
            self._at.update({j: start + i for i, j in enumerate(new)})
        place = np.array([self._at[int(j)] for j in sets.ravel()], dtype=int).reshape(sets.shape)
        rows: FloatArray = self._gram[place]
        return rows

    def amounts(self, sets: IntArray) -> tuple[FloatArray, FloatArray]:
        """Least squares amounts of the members of sets of one size, and the sums of squares that they leave.

        Parameters
        ----------
        sets : ndarray of int, shape (sets, size)

        Returns
        -------
        amounts : ndarray, shape (sets, size)
            Free in sign.
        squares : ndarray, shape (sets,)
        """
        if sets.shape[1] == 0:
            return np.zeros(sets.shape), np.full(sets.shape[0], self.energy)
        self.gram(sets)
        inner = self._inner(sets)
        found = np.linalg.solve(inner, self.cross[sets][:, :, None])[:, :, 0]
        return found, np.maximum(self.energy - np.einsum("ij,ij->i", self.cross[sets], found), 0.0)

    def _inner(self, sets: IntArray) -> FloatArray:
        place = np.array([self._at[int(j)] for j in sets.ravel()], dtype=int).reshape(sets.shape)
        inner: FloatArray = self._gram[place[:, :, None], sets[:, None, :]].astype(np.float64)
        size = sets.shape[1]
        # sets hold no two like members, yet rounding must not stop the solution
        inner[:, np.arange(size), np.arange(size)] += self._same
        return inner

    def gains(self, sets: IntArray) -> FloatArray:
        """How far the sum of squares falls when each spectrum of the library joins each set, (sets, spectra).

        Zero for spectra that are not allowed, are in the set, would come in a negative amount, or lie in its span.
        """
        n = sets.shape[0]
        if sets.shape[1] == 0:
            along = np.repeat(self.cross[None], n, axis=0)
            apart = np.ones((n, self.x.shape[0]))
        else:
            rows = self.gram(sets)
            inner = self._inner(sets)
            found = np.linalg.solve(inner, self.cross[sets][:, :, None])[:, :, 0]
            hidden = np.linalg.solve(inner, rows.astype(np.float64))
            along = self.cross - np.einsum("nk,nkm->nm", found, rows)
            apart = 1.0 - np.einsum("nkm,nkm->nm", rows, hidden)
        good = (along > 0) & (apart > self._same) & self.allowed
        # rounding must not let a member join a set that it is in
        np.put_along_axis(good, sets, False, axis=1)
        return np.where(good, along**2 / np.where(good, apart, 1.0), 0.0)


class _Record:
    """Every set that was looked at, by size."""

    def __init__(self, pursuit: Pursuit, required: tuple[int, ...]) -> None:
        self.pursuit = pursuit
        self.required = np.array(required, dtype=int)
        self.squares: dict[tuple[int, ...], float] = {}
        self._refused: set[tuple[int, ...]] = set()

    def look_at(self, sets: IntArray) -> None:
        """Solve sets of one size; a set with a member that is not needed is replaced by the rest of it."""
        while sets.shape[0]:
            sets = np.unique(np.sort(sets, axis=1), axis=0)
            new = [tuple(row) not in self.squares and tuple(row) not in self._refused for row in sets.tolist()]
            sets = sets[new]
            if not sets.shape[0]:
                return
            amounts, squares = self.pursuit.amounts(sets)
            free = ~np.isin(sets, self.required)
            valid = ((amounts > 0) | ~free).all(axis=1)
            for row, left in zip(sets[valid].tolist(), squares[valid], strict=True):
                self.squares[tuple(row)] = float(left)
            sets, amounts, free = sets[~valid], amounts[~valid], free[~valid]
            self._refused |= {tuple(row) for row in sets.tolist()}
            if not sets.shape[0]:
                return
            least = np.where(free, amounts, np.inf).argmin(axis=1)
            keep = np.ones(sets.shape, dtype=bool)
            keep[np.arange(sets.shape[0]), least] = False
            sets = sets[keep].reshape(sets.shape[0], sets.shape[1] - 1)

    def best(self, size: int, number: int) -> IntArray:
        """The best sets of a size, (sets, size)."""
        alike = sorted((left, members) for members, left in self.squares.items() if len(members) == size)[:number]
        return np.array([members for _, members in alike], dtype=int).reshape(len(alike), size)

    def least(self, size: int) -> float:
        """The smallest sum of squares of the sets of a size."""
        return min((left for members, left in self.squares.items() if len(members) == size), default=np.inf)


def search(
    pursuit: Pursuit,
    penalty: FloatArray,
    sigma2: float,
    *,
    required: tuple[int, ...] = (),
    exchange: bool = True,
) -> Found:
    """Sets of members that explain a sample, of all sizes that the penalty knows.

    Parameters
    ----------
    pursuit : Pursuit
    penalty : ndarray, shape (most + 1,)
        For each number of members.
    sigma2 : float
        Variance of a coordinate of the sample about a right model.
    required : tuple of int
        Members of every set, whose amounts may come out as nothing.
    exchange : bool
        Whether members are exchanged for better ones; without, the pursuit alone.

    Returns
    -------
    Found
        Holds the best set with each of its members taken out, exchanged for others, and with one more.
    """
    record = _Record(pursuit, required)
    record.look_at(np.array([required], dtype=int).reshape(1, len(required)))
    most, lowest = len(penalty) - 1, np.inf
    best_size = len(required)
    for size in range(len(required), most + 1):
        if size > len(required):
            _extend(record, record.best(size - 1, BEAM))
            if exchange:
                _exchange(record, size)
        here = record.least(size) / sigma2 + penalty[size]
        if here < lowest:
            lowest, best_size = here, size
        elif size >= best_size + _PATIENCE:
            break
    if exchange:
        top = _ranked(record, penalty, sigma2).members[0]
        _neighbours(record, np.array([top], dtype=int).reshape(1, len(top)), 2 * TRIED)
        if len(top) < most:
            _extend(record, np.array([top], dtype=int).reshape(1, len(top)))
    return _ranked(record, penalty, sigma2)


def _extend(record: _Record, sets: IntArray) -> None:
    """Try the best next members of each set."""
    if not sets.shape[0]:
        return
    gains = record.pursuit.gains(sets)
    record.look_at(_joined(sets, gains, TRIED))


def _joined(sets: IntArray, gains: FloatArray, number: int) -> IntArray:
    """Each set with each of its best next members, (new sets, size + 1)."""
    number = min(number, gains.shape[1])
    top = np.argpartition(-gains, number - 1, axis=1)[:, :number]
    useful = np.take_along_axis(gains, top, axis=1) > 0
    wide = np.repeat(sets[:, None, :], number, axis=1)
    joined: IntArray = np.concatenate([wide, top[:, :, None]], axis=2)[useful]
    return joined


def _exchange(record: _Record, size: int) -> None:
    """Put other members into the best sets of a size until none is better."""
    before = record.least(size)
    for _ in range(_ROUNDS):
        _neighbours(record, record.best(size, _EXCHANGED), TRIED // 2)
        after = record.least(size)
        if not after < before:
            return
        before = after


def _neighbours(record: _Record, sets: IntArray, number: int) -> None:
    """Look at sets with one member taken out, and with another one in its place."""
    size = sets.shape[1]
    if size == 0 or not sets.shape[0]:
        return
    smaller = np.unique(np.concatenate([np.delete(sets, i, axis=1) for i in range(size)]), axis=0)
    needed = record.required
    smaller = smaller[np.isin(smaller, needed).sum(axis=1) == needed.size]
    if not smaller.shape[0]:
        return
    record.look_at(smaller)
    record.look_at(_joined(smaller, record.pursuit.gains(smaller), number))


def _ranked(record: _Record, penalty: FloatArray, sigma2: float) -> Found:
    members = list(record.squares)
    squares = np.array([record.squares[one] for one in members])
    criterion = squares / sigma2 + penalty[[len(one) for one in members]]
    order = sorted(range(len(members)), key=lambda i: (criterion[i], members[i]))
    return Found([members[i] for i in order], squares[order], criterion[order])


def screened(
    x: FloatArray, y: FloatArray, allowed: BoolArray, most: int, number: int, required: tuple[int, ...] = ()
) -> IntArray:
    """Members of a big library that may be in a sample: those that fit best at some step of the pursuit.

    Parameters
    ----------
    x : ndarray, shape (spectra, d)
        As for :class:`Pursuit`, usually single precision in a reduced basis.
    y : ndarray, shape (d,)
    allowed : ndarray of bool, shape (spectra,)
    most : int
        Steps.
    number : int
        Members kept of each set of each step.
    required : tuple of int

    Returns
    -------
    ndarray of int
        Increasing, each once, the required ones among them.
    """
    pursuit = Pursuit(x, y, allowed)
    record = _Record(pursuit, required)
    record.look_at(np.array([required], dtype=int).reshape(1, len(required)))
    kept = [np.array(required, dtype=int)]
    for size in range(len(required), most + 1):
        sets = record.best(size, BEAM)
        if not sets.shape[0]:
            break
        gains = pursuit.gains(sets)
        count = min(number, gains.shape[1])
        top = np.argpartition(-gains, count - 1, axis=1)[:, :count]
        kept.append(top[np.take_along_axis(gains, top, axis=1) > 0])
        record.look_at(_joined(sets, gains, TRIED))
    return np.unique(np.concatenate(kept))
