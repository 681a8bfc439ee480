"""The command ``predict``: a saved calibration and spectra in, guarded values out."""

from pathlib import Path
from typing import Annotated

import typer

from unmix.cli import options
from unmix.cli.output import OutputFiles, errors_as_sentences, status_of

EXAMPLE = """
Example:
  unmix predict water.nc today/*.jdx --csv water.csv
"""


def command(
    model: Annotated[Path, typer.Argument(metavar="MODEL", help="A calibration that unmix calibrate saved.")],
    samples: options.Sources,
    level: options.Level = 0.95,
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
    """Predict values of spectra from a calibration, and say which of them it can be trusted with.

    Every value comes with its interval; a spectrum that is unlike those of the calibration is marked, with the part of
    the axis that makes it so. Exit status: 0 when every value is supported, 1 when one is doubtful or unsupported, 2
    when something could not be used.
    """
    with errors_as_sentences(debug) as shown:
        files = OutputFiles(csv, xlsx, json, netcdf, report, overwrite)
        files.check()
        from unmix.cli.models import predict_files  # noqa: PLC0415 - heavy
        from unmix.cli.show import print_refused, remarks_of  # noqa: PLC0415 - heavy
        from unmix.cli.show_calibration import print_predictions  # noqa: PLC0415 - heavy

        results, refused = predict_files(model, samples, level, unit=unit, quantity=quantity)
        shown.update(remarks_of(results))
        if not (quiet or files.stream):
            print_predictions(results)
        print_refused(refused)
        files.write(results)
    verdicts = [str(verdict) for one in results for verdict in one["verdict"].values.ravel()]
    raise typer.Exit(status_of(verdicts, refused=len(refused)))
