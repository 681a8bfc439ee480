"""From a store of spectra to a store of results, block by block, whatever their size; a run that stopped goes on.

What is being written stands in a folder beside the target and takes the target's place when the last block is done, so
that no store looks complete that is not. A block is marked when all of it is written; doing a block twice writes the
same numbers to the same place.
"""

import concurrent.futures
import json
import multiprocessing
import os
import shutil
from collections import Counter
from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from functools import lru_cache, partial
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from unmix.chunked import Work, by_block, one_block
from unmix.errors import InputError, WriteError
from unmix.read import read

#: bytes of spectra in a block, if nothing else is asked for
BLOCK_BYTES = 2**24
#: what stands in the folder of an unfinished run: the store, what the job is, and a mark for every finished block
_STORE, _JOB, _MARKS = "store.zarr", "job.json", "done"

#: called with spectra done and all spectra
Progress = Callable[[int, int], None]


@dataclass(frozen=True)
class Finished:
    """What became of a run: spectra by verdict, and how many blocks had been done before."""

    verdicts: dict[str, int]
    blocks: int
    found_done: int


@dataclass(frozen=True)
class _Job:
    """What a worker needs to do any block; small, since it travels with every one."""

    source: str
    beside: str
    work: Work
    names: tuple[str, ...]
    room: dict[str, int]
    rows: int
    quantity: str | None
    unit: str | None


def stream(
    work: Work,
    source: str | os.PathLike[str],
    target: str | os.PathLike[str],
    *,
    room: dict[str, int] | None = None,
    rows: int | None = None,
    workers: int | None = None,
    scheduler: str | None = None,
    resume: bool = False,
    overwrite: bool = False,
    quantity: str | None = None,
    unit: str | None = None,
    progress: Progress | None = None,
) -> Finished:
    """Apply work to all spectra of a store and write the results to a Zarr store.

    Parameters
    ----------
    work : callable
        Makes a Dataset from spectra in memory, as ``functools.partial(unmix.quantify, pure=pure)`` does; can be sent
        to another process.
    source : path
        A Zarr folder or a netCDF file of spectra; images too.
    target : path
        The Zarr folder that shall appear.
    room : dict, optional
        As for ``chunked.by_block``.
    rows : int, optional
        Spectra, or lines of an image, in a block; about 16 MiB of spectra by default. A worker holds one block.
    workers : int, optional
        Processes; one a core by default. One works in this process.
    scheduler : str, optional
        Address of a dask scheduler whose workers do the work, such as ``tcp://host:8786``; they must see both stores
        under the same paths.
    resume : bool
        Go on with a run of the same job that was stopped.
    overwrite : bool
        Whether ``target`` may be replaced, when all is done.
    quantity, unit : str, optional
        As for ``unmix.read``.
    progress : callable, optional
        Called with the number of spectra done and of all.

    Returns
    -------
    Finished

    Raises
    ------
    WriteError
        When the target exists, or an unfinished run stands beside it that is another job or is not to be resumed.
    InputError, ReadError
        When the spectra or the options cannot be used, before anything is written.
    """
    target, source = Path(target).absolute(), Path(source).absolute()
    if target.exists() and not overwrite:
        raise WriteError("exists already", where=str(target), accepted="choose another name or ask for overwriting")
    if not target.parent.is_dir():
        raise WriteError("its folder does not exist", where=str(target), accepted="create the folder first")
    workers = workers if workers is not None else os.cpu_count() or 1
    if workers < 1:
        raise InputError(f"workers is {workers}", accepted="give a number from 1")
    spectra = read(source, chunks={}, quantity=quantity, unit=unit)
    rows = _rows(spectra, rows)
    first = str(spectra.dims[0])
    spectra = spectra.chunk({first: rows, **dict.fromkeys(spectra.dims[1:], -1)})
    lazy = by_block(work, spectra, room=room)
    names = tuple(str(name) for name, array in lazy.data_vars.items() if array.chunks is not None)
    beside = target.with_name(f"{target.name}.unfinished")
    done = _begin(beside, lazy, _description(lazy, spectra, source, rows), resume=resume)
    job = _Job(str(source), str(beside), work, names, dict(room or {}), rows, quantity, unit)
    count = -(-spectra.sizes[first] // rows)
    each = int(np.prod(spectra.shape[:-1], dtype=int)) // spectra.sizes[first]
    sizes = [min(rows, spectra.sizes[first] - i * rows) * each for i in range(count)]
    verdicts = sum(done.values(), Counter())
    finished, total = sum(sizes[i] for i in done), sum(sizes)
    with _pool(workers, scheduler, count - len(done)) as run:
        for block, found in run(job, [i for i in range(count) if i not in done]):
            verdicts += found
            finished += sizes[block]
            if progress is not None:
                progress(finished, total)
    _end(beside, target)
    return Finished(dict(verdicts), count, len(done))


def _rows(spectra: xr.DataArray, rows: int | None) -> int:
    if rows is not None:
        if rows < 1:
            raise InputError(f"rows is {rows}", accepted="give a number from 1")
        return min(rows, spectra.shape[0])
    return int(np.clip(BLOCK_BYTES * spectra.shape[0] // spectra.nbytes, 1, spectra.shape[0]))


# -- the unfinished store --------------------------------------------------------------------------------------------


def _description(lazy: xr.Dataset, spectra: xr.DataArray, source: Path, rows: int) -> dict[str, Any]:
    """What makes a job the same job; numbers of the spectra themselves are not looked at."""
    stat = source.stat()
    told = {key: lazy.attrs[key] for key in ("method", "settings", "versions") if key in lazy.attrs}
    return {"source": str(source), "changed": stat.st_mtime_ns, "sizes": [int(n) for n in spectra.shape],
            "rows": rows, **told}  # fmt: skip


def _begin(beside: Path, lazy: xr.Dataset, description: dict[str, Any], *, resume: bool) -> dict[int, Counter[str]]:
    """Make the unfinished store, or find out which blocks of it are done."""
    if beside.exists():
        if not resume:
            raise WriteError("is left over from a run that was stopped", where=str(beside),
                             accepted="resume it, or remove the folder")  # fmt: skip
        return _found(beside, description)
    lazy = lazy.assign_coords({name: c.load() for name, c in lazy.coords.items()})
    for variable in lazy.variables.values():
        variable.encoding.clear()
    try:
        (beside / _MARKS).mkdir(parents=True)
        lazy.to_zarr(beside / _STORE, mode="w", compute=False, consolidated=False, zarr_format=2)
        (beside / _JOB).write_text(json.dumps(description))
    except BaseException:
        shutil.rmtree(beside, ignore_errors=True)
        raise
    return {}


def _found(beside: Path, description: dict[str, Any]) -> dict[int, Counter[str]]:
    try:
        before = json.loads((beside / _JOB).read_text())
        done = {
            int(mark.name): Counter(json.loads(mark.read_text()))
            for mark in (beside / _MARKS).iterdir()
            if mark.name.isdigit()
        }
    except (OSError, ValueError) as error:
        raise WriteError("cannot be resumed: its record is damaged", where=str(beside),
                         accepted="remove the folder and start again") from error  # fmt: skip
    other = [key for key, value in description.items() if before.get(key) != value]
    if other:
        raise WriteError(f"cannot be resumed: the {other[0]} differs from that of the run that was stopped",
                         where=str(beside),
                         accepted="give the same spectra and options, or remove the folder")  # fmt: skip
    return done


def _end(beside: Path, target: Path) -> None:
    if target.exists():
        target.rename(beside / "replaced")
    (beside / _STORE).rename(target)
    shutil.rmtree(beside, ignore_errors=True)


# -- one block -------------------------------------------------------------------------------------------------------


@lru_cache(maxsize=2)
def _opened(source: str, quantity: str | None, unit: str | None) -> xr.DataArray:
    return read(source, chunks={}, quantity=quantity, unit=unit)


def do_block(block: int, *, job: _Job) -> tuple[int, Counter[str]]:
    """Do one block and mark it; verdicts are counted.

    Parameters
    ----------
    block : int
    job : _Job

    Returns
    -------
    block : int
    verdicts : Counter
    """
    mark = Path(job.beside) / _MARKS / f"{block}"
    if mark.exists():
        return block, Counter(json.loads(mark.read_text()))
    spectra = _opened(job.source, job.quantity, job.unit)
    first = str(spectra.dims[0])
    place = slice(block * job.rows, min((block + 1) * job.rows, spectra.sizes[first]))
    piece = spectra.isel({first: place}).compute(scheduler="synchronous")
    found = one_block(piece, work=job.work, names=job.names, room=job.room)
    found = found.drop_vars(list(found.coords))
    found.to_zarr(Path(job.beside) / _STORE, region={first: place}, consolidated=False, zarr_format=2)
    verdicts = Counter(map(str, found["verdict"].values.ravel())) if "verdict" in found else Counter[str]()
    begun = mark.with_name(f".{block}.{os.getpid()}")
    begun.write_text(json.dumps(verdicts))
    begun.replace(mark)
    return block, verdicts


# -- who does it -----------------------------------------------------------------------------------------------------

_Run = Callable[[_Job, list[int]], Iterable[tuple[int, Counter[str]]]]


def _cluster() -> Any:
    try:
        import distributed  # noqa: PLC0415 - an optional package
    except ImportError as error:
        raise InputError("a scheduler needs the package distributed, which is not installed",
                         accepted="install unmix with its extra 'scale'") from error  # fmt: skip
    return distributed


@contextmanager
def _pool(workers: int, scheduler: str | None, blocks: int) -> Iterator[_Run]:
    if scheduler is not None:
        cluster = _cluster()
        with cluster.Client(scheduler) as client:

            def on_cluster(job: _Job, todo: list[int]) -> Iterator[tuple[int, Counter[str]]]:
                while todo:
                    futures = dict(zip(client.map(do_block, todo, job=job, pure=False), todo, strict=True))
                    todo = []
                    for future in cluster.as_completed(list(futures)):
                        try:
                            yield future.result()
                        except cluster.CancelledError:
                            # its worker died before the answer was fetched: done if it left its mark, else again
                            todo.append(futures[future])

            yield on_cluster
        return
    if min(workers, blocks) <= 1:
        yield lambda job, todo: map(partial(do_block, job=job), todo)
        return
    pool = concurrent.futures.ProcessPoolExecutor(min(workers, blocks), multiprocessing.get_context("spawn"))
    try:

        def in_processes(job: _Job, todo: list[int]) -> Iterator[tuple[int, Counter[str]]]:
            futures = [pool.submit(do_block, block, job=job) for block in todo]
            for future in concurrent.futures.as_completed(futures):
                yield future.result()

        yield in_processes
    finally:
        pool.shutdown(wait=True, cancel_futures=True)
