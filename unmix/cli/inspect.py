"""The command ``inspect``: what is in spectrum files, what is doubtful about them, and what could not be read."""

from pathlib import Path
from typing import Annotated, Any

import typer

from unmix.cli import options
from unmix.cli.output import (
    Status,
    check_targets,
    errors_as_sentences,
    is_stream,
    print_error,
)
from unmix.cli.terminal import Cell, Column, print_table, wrapped

EXAMPLE = """
Example:
  unmix inspect drums/
  unmix inspect old/*.dx --checks warn --verbose
  unmix inspect run.csv --unit nm --quantity absorbance --json -
"""


def command(
    files: Annotated[
        list[str], typer.Argument(metavar="FILES", help="Spectrum files, folders or patterns such as 'runs/*.jdx'.")
    ],
    verbose: Annotated[bool, typer.Option("--verbose", "-v", help="Show everything found in each file.")] = False,
    unit: options.Unit = None,
    quantity: options.Quantity = None,
    per: options.Per = None,
    decimal: options.Decimal = None,
    orientation: options.Orientation = None,
    sheet: options.Sheet = None,
    checks: options.Checks = "error",
    json: Annotated[
        Path | None, typer.Option("--json", metavar="FILE", help="Write everything as JSON ('-' prints it instead).")
    ] = None,
    overwrite: options.Overwrite = False,
    quiet: options.Quiet = False,
    debug: options.Debug = False,
) -> None:
    """Say what is in each file: format, axis, units, quantity, noise, and whatever is doubtful.

    One line a file; with --verbose every finding. Exit status: 0 when nothing is doubtful, 1 when something is, 2 when
    a file could not be read.
    """
    with errors_as_sentences(debug):
        check_targets([json], overwrite=overwrite)
        from unmix.cli.examined import examine  # noqa: PLC0415 - heavy
        from unmix.files import whole_file  # noqa: PLC0415
        from unmix.read.found import Options  # noqa: PLC0415 - heavy
        from unmix.report.tables import json_text  # noqa: PLC0415 - heavy

        given = Options(checks, quantity, unit, per, decimal, orientation, sheet)
        answer = examine(files, given)
        if not (quiet or is_stream(json)):
            _print(answer, verbose)
        if is_stream(json):
            print(json_text(answer), end="")
        elif json is not None:
            with whole_file(json, overwrite) as beside:
                beside.write_text(json_text(answer), encoding="utf-8")
        for entry in answer["refused"]:
            print_error(f"{entry['file']}: {entry['reason']}")
    raise typer.Exit(_status(answer))


def _status(answer: dict[str, Any]) -> Status:
    if answer["refused"]:
        return Status.UNUSABLE
    return Status.DOUBTFUL if any(_findings(record) for record in answer["files"]) else Status.SUPPORTED


def _findings(record: dict[str, Any]) -> list[str]:
    """Everything doubtful about a file, each sentence with the spectrum that it is about where there are several."""
    several = len(record["spectra"]) > 1
    remarks = [f"{one['label']}: {one['remark']}" if several else one["remark"]
               for one in record["spectra"] if one["remark"]]  # fmt: skip
    return [*record["notes"], *remarks]


def _print(answer: dict[str, Any], verbose: bool) -> None:
    columns = [Column("file", cut=True), Column("kind"), Column("n", right=True), Column("axis"),
               Column("quantity", cut=True), Column("noise", right=True), Column("remarks", right=True)]  # fmt: skip
    if answer["files"]:
        print_table(columns, [_row(record) for record in answer["files"]])
        print()
    n_doubtful = sum(bool(_findings(record)) for record in answer["files"])
    if n_doubtful and not verbose:
        print("The remarks are shown with --verbose.")
    if verbose:
        for record in answer["files"]:
            _print_details(record)
    n = len(answer["files"])
    if n > 1:
        print("All spectra stand on one axis." if answer["shared_axis"] else
              "The axes differ; read together, the spectra are interpolated onto the coarsest of them.")  # fmt: skip
    for remark in answer["remarks"]:
        print(wrapped(remark[:1].upper() + remark[1:] + "."))


def _row(record: dict[str, Any]) -> list[str | Cell]:
    axis = record["axis"]
    noise = [one["noise"] for one in record["spectra"] if one["noise"] is not None]
    findings = _findings(record)
    spacing = "" if axis["spacing"] is None else f" by {axis['spacing']:.4g}" + ("" if axis["even"] else " (uneven)")
    quantity = record["quantity"] + (f" per {record['per']}" if record["per"] else "")
    return [
        record["file"], record["format"].split("-")[0], str(len(record["spectra"])),
        f"{axis['first']:.4g}-{axis['last']:.4g} {axis['unit']}{spacing}", quantity,
        f"{sorted(noise)[len(noise) // 2]:.2g}" if noise else "",
        Cell(str(len(findings)), "warn") if findings else Cell("none", "good"),
    ]  # fmt: skip


def _print_details(record: dict[str, Any]) -> None:
    axis = record["axis"]
    print(wrapped(record["file"]))
    written = {"packing": "packing", "blocks": "blocks", "layout": "layout", "cells": "written as",
               "data_type": "data type", "axis_unit_written": "axis unit as written",
               "ordinate_unit_written": "ordinate as written", "direction": "direction"}  # fmt: skip
    facts = [
        f"format: {record['format']}",
        *(f"{title}: {record[name]}" for name, title in written.items() if name in record),
    ]
    print(wrapped("; ".join([*facts, f"channels: {axis['channels']}"]), first="  ", rest="  "))
    for one in record["spectra"]:
        noise = "" if one["noise"] is None else f", noise {one['noise']:.2g}"
        print(wrapped(f"{one['label']}{noise}: {one['remark'] or 'nothing doubtful'}", first="  - ", rest="    "))
    for note in record["notes"]:
        print(wrapped(note, first="  ! ", rest="    "))
