"""What a command leaves behind: files whole or not at all, the exit status, and errors in one sentence."""

import os
import sys
import warnings
from collections.abc import Iterable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from enum import IntEnum
from pathlib import Path
from typing import Any

import typer

from unmix.cli.terminal import coloured, harmless, painted, say
from unmix.errors import InputError, UnmixError, UnmixWarning, WriteError

#: status of a program that was stopped by Ctrl-C
STOPPED = 130


class Status(IntEnum):
    """Exit statuses of every command."""

    SUPPORTED = 0
    DOUBTFUL = 1
    UNUSABLE = 2


def status_of(verdicts: Iterable[str], *, refused: int = 0) -> Status:
    """The exit status for the verdicts of a run and the number of inputs that could not be used."""
    if refused:
        return Status.UNUSABLE
    return Status.SUPPORTED if all(verdict == "supported" for verdict in verdicts) else Status.DOUBTFUL


def is_stream(path: Path | None) -> bool:
    """Whether the option asks for standard output instead of a file."""
    return path is not None and str(path) == "-"


def check_targets(paths: Iterable[Path | None], *, overwrite: bool) -> None:
    """Refuse files that could not be written, before any work is done.

    Raises
    ------
    WriteError
        When one exists and may not be replaced, its folder does not exist, or two are the same file.
    """
    seen: set[Path] = set()
    for path in paths:
        if path is None or is_stream(path):
            continue
        place = Path(os.path.abspath(path))
        if place in seen:
            raise WriteError(
                "is asked for twice", where=str(path), accepted="give every file a name of its own"
            )
        seen.add(place)
        if place.is_dir():
            raise WriteError("is a folder", where=str(path), accepted="give the name of a file")
        if place.exists() and not overwrite:
            raise WriteError(
                "exists already", where=str(path), accepted="choose another name or add --overwrite"
            )
        if not place.parent.is_dir():
            raise WriteError("its folder does not exist", where=str(path), accepted="create the folder first")


@dataclass(frozen=True)
class OutputFiles:
    """The files that the shared options ask for; ``-`` for CSV and JSON is standard output."""

    csv: Path | None = None
    xlsx: Path | None = None
    json: Path | None = None
    netcdf: Path | None = None
    report: Path | None = None
    overwrite: bool = False

    @property
    def stream(self) -> bool:
        """Whether standard output is taken, so that nothing else may be printed there."""
        return is_stream(self.csv) or is_stream(self.json)

    def check(self) -> None:
        """Refuse what could not be written, before any work is done; see :func:`check_targets`.

        Raises
        ------
        WriteError, InputError
        """
        if is_stream(self.csv) and is_stream(self.json):
            raise InputError(
                "--csv and --json cannot both go to standard output", accepted="give one of them a file"
            )
        paths = (self.csv, self.xlsx, self.json, self.netcdf, self.report)
        check_targets(paths, overwrite=self.overwrite)

    def write(self, results: Sequence[Any]) -> None:
        """Write results into every file that was asked for, each whole or not at all."""
        from unmix.report import tables  # noqa: PLC0415 - heavy, and not needed for a help text
        from unmix.report.page import report  # noqa: PLC0415

        if is_stream(self.csv):
            print(tables.csv_text(tables.rows(results), tables.columns(results)), end="")
        if is_stream(self.json):
            print(tables.json_text(tables.document(results)), end="")
        writers = ((tables.write_csv, self.csv), (tables.write_xlsx, self.xlsx), (tables.write_json, self.json),
                   (tables.write_netcdf, self.netcdf), (report, self.report))  # fmt: skip
        for write, path in writers:
            if path is not None and not is_stream(path):
                write(results, path, overwrite=self.overwrite)
                say(f"wrote {path}")


def print_error(text: str) -> None:
    """One sentence about what went wrong, on standard error."""
    mark = painted("unmix:", "bad", colour=coloured(sys.stderr))
    print(mark, harmless(text), file=sys.stderr)


@contextmanager
def errors_as_sentences(debug: bool) -> Iterator[set[str]]:
    """Turn what goes wrong inside into one sentence and status 2; with ``debug`` the error comes through.

    Warnings of unmix become remarks on standard error, each once, unless their text was put into the set that is
    handed out because it is shown elsewhere. Ctrl-C ends with status 130.
    """
    shown: set[str] = set()
    with warnings.catch_warnings(record=not debug) as caught:
        warnings.simplefilter("default" if debug else "ignore")
        warnings.simplefilter("always", UnmixWarning)
        try:
            yield shown
        except KeyboardInterrupt:
            print_error("stopped by Ctrl-C; files that were finished are in place, none is half-written")
            raise typer.Exit(STOPPED) from None
        except (BrokenPipeError, typer.Exit, typer.Abort, typer.BadParameter):
            raise
        except (UnmixError, OSError, MemoryError) as error:
            if debug:
                raise
            print_error(_sentence(error))
            raise typer.Exit(Status.UNUSABLE) from error
        except Exception as error:
            if debug:
                raise
            print_error(f"a fault in unmix itself ({type(error).__name__}: {error}); "
                        "run again with --debug and report what it prints")  # fmt: skip
            raise typer.Exit(Status.UNUSABLE) from error
        finally:
            for text in dict.fromkeys(str(entry.message) for entry in caught or []):
                if text not in shown:
                    say(f"note: {text}")


def _sentence(error: BaseException) -> str:
    if isinstance(error, MemoryError):
        return "there is not enough memory for this; give fewer files at a time"
    if isinstance(error, OSError) and not isinstance(error, UnmixError):
        place = f"{error.filename}: " if error.filename else ""
        return f"{place}{(error.strerror or str(error)).lower()}"
    return str(error)
