"""The loops of a calibration: choose the number of latent variables, then judge the choice in a loop of its own."""

from dataclasses import dataclass

import numpy as np

from unmix.diagnose.calibration import one_standard_error
from unmix.errors import InputError
from unmix.kernels import FloatArray, IntArray
from unmix.kernels.pls import permuted_errors
from unmix.solve.folds import Fold, Plan, inner_way, make_plan
from unmix.solve.problem import Problem, Progress

#: with more samples than this, intervals come from the folds of the validation instead of single samples left out
SINGLY = 60


@dataclass(frozen=True)
class Choice:
    """Cross-validation with every number of latent variables.

    Attributes
    ----------
    predicted : ndarray, shape (rounds, most + 1, samples, properties)
        With 0, 1, 2, ... latent variables; NaN where a sample was not tested.
    components : int
        The number chosen or given, at least 1.
    nothing_better : bool
        Whether the rule would take none at all.
    suggested : int
        What the rule asks for.
    standard_error : ndarray, shape (most + 1,)
        Of the mean squared error, in variances of the reference values.
    """

    predicted: FloatArray
    components: int
    nothing_better: bool
    suggested: int
    standard_error: FloatArray


def choose(problem: Problem, most: int, plan: Plan, components: int | None) -> Choice:
    """Cross-validate, and take the smallest number within one standard error of the best unless one is given."""
    predicted = np.array([problem.cross(most, folds) for folds in plan.rounds])
    squares = np.mean(scaled_squares(predicted, problem.values), axis=0)
    suggested, spread = one_standard_error(squares, plan.units)
    return Choice(predicted, components or max(suggested, 1), suggested == 0, suggested, spread)


def scaled_squares(predicted: FloatArray, values: FloatArray) -> FloatArray:
    """Squared errors over the variance of each property, summed over properties: (..., samples)."""
    found: FloatArray = np.sum((predicted - values) ** 2 / values.var(axis=0), axis=-1)
    return found


def most_components(n_channels: int, folds: list[list[Fold]], wanted: int) -> int:
    """The largest number of latent variables that every training set can hold."""
    smallest = min(train.size for round_ in folds for train, _ in round_)
    return max(min(wanted, smallest - 1, n_channels), 1)


def nested(
    problem: Problem, most: int, plan: Plan, components: int | None, *, folds: int, seed: int, tick: Progress | None
) -> tuple[FloatArray, IntArray]:
    """Predict every sample by a model whose number of latent variables was chosen without it.

    Parameters
    ----------
    problem : Problem
    most : int
    plan : Plan
        Its first round is the outer loop; of samples left out one by one, parts are taken instead.
    components : int or None
        A number that was given is not chosen again.
    folds : int
        Parts of the inner loop.
    seed : int
    tick : callable, optional
        Called with the outer folds done and all of them.

    Returns
    -------
    predicted : ndarray, shape (samples, properties)
    chosen : ndarray of int, shape (outer folds,)

    References
    ----------
    Varma and Simon, BMC Bioinformatics 7 (2006) 91.
    """
    n = problem.values.shape[0]
    outer = plan.rounds[0]
    if len(outer) > folds and plan.way == "leave-one-out":
        outer = make_plan(n, "k-fold", folds=folds, groups=plan.units, seed=seed).rounds[0]
    predicted = np.full(problem.values.shape, np.nan)
    chosen = []
    for done, (train, test) in enumerate(outer):
        if components is None:
            part = problem.subset(train)
            units = None if plan.units is None else plan.units[train]
            if units is not None and np.unique(units).size < 2:
                raise InputError("one group holds all samples of a training set of the outer loop",
                                 accepted="give three groups or more, or n_components")  # fmt: skip
            inner = make_plan(train.size, inner_way(plan), folds=folds, groups=units, seed=seed)
            best = choose(part, most_components(most, inner.rounds, most), inner, None).components
        else:
            best = components
        predicted[test] = problem.cross(best, [(train, test)])[-1, test]
        chosen.append(best)
        if tick is not None:
            tick(done + 1, len(outer))
    return predicted, np.array(chosen)


def permutation_test(
    rows: FloatArray, values: FloatArray, most: int, plan: Plan, permutations: int, seed: int, tick: Progress | None
) -> float:
    """How often spectra predict shuffled reference values as well as the true ones.

    Parameters
    ----------
    rows : ndarray, shape (samples, channels)
        Prepared spectra.
    values : ndarray, shape (samples, properties)
    most : int
        The error compared is the smallest of cross-validation with 1 to ``most`` latent variables.
    plan : Plan
    permutations : int
    seed : int
    tick : callable, optional

    Returns
    -------
    float
        p = (1 + shuffles at least as good) / (1 + shuffles); NaN when none was asked for, or when groups of unequal
        size leave nothing that could be exchanged.

    Notes
    -----
    Samples in blocks along time are shifted around a circle, groups are exchanged as wholes: neighbours that are alike
    stay neighbours, otherwise the test would take that likeness for a relation.

    References
    ----------
    Ojala and Garriga, J. Mach. Learn. Res. 11 (2010) 1833.
    """
    orders = _orders(values.shape[0], plan, permutations, seed)
    if not len(orders):
        return np.nan
    y = (values - values.mean(axis=0)) / values.std(axis=0)
    folds = plan.rounds[0]
    true = permuted_errors(rows, y, most, folds, np.arange(y.shape[0])[None]).min()
    good = 0
    for start in range(0, len(orders), 20):
        errors = permuted_errors(rows, y, most, folds, orders[start : start + 20]).min(axis=1)
        good += int(np.sum(errors <= true * (1 + 1e-12)))
        if tick is not None:
            tick(min(start + 20, len(orders)), len(orders))
    return (1 + good) / (1 + len(orders))


def _orders(n: int, plan: Plan, permutations: int, seed: int) -> IntArray:
    # a stream of its own: the folds were made from the same seed
    rng = np.random.default_rng([seed, 1])
    if plan.way == "blocks":
        shifts = rng.permutation(np.arange(1, n))[:permutations]
        return np.array([np.roll(np.arange(n), shift) for shift in shifts], dtype=int)
    if plan.units is None:
        return np.array([rng.permutation(n) for _ in range(permutations)], dtype=int)
    members = [np.flatnonzero(plan.units == unit) for unit in np.unique(plan.units)]
    if len({rows.size for rows in members}) > 1 or len(members) < 4:
        return np.empty((0, n), dtype=int)
    orders = np.empty((permutations, n), dtype=int)
    for k in range(permutations):
        for rows, other in zip(members, rng.permutation(len(members)), strict=True):
            orders[k, rows] = members[other]
    return orders


def interval_folds(plan: Plan, n: int) -> list[Fold]:
    """The folds that intervals come from: single samples, or the first round where samples belong together."""
    every = np.arange(n)
    if plan.units is None and plan.way != "blocks" and n <= SINGLY:
        return [(np.delete(every, i), every[i : i + 1]) for i in range(n)]
    return plan.rounds[0]
