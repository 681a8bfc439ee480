"""The list of commands, each loaded when it is called; nothing heavy is imported before that.

A command is a module of this package with a function ``command`` (its docstring is the help text, its
annotated parameters the options) and a text ``EXAMPLE`` that stands below the help.
"""

import platform
import sys
from collections.abc import Sequence
from importlib import import_module, metadata
from typing import Annotated, Any

import typer
from typer.core import TyperGroup

from unmix.errors import suggestion

#: command -> what it is for, in the order of the help text; the module of the same name holds it
COMMANDS = {
    "inspect": "Show what is in spectrum files, and what could not be read",
    "convert": "Write spectra as JCAMP-DX, CSV or netCDF",
    "quantify": "How much of each known component is in each sample, and how sure",
    "identify": "Which few spectra of a library make up each sample",
    "conditioning": "What a set of pure spectra allows, before anything is measured",
    "calibrate": "From spectra with reference values to a proven calibration",
    "predict": "Values of new spectra from a calibration, each one guarded",
    "demo": "List the demonstration data sets, or run one",
}

#: how every command prints its help
CONTEXT = {"help_option_names": ["-h", "--help"], "max_content_width": 80}


class LazyGroup(TyperGroup):
    """A group that knows its commands by name and imports one only to run it or to print its own help."""

    def list_commands(self, ctx: Any) -> list[str]:  # noqa: ARG002 - the signature is typer's
        """Names of all commands."""
        return list(COMMANDS)

    def get_command(self, ctx: Any, cmd_name: str) -> Any:
        """Load one command."""
        if cmd_name not in COMMANDS:
            ctx.fail(f"there is no command '{cmd_name}'{suggestion(cmd_name, list(COMMANDS))}")
        module = import_module(f"unmix.cli.{cmd_name}")
        single = typer.Typer(add_completion=False, rich_markup_mode=None)
        # \b keeps the line breaks of the example
        epilog = "\b\n" + module.EXAMPLE.strip("\n")
        single.command(cmd_name, context_settings=CONTEXT, epilog=epilog)(module.command)
        loaded = typer.main.get_command(single)
        loaded.name = cmd_name
        return loaded

    def format_commands(self, ctx: Any, formatter: Any) -> None:  # noqa: ARG002 - the signature is typer's
        """List the commands without loading them."""
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))


def _print_version(wanted: bool) -> None:
    if wanted:
        print(f"unmix {metadata.version('unmix')}")
        raise typer.Exit


def _print_environment(wanted: bool) -> None:
    if not wanted:
        return
    from unmix.provenance import versions  # noqa: PLC0415 - not needed for anything else here

    found = versions()
    for package in ("plotly", "typer", "h5netcdf", "openpyxl", "dask", "zarr"):
        try:
            found[package] = metadata.version(package)
        except metadata.PackageNotFoundError:
            found[package] = "not installed"
    found["system"] = f"{platform.system()} {platform.release()} {platform.machine()}"
    for name, version in found.items():
        print(f"{name:<14}{version}")
    raise typer.Exit


def _build() -> Any:
    app = typer.Typer(
        cls=LazyGroup,
        no_args_is_help=True,
        rich_markup_mode=None,
        context_settings=CONTEXT,
        epilog="\b\nStart here:\n  unmix demo\n  unmix quantify --help",
    )

    @app.callback()
    def unmix(
        version: Annotated[
            bool,
            typer.Option("--version", help="Print the version.", callback=_print_version, is_eager=True),
        ] = False,
        environment: Annotated[
            bool,
            typer.Option("--environment", help="Print the versions that a bug report needs.",
                         callback=_print_environment, is_eager=True),
        ] = False,
    ) -> None:  # fmt: skip
        """What is in a mixture, how much of each, and how sure: from optical spectra."""

    return typer.main.get_command(app)


def main(arguments: Sequence[str] | None = None) -> None:
    """Run the command line; the entry point that packaging knows.

    Parameters
    ----------
    arguments : sequence of str, optional
        What stands behind the program's name; that of the process by default.

    Raises
    ------
    SystemExit
        Always: status 0 when every sample is answered and supported, 1 when something is doubtful or
        unsupported, 2 when the input or the arguments could not be used.
    """
    for stream in (sys.stdout, sys.stderr):
        # A terminal that lacks a character shows a question mark; it does not end the program
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")
    _build().main(args=list(arguments) if arguments is not None else None, prog_name="unmix")
