"""What a parameter of a step may be: declared once beside the class, used for check, message and method files.

A rule is a test and the words for it. What the values do belongs to the steps.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from numbers import Integral, Real
from typing import Any

import numpy as np

from unmix.errors import InputError


@dataclass(frozen=True)
class Rule:
    """A test of one value, and what would pass it in words that follow ``give``."""

    text: str
    passes: Callable[[Any], bool]

    def or_none(self, meaning: str) -> "Rule":
        """The same rule with None allowed too, and what None means."""
        return Rule(f"{self.text}, or None for {meaning}", lambda value: value is None or self.passes(value))


def number(*, above: float | None = None, least: float | None = None, most: float | None = None) -> Rule:
    """A finite number within bounds."""
    bounds = [f"above {above:g}"] if above is not None else []
    bounds += [f"from {least:g}"] if least is not None else []
    bounds += [f"to {most:g}"] if most is not None else []

    def passes(value: Any) -> bool:
        return (
            isinstance(value, Real)
            and not isinstance(value, bool)
            and bool(np.isfinite(float(value)))
            and (above is None or float(value) > above)
            and (least is None or float(value) >= least)
            and (most is None or float(value) <= most)
        )

    return Rule(" ".join(["a number", *bounds]), passes)


def whole(*, least: int, most: int | None = None, odd: bool = False) -> Rule:
    """A whole number within bounds, odd if so wanted."""
    upper = f" to {most}" if most is not None else ""

    def passes(value: Any) -> bool:
        return (
            isinstance(value, Integral)
            and not isinstance(value, bool)
            and int(value) >= least
            and (most is None or int(value) <= most)
            and (not odd or int(value) % 2 == 1)
        )

    return Rule(f"an odd whole number from {least}{upper}" if odd else f"a whole number from {least}{upper}", passes)


def choice(*options: str) -> Rule:
    """One of a few words."""
    return Rule("one of " + ", ".join(f"'{option}'" for option in options), lambda value: value in options)


def flag() -> Rule:
    """True or False."""
    return Rule("True or False", lambda value: isinstance(value, bool | np.bool_))


def regions() -> Rule:
    """A list of (low, high); what they hold is checked against the axis."""
    return Rule(
        "a list of (low, high), for example [(1650, 1800)]",
        lambda value: isinstance(value, Sequence | np.ndarray) and not isinstance(value, str),
    )


def region() -> Rule:
    """One (low, high)."""

    def passes(value: Any) -> bool:
        return (
            isinstance(value, Sequence | np.ndarray)
            and not isinstance(value, str)
            and len(value) == 2
            and all(isinstance(bound, Real) and np.isfinite(float(bound)) for bound in value)
            and float(value[0]) <= float(value[1])
        )

    return Rule("a pair (low, high), for example (1650, 1800)", passes)


def spectrum() -> Rule:
    """A spectrum or several, labelled or as plain numbers; the axis is checked when it is known."""

    def passes(value: Any) -> bool:
        kind = getattr(value, "dtype", None)
        if kind is None:
            if not isinstance(value, Sequence) or isinstance(value, str):
                return False
            try:
                kind = np.asarray(value).dtype
            except ValueError:
                return False
        return getattr(kind, "kind", "O") in "fiu"

    return Rule("a spectrum on the axis of the data (labelled, or a list of numbers)", passes)


def check_parameters(owner: str, values: Mapping[str, Any], rules: Mapping[str, Rule]) -> None:
    """Raise for the first value that its rule does not accept.

    Raises
    ------
    InputError
        Naming the step, the parameter, the value and what would be accepted.
    """
    for name, rule in rules.items():
        if not rule.passes(values[name]):
            raise InputError(f"{owner}: {name} is {shown(values[name])}", accepted=f"give {rule.text}")


def shown(value: Any) -> str:
    """A value for a message, cut where it is long."""
    text = repr(value)
    return text if len(text) <= 60 else text[:57] + "..."
