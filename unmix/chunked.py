"""Spectra in chunks (dask): the same work block by block, done only when it is asked for.

A block is a piece of the leading dimensions with all its channels. What a result looks like is learnt by running the
work on one invented spectrum with the labels of the first; nothing is read for that. dask is loaded only by spectra
that are in chunks already.
"""

import sys
import warnings
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from typing import Any

import numpy as np
import xarray as xr

from unmix.errors import UnmixWarning
from unmix.spectra import check_spectra, spectral_dim

#: work on spectra in memory
Work = Callable[[xr.DataArray], xr.Dataset]

#: letters that a text of a result in chunks can have; a longer one ends in CUT
TEXT = 1000
CUT = " ..."


def is_chunked(spectra: Any) -> bool:
    """Whether spectra are an array in chunks, whose numbers are not in memory."""
    return isinstance(spectra, xr.DataArray) and spectra.chunks is not None


def whole_channels(spectra: xr.DataArray) -> xr.DataArray:
    """Checked spectra in chunks that hold all channels each; says so where chunks had to be merged.

    Parameters
    ----------
    spectra : DataArray
        In chunks.

    Returns
    -------
    DataArray, dims (..., spectral)
    """
    found = check_spectra(spectra)
    dim = spectral_dim(found)
    parts = (found.chunks or ())[-1]
    if len(parts) > 1:
        warnings.warn(f"the spectra are cut into {len(parts)} chunks along '{dim}', and every spectrum is needed "
                      "whole; the chunks were merged, which reads each piece of the store several times",
                      UnmixWarning, stacklevel=4)  # fmt: skip
    # the coordinates keep their own chunks, if they have any
    return found.copy(data=found.data.rechunk({found.ndim - 1: -1}))


def by_block(work: Work, spectra: xr.DataArray, *, room: Mapping[str, int] | None = None) -> xr.Dataset:
    """A result whose arrays are computed block by block when they are asked for.

    Parameters
    ----------
    work : callable
        Makes a Dataset from spectra in memory; can be sent to another process. Its variables either run along all
        leading dimensions of the spectra, or do not depend on the spectra.
    spectra : DataArray
        In chunks.
    room : mapping, optional
        Dimensions of the result whose size depends on the spectra, to the largest that they can have; empty places
        are NaN or "".

    Returns
    -------
    Dataset
        Variables along the leading dimensions are in chunks like the spectra, the others in memory. Texts have at most
        ``TEXT`` letters.
    """
    spectra = whole_channels(spectra)
    dim = spectral_dim(spectra)
    template, fixed, attrs = _outline(work, spectra, room or {})
    lazy = xr.map_blocks(one_block, spectra, template=template, kwargs={
        "work": work, "names": tuple(map(str, template.data_vars)), "room": dict(room or {}),
    })  # fmt: skip
    kept = {name: c.variable for name, c in spectra.coords.items() if dim not in c.dims}
    found: xr.Dataset = lazy.assign_coords(kept).assign(fixed.data_vars).assign_coords(fixed.coords)
    return found.assign_attrs(attrs)


def one_block(spectra: xr.DataArray, *, work: Work, names: tuple[str, ...], room: Mapping[str, int]) -> xr.Dataset:
    """The part of a result that belongs to one block, in the shape that the whole result has.

    Parameters
    ----------
    spectra : DataArray
        In memory.
    work : callable
    names : tuple of str
        Variables to keep.
    room : mapping
        See :func:`by_block`.

    Returns
    -------
    Dataset
        Without coordinates other than those of its dimensions.
    """
    with one_thread():
        found = work(spectra)[list(names)]
    found = found.drop_vars([name for name in found.coords if name not in found.indexes])
    fill: Any = {name: "" if array.dtype.kind in "UO" else np.nan for name, array in found.data_vars.items()}
    for dim, size in room.items():
        if dim in found.dims:
            found = found.pad({dim: (0, size - found.sizes[dim])}, constant_values=fill)
    texts = {name: array.copy(data=_cut(array.values)) for name, array in found.data_vars.items()
             if array.dtype.kind in "UO"}  # fmt: skip
    return found.assign(texts)


@contextmanager
def one_thread() -> Iterator[None]:
    """Let compiled code use one thread: blocks run side by side already."""
    from threadpoolctl import threadpool_limits  # noqa: PLC0415 - not needed before there are blocks

    numba = sys.modules.get("numba")
    before = numba.get_num_threads() if numba is not None else 1
    with threadpool_limits(1):
        if numba is not None:
            numba.set_num_threads(1)
        try:
            yield
        finally:
            if numba is not None:
                numba.set_num_threads(before)


def _outline(
    work: Work, spectra: xr.DataArray, room: Mapping[str, int]
) -> tuple[xr.Dataset, xr.Dataset, dict[str, Any]]:
    """What the result looks like: empty arrays in chunks, what does not depend on the spectra, and attributes."""
    import dask.array as da  # noqa: PLC0415 - whoever has spectra in chunks has dask loaded

    leading = set(map(str, spectra.dims[:-1]))
    chunks = dict(zip(spectra.dims, spectra.chunks or (), strict=True))
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", UnmixWarning)
        found = work(_invented(spectra))
    template = {}
    for name, array in found.data_vars.items():
        if set(array.dims) & leading:
            cut = tuple(chunks[d] if d in leading else (room.get(str(d), array.sizes[d]),) for d in array.dims)
            kind = f"<U{TEXT}" if array.dtype.kind in "UO" else array.dtype
            template[name] = (array.dims, da.empty([sum(parts) for parts in cut], chunks=cut, dtype=kind), array.attrs)
    index = {name: c.variable for name, c in {**found.coords, **spectra.coords}.items()
             if c.dims == (name,) and (name in leading or name in found.coords)}  # fmt: skip
    alone = {name: c.variable for name, c in found.coords.items() if not set(c.dims) & leading}
    fixed = xr.Dataset({name: a.variable for name, a in found.data_vars.items() if name not in template}, coords=alone)
    return xr.Dataset(template, coords=index), fixed, dict(found.attrs)


def _invented(spectra: xr.DataArray) -> xr.DataArray:
    """One spectrum with the labels of the first and numbers that any quantity can have."""
    first = spectra.isel(dict.fromkeys(spectra.dims[:-1], slice(0, 1)))
    values = np.random.default_rng(0).uniform(0.3, 0.7, first.shape).astype(spectra.dtype)
    return first.copy(data=values).compute()


def _cut(texts: Any) -> Any:
    """Texts of one width, a longer one cut with a mark."""
    whole = np.asarray(texts).astype(str)
    long = np.char.str_len(whole) > TEXT
    if long.any():
        whole = np.where(long, np.char.add(whole.astype(f"<U{TEXT - len(CUT)}"), CUT), whole)
    return whole.astype(f"<U{TEXT}")
