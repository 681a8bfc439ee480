"""The command ``quantify``: samples and pure spectra from files, amounts with verdicts out."""

from pathlib import Path
from typing import Annotated, Any

import typer

from unmix.cli import options
from unmix.cli.output import OutputFiles, Status, errors_as_sentences, status_of
from unmix.cli.stored import StoreOptions, stream_store

EXAMPLE = """
Example:
  unmix quantify drums/*.jdx --pure pure/ --baseline 1 --report drums.html
  unmix quantify run.csv --pure pure/ --regions 1650-1800 --path-length "25 um"
  unmix quantify run.csv --pure pure/ --method derivative.toml
  unmix quantify run.csv --pure pure/ --constraints known.toml  (sum = 100)
  unmix quantify cube.zarr --pure pure/ --out result.zarr
  unmix quantify run.csv --standards standards/ --amounts amounts.csv --report run.html
"""


def command(
    samples: options.Sources,
    pure: Annotated[
        list[str] | None,
        typer.Option("--pure", metavar="PATH", help="Pure spectra: folder, file or pattern; may be repeated."),
    ] = None,
    standards: Annotated[
        list[str] | None,
        typer.Option(
            "--standards", metavar="PATH", help="Spectra of known amounts, from which to learn; with --amounts."
        ),
    ] = None,
    amounts: Annotated[
        Path | None,
        typer.Option("--amounts", metavar="TABLE", help="Amounts of the standards: names first, a column a component."),
    ] = None,
    baseline: options.Baseline = "1",
    regions: options.Regions = None,
    level: options.Level = 0.95,
    path_length: options.PathLength = None,
    path_uncertainty: options.PathUncertainty = 0.0,
    dilution: options.Dilution = 1.0,
    dilution_uncertainty: options.DilutionUncertainty = 0.0,
    constraints: options.Constraints = None,
    axis: Annotated[
        str | None,
        typer.Option("--axis", metavar="WORDS", help="Axis errors to fit: shift, stretch, broadening, or shift=2."),
    ] = None,
    noise: options.Noise = None,
    no_nonnegative: Annotated[
        bool,
        typer.Option("--no-nonnegative", help="Let amounts become negative, as plain least squares does."),
    ] = False,
    unit: options.Unit = None,
    quantity: options.Quantity = None,
    pure_unit: options.PureUnit = None,
    pure_quantity: options.PureQuantity = None,
    per: options.Per = None,
    method: options.MethodFile = None,
    csv: options.Csv = None,
    xlsx: options.Xlsx = None,
    json: options.Json = None,
    netcdf: options.NetCdf = None,
    report: options.Report = None,
    out: options.Out = None,
    resume: options.Resume = False,
    rows: options.Rows = None,
    workers: options.Workers = None,
    scheduler: options.Scheduler = None,
    overwrite: options.Overwrite = False,
    quiet: options.Quiet = False,
    debug: options.Debug = False,
) -> None:
    """Say how much of each known component is in each sample, how sure, and whether something is missing.

    The samples are read, brought onto the channels of the pure spectra and fitted with these and a baseline. Every
    amount comes with its interval, every sample with a verdict and the reason for it. Exit status: 0 when all
    answers are supported, 1 when one is doubtful or unsupported, 2 when something could not be used.
    """
    with errors_as_sentences(debug) as shown:
        files = OutputFiles(csv, xlsx, json, netcdf, report, overwrite)
        files.check()
        store = StoreOptions(out, resume, rows, workers, scheduler)
        store.check(files)
        settings: dict[str, Any] = {
            "baseline": options.baseline_from(baseline),
            "regions": options.regions_from(regions),
            "level": level,
            "path_length": path_length,
            "path_uncertainty": path_uncertainty,
            "dilution": dilution,
            "dilution_uncertainty": dilution_uncertainty,
            "axis": options.axis_from(axis),
            "constraints": options.constraints_from(constraints),
            "noise": noise,
            "nonnegative": not no_nonnegative,
        }
        from unmix.cli.samples import known_spectra, quantify_files, quantify_work, read_method  # noqa: PLC0415 - heavy
        from unmix.cli.show import print_amounts, print_reasons, print_refused, remarks_of  # noqa: PLC0415 - heavy

        given = {"unit": pure_unit, "quantity": pure_quantity, "per": per}
        if method is not None:
            settings["method"] = read_method(method)
        known = known_spectra(pure, standards, amounts, settings, given)
        if out is not None:
            work = quantify_work(known, settings)
            raise typer.Exit(stream_store(work, samples, store, overwrite=overwrite, unit=unit, quantity=quantity))
        run = quantify_files(samples, known, settings, unit=unit, quantity=quantity)
        shown.update(remarks_of(run.results))
        if not (quiet or files.stream):
            print_amounts(run.results, run.order)
            print_reasons(run.results, run.order)
        print_refused(run.refused)
        files.write(run.results)
    verdicts = [str(verdict) for one in run.results for verdict in one["verdict"].values.ravel()]
    status: Status = status_of(verdicts, refused=len(run.refused))
    raise typer.Exit(status)
