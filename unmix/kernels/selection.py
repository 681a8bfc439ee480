"""Choosing samples that span a set: Kennard and Stone, duplex, and with reference values in the distance."""

import numpy as np

from unmix.kernels import FloatArray, IntArray


def distances(x: FloatArray) -> FloatArray:
    """Euclidean distances between rows, shape (rows, rows)."""
    square = np.sum(x**2, axis=1)
    found: FloatArray = np.sqrt(np.maximum(square[:, None] + square - 2.0 * x @ x.T, 0.0))
    np.fill_diagonal(found, 0.0)
    return found


def kennard_stone(distance: FloatArray, count: int, chosen: IntArray | None = None) -> IntArray:
    """Take the two rows farthest apart, then always the row farthest from those taken.

    Parameters
    ----------
    distance : ndarray, shape (rows, rows)
    count : int
        How many to take, from 2.
    chosen : ndarray of int, optional
        Rows taken already; they are the first of the answer.

    Returns
    -------
    ndarray of int, shape (count,)
        In the order in which they were taken.

    References
    ----------
    Kennard and Stone, Technometrics 11 (1969) 137.
    """
    taken = list(np.unravel_index(int(distance.argmax()), distance.shape)) if chosen is None else list(chosen)
    nearest = distance[:, taken].min(axis=1)
    while len(taken) < count:
        nearest[taken] = -1.0
        best = int(nearest.argmax())
        taken.append(best)
        nearest = np.minimum(nearest, distance[:, best])
    return np.array(taken[:count], dtype=np.intp)


def duplex(distance: FloatArray, count: int) -> tuple[IntArray, IntArray]:
    """Two sets that span the rows alike, taken in turn: ``count`` rows for the second, as many or more for the first.

    Parameters
    ----------
    distance : ndarray, shape (rows, rows)
    count : int
        Rows of the second set, 2 to half of all.

    Returns
    -------
    first, second : ndarray of int
        In the order in which they were taken; the first holds all rows that the second does not.

    References
    ----------
    Snee, Technometrics 19 (1977) 415.
    """
    left = np.ones(distance.shape[0], dtype=np.bool_)
    sets: list[list[int]] = [[], []]

    def take(place: int, rows: list[int]) -> None:
        sets[place] += rows
        left[rows] = False

    for place in (0, 1):
        index = np.flatnonzero(left)
        part = distance[np.ix_(index, index)]
        pair = np.unravel_index(int(part.argmax()), part.shape)
        take(place, [int(index[pair[0]]), int(index[pair[1]])])
    while len(sets[1]) < count:
        for place in (0, 1):
            index = np.flatnonzero(left)
            if index.size and (place == 0 or len(sets[1]) < count):
                near = distance[index][:, sets[place]].min(axis=1)
                take(place, [int(index[near.argmax()])])
    rest = np.flatnonzero(left)
    return np.array(sets[0] + rest.tolist(), dtype=np.intp), np.array(sets[1], dtype=np.intp)
