"""What is known about the amounts before anything is measured: read, checked against each other, made into rows.

How a fit obeys them stands in ``constrained``.
"""

import itertools
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any, NamedTuple

import numpy as np
from scipy.optimize import linprog

from unmix.errors import InputError, listed, suggestion
from unmix.kernels import BoolArray, FloatArray, IntArray

#: the kinds of constraint
KINDS = ("sum", "fixed", "upper", "ratio")

#: what ``linprog`` says when nothing keeps all constraints
_INFEASIBLE = 2

_SHAPE = 'give for example {"sum": 1.0, "fixed": {"water": 2.0}, "upper": {"toluene": 50.0}, "ratio": {"a:b": 2.0}}'


class Rule(NamedTuple):
    """One equality: ``row`` @ amounts = ``value``, known to ``uncertainty`` (0 where exact).

    ``thing`` is what equals the value, in words.
    """

    thing: str
    row: FloatArray
    value: float
    uncertainty: float


@dataclass(frozen=True)
class Constraints:
    """Checked constraints on the amounts of k components.

    Attributes
    ----------
    components : list of str
    exact, loose : list of Rule
        Equalities without and with an uncertainty.
    upper : ndarray, shape (components,)
        Upper bounds, infinite where there is none.
    scale : ndarray, shape (spectra,)
        What amounts are multiplied by to become those of the fit (path factor); 1 for all when empty.
    """

    components: list[str]
    exact: list[Rule]
    loose: list[Rule]
    upper: FloatArray
    scale: FloatArray = field(default_factory=lambda: np.empty(0))

    @property
    def count(self) -> int:
        """How many tests there are of them."""
        return len(self.exact) + len(self.loose) + int(np.isfinite(self.upper).sum())

    def scales(self, rows: IntArray) -> FloatArray:
        """The scale of some spectra."""
        return self.scale[rows] if self.scale.size else np.ones(rows.size)

    def of(self, row: int) -> "Constraints":
        """The constraints as the only spectrum of a batch has them."""
        return replace(self, scale=self.scale[row : row + 1]) if self.scale.size else self

    def sentences(self, unit: str) -> list[str]:
        """What was taken as given, for the assumptions of a result."""
        behind = f" {unit}" if unit not in ("", "1") else ""
        said = [f"{rule.thing} was given as {rule.value:g}{behind}" for rule in self.exact]
        said += [f"{rule.thing} was given as {rule.value:g}{behind} with a standard uncertainty of "
                 f"{rule.uncertainty:g}{behind}" for rule in self.loose]  # fmt: skip
        said += [f"the amount of {self.components[j]} was given as at most {self.upper[j]:g}{behind}"
                 for j in np.flatnonzero(np.isfinite(self.upper))]  # fmt: skip
        return said


def read_constraints(
    given: Mapping[str, Any] | None, components: Sequence[str], *, nonnegative: bool
) -> Constraints | None:
    """Check constraints and make rows of them.

    Parameters
    ----------
    given : mapping or None
        ``sum``: the sum of all amounts; ``fixed``: component to amount; either may be a pair (value, standard
        uncertainty). ``upper``: component to upper bound. ``ratio``: pair of components (or the text ``"a:b"``) to
        the ratio of the first to the second.
    components : sequence of str
    nonnegative : bool
        Whether amounts are bounded at zero, which counts when constraints are checked against each other.

    Returns
    -------
    Constraints or None
        None where nothing was given.

    Raises
    ------
    InputError
        For a kind, component or value that cannot be used, constraints that contradict each other (two are named),
        or so many that nothing is left to determine.

    Examples
    --------
    >>> read_constraints({"ratio": {("a", "b"): 2.0}}, ["a", "b", "c"], nonnegative=True).exact[0].row
    array([ 1., -2.,  0.])
    """
    if not given:
        return None
    if not isinstance(given, Mapping):
        raise InputError(f"constraints is a {type(given).__name__}", accepted=_SHAPE)
    names = [str(name) for name in components]
    unknown = [str(kind) for kind in given if kind not in KINDS]
    if unknown:
        raise InputError(f"constraints: {listed(unknown)} is not known{suggestion(unknown[0], KINDS)}",
                         accepted=f"give {', '.join(KINDS)}")  # fmt: skip
    rules = [*_sum(given, names), *_fixed(given, names), *_ratio(given, names)]
    exact = [rule for rule in rules if rule.uncertainty == 0]
    loose = [rule for rule in rules if rule.uncertainty > 0]
    upper = np.full(len(names), np.inf)
    for name, value in _entries(given, "upper").items():
        upper[_place(name, names, "upper")] = _number(value, f"upper bound of '{name}'")
    exact = _independent(exact)
    _require_possible(exact, upper, names, nonnegative)
    if len(exact) >= len(names):
        raise InputError(f"{len(exact)} constraints fix all {len(names)} components, so nothing is left to determine",
                         accepted="give fewer, or their uncertainties")  # fmt: skip
    return Constraints(names, exact, loose, upper)


def plain(given: Mapping[str, Any] | None) -> dict[str, Any] | None:
    """Constraints as JSON can hold them: a pair of components becomes the text ``"a:b"``."""
    if not given:
        return None
    return {kind: {key if isinstance(key, str) else ":".join(map(str, key)): value for key, value in entry.items()}
            if isinstance(entry, Mapping) else entry for kind, entry in given.items()}  # fmt: skip


def _entries(given: Mapping[str, Any], kind: str) -> Mapping[Any, Any]:
    entries = given.get(kind) or {}
    if not isinstance(entries, Mapping):
        raise InputError(f"constraints: '{kind}' is {entries!r}", accepted=_SHAPE)
    return entries


def _place(name: object, names: list[str], kind: str) -> int:
    if name not in names:
        raise InputError(f"constraints: '{kind}' names '{name}', which is not a component"
                         f"{suggestion(str(name), names)}", accepted=f"the components are {listed(names)}")  # fmt: skip
    return names.index(str(name))


def _number(value: Any, what: str) -> float:
    plain = isinstance(value, (int, float, np.number)) and not isinstance(value, (bool, np.bool_))
    if not plain or not np.isfinite(value):
        raise InputError(f"constraints: the {what} is {value!r}", accepted="give a finite number")
    return float(value)


def _with_uncertainty(value: Any, what: str) -> tuple[float, float]:
    if isinstance(value, Sequence) and not isinstance(value, str) and len(value) == 2:
        size = _number(value[1], f"standard uncertainty of the {what}")
        if size < 0:
            raise InputError(f"constraints: the standard uncertainty of the {what} is {size:g}",
                             accepted="give one from 0")  # fmt: skip
        return _number(value[0], what), size
    return _number(value, what), 0.0


def _sum(given: Mapping[str, Any], names: list[str]) -> list[Rule]:
    if given.get("sum") is None:
        return []
    return [Rule("the sum of all amounts", np.ones(len(names)), *_with_uncertainty(given["sum"], "sum"))]


def _fixed(given: Mapping[str, Any], names: list[str]) -> list[Rule]:
    found = []
    for name, value in _entries(given, "fixed").items():
        row = np.zeros(len(names))
        row[_place(name, names, "fixed")] = 1.0
        found.append(Rule(f"the amount of {name}", row, *_with_uncertainty(value, f"fixed amount of '{name}'")))
    return found


def _ratio(given: Mapping[str, Any], names: list[str]) -> list[Rule]:
    found = []
    for pair, value in _entries(given, "ratio").items():
        first, second = _pair(pair, names)
        ratio = _number(value, f"ratio of '{first}' to '{second}'")
        if ratio <= 0 or first == second:
            raise InputError(f"constraints: the ratio of '{first}' to '{second}' is {ratio:g}",
                             accepted="give a ratio above zero between two components; for none of one, fix it at 0")
        row = np.zeros(len(names))
        row[names.index(first)], row[names.index(second)] = 1.0, -ratio
        found.append(Rule(f"the amount of {first} less {ratio:g} times that of {second}", row, 0.0, 0.0))
    return found


def _pair(pair: Any, names: list[str]) -> tuple[str, str]:
    """Two names from a pair, or from a text with a colon between them (names may hold colons themselves)."""
    if isinstance(pair, str):
        cuts = [(pair[:i].strip(), pair[i + 1 :].strip()) for i, letter in enumerate(pair) if letter == ":"]
        cuts = [cut for cut in cuts if all(part in names for part in cut)] or cuts[:1]
        pair = cuts[0] if cuts else (pair,)
    if not isinstance(pair, Sequence) or len(pair) != 2:
        raise InputError(f"constraints: a ratio is between {pair!r}", accepted="give two components, such as 'a:b'")
    first, second = (names[_place(name, names, "ratio")] for name in pair)
    return first, second


def _independent(rules: list[Rule]) -> list[Rule]:
    """The equalities without those that follow from others; refuses one that contradicts them."""
    kept: list[Rule] = []
    for rule in rules:
        if not kept:
            kept.append(rule)
            continue
        rows = np.array([one.row for one in kept])
        share = np.linalg.lstsq(rows.T, rule.row, rcond=1e-12)[0]
        if np.linalg.norm(rows.T @ share - rule.row) > 1e-9 * np.linalg.norm(rule.row):
            kept.append(rule)
            continue
        follows = float(share @ np.array([one.value for one in kept]))
        if abs(follows - rule.value) > 1e-9 * max(abs(follows), abs(rule.value)):
            partner = kept[int(np.argmax(np.abs(share)))]
            others = " (with the other constraints)" if np.count_nonzero(np.abs(share) > 1e-9) > 1 else ""
            raise _contradiction(partner.thing, partner.value, rule.thing, rule.value, others)
    return kept


def _contradiction(one: str, value: float, other: str, limit: float, others: str = "") -> InputError:
    return InputError(f"constraints contradict each other: {one} = {value:g} and {other} = {limit:g}{others}",
                      accepted="leave one of them out or give it an uncertainty")  # fmt: skip


def _require_possible(rules: list[Rule], upper: FloatArray, names: list[str], nonnegative: bool) -> None:
    """Refuse equalities and bounds that no amounts can keep together, naming two."""
    if nonnegative and (upper < 0).any():
        j = int(np.argmax(upper < 0))
        raise InputError(f"constraints: the upper bound of '{names[j]}' is {upper[j]:g}, but no amount is below zero",
                         accepted="give a bound above zero, or nonnegative=False")  # fmt: skip
    low = np.full(len(names), 0.0 if nonnegative else -np.inf)
    everything = np.ones(len(names), dtype=bool)
    if _possible(rules, low, upper, everything):
        return
    bounds = np.flatnonzero(np.isfinite(upper))
    for rule in rules:
        if not _possible([rule], low, np.full(len(names), np.inf), everything):
            raise InputError(f"constraints: {rule.thing} is {rule.value:g}, but no amount is below zero",
                             accepted="give a value above zero, or nonnegative=False")  # fmt: skip
    for one, other in itertools.combinations(rules, 2):
        if not _possible([one, other], low, np.full(len(names), np.inf), everything):
            raise _contradiction(one.thing, one.value, other.thing, other.value)
    for rule, j in itertools.product(rules, bounds.tolist()):
        only = np.arange(len(names)) == j
        if not _possible([rule], low, upper, only):
            raise _contradiction(rule.thing, rule.value, f"the largest amount of {names[j]}", float(upper[j]))
    things = [f"{rule.thing} = {rule.value:g}" for rule in rules]
    things += [f"{names[j]} at most {upper[j]:g}" for j in bounds]
    raise InputError(f"constraints contradict each other: {listed(things)} cannot all hold",
                     accepted="leave one of them out or give it an uncertainty")  # fmt: skip


def _possible(rules: list[Rule], low: FloatArray, upper: FloatArray, bounded: BoolArray) -> bool:
    high = np.where(bounded, upper, np.inf)
    if not rules:
        return bool((low <= high).all())
    ends = list(zip(low.tolist(), high.tolist(), strict=True))
    found = linprog([0.0] * low.size, A_eq=[rule.row.tolist() for rule in rules],
                    b_eq=[rule.value for rule in rules], bounds=ends, method="highs")  # fmt: skip
    return int(found.status) != _INFEASIBLE
