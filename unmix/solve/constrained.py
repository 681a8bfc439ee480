"""A fit made to obey what is known about the amounts, and tests whether the data bear it.

Legend: with T the whitened design in the coordinates of an orthonormal basis and z the data there, the fit is the x
that brings T x nearest to z. Exact equalities leave x = x0 + N v; equalities with an uncertainty u join as rows
weighed by sigma / u; bounds are kept in the metric of the fit. sigma^2 K K' is the covariance of x,
K = [K_data, K_given].
"""

from typing import NamedTuple

import numpy as np
from scipy.linalg import null_space

from unmix.diagnose.constraints import Check, limit_of
from unmix.diagnose.residual import FilterPair
from unmix.kernels import BoolArray, FloatArray, IntArray
from unmix.kernels.bounded import between
from unmix.kernels.gls import Design, GlsFit
from unmix.solve.constraints import Constraints, Rule

#: singular values below this share of the largest leave a direction undetermined
_RANK = 1e-9
#: part of a term in an undetermined direction above which the term is undetermined
_LOST = 1e-6


class Constrained(NamedTuple):
    """A chunk of spectra whose fit obeys the constraints.

    Attributes
    ----------
    solved : GlsFit
        With terms, solution and factor of the constrained fit; residual, noise and basis are those of the free one.
    given : ndarray, shape (spectra, components)
        Standard uncertainty of the amounts from that of the constraints.
    response : ndarray, shape (spectra, components, components)
        Change of each amount (first) for a unit more of each component (last) in the spectrum.
    checks : list of list of Check
        For each spectrum one test a constraint.
    """

    solved: GlsFit
    given: FloatArray
    response: FloatArray
    checks: list[list[Check]]


class _Estimate(NamedTuple):
    x: FloatArray
    data: FloatArray
    given: FloatArray
    lost: BoolArray


def constrain(
    solved: GlsFit,
    design: Design,
    columns: FloatArray,
    constraints: Constraints,
    rows: IntArray,
    sigma: FloatArray,
    freedom: FloatArray,
    *,
    nonnegative: bool,
) -> Constrained:
    """Let a fit obey constraints.

    Parameters
    ----------
    solved : GlsFit
        Of a chunk, without bounds.
    design : Design
        It was made with.
    columns : ndarray, shape (channels, terms)
        The design, not weighed.
    constraints : Constraints
    rows : ndarray of int, shape (spectra,)
        Which spectra of the constraints' scale they are.
    sigma : ndarray, shape (spectra,)
        Standard deviation of the whitened noise; NaN where it is not known, and constraints with an uncertainty then
        play no part.
    freedom : ndarray, shape (spectra, 1)
        Degrees of freedom of it.
    nonnegative : bool

    Returns
    -------
    Constrained
    """
    n, m = solved.terms.shape
    k = len(constraints.components)
    terms, solution = np.empty((n, m)), np.empty((n, m))
    factor = np.empty((n, m, m))
    given, response = np.zeros((n, k)), np.empty((n, k, k))
    checks: list[list[Check]] = []
    for i, scale in enumerate(constraints.scales(rows)):
        basis = solved.basis[min(i, solved.basis.shape[0] - 1)]
        whitened = FilterPair(solved.filter[i : i + 1], design.weight).forward(columns.T[None])[0]
        triangle = basis @ whitened.T
        problem = _Problem(triangle, triangle @ solved.terms[i], k, float(sigma[i]), float(scale))
        found = problem.solve(constraints.exact, constraints.loose)
        whole = np.hstack([found.data, found.given])
        low = np.full(k, 0.0 if nonnegative else -np.inf)
        high = scale * constraints.upper
        moved = between(found.x[-k:], whole[-k:], low, high)[1]
        terms[i], solution[i] = found.x, found.x + whole @ moved
        solution[i, -k:] = np.clip(solution[i, -k:], low, high)
        factor[i] = np.where(found.lost[:, None], np.inf, found.data)
        given[i] = problem.sigma * np.linalg.norm(found.given[-k:], axis=1)
        response[i] = found.data[-k:] @ triangle[:, -k:]
        limit = limit_of(constraints.count, float(freedom[i, 0]))
        checks.append([check.scaled(1.0 / scale) for check in _checks(problem, found, constraints, limit)])
    return Constrained(solved._replace(terms=terms, solution=solution, factor=factor), given, response, checks)


class _Problem:
    """One spectrum in the coordinates of its basis."""

    def __init__(self, triangle: FloatArray, z: FloatArray, k: int, sigma: float, scale: float) -> None:
        length = np.linalg.norm(triangle, axis=0)
        self.length = np.where(length > 0, length, 1.0)
        self.triangle = triangle / self.length
        self.z = z
        self.k = k
        self.sigma = sigma if np.isfinite(sigma) else 0.0
        self.scale = scale

    def rows(self, rules: list[Rule]) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Rows on the scaled terms, values and uncertainties of equalities."""
        m = self.length.size
        found = np.zeros((len(rules), m))
        found[:, m - self.k :] = np.array([rule.row for rule in rules]).reshape(-1, self.k) / self.length[m - self.k :]
        values, sizes = (np.array([getattr(rule, name) for rule in rules]) for name in ("value", "uncertainty"))
        return found, self.scale * values, self.scale * sizes

    def solve(self, exact: list[Rule], loose: list[Rule]) -> _Estimate:
        """Terms that obey equalities, and what of their covariance comes from the data and from what was given."""
        m = self.length.size
        start, free = np.zeros(m), np.eye(m)
        if exact:
            rows, values, _ = self.rows(exact)
            start, free = np.linalg.pinv(rows) @ values, null_space(rows)
        g, h = self.triangle, self.z - self.triangle @ start
        if loose:
            rows, values, sizes = self.rows(loose)
            weigh = (self.sigma / sizes)[:, None]
            g, h = np.vstack([g, weigh * rows]), np.concatenate([h, weigh[:, 0] * (values - rows @ start)])
        u, size, v = np.linalg.svd(g @ free, full_matrices=True)
        rank = int(np.sum(size > _RANK * size.max(initial=0.0)))
        map_ = free @ (v[:rank].T / size[:rank]) @ u[:, :rank].T
        lost = np.linalg.norm(free @ v[rank:].T, axis=1) > _LOST
        x = (start + map_ @ h) / self.length
        map_ = map_ / self.length[:, None]
        return _Estimate(x, map_[:, : self.z.size], map_[:, self.z.size :], lost)


def _checks(problem: _Problem, found: _Estimate, constraints: Constraints, limit: float) -> list[Check]:
    """Each equality against the answer without it, and each upper bound against the answer without bounds."""
    checks = []
    k, sigma, scale = problem.k, problem.sigma, problem.scale
    for kind in ("exact", "loose"):
        for rule in getattr(constraints, kind):
            without = {name: [one for one in getattr(constraints, name) if one is not rule]
                       for name in ("exact", "loose")}  # fmt: skip
            other = problem.solve(**without)
            whole = np.hstack([other.data, other.given])
            silent = bool((other.lost[-k:] & (rule.row != 0)).any())
            size = np.inf if silent else sigma * np.linalg.norm(rule.row @ whole[-k:])
            miss = rule.row @ other.x[-k:] - scale * rule.value
            checks.append(Check(rule.thing, scale * rule.value, float(miss),
                                float(np.hypot(size, scale * rule.uncertainty)), limit))  # fmt: skip
    whole = np.hstack([found.data, found.given])[-k:]
    for j in np.flatnonzero(np.isfinite(constraints.upper)):
        bound = scale * constraints.upper[j]
        size = np.inf if found.lost[-k:][j] else sigma * np.linalg.norm(whole[j])
        checks.append(Check(f"the largest amount of {constraints.components[j]}", float(bound),
                            float(max(found.x[-k:][j] - bound, 0.0)), float(size), limit, upper=True))  # fmt: skip
    return checks
