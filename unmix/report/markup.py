"""HTML put together from elements; every text is escaped here and nowhere else, that in scripts included."""

import html
import json
import re
from collections.abc import Iterable
from typing import Any

#: longest text of a file that a page shows in one place
LONGEST = 100

#: control characters, and those that turn the writing direction of what follows; right-to-left scripts need none
_CONTROL = re.compile(r"[\x00-\x08\x0b\x0c\x0e-\x1f\x7f-\x9f\u202a-\u202e\u2066-\u2069\ufffe\uffff]")
_VOID = {"meta", "link", "br", "input", "line", "rect", "path"}


class Markup(str):
    """Text that is HTML already and goes into a page as it is."""

    __slots__ = ()


Child = Markup | str | Iterable["Child"] | None


def shown(text: object) -> str:
    """A text at a length that a page can bear, without control characters."""
    whole = _CONTROL.sub("\N{REPLACEMENT CHARACTER}", str(text))
    if len(whole) <= LONGEST:
        return whole
    return f"{whole[:LONGEST]}\N{HORIZONTAL ELLIPSIS} ({len(whole)} characters)"


def escaped(child: Child) -> Markup:
    """HTML as it is; every other text with its special characters turned into entities."""
    if child is None:
        return Markup()
    if isinstance(child, Markup):
        return child
    if isinstance(child, str):
        return Markup(html.escape(_CONTROL.sub("\N{REPLACEMENT CHARACTER}", child), quote=True))
    return Markup("".join(escaped(one) for one in child))


def element(tag: str, *children: Child, **attributes: Any) -> Markup:
    """One HTML element.

    Parameters
    ----------
    tag : str
    *children : Markup, text, iterables of them, or None
        Text is escaped.
    **attributes
        ``class_`` is ``class`` and ``aria_label`` is ``aria-label``; True gives a bare attribute, None and
        False give none. Values are escaped.

    Examples
    --------
    >>> element("p", "a < b", class_="note")
    '<p class="note">a &lt; b</p>'
    """
    parts = [tag]
    for name, value in attributes.items():
        if value is None or value is False:
            continue
        key = name.rstrip("_").replace("_", "-")
        parts.append(key if value is True else f'{key}="{escaped(str(value))}"')
    opening = f"<{' '.join(parts)}>"
    return Markup(opening if tag in _VOID else f"{opening}{escaped(children)}</{tag}>")


def name_of(text: object, tag: str = "bdi") -> Markup:
    """A name out of a file: cut to a bearable length, its writing direction kept to itself."""
    name = shown(text)
    # A word that no column has room for may break anywhere, others stay whole
    endless = any(len(word) > 24 for word in name.split())
    return element(tag, name, dir="auto", class_="endless" if endless else None)


def script_json(structure: Any) -> Markup:
    """A structure as JSON that cannot end the script element it stands in."""
    text = json.dumps(structure, ensure_ascii=True, allow_nan=False, separators=(",", ":"))
    for char in "<>&":
        text = text.replace(char, f"\\u{ord(char):04x}")
    return Markup(text)


def figure_text(text: object, longest: int = 40) -> str:
    """A name for a legend or label of a figure, where some markup would otherwise be obeyed."""
    whole = _CONTROL.sub("\N{REPLACEMENT CHARACTER}", str(text))
    cut = whole if len(whole) <= longest else whole[: longest - 1] + "\N{HORIZONTAL ELLIPSIS}"
    # A dollar sign pair would be taken for a formula
    return html.escape(cut, quote=False).replace("$", "\N{FULLWIDTH DOLLAR SIGN}")
