"""Do the data bear what was given about the amounts? One test a constraint, and the sentence when it fails."""

from collections.abc import Callable
from typing import NamedTuple

import numpy as np

from unmix.diagnose.limits import quantile

#: chance that a spectrum whose constraints are all true is flagged for one of them
FALSE_ALARM = 0.0027


class Check(NamedTuple):
    """What the data say about one constraint, in units of amount.

    Attributes
    ----------
    thing : str
        What was given, in words.
    value : float
        What it was given as.
    miss : float
        What the data would add to it.
    uncertainty : float
        Standard uncertainty of the miss, that of the value given included.
    limit : float
        Of miss over uncertainty.
    upper : bool
        Whether it is an upper bound, which only a positive miss breaks.
    """

    thing: str
    value: float
    miss: float
    uncertainty: float
    limit: float
    upper: bool = False

    @property
    def score(self) -> float:
        """Miss over its standard uncertainty; 0 where the data say nothing."""
        if self.miss == 0 or not np.isfinite(self.uncertainty):
            return 0.0
        return self.miss / self.uncertainty if self.uncertainty > 0 else float(np.copysign(np.inf, self.miss))

    @property
    def fails(self) -> bool:
        """Whether the miss is beyond what uncertainty explains."""
        return abs(self.score) > self.limit

    def scaled(self, factor: float) -> "Check":
        """The same in another unit of amount."""
        return self._replace(value=self.value * factor, miss=self.miss * factor, uncertainty=self.uncertainty * factor)


def limit_of(count: int, freedom: float) -> float:
    """Limit of a score when so many constraints are tested, by the inequality of Bonferroni.

    Parameters
    ----------
    count : int
    freedom : float
        Degrees of freedom of the noise.
    """
    return float(quantile(1.0 - FALSE_ALARM / 2.0 / max(count, 1), np.array(freedom)))


def broken(checks: list[Check], amount: Callable[[float], str]) -> list[tuple[Check, str]]:
    """The constraints that the data contradict, with a sentence for each.

    Parameters
    ----------
    checks : list of Check
    amount : callable
        Writes an amount with its unit.
    """
    said = []
    for check in checks:
        if check.fails:
            asks = "the spectrum asks for" if check.upper else "by the spectrum it is"
            said.append((check, f"{check.thing[:1].upper()}{check.thing[1:]} was given as {amount(check.value)}, but "
                                f"{asks} {amount(check.value + check.miss)} with a standard uncertainty of "
                                f"{amount(check.uncertainty)} (z = {check.score:.1f}): that constraint, a pure "
                                "spectrum or the list is wrong."))  # fmt: skip
    return said
