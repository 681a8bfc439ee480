"""The errors of unmix, and how their messages are put together.

A message is one sentence that names the thing, the value, where it stands, and what would be accepted.
The fields of an error say the same to a program.
"""

import difflib
from collections.abc import Iterable, Sequence

#: how many offenders a message names before it counts the rest
NAMED = 5


class UnmixError(Exception):
    """Base of every error that unmix raises on purpose.

    Parameters
    ----------
    message : str
        One sentence for a person.
    where : str, optional
        The file, line, sample or channel concerned.
    accepted : str, optional
        What would have been accepted.
    """

    def __init__(self, message: str, *, where: str = "", accepted: str = "") -> None:
        self.message = message
        self.where = where
        self.accepted = accepted
        text = f"{where}: {message}" if where else message
        super().__init__(f"{text}; {accepted}" if accepted else text)


class ReadError(UnmixError, ValueError):
    """A file could not be read, or could be read only in part.

    ``path`` is the file and ``line`` the line number counted from 1 (0 when no line can be named).
    """

    def __init__(self, message: str, *, path: str = "", line: int = 0, accepted: str = "") -> None:
        self.path = path
        self.line = line
        place = f"{path}, line {line}" if path and line else path or (f"line {line}" if line else "")
        super().__init__(message, where=place, accepted=accepted)


class InputError(UnmixError, ValueError):
    """Spectra, pure spectra, amounts or an option cannot be used as given."""


class UnitError(InputError):
    """A unit or quantity is unknown, missing, or does not fit the other data."""


class AxisError(InputError):
    """An axis is not usable, or two axes have nothing in common."""


class WriteError(UnmixError, OSError):
    """A file could not be written; nothing was left half-written."""


class UnmixWarning(UserWarning):
    """Something was assumed or left out, and the result says so too."""


def listed(names: Iterable[object]) -> str:
    """Names in quotes, the first five and then a count: ``'a', 'b' and 3 more``."""
    every = [f"'{name}'" for name in names]
    if len(every) <= NAMED:
        return ", ".join(every)
    return ", ".join(every[:NAMED]) + f" and {len(every) - NAMED} more"


def suggestion(name: str, choices: Sequence[str]) -> str:
    """``; did you mean 'B-7'?`` when one of the choices is close to the name, else an empty text."""
    near = difflib.get_close_matches(name, choices, n=1)
    return f"; did you mean '{near[0]}'?" if near else ""
