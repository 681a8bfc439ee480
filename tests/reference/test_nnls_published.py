"""Non-negative least squares problems with published or independently computed answers.

Recomputed with the R package nnls 1.4 and scipy 1.17, which agree; every answer is also held to the conditions of
Karush, Kuhn and Tucker: the gradient A'(y - A x) is zero where x is positive and not positive where x is zero.
"""

from typing import NamedTuple

import numpy as np
import pytest

from unmix.kernels.nnls import nnls


class Problem(NamedTuple):
    a: tuple
    y: tuple
    x: tuple
    squares: float
    gradient: tuple | None = None


TI_V = np.array([(0.895, 0.884, 0.694, 0.481, 0.173), (0.326, 0.497, 0.528, 0.512, 0.374)])
MIXTURE = (0.651, 0.743, 0.665, 0.547, 0.314)

PROBLEMS = {
    # reference page of MATLAB's lsqnonneg (found), printed (0, 0.6929) and norm 0.9118
    "one of two active": Problem(
        ((0.0372, 0.2869), (0.6861, 0.7071), (0.6233, 0.6245), (0.6344, 0.6170)), (0.8587, 0.1781, 0.0747, 0.8405),
        (0.0, 0.6929343971), 0.8314559513, (-0.1506118191, 0.0)),
    # Bro and de Jong, J. Chemometrics 11 (1997) 393 (paper found, example second-hand), printed 0.6495, 0, 0
    "two of three active": Problem(
        ((73, 71, 52), (87, 74, 46), (72, 2, 7), (80, 89, 71)), (49, 67, 68, 20), (0.6495384364, 0.0, 0.0),
        1585.039784, (0.0, -1913.5334, -1555.8464)),
    # Harvey, Analytical Chemistry 2.1, problem 25(a), with an invented third spectrum; computed
    "third component absent": Problem(
        tuple(map(tuple, np.vstack([TI_V, (0.20, 0.35, 0.45, 0.42, 0.10)]).T)), MIXTURE,
        (0.5079156484, 0.5944416963, 0.0), 2.808121305e-5, (0.0, 0.0, -9.0506018e-4)),
    "third component there": Problem(
        tuple(map(tuple, np.vstack([TI_V, (0.10, 0.20, 0.40, 0.70, 0.90)]).T)), MIXTURE,
        (0.52141035500, 0.56147080390, 0.01453209306), 3.410885172e-6, (0.0, 0.0, 0.0)),
    # by hand
    "means": Problem(((1, 0), (1, 0), (0, 1)), (2, 1, 1), (1.5, 1.0), 0.5, (0.0, 0.0)),
    "all active": Problem(((1, 0), (1, 0), (0, 1)), (-1, -1, -1), (0.0, 0.0), 3.0, (-2.0, -1.0)),
}  # fmt: skip


@pytest.mark.parametrize("name", PROBLEMS)
def test_published_answer(name):
    problem = PROBLEMS[name]
    a, y = np.array(problem.a, dtype=float), np.array(problem.y, dtype=float)
    x = nnls(a, y[None])[0]
    assert x == pytest.approx(problem.x, rel=1e-9, abs=1e-12)
    assert np.sum((y - a @ x) ** 2) == pytest.approx(problem.squares, rel=1e-9)
    gradient = a.T @ (y - a @ x)
    assert gradient == pytest.approx(problem.gradient, rel=1e-7, abs=1e-9 * np.abs(a.T @ y).max())


def test_unconstrained_answers_differ_so_that_the_bound_is_what_is_tested():
    a, y = np.array(PROBLEMS["one of two active"].a), np.array(PROBLEMS["one of two active"].y)
    assert np.linalg.lstsq(a, y, rcond=None)[0] == pytest.approx([-2.562746542, 3.110776613])
    a, y = (np.array(part, dtype=float) for part in PROBLEMS["two of three active"][:2])
    assert np.linalg.lstsq(a, y, rcond=None)[0] == pytest.approx([1.12315196, 0.91698856, -2.06782544])


def test_all_of_a_size_in_one_batch():
    a = np.array(PROBLEMS["means"].a, dtype=float)
    y = np.array([PROBLEMS["means"].y, PROBLEMS["all active"].y], dtype=float)
    assert nnls(a, y) == pytest.approx(np.array([PROBLEMS["means"].x, PROBLEMS["all active"].x]))
