"""Slow plain twins of the penalised smoother: dense matrices, extended precision, plain elimination.

Nothing here is shared with the kernel. The reweighting rules are written from the papers, spectrum by spectrum.
"""

from math import comb

import numpy as np


def even_penalty(channels, order):
    """D'D of plain differences."""
    signs = np.array([(-1) ** (order - j) * comb(order, j) for j in range(order + 1)], dtype=float)
    d = np.array([np.concatenate([np.zeros(i), signs, np.zeros(channels - order - 1 - i)])
                  for i in range(channels - order)])  # fmt: skip
    return d.T @ d


def uneven_penalty(axis, order):
    """The quadratic form of squared d-th divided differences, each over its own width, in extended precision."""
    t = ((axis - axis[0]) / (axis[-1] - axis[0]) * (axis.size - 1)).astype(np.longdouble)
    rows = np.zeros((axis.size - order, axis.size), dtype=np.longdouble)
    for i in range(axis.size - order):
        part = t[i : i + order + 1]
        for j in range(order + 1):
            rows[i, i + j] = 1 / np.prod([part[j] - part[k] for k in range(order + 1) if k != j])
        rows[i] *= np.prod(np.arange(1, order + 1)) * np.sqrt((part[-1] - part[0]) / order)
    return rows.T @ rows


def smooth(y, w, penalty_matrix, penalty):
    """Solve (W + penalty D'D) z = W y by plain elimination, in extended precision where the machine has it."""
    matrix = np.diag(w) + np.longdouble(penalty) * penalty_matrix
    right = (w * y).astype(np.longdouble)
    size = y.size
    for i in range(size):
        factor = matrix[i + 1 :, i] / matrix[i, i]
        matrix[i + 1 :] -= factor[:, None] * matrix[i]
        right[i + 1 :] -= factor * right[i]
    z = np.zeros(size, dtype=np.longdouble)
    for i in range(size - 1, -1, -1):
        z[i] = (right[i] - matrix[i, i + 1 :] @ z[i + 1 :]) / matrix[i, i]
    return z.astype(float)


def asymmetric(y, penalty_matrix, penalty, p, iterations=100):
    w = np.ones(y.size)
    for _ in range(iterations):
        z = smooth(y, w, penalty_matrix, penalty)
        new = np.array([p if y[i] > z[i] else 1 - p for i in range(y.size)])
        if (new == w).all():
            break
        w = new
    return z


def adaptive(y, penalty_matrix, penalty, tolerance, iterations=100):
    w = np.ones(y.size)
    for t in range(1, iterations + 1):
        z = smooth(y, w, penalty_matrix, penalty)
        negative = [y[i] - z[i] for i in range(y.size) if y[i] < z[i]]
        size = sum(abs(d) for d in negative)
        if size < tolerance * np.abs(y).sum():
            break
        w = np.array([0.0 if y[i] >= z[i] else np.exp(t * abs(y[i] - z[i]) / size) for i in range(y.size)])
    return z


def logistic(y, penalty_matrix, penalty, tolerance, iterations=200):
    w = np.ones(y.size)
    for _ in range(iterations):
        z = smooth(y, w, penalty_matrix, penalty)
        d = y - z
        negative = d[d < 0]
        m, s = np.mean(negative), np.std(negative, ddof=1)
        with np.errstate(over="ignore"):
            new = 1 / (1 + np.exp(2 * (d - (2 * s - m)) / s))
        if np.linalg.norm(w - new) / np.linalg.norm(w) < tolerance:
            break
        w = new
    return z
