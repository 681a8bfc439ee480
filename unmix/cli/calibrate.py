"""The command ``calibrate``: spectra and a table of reference values in, a proven calibration out."""

from pathlib import Path
from typing import Annotated, Any

import typer

from unmix.cli import options
from unmix.cli.output import OutputFiles, check_targets, errors_as_sentences, status_of
from unmix.cli.terminal import say

EXAMPLE = """
Example:
  unmix calibrate runs/ --values lab.csv --property moisture --save water.nc
  unmix calibrate runs/ --values lab.csv --property moisture --groups batch
"""


def command(
    samples: options.Sources,
    values: Annotated[
        Path,
        typer.Option("--values", metavar="TABLE", help="Reference values: names of the samples first."),
    ],
    properties: Annotated[
        list[str] | None,
        typer.Option("--property", metavar="NAME", help="Column to calibrate; may be repeated."),
    ] = None,
    save: Annotated[
        Path | None,
        typer.Option("--save", metavar="MODEL", help="Save the calibration, for unmix predict."),
    ] = None,
    method: Annotated[
        Path | None,
        typer.Option("--method", metavar="FILE", help="A saved method whose steps prepare the spectra."),
    ] = None,
    components: Annotated[
        int | None,
        typer.Option("--components", metavar="NUMBER", help="Latent variables; chosen by default."),
    ] = None,
    max_components: Annotated[
        int, typer.Option("--max-components", metavar="NUMBER", help="Largest number tried.")
    ] = 15,
    validation: Annotated[
        str,
        typer.Option("--validation", metavar="WAY", help="k-fold, repeated, leave-one-out or blocks (along time)."),
    ] = "k-fold",
    folds: Annotated[int, typer.Option("--folds", metavar="NUMBER", help="Parts of the validation.")] = 10,
    groups: Annotated[
        str | None,
        typer.Option("--groups", metavar="COLUMN", help="Column of the table that names batches or days."),
    ] = None,
    test: Annotated[
        list[str] | None,
        typer.Option("--test", metavar="PATH", help="Spectra of a separate test set; may be repeated."),
    ] = None,
    permutations: Annotated[
        int, typer.Option("--permutations", metavar="NUMBER", help="Shuffles of the permutation test.")
    ] = 199,
    seed: Annotated[int, typer.Option("--seed", metavar="NUMBER", help="Of random parts and shuffles.")] = 0,
    unit: options.Unit = None,
    quantity: options.Quantity = None,
    csv: options.Csv = None,
    xlsx: options.Xlsx = None,
    json: options.Json = None,
    netcdf: options.NetCdf = None,
    report: options.Report = None,
    overwrite: options.Overwrite = False,
    quiet: options.Quiet = False,
    debug: options.Debug = False,
) -> None:
    """Calibrate spectra against reference values, and prove the calibration.

    Partial least squares; the number of latent variables is the smallest within one standard error of the best, and
    its error is told from a loop that played no part in the choice. Exit status: 0 when the calibration is supported,
    1 when it is doubtful or unsupported, 2 when something could not be used.
    """
    with errors_as_sentences(debug) as shown:
        files = OutputFiles(csv, xlsx, json, netcdf, report, overwrite)
        files.check()
        check_targets([save], overwrite=overwrite)
        settings: dict[str, Any] = {"n_components": components, "max_components": max_components, "folds": folds,
                                    "validation": validation, "permutations": permutations, "seed": seed}  # fmt: skip
        import unmix  # noqa: PLC0415 - heavy
        from unmix.cli.models import calibrate_files  # noqa: PLC0415 - heavy
        from unmix.cli.show import print_refused, remarks_of  # noqa: PLC0415 - heavy
        from unmix.cli.show_calibration import print_calibration  # noqa: PLC0415 - heavy

        given: dict[str, Any] = {"groups": groups, "test": test or [], "method": method, "unit": unit}
        calibration, refused = calibrate_files(samples, values, properties or [], settings, quantity=quantity, **given)
        shown.update(remarks_of([calibration.data]))
        if not (quiet or files.stream):
            print_calibration(calibration.data)
        print_refused(refused)
        files.write([calibration.data])
        if save is not None:
            unmix.save(calibration, save, overwrite=overwrite)
            say(f"wrote {save}")
    raise typer.Exit(status_of([str(calibration.data["verdict"].item())], refused=len(refused)))
