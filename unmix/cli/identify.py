"""The command ``identify``: samples and a library in, the mixtures that explain them out."""

from typing import Annotated, Any

import typer

from unmix.cli import options
from unmix.cli.output import OutputFiles, errors_as_sentences, status_of

EXAMPLE = """
Example:
  unmix identify drum.jdx --library spectra/
  unmix identify drums/ --library library.nc --include water --report found.html
"""


def command(
    samples: options.Sources,
    library: Annotated[
        list[str],
        typer.Option("--library", metavar="PATH", help="Pure spectra: folder, file or store; may be repeated."),
    ],
    max_components: Annotated[
        int, typer.Option("--max-components", metavar="NUMBER", help="Members of a mixture at most.")
    ] = 6,
    include: Annotated[
        list[str] | None, typer.Option("--include", metavar="NAME", help="Certainly there; may be repeated.")
    ] = None,
    exclude: Annotated[
        list[str] | None, typer.Option("--exclude", metavar="NAME", help="Certainly not there; may be repeated.")
    ] = None,
    candidates: Annotated[
        int, typer.Option("--candidates", metavar="NUMBER", help="Mixtures to report at most.")
    ] = 5,
    baseline: options.Baseline = "1",
    regions: options.Regions = None,
    level: options.Level = 0.95,
    path_length: options.PathLength = None,
    unit: options.Unit = None,
    quantity: options.Quantity = None,
    pure_unit: options.PureUnit = None,
    pure_quantity: options.PureQuantity = None,
    csv: options.Csv = None,
    xlsx: options.Xlsx = None,
    json: options.Json = None,
    netcdf: options.NetCdf = None,
    report: options.Report = None,
    overwrite: options.Overwrite = False,
    quiet: options.Quiet = False,
    debug: options.Debug = False,
) -> None:
    """Say which few spectra of a library make up each sample, and what else it could be.

    A name is the spectrum that fits best among those given, to be confirmed. Exit status: 0 when every answer is
    supported, 1 when one is doubtful or unsupported, 2 when something could not be used.
    """
    with errors_as_sentences(debug) as shown:
        files = OutputFiles(csv, xlsx, json, netcdf, report, overwrite)
        files.check()
        settings: dict[str, Any] = {
            "max_components": max_components, "include": include or [], "exclude": exclude or [],
            "candidates": candidates, "baseline": options.baseline_from(baseline), "level": level,
            "regions": options.regions_from(regions), "path_length": path_length,
        }  # fmt: skip
        from unmix.cli.samples import identify_files, read_pure  # noqa: PLC0415 - heavy
        from unmix.cli.show import print_candidates, print_refused, remarks_of  # noqa: PLC0415 - heavy

        known = read_pure(library, unit=pure_unit, quantity=pure_quantity)
        results, refused = identify_files(samples, known, settings, unit=unit, quantity=quantity)
        shown.update(remarks_of(results))
        if not (quiet or files.stream):
            print_candidates(results)
        print_refused(refused)
        files.write(results)
    verdicts = [str(verdict) for one in results for verdict in one["verdict"].values.ravel()]
    raise typer.Exit(status_of(verdicts, refused=len(refused)))
