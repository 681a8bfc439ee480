"""JCAMP-DX text to blocks of labels; knows labels, comments and nesting, not what a label means.

References
----------
R. S. McDonald and P. A. Wilks, Appl. Spectrosc. 42 (1988) 151-162; P. Lampen, J. Lambert, R. J. Lancashire,
R. S. McDonald, P. S. McIntyre, D. N. Rutledge, T. Froehlich, A. N. Davies, Pure Appl. Chem. 71 (1999) 1549-1556.
"""

import re
from bisect import bisect_left
from dataclasses import dataclass, field

from unmix.errors import ReadError
from unmix.read.found import Findings
from unmix.read.text import decoded, encoding_of

_LABEL = re.compile(rb"^[ \t]*##([^=\n]{0,120})=", re.MULTILINE)
_SAME = re.compile(r"[ \-/_\t]")
#: labels that open a table of data
TABLES = ("XYDATA", "XYPOINTS", "DATATABLE", "PEAKTABLE", "PEAKASSIGNMENTS", "RADATA")


@dataclass(frozen=True)
class Entry:
    """One label with its value; ``line`` is where the label stands, ``rest`` what follows its first line."""

    label: str
    value: str
    line: int
    rest: bytes = b""


@dataclass
class Block:
    """From ``##TITLE=`` to ``##END=``; ``children`` is how many blocks stand directly inside."""

    line: int
    entries: list[Entry] = field(default_factory=list)
    children: int = 0

    def find(self, label: str) -> Entry | None:
        """The first entry with a label in its canonical spelling."""
        return next((entry for entry in self.entries if entry.label == label), None)

    def text(self, label: str) -> str:
        """The value of a label, empty where it is missing."""
        entry = self.find(label)
        return entry.value if entry else ""


def canonical(label: str) -> str:
    """A label as the standard compares it.

    Examples
    --------
    >>> canonical("Jcamp_dx"), canonical("DATA TYPE"), canonical("DELTA-X")
    ('JCAMPDX', 'DATATYPE', 'DELTAX')
    """
    return _SAME.sub("", label).upper()


def is_jcamp(head: bytes, *, file: str) -> bool:
    """Whether a file starts as JCAMP-DX does: with a label, behind blank lines and comments at most.

    Raises
    ------
    ReadError
        When the bytes are no text.
    """
    encoding = encoding_of(head, file=file)
    lines = head.decode(encoding, errors="ignore").splitlines()
    first = next((line.strip() for line in lines if line.strip() and not line.strip().startswith("$$")), "")
    return re.match(r"##[^=]{0,120}=", first) is not None


def split_blocks(data: bytes, findings: Findings) -> list[Block]:
    r"""Cut a file into its blocks, outermost first, each block with the labels that are its own.

    Parameters
    ----------
    data : bytes
        The file, ``\n`` between its lines.
    findings : Findings
        Gets a missing ``##END=``.

    Raises
    ------
    ReadError
        When there is no block at all.
    """
    marks = list(_LABEL.finditer(data))
    newlines = [match.start() for match in re.finditer(rb"\n", data)]
    blocks: list[Block] = []
    open_blocks: list[Block] = []
    for i, mark in enumerate(marks):
        end = marks[i + 1].start() if i + 1 < len(marks) else len(data)
        entry = _entry(mark, data[mark.end() : end], bisect_left(newlines, mark.end()) + 1)
        if entry.label == "TITLE":
            while open_blocks and any(entry.label in TABLES for entry in open_blocks[-1].entries):
                _unended(open_blocks.pop(), findings)
            if open_blocks:
                open_blocks[-1].children += 1
            open_blocks.append(Block(entry.line))
            blocks.append(open_blocks[-1])
        elif entry.label == "END" and open_blocks:
            open_blocks.pop()
            continue
        if open_blocks and entry.label:
            open_blocks[-1].entries.append(entry)
    if not blocks:
        raise ReadError("the file has no ##TITLE=, so it is no JCAMP-DX file", path=findings.file)
    for block in reversed(open_blocks):
        _unended(block, findings)
    return blocks


def _unended(block: Block, findings: Findings) -> None:
    findings.failed("the block that starts here has no ##END=; the file may be cut short", block.line)


def _entry(mark: re.Match[bytes], value: bytes, line: int) -> Entry:
    label = canonical(mark.group(1).decode("latin-1"))
    head, _, rest = value.partition(b"\n")
    if label in TABLES:
        return Entry(label, _text(head), line, without_comments(rest))
    return Entry(label, _text(value), line)


def _text(value: bytes) -> str:
    return " ".join(decoded(without_comments(value)).split())


def without_comments(text: bytes) -> bytes:
    """Text without its ``$$`` comments; the line ends stay, so that line numbers do."""
    return re.sub(rb"\$\$[^\n]*", b"", text) if b"$$" in text else text
