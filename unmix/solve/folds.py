"""How samples are parted into training and test sets: at random, one by one, by groups, in blocks along time."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, TypeAlias

import numpy as np

from unmix.errors import InputError, suggestion
from unmix.kernels import IntArray

#: a training and a test set, as index arrays
Fold: TypeAlias = tuple[IntArray, IntArray]

#: ways of validation, and what they are for
WAYS = {
    "k-fold": "parts at random",
    "repeated": "parts at random, several times",
    "leave-one-out": "every sample, or every group, by itself",
    "blocks": "parts that follow each other in the order given, for a process along time",
}


@dataclass(frozen=True)
class Plan:
    """Folds of a validation.

    Attributes
    ----------
    way : str
        One of :data:`WAYS`, or ``given``.
    rounds : list of list of (train, test)
        In each round a sample is tested at most once.
    units : ndarray of int, shape (samples,), or None
        Samples with equal numbers were kept together.
    words : str
        The plan in words, for a report.
    """

    way: str
    rounds: list[list[Fold]]
    units: IntArray | None
    words: str


def make_plan(
    n: int, way: Any = "k-fold", *, folds: int = 10, repeats: int = 5, groups: IntArray | None = None, seed: int = 0
) -> Plan:
    """Part n samples for cross-validation.

    Parameters
    ----------
    n : int
    way : str or sequence of (train, test)
        One of :data:`WAYS`, or the folds themselves.
    folds, repeats : int
        Parts, and how often the samples are parted anew where that is asked for.
    groups : ndarray of int, shape (samples,), optional
        Samples with equal numbers stay together.
    seed : int

    Returns
    -------
    Plan

    Raises
    ------
    InputError
        For a way that is not known, too few samples or groups, or folds that are not index arrays.

    Examples
    --------
    >>> [test.tolist() for _, test in make_plan(6, "blocks", folds=3).rounds[0]]
    [[0, 1], [2, 3], [4, 5]]
    """
    if not isinstance(way, str):
        return Plan("given", [_given(way, n)], groups, "folds that were given")
    if way not in WAYS:
        raise InputError(f"validation is '{way}'{suggestion(way, list(WAYS))}",
                         accepted=f"give one of {', '.join(WAYS)}, or a list of (train, test)")  # fmt: skip
    for name, value in (("folds", folds), ("repeats", repeats)):
        least = 2 if name == "folds" else 1
        if isinstance(value, bool) or not isinstance(value, (int, np.integer)) or value < least:
            raise InputError(f"{name} is {value!r}", accepted=f"give a whole number from {least}")
    if way == "blocks" and groups is not None:
        raise InputError("validation in blocks keeps the order of the samples and takes no groups",
                         accepted="give groups, or validation='blocks'")  # fmt: skip
    units = np.arange(n) if groups is None else np.unique(groups, return_inverse=True)[1].ravel()
    count = int(units.max()) + 1 if n else 0
    what = "samples" if groups is None else "groups"
    if count < 2:
        raise InputError(f"{count} {what} cannot be parted for validation", accepted=f"give two {what} or more")
    parts = count if way == "leave-one-out" else min(int(folds), count)
    rng = np.random.default_rng(seed)
    rounds = []
    for _ in range(int(repeats) if way == "repeated" else 1):
        order: IntArray = rng.permutation(count) if way in ("k-fold", "repeated") else np.arange(count)
        if groups is not None and way != "leave-one-out":
            order = _balanced(order, units, parts)
            place = np.arange(count) % parts
        else:
            place = np.arange(count) * parts // count
        part_of = np.empty(count, dtype=int)
        part_of[order] = place
        of_sample = part_of[units]
        rounds.append([_split(of_sample == k) for k in range(parts)])
    return Plan(way, rounds, None if groups is None else units, _words(way, parts, len(rounds), groups is not None))


def inner_way(plan: Plan) -> str:
    """The way in which the training samples of an outer loop are parted again."""
    return "blocks" if plan.way == "blocks" else "k-fold"


def _balanced(order: IntArray, units: IntArray, parts: int) -> IntArray:
    """Groups dealt out by size, the largest first in alternating direction, so that parts are alike in size."""
    size = np.bincount(units)
    by_size = order[np.argsort(-size[order], kind="stable")]
    for k in range(parts, by_size.size, 2 * parts):
        by_size[k : k + parts] = by_size[k : k + parts][::-1]
    return by_size


def _split(tested: Any) -> Fold:
    return np.flatnonzero(~tested), np.flatnonzero(tested)


def _words(way: str, parts: int, rounds: int, grouped: bool) -> str:
    if way == "leave-one-out":
        return "each group left out by itself" if grouped else "each sample left out by itself"
    if way == "blocks":
        return f"{parts} blocks in the order of the samples"
    together = ", groups kept together" if grouped else ""
    times = f", parted {rounds} times" if rounds > 1 else ""
    return f"{parts} parts at random{together}{times}"


def _given(folds: Sequence[Any], n: int) -> list[Fold]:
    found: list[Fold] = []
    tested = np.zeros(n, dtype=int)
    for k, fold in enumerate(folds, start=1):
        try:
            train, test = (np.asarray(part) for part in fold)
        except (TypeError, ValueError):
            raise InputError(f"validation: fold {k} is not a pair", accepted="give (train, test) indices") from None
        for name, part in (("training", train), ("test", test)):
            if part.ndim != 1 or part.size == 0 or part.dtype.kind not in "iu":
                raise InputError(f"validation: the {name} set of fold {k} is not a list of indices",
                                 accepted="give whole numbers, at least one")  # fmt: skip
            if part.min() < 0 or part.max() >= n:
                raise InputError(f"validation: the {name} set of fold {k} reaches from {part.min()} to {part.max()}",
                                 accepted=f"give indices from 0 to {n - 1}")  # fmt: skip
        if np.intersect1d(train, test).size:
            raise InputError(f"validation: fold {k} tests samples that it was trained on",
                             accepted="give sets that share no sample")  # fmt: skip
        tested[test] += 1
        found.append((train, test))
    if not found:
        raise InputError("validation holds no fold", accepted="give a list of (train, test) indices")
    if (tested > 1).any():
        raise InputError(f"validation: sample {int(tested.argmax()) + 1} is tested {tested.max()} times",
                         accepted="test each sample once at most")  # fmt: skip
    return found
