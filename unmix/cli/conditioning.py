"""The command ``conditioning``: what a set of pure spectra allows before any sample is measured."""

from typing import Annotated

import typer

from unmix.cli import options
from unmix.cli.output import OutputFiles, errors_as_sentences, status_of

EXAMPLE = """
Example:
  unmix conditioning --pure pure/ --noise 0.0005
  unmix conditioning --pure pure/ --noise 0.0005 --wanted 0.2 --path-length "25 um"
  unmix conditioning --pure pure/ --regions 1650-1800 --report pure.html
"""


def command(
    pure: options.Pure,
    noise: options.Noise = None,
    baseline: options.Baseline = "1",
    regions: options.Regions = None,
    wanted: Annotated[
        str | None,
        typer.Option("--wanted", metavar="LIMIT", help="Detection limit wanted: 0.5, or 'acetone=0.5,water=2'."),
    ] = None,
    typical: Annotated[
        str | None,
        typer.Option("--typical", metavar="AMOUNT", help="Amounts of a usual sample, written likewise."),
    ] = None,
    path_length: options.PathLength = None,
    noise_model: Annotated[
        str,
        typer.Option("--noise-model", metavar="WORD", help="Noise: constant, detector or source limited."),
    ] = "constant",
    max_absorbance: Annotated[
        float, typer.Option("--max-absorbance", metavar="A", help="Absorbance above which a channel is not trusted.")
    ] = 2.0,
    pure_unit: options.PureUnit = None,
    pure_quantity: options.PureQuantity = None,
    per: options.Per = None,
    csv: options.Csv = None,
    xlsx: options.Xlsx = None,
    json: options.Json = None,
    netcdf: options.NetCdf = None,
    report: options.Report = None,
    overwrite: options.Overwrite = False,
    quiet: options.Quiet = False,
    debug: options.Debug = False,
) -> None:
    """Say which components can be told apart, and how little of each could be detected.

    Nothing is measured yet: the pure spectra, the regions and the baseline decide. With --noise the detection
    limits follow, and with --wanted what to change to reach others: windows, path, scans, resolution. Exit status: 0
    when all components can be told apart, 1 when not, 2 when something could not be used.
    """
    with errors_as_sentences(debug) as shown:
        files = OutputFiles(csv, xlsx, json, netcdf, report, overwrite)
        files.check()
        order, parts = options.baseline_from(baseline), options.regions_from(regions)
        import unmix  # noqa: PLC0415 - heavy
        from unmix.cli.samples import read_pure  # noqa: PLC0415 - heavy
        from unmix.cli.show import print_design, remarks_of  # noqa: PLC0415 - heavy

        known = read_pure(pure, unit=pure_unit, quantity=pure_quantity, per=per)
        result = unmix.conditioning(known, noise=noise, regions=parts, baseline=order,
                                    wanted=options.amounts_from("--wanted", wanted),
                                    typical=options.amounts_from("--typical", typical), path_length=path_length,
                                    noise_model=noise_model, max_absorbance=max_absorbance)  # fmt: skip
        shown.update(remarks_of([result]))
        if not (quiet or files.stream):
            print_design(result)
        files.write([result])
    raise typer.Exit(status_of([str(result["verdict"].item())]))
