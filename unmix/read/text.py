"""Bytes of a text file to text: byte-order marks, UTF-16, Latin-1, and the line ends of every system."""

import codecs
from collections.abc import Iterator
from pathlib import Path

from unmix.errors import ReadError

_MARKS = ((codecs.BOM_UTF32_LE, "utf-32"), (codecs.BOM_UTF32_BE, "utf-32"), (codecs.BOM_UTF16_LE, "utf-16"),
          (codecs.BOM_UTF16_BE, "utf-16"))  # fmt: skip


def plain_lines(data: bytes, *, file: str) -> bytes:
    r"""The bytes of a text file without byte-order mark, ``\n`` between its lines, wide encodings as UTF-8.

    Raises
    ------
    ReadError
        When the bytes are no text: zero bytes, or a wide encoding that breaks off.
    """
    for mark, encoding in _MARKS:
        if data.startswith(mark):
            data = _narrowed(data, encoding, file)
            break
    else:
        data = data.removeprefix(codecs.BOM_UTF8)
        if b"\0" in data[:65536]:
            data = _narrowed(data, _unmarked(data, file), file)
    if b"\0" in data:
        line = data[: data.index(b"\0")].count(b"\n") + 1
        raise ReadError("a zero byte stands in the text, so the file is damaged or of another kind", path=file,
                        line=line)  # fmt: skip
    if b"\r" in data:
        data = data.replace(b"\r\n", b"\n").replace(b"\r", b"\n")
    return data


def _unmarked(data: bytes, file: str) -> str:
    """Wide text without a mark: every second byte of its start is zero."""
    head = data[:64]
    if len(head) >= 8 and not any(head[1::2]) and all(head[::2]):
        return "utf-16-le"
    if len(head) >= 8 and not any(head[::2]) and all(head[1::2]):
        return "utf-16-be"
    raise ReadError("the file is not text", path=file,
                    accepted="give JCAMP-DX, CSV, TSV, xlsx, netCDF or Zarr")  # fmt: skip


def _narrowed(data: bytes, encoding: str, file: str) -> bytes:
    try:
        return data.decode(encoding).encode("utf-8")
    except UnicodeError:
        raise ReadError(f"the text is not valid {encoding.upper()}", path=file) from None


def decoded(data: bytes) -> str:
    """Text from bytes: UTF-8 where it is valid, else Latin-1, which every byte string is."""
    try:
        return data.decode("utf-8")
    except UnicodeDecodeError:
        return data.decode("latin-1")


def encoding_of(head: bytes, *, file: str) -> str:
    """The encoding of a text file from its first bytes; UTF-8 also stands for Latin-1 until a byte forbids it.

    Raises
    ------
    ReadError
        When the bytes are no text.
    """
    for mark, encoding in _MARKS:
        if head.startswith(mark):
            return encoding
    if b"\0" in head:
        return _unmarked(head, file)
    return "utf-8-sig"


def lines_of(path: Path, *, file: str) -> Iterator[str]:
    """The lines of a text file, one at a time, in whatever encoding and with whatever line ends it has.

    Bytes that are not UTF-8 are taken as Latin-1.

    Raises
    ------
    ReadError
        When the file is no text.
    """
    with path.open("rb") as raw:
        encoding = encoding_of(raw.read(65536), file=file)
    errors = "surrogateescape" if encoding == "utf-8-sig" else "strict"
    with path.open(encoding=encoding, errors=errors) as lines:
        try:
            for number, line in enumerate(lines, 1):
                if "\0" in line:
                    raise ReadError("a zero byte stands in the text, so the file is damaged or of another kind",
                                    path=file, line=number)  # fmt: skip
                yield line if line.isascii() else _latin(line)
        except UnicodeError:
            raise ReadError(f"the text is not valid {encoding.upper()}", path=file) from None


def _latin(line: str) -> str:
    """A line whose bytes were no UTF-8 as Latin-1."""
    try:
        line.encode("utf-8")
    except UnicodeEncodeError:
        return line.encode("utf-8", "surrogateescape").decode("latin-1")
    return line
