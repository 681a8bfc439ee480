"""Writing files: whole or not at all, never over another one by accident, and harmless in a spreadsheet.

Everything that unmix writes goes through :func:`whole_file`; what is written is no business of this module.
"""

import os
import re
import secrets
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from unmix.errors import UnmixError, WriteError

#: what makes a spreadsheet take a cell for a formula, the wide forms of East Asian keyboards included
_FORMULA = re.compile(r"'*\s*[=+\-@\t\r\uff1d\uff0b\uff0d\uff20]")
_NUMBER = re.compile(r"\s*[-+]?(\d+\.?\d*|\.\d+)([eE][-+]?\d+)?\s*")


@contextmanager
def whole_file(path: str | os.PathLike[str], overwrite: bool = False) -> Iterator[Path]:
    """Hand out a path beside ``path`` to write to; it takes the place of ``path`` only when all went well.

    Parameters
    ----------
    path : path
        The file, or the folder of a store, that shall appear.
    overwrite : bool
        Whether it may replace one that is there.

    Yields
    ------
    Path
        A name in the same folder with the same suffix, not taken yet. When the block fails, what was written
        there is removed and ``path`` is as it was.

    Raises
    ------
    WriteError
        When ``path`` exists and ``overwrite`` is false, its folder does not exist, or the disk refuses.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     with whole_file(Path(folder) / "a.txt") as beside:
    ...         _ = beside.write_text("one")
    ...     [file.name for file in Path(folder).iterdir()]
    ['a.txt']
    """
    target = Path(path)
    _refuse_existing(target, overwrite)
    if not target.parent.is_dir():
        raise WriteError("its folder does not exist", where=str(target), accepted="create the folder first")
    beside = target.with_name(f".{target.stem[:80]}.{secrets.token_hex(4)}{target.suffix}")
    try:
        yield beside
        _refuse_existing(target, overwrite)
        _move(beside, target)
    except OSError as error:
        if isinstance(error, UnmixError):
            raise
        raise WriteError(f"could not be written ({error.strerror or error})", where=str(target)) from error
    finally:
        _remove(beside)


def _refuse_existing(target: Path, overwrite: bool) -> None:
    if target.exists() and not overwrite:
        raise WriteError("exists already", where=str(target),
                         accepted="choose another name or ask for overwriting")  # fmt: skip


def _move(beside: Path, target: Path) -> None:
    if not (target.is_dir() or beside.is_dir()):
        beside.replace(target)
        return
    # A folder cannot be renamed over another one: the old one steps aside and comes back if the move fails
    aside = target.with_name(f"{beside.name}.old")
    if target.exists():
        target.rename(aside)
    try:
        beside.rename(target)
    except OSError:
        if aside.exists():
            aside.rename(target)
        raise
    _remove(aside)


def _remove(path: Path) -> None:
    if path.is_dir():
        shutil.rmtree(path, ignore_errors=True)
    else:
        path.unlink(missing_ok=True)


def harmless_cell(text: str) -> str:
    """A text that no spreadsheet runs as a formula: an apostrophe goes in front where it might be one.

    Numbers stay as they are. :func:`read_cell` takes the apostrophe off again.

    Examples
    --------
    >>> harmless_cell("=1+1"), harmless_cell("-0.5"), harmless_cell("toluene")
    ("'=1+1", '-0.5', 'toluene')
    """
    return f"'{text}" if _FORMULA.match(text) and not _NUMBER.fullmatch(text) else text


def read_cell(text: str) -> str:
    """The text that :func:`harmless_cell` was given.

    Examples
    --------
    >>> read_cell(harmless_cell("@home"))
    '@home'
    """
    return text[1:] if text.startswith("'") and _FORMULA.match(text) else text
