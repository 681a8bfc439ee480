"""What every reader hands back: spectra that share one axis, with what their file said and what was doubtful.

Readers turn bytes into :class:`Found`; ``collect.py`` turns a list of them into labelled arrays.
"""

from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np

from unmix.errors import InputError, ReadError, UnitError
from unmix.kernels import FloatArray
from unmix.ordinate_units import OrdinateUnit, ordinate_unit
from unmix.read.headings import axis_heading
from unmix.units import AXIS_ACCEPTED, AxisUnit, axis_unit

Checks = Literal["error", "warn"]


@dataclass(frozen=True)
class Options:
    """What the caller of ``read`` said about the files; None where the files shall say it.

    ``checks`` tells what a failed check is, ``quantity``, ``unit`` and ``per`` what the numbers and the axis are,
    ``decimal`` and ``orientation`` how a table is laid out, ``sheet`` which sheet of a workbook holds the
    spectra, and ``chunks`` how a store is opened lazily.
    """

    checks: str = "error"
    quantity: str | None = None
    unit: str | None = None
    per: str | None = None
    decimal: str | None = None
    orientation: str | None = None
    sheet: str | None = None
    chunks: Any = None

    def __post_init__(self) -> None:
        _one_of("checks", self.checks, ("error", "warn"))
        _one_of("decimal", self.decimal, (None, ".", ","))
        _one_of("orientation", self.orientation, (None, "columns", "rows"))
        if self.quantity is not None:
            ordinate_unit(self.quantity)
        if self.unit is not None:
            axis_unit(self.unit)


def _one_of(name: str, value: object, accepted: tuple[str | None, ...]) -> None:
    if value not in accepted:
        texts = " or ".join(f"'{text}'" for text in accepted if text)
        raise InputError(f"{name} is {value!r}", accepted=f"give {texts}")


@dataclass
class Found:
    """Spectra of one file on one axis.

    Attributes
    ----------
    axis : ndarray, shape (channels,)
        In the contract's unit, strictly increasing.
    values : ndarray, shape (spectra, channels)
        In the contract's unit where ``quantity`` is one of the contract's; NaN where missing.
    dim : str
        The spectral dimension.
    quantity : str
        What the numbers are; the file's own words where they are not understood.
    per : str
        Unit amount of an absorptivity, empty where unknown.
    labels : list of str
        Title or column header of each spectrum; empty texts where there is none.
    file : str
        Base name.
    coords : dict
        Further facts, one entry a spectrum: ``path_length`` (cm), columns of metadata.
    attrs : dict
        Attributes that a store keeps with its spectra.
    notes : list of str
        What was assumed, contradicted or failed.
    facts : dict
        What the file looked like: format, layout, direction, units as written.
    """

    axis: FloatArray
    values: FloatArray
    dim: str
    quantity: str
    labels: list[str]
    file: str
    per: str = ""
    coords: dict[str, list[Any]] = field(default_factory=dict)
    attrs: dict[str, Any] = field(default_factory=dict)
    notes: list[str] = field(default_factory=list)
    facts: dict[str, str] = field(default_factory=dict)


class Findings:
    """Collects what is doubtful in a file; a failed check is an error or a note, as the caller asked."""

    def __init__(self, file: str, checks: str) -> None:
        self.file = file
        self.checks = checks
        self.notes: list[str] = []

    def note(self, text: str, line: int = 0) -> None:
        """Keep a sentence for the caller."""
        self.notes.append(f"line {line}: {text}" if line else text)

    def failed(self, text: str, line: int = 0) -> None:
        """Keep a failed check, or raise ReadError for it."""
        if self.checks == "error":
            raise ReadError(text, path=self.file, line=line,
                            accepted="checks='warn' reads the file nevertheless")  # fmt: skip
        self.note(text, line)


def axis_of(written: str, options: Options, findings: Findings, *, raman: bool = False, line: int = 0) -> AxisUnit:
    """The axis unit, from the argument or the file's text.

    Raises
    ------
    ReadError
        When neither says it in words that are understood.
    """
    stated = axis_heading(written)
    if stated is None and written.strip() and options.unit is None:
        raise ReadError(f"axis unit '{written.strip()[:60]}' is not understood", path=findings.file, line=line,
                        accepted=f"{AXIS_ACCEPTED} as unit=")  # fmt: skip
    if stated is not None and raman and stated.dim == "wavenumber":
        stated = AxisUnit("raman_shift", stated.factor)
    if options.unit is not None:
        given = axis_unit(options.unit)
        if stated is not None and stated != given:
            findings.note(f"the file says that its axis is in '{written.strip()}'; "
                          f"read as '{options.unit}' as asked")  # fmt: skip
        return given
    if stated is None:
        raise ReadError("the unit of the axis is not stated", path=findings.file, line=line,
                        accepted="give it as unit=, for example unit='cm-1' or unit='nm'")  # fmt: skip
    return stated


def ordinate_of(written: str, options: Options, findings: Findings) -> tuple[OrdinateUnit | None, str]:
    """What the ordinates are, from the argument or the file's text, and the words that said so.

    None means that the words are not understood: they are kept as the quantity, and solvers refuse it.
    """
    stated: OrdinateUnit | None = None
    try:
        stated = ordinate_unit(written) if written.strip() else None
    except UnitError:
        stated = None
    if options.quantity is not None:
        given = ordinate_unit(options.quantity)
        if stated is not None and (stated.quantity, stated.form) != (given.quantity, given.form):
            findings.note(f"the file says that its ordinates are '{written.strip()}'; "
                          f"read as '{options.quantity}' as asked")  # fmt: skip
        return given, options.quantity
    return stated, written.strip()


def refuse_infinite(values: FloatArray, findings: Findings) -> None:
    """Refuse ordinates that became infinite by their factor or conversion.

    Raises
    ------
    ReadError
        When there are any.
    """
    infinite = np.flatnonzero(np.isinf(values).any(axis=0))
    if infinite.size:
        raise ReadError(f"the ordinate at point {infinite[0] + 1} of {values.shape[1]} is too large for a number",
                        path=findings.file)  # fmt: skip


def increasing(axis: FloatArray, values: FloatArray, findings: Findings) -> tuple[FloatArray, FloatArray, str]:
    """Axis and values in increasing order, and the direction in which the file ran.

    Raises
    ------
    ReadError
        When the axis is not finite or does not run one way.
    """
    if not np.isfinite(axis).all():
        at = int(np.argmin(np.isfinite(axis)))
        raise ReadError(f"the axis is not finite at point {at + 1} of {axis.size}", path=findings.file)
    step = np.diff(axis)
    if not step.size or (step > 0).all():
        return axis, values, "ascending"
    if (step < 0).all():
        return np.ascontiguousarray(axis[::-1]), np.ascontiguousarray(values[..., ::-1]), "descending"
    turned = step <= 0 if step[0] > 0 else step >= 0
    at = int(np.argmax(turned)) if step[0] else 0
    raise ReadError(
        f"the axis does not run one way: {axis[at]:.10g} is followed by {axis[at + 1]:.10g} at point {at + 2} "
        f"of {axis.size}",
        path=findings.file,
        accepted="each position stands once, in rising or falling order",
    )
