"""A store of spectra to a store of results, whatever their size, for the commands that answer spectrum by spectrum."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from unmix.cli.output import OutputFiles, Status, status_of
from unmix.cli.terminal import progress, say
from unmix.errors import InputError


@dataclass(frozen=True)
class StoreOptions:
    """What the options about a store of results ask for; see ``options``."""

    out: Path | None = None
    resume: bool = False
    rows: int | None = None
    workers: int | None = None
    scheduler: str | None = None

    def check(self, files: OutputFiles) -> None:
        """Refuse options that do not go together.

        Raises
        ------
        InputError
        """
        if self.out is None:
            for name in ("resume", "rows", "workers", "scheduler"):
                if getattr(self, name):
                    raise InputError(f"--{name} is given without a store to write to", accepted="add --out STORE.zarr")
            return
        if self.out.suffix != ".zarr":
            raise InputError(f"--out is {self.out}", accepted="give a name that ends in .zarr")
        other = [path for path in (files.csv, files.xlsx, files.json, files.netcdf, files.report) if path is not None]
        if other:
            raise InputError(f"--out writes a store and {other[0]} another file of all results",
                             accepted="give one of them; parts of a store can be opened with xarray later")  # fmt: skip


def stream_store(
    work: Callable[..., Any],
    sources: Sequence[str],
    asked: StoreOptions,
    *,
    overwrite: bool,
    unit: str | None,
    quantity: str | None,
) -> Status:
    """Answer all spectra of one store into another, with progress, and say what became of them.

    Parameters
    ----------
    work : callable
        See ``stream.stream``.
    sources : sequence of str
        One path of a store.
    asked : StoreOptions
    overwrite : bool
    unit, quantity : str or None
        What the spectra leave unsaid.

    Returns
    -------
    Status

    Raises
    ------
    InputError
        When there is more than one source.
    """
    from unmix.diagnose.residual import MAX_BANDS  # noqa: PLC0415 - heavy
    from unmix.stream import stream  # noqa: PLC0415 - heavy

    if len(sources) != 1 or asked.out is None:
        raise InputError(f"--out takes the spectra of one store, but {len(sources)} are given",
                         accepted="put them into one Zarr store with unmix convert")  # fmt: skip
    at = [0, 0]
    with progress("spectra") as tick:

        def told(done: int, total: int) -> None:
            at[:] = done, total
            tick(done, total)

        try:
            run = stream(work, sources[0], asked.out, room={"misfit_band": MAX_BANDS}, rows=asked.rows,
                         workers=asked.workers, scheduler=asked.scheduler, resume=asked.resume, overwrite=overwrite,
                         quantity=quantity, unit=unit, progress=told)  # fmt: skip
        except KeyboardInterrupt:
            if at[1]:
                say(f"{at[0]} of {at[1]} spectra are finished and kept; the same command with --resume goes on")
            raise
    total = sum(run.verdicts.values())
    shares = [f"{run.verdicts.get(word, 0)} {word}" for word in ("supported", "doubtful", "unsupported")]
    print(f"{total} spectra: {', '.join(shares)}")
    if run.found_done:
        print(f"{run.found_done} of {run.blocks} blocks had been done before")
    say(f"wrote {asked.out}")
    return status_of(run.verdicts)
