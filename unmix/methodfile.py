"""The text of a method file: TOML in and out, and which line a key stands on.

What the entries mean is known to ``method``.
"""

import json
import re
import tomllib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from unmix.errors import InputError, ReadError

#: a place in the file: table name, its number from 0 where there are several, and the key
Place = tuple[str, int, str]

_HEADER = re.compile(r"\s*(\[\[?)\s*([A-Za-z0-9_.\- \t]+?)\s*\]\]?\s*(#.*)?")
_KEY = re.compile(r"""\s*(?:"([^"]*)"|'([^']*)'|([A-Za-z0-9_\-]+))\s*(?:\.[^=]*)?=""")


@dataclass(frozen=True)
class MethodText:
    """A parsed file with the line of every key, counted from 1."""

    entries: dict[str, Any]
    where: str = ""
    lines: dict[Place, int] = field(default_factory=dict)

    def error(self, message: str, table: str, number: int = 0, key: str = "", *, accepted: str = "") -> ReadError:
        """An error that names the file and the line of the key, or of its table."""
        line = self.lines.get((table, number, key)) or self.lines.get((table, number, "")) or 0
        return ReadError(message, path=self.where, line=line, accepted=accepted)


def parse(text: str, where: str = "") -> MethodText:
    """Read TOML and note where each key stands.

    Raises
    ------
    ReadError
        With the line, when the text is not TOML.
    """
    try:
        entries = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        found = re.search(r"\(at line (\d+), column \d+\)", str(error))
        what = re.sub(r"\s*\(at .*\)", "", str(error))
        raise ReadError(f"is not TOML ({what[:1].lower()}{what[1:]})", path=where,
                        line=int(found.group(1)) if found else text.count("\n") + 1,
                        accepted="write key = value, texts in quotes") from None  # fmt: skip
    return MethodText(entries, where, _lines(text))


def _lines(text: str) -> dict[Place, int]:
    places: dict[Place, int] = {}
    table, number, counts = "", 0, dict[str, int]()
    for line, content in enumerate(text.splitlines(), start=1):
        if header := _HEADER.fullmatch(content):
            table = header.group(2)
            if header.group(1) == "[[":
                counts[table] = counts.get(table, -1) + 1
            number = counts.get(table, counts.get(table.split(".")[0], 0))
            places.setdefault((table, number, ""), line)
            # [step.vapour] is the key vapour of the step above it
            parent, _, key = table.partition(".")
            places.setdefault((parent, number, key), line)
        elif key_found := _KEY.match(content):
            places.setdefault((table, number, next(filter(None, key_found.groups()), "")), line)
    return places


def table_text(entries: Mapping[str, Any], header: str) -> list[str]:
    """Lines of TOML for one table; entries that are tables themselves follow as sub-tables.

    Raises
    ------
    InputError
        For a value that TOML cannot hold.
    """
    lines = [header] if header else []
    lines += [f"{key} = {value_text(value, key)}" for key, value in entries.items() if not isinstance(value, Mapping)]
    for key, value in entries.items():
        if isinstance(value, Mapping):
            lines += ["", *table_text(value, f"[{header.strip('[]')}.{key}]")]
    return lines


def value_text(value: Any, key: str) -> str:
    """One value as TOML: text, whole number, number, truth value, or a list of these.

    Examples
    --------
    >>> value_text([1, 2.5, "a"], "x")
    '[1, 2.5, "a"]'
    """
    if isinstance(value, np.generic | np.ndarray):
        value = value.tolist()
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int):
        return str(value)
    if isinstance(value, float):
        return repr(value)
    if isinstance(value, str):
        return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
    if isinstance(value, Sequence):
        return "[" + ", ".join(value_text(item, key) for item in value) + "]"
    raise InputError(f"{key} is a {type(value).__name__}, which a method file cannot hold",
                     accepted="give numbers, texts or lists")  # fmt: skip
