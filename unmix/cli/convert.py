"""The command ``convert``: spectra from any format into JCAMP-DX, tables, workbooks, netCDF or Zarr."""

from pathlib import Path
from typing import Annotated, Any

import typer

from unmix.cli import options
from unmix.cli.output import Status, check_targets, errors_as_sentences, print_error
from unmix.cli.terminal import progress, say
from unmix.errors import InputError, UnmixError

EXAMPLE = """
Example:
  unmix convert drums/*.jdx --to drums.csv
  unmix convert drums/ --into packed/ --suffix .jdx --form DIFDUP
"""


def command(
    files: Annotated[
        list[str], typer.Argument(metavar="FILES", help="Spectrum files, folders or patterns such as 'runs/*.jdx'.")
    ],
    to: Annotated[
        Path | None, typer.Option("--to", metavar="FILE", help="Write all spectra into one file; its suffix says how.")
    ] = None,
    into: Annotated[
        Path | None, typer.Option("--into", metavar="FOLDER", help="Write a file for each file, into this folder.")
    ] = None,
    suffix: Annotated[
        str, typer.Option("--suffix", metavar="SUFFIX", help="With --into: .jdx, .csv, .tsv, .xlsx, .nc or .zarr.")
    ] = ".jdx",
    form: Annotated[str, typer.Option("--form", metavar="WORD", help="For JCAMP-DX: AFFN or DIFDUP.")] = "AFFN",
    unit: options.Unit = None,
    quantity: options.Quantity = None,
    per: options.Per = None,
    decimal: options.Decimal = None,
    orientation: options.Orientation = None,
    sheet: options.Sheet = None,
    checks: options.Checks = "error",
    overwrite: options.Overwrite = False,
    debug: options.Debug = False,
) -> None:
    """Write spectra in another format.

    With --to all spectra go into one file, on one axis within the range that they share; with --into every file keeps
    its own axis. Exit status: 0 when all went well, 1 when something was assumed or cut, 2 when a file could not be
    read or written.
    """
    with errors_as_sentences(debug):
        if (to is None) == (into is None):
            raise InputError("convert needs to know where to write", accepted="give either --to FILE or --into FOLDER")
        given: dict[str, Any] = {"checks": checks, "unit": unit, "quantity": quantity, "per": per,
                                 "decimal": decimal, "orientation": orientation, "sheet": sheet}  # fmt: skip
        if to is not None:
            status = _into_one(files, to, form, overwrite, given)
        else:
            assert into is not None
            status = _one_by_one(files, into, suffix, form, overwrite, given)
    raise typer.Exit(status)


def _into_one(files: list[str], to: Path, form: str, overwrite: bool, given: dict[str, Any]) -> Status:
    check_targets([to], overwrite=overwrite)
    import json  # noqa: PLC0415

    import unmix  # noqa: PLC0415 - heavy

    source: Any = files[0] if len(files) == 1 else files
    spectra = unmix.read(source, **given)
    unmix.write(spectra, to, overwrite=overwrite, form=form)  # type: ignore[arg-type]
    say(f"wrote {to} ({spectra.sizes['sample']} spectra)")
    if json.loads(spectra.attrs.get("refused", "{}")):
        return Status.UNUSABLE
    return Status.DOUBTFUL if json.loads(spectra.attrs["notes"]) else Status.SUPPORTED


def _one_by_one(files: list[str], into: Path, suffix: str, form: str, overwrite: bool, given: dict[str, Any]) -> Status:
    import json  # noqa: PLC0415

    import unmix  # noqa: PLC0415 - heavy
    from unmix.read import read_each  # noqa: PLC0415 - heavy
    from unmix.read.collect import files_of  # noqa: PLC0415 - heavy

    paths, _, left = files_of(files)
    into.mkdir(parents=True, exist_ok=True)
    written: set[Path] = set()
    status = Status.DOUBTFUL if left else Status.SUPPORTED
    with progress("convert") as tick:
        for done, path in enumerate(paths):
            tick(done, len(paths))
            try:
                arrays, _ = read_each(path, **given)
                for i, spectra in enumerate(arrays, 1):
                    target = into / f"{path.stem}{f'-{i}' if len(arrays) > 1 else ''}{suffix}"
                    if target in written:
                        raise InputError(f"two of the files would become {target}", accepted="convert them apart")
                    unmix.write(spectra, target, overwrite=overwrite, form=form)  # type: ignore[arg-type]
                    written.add(target)
                    if json.loads(spectra.attrs["notes"]):
                        status = max(status, Status.DOUBTFUL)
            except UnmixError as error:
                print_error(str(error))
                status = Status.UNUSABLE
    say(f"wrote {len(written)} files into {into}")
    return status
