"""The command ``demo``: list the demonstration sets, or run one and show its answer beside the truth."""

import csv as csv_module
import math
import shlex
import sys
from importlib import resources
from pathlib import Path
from typing import Annotated, Any

import typer

from unmix.cli import options
from unmix.cli.output import OutputFiles, errors_as_sentences
from unmix.errors import InputError, suggestion

EXAMPLE = """
Example:
  unmix demo
  unmix demo recovered_solvent --report drums.html
"""

#: what a set must hold: samples in the one folder that is not this one
_PURE = "pure"
#: further spectra, among which what is not explained may be
_LIBRARY = "library"
_TRUTH = "truth.csv"


def command(
    name: Annotated[
        str | None, typer.Argument(metavar="NAME", help="The set to run; none lists them all.")
    ] = None,
    csv: options.Csv = None,
    xlsx: options.Xlsx = None,
    json: options.Json = None,
    netcdf: options.NetCdf = None,
    report: options.Report = None,
    overwrite: options.Overwrite = False,
    quiet: options.Quiet = False,
    debug: options.Debug = False,
) -> None:
    """List the demonstration data sets, or run one and compare its answer with the truth.

    The sets are invented, the files are such as a laboratory would have them. Exit status 0 when the set ran,
    whatever its verdicts are.
    """
    with errors_as_sentences(debug) as shown:
        sets = demo_sets()
        if name is None:
            _list(sets)
            return
        if name not in sets:
            raise InputError(f"there is no demo set '{name}'{suggestion(name, list(sets))}",
                             accepted=f"choose {', '.join(sets)}")  # fmt: skip
        files = OutputFiles(csv, xlsx, json, netcdf, report, overwrite)
        files.check()
        _run(sets[name], files, shown, quiet=quiet)


def demo_sets() -> dict[str, Path]:
    """The folders of the demo sets, by name: inside the installed package, or beside it in a checkout.

    Raises
    ------
    InputError
        When there are none.
    """
    package = Path(str(resources.files("unmix")))
    for folder in (package / "demo_sets", package.parent / "demo_sets"):
        if folder.is_dir():
            found = {entry.name: entry for entry in sorted(folder.iterdir()) if (entry / _PURE).is_dir()}
            if found:
                return found
    raise InputError(
        "the demo sets are not installed", accepted="install unmix from its wheel or its checkout"
    )


def _title(folder: Path) -> str:
    """The first heading of a set's README, and the first sentence of the paragraph that tells the story."""
    lines = (folder / "README.md").read_text(encoding="utf-8").splitlines()
    paragraphs = [part.replace("\n", " ").strip() for part in "\n".join(lines[1:]).split("\n\n")]
    story = next((part for part in paragraphs if part and not part.startswith(("*", "#", "|"))), "")
    return story.split(". ")[0].rstrip(".") or lines[0].lstrip("# ")


def _list(sets: dict[str, Path]) -> None:
    from unmix.cli.terminal import wrapped  # noqa: PLC0415 - kept beside its use

    for name, folder in sets.items():
        print(name)
        print(wrapped(_title(folder), first="  ", rest="  "))
    first = next(iter(sets))
    print(f"\nRun one:  unmix demo {first} --report {first}.html")


def _samples_of(folder: Path) -> Path:
    others = [
        entry
        for entry in sorted(folder.iterdir())
        if entry.is_dir() and entry.name not in (_PURE, _LIBRARY, "__pycache__")
    ]
    if len(others) != 1:
        raise InputError("the demo set must hold its samples in one folder", where=str(folder))
    return others[0]


def _run(folder: Path, files: OutputFiles, shown: set[str], *, quiet: bool) -> None:
    from unmix.cli.samples import quantify_files, read_pure  # noqa: PLC0415 - heavy
    from unmix.cli.show import print_against, print_reasons, remarks_of  # noqa: PLC0415 - heavy
    from unmix.cli.terminal import wrapped  # noqa: PLC0415 - kept beside its use

    samples, pure = _samples_of(folder), folder / _PURE
    settings: dict[str, Any] = {"baseline": 1}
    if (folder / _LIBRARY).is_dir():
        settings["library"] = read_pure([str(folder / _LIBRARY)])
    run = quantify_files([str(samples)], read_pure([str(pure)]), settings)
    title = f"Demo: {folder.name.replace('_', ' ')} (invented data)"
    results = [one.assign_attrs(title=title) for one in run.results]
    shown.update(remarks_of(results))
    if not (quiet or files.stream):
        print_against(results, run.order, read_truth(folder / _TRUTH))
        print(
            wrapped("An interval at 95% misses about one value in twenty, also in a supported answer.") + "\n"
        )
        print_reasons(results, run.order)
        print("\nThe same on your own files, put in the place of these:")
        print(
            f"  unmix quantify {shlex.quote(str(samples))} --pure {shlex.quote(str(pure))} --report page.html"
        )
        sys.stdout.flush()
    files.write(results)


def read_truth(path: Path) -> dict[str, dict[str, float]]:
    """The true amounts, sample to component to amount; empty where a set has no such file."""
    if not path.is_file():
        return {}
    with path.open(encoding="utf-8", newline="") as file:
        rows = list(csv_module.DictReader(file))
    return {
        row["sample"]: {key: _number(text) for key, text in row.items() if key != "sample"} for row in rows
    }


def _number(text: str | None) -> float:
    try:
        return float(text or "nan")
    except ValueError:
        return math.nan
