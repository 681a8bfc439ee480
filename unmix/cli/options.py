"""Options that several commands share, declared once, and how their texts become values.

What an option means is the business of the function that it is handed to; here it is only read.
"""

import re
import tomllib
from pathlib import Path
from typing import Annotated, Any

import typer

from unmix.errors import InputError, ReadError

Sources = Annotated[
    list[str],
    typer.Argument(metavar="SAMPLES", help="Spectrum files, folders or patterns such as 'runs/*.jdx'."),
]
Pure = Annotated[
    list[str],
    typer.Option("--pure", metavar="PATH", help="Pure spectra: folder, file or pattern; may be repeated."),
]
MethodFile = Annotated[
    Path | None,
    typer.Option("--method", metavar="FILE", help="A saved method: steps for samples and pure spectra, and settings."),
]
Csv = Annotated[
    Path | None,
    typer.Option("--csv", metavar="FILE", help="Write the table as CSV ('-' prints it instead)."),
]
Xlsx = Annotated[
    Path | None,
    typer.Option("--xlsx", metavar="FILE", help="Write the table as a spreadsheet."),
]
Json = Annotated[
    Path | None,
    typer.Option(
        "--json", metavar="FILE", help="Write table and provenance as JSON ('-' prints it instead)."
    ),
]
NetCdf = Annotated[
    Path | None,
    typer.Option("--netcdf", metavar="FILE", help="Write the whole result, curves included, as netCDF."),
]
Report = Annotated[
    Path | None,
    typer.Option("--report", metavar="FILE", help="Write a page to look at (HTML, works offline)."),
]
Constraints = Annotated[
    Path | None,
    typer.Option("--constraints", metavar="FILE", help="What is known about the amounts, as TOML."),
]
Dilution = Annotated[
    float, typer.Option("--dilution", metavar="FACTOR", help="By how much the samples were diluted.")
]
PathUncertainty = Annotated[
    float, typer.Option("--path-uncertainty", metavar="SHARE", help="Relative uncertainty of the path, as 0.01.")
]
DilutionUncertainty = Annotated[
    float, typer.Option("--dilution-uncertainty", metavar="SHARE", help="The same of the dilution.")
]
Out = Annotated[
    Path | None,
    typer.Option("--out", metavar="STORE", help="Answer one store of any size block by block into this Zarr store."),
]
Resume = Annotated[bool, typer.Option("--resume", help="Go on with a run into a store that was stopped.")]
Rows = Annotated[
    int | None,
    typer.Option("--rows", metavar="N", help="Spectra, or lines of an image, in a block of a run into a store."),
]
Workers = Annotated[
    int | None,
    typer.Option("--workers", metavar="N", help="Processes of a run into a store; one a core if unsaid."),
]
Scheduler = Annotated[
    str | None,
    typer.Option("--scheduler", metavar="ADDRESS", help="A dask scheduler for it, such as tcp://host:8786."),
]
Overwrite = Annotated[bool, typer.Option("--overwrite", help="Replace files that exist already.")]
Quiet = Annotated[bool, typer.Option("--quiet", "-q", help="Print nothing but errors.")]
Debug = Annotated[bool, typer.Option("--debug", help="Show the full Python error when something fails.")]
Regions = Annotated[
    str | None,
    typer.Option(
        "--regions",
        metavar="LOW-HIGH,...",
        help="Use only these parts of the axis, for example 900-1300,1650-1800.",
    ),
]
Baseline = Annotated[
    str,
    typer.Option(
        "--baseline",
        metavar="ORDER",
        help="Baseline in the fit: 0 an offset, 1 a line, 2 a curve, ... or none.",
    ),
]
Noise = Annotated[
    float | None,
    typer.Option(
        "--noise", metavar="ABSORBANCE", help="Noise of a channel (standard deviation), when it is known."
    ),
]
Level = Annotated[float, typer.Option("--level", metavar="FRACTION", help="Confidence of the intervals.")]
Per = Annotated[
    str | None,
    typer.Option(
        "--per",
        metavar="UNIT",
        help="Unit amount of the pure spectra, such as g/L, if unsaid.",
    ),
]
Quantity = Annotated[
    str | None,
    typer.Option(
        "--quantity", metavar="WORD", help="What the samples' numbers are (absorbance, %T), if unsaid."
    ),
]
Unit = Annotated[
    str | None,
    typer.Option("--unit", metavar="UNIT", help="Axis unit of the samples (cm-1, nm), if unsaid."),
]
PureQuantity = Annotated[
    str | None,
    typer.Option("--pure-quantity", metavar="WORD", help="What the pure spectra's numbers are, if unsaid."),
]
PureUnit = Annotated[
    str | None,
    typer.Option("--pure-unit", metavar="UNIT", help="Axis unit of the pure spectra, if unsaid."),
]
Decimal = Annotated[
    str | None,
    typer.Option("--decimal", metavar="MARK", help="Decimal mark of a table, '.' or ',', if it is unclear."),
]
Orientation = Annotated[
    str | None,
    typer.Option("--orientation", metavar="WORD", help="Spectra in columns or rows of a table, if unclear."),
]
Sheet = Annotated[
    str | None,
    typer.Option("--sheet", metavar="NAME", help="Sheet of a workbook, where several are filled."),
]
Checks = Annotated[
    str,
    typer.Option("--checks", metavar="WORD", help="What a failed check of a JCAMP-DX file does: error or warn."),
]
PathLength = Annotated[
    str | None,
    typer.Option(
        "--path-length", metavar="LENGTH", help="Path length of all samples, for example '25 um' or '1 cm'."
    ),
]

_REGION = re.compile(
    r"\s*([-+]?[\d.]+(?:e[-+]?\d+)?)\s*(?:-|:|\.\.|to)\s*([-+]?[\d.]+(?:e[-+]?\d+)?)\s*", re.I
)


def regions_from(text: str | None) -> list[tuple[float, float]] | None:
    """Read ``900-1300,1650-1800``; either end may come first, as infrared regions are written both ways.

    Raises
    ------
    InputError
        When a part is not two numbers.

    Examples
    --------
    >>> regions_from("1800-1650, 900-1300")
    [(1650.0, 1800.0), (900.0, 1300.0)]
    """
    if text is None:
        return None
    found = []
    for part in text.split(","):
        match = _REGION.fullmatch(part)
        try:
            low, high = sorted(float(number) for number in match.groups()) if match else (0.0, 0.0)
        except ValueError:
            match = None
        if not match:
            raise InputError(
                f"--regions: '{part}' is not a region",
                accepted="give low-high with commas between them, for example 900-1300,1650-1800",
            )
        found.append((low, high))
    return found


def axis_from(text: str | None) -> list[str] | dict[str, float] | None:
    """Read ``shift,broadening`` or ``shift=2,broadening=5``.

    Raises
    ------
    InputError
        When some have a bound and others not, or a bound is no number.

    Examples
    --------
    >>> axis_from("shift"), axis_from("shift=2,stretch=1e-4")
    (['shift'], {'shift': 2.0, 'stretch': 0.0001})
    """
    if text is None:
        return None
    if "=" not in text:
        return [part.strip() for part in text.split(",")]
    found = amounts_from("--axis", text)
    return found if isinstance(found, dict) else None


def amounts_from(option: str, text: str | None) -> float | dict[str, float] | None:
    """Read one number, or ``name=number`` with commas between them.

    Raises
    ------
    InputError
        When it is neither.

    Examples
    --------
    >>> amounts_from("--wanted", "acetone=0.5, water=2")
    {'acetone': 0.5, 'water': 2.0}
    """
    if text is None:
        return None
    try:
        if "=" not in text:
            return float(text)
        return {name.strip(): float(number) for name, number in (part.rsplit("=", 1) for part in text.split(","))}
    except ValueError:
        raise InputError(f"{option} is '{text}'",
                         accepted="give a number, or component=number with commas between them") from None  # fmt: skip


def constraints_from(path: Path | None) -> dict[str, Any] | None:
    """Read constraints from a TOML file.

    Raises
    ------
    ReadError
        When it cannot be read or is not TOML.
    """
    if path is None:
        return None
    try:
        return tomllib.loads(path.read_text(encoding="utf-8"))
    except (OSError, UnicodeDecodeError, tomllib.TOMLDecodeError) as error:
        raise ReadError(f"is not a file of constraints ({error})", path=str(path),
                        accepted="write TOML such as: sum = 100") from error  # fmt: skip


def baseline_from(text: str) -> int | None:
    """Read the order of the baseline; ``none`` is None.

    Raises
    ------
    InputError
        When the text is neither ``none`` nor a whole number from zero.
    """
    if text.strip().lower() == "none":
        return None
    if not text.strip().isdecimal():
        raise InputError(f"--baseline is '{text}'", accepted="give 0, 1, 2, ... or none")
    return int(text)
