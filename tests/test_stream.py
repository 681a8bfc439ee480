"""From store to store: equal to the answer in memory, resumed after a stop, never whole before it is."""

import json
import os
import signal
from functools import partial

import numpy as np
import pytest
import xarray as xr

import unmix
from unmix.errors import InputError, WriteError
from unmix.stream import stream

distributed = pytest.importorskip("distributed")
pytest.importorskip("zarr")

ROOM = {"misfit_band": 8}


@pytest.fixture
def job(tmp_path, rng):
    axis = np.linspace(400, 700, 61)
    pure = xr.DataArray(
        np.exp(-(((axis - np.array([[470.0], [540], [610]])) / 35) ** 2)), dims=("component", "wavelength"),
        coords={"component": ["amber", "blue", "coral"], "wavelength": axis},
        attrs={"quantity": "absorptivity", "per": "g/L"},
    )  # fmt: skip
    values = rng.uniform(0, 2, (23, 3)) @ pure.values + 0.002 * rng.normal(size=(23, 61))
    spectra = xr.DataArray(values.astype(np.float32), dims=("sample", "wavelength"),
                           coords={"wavelength": axis, "label": ("sample", [f"s{i}" for i in range(23)])},
                           attrs={"quantity": "absorbance"})  # fmt: skip
    unmix.write(spectra, tmp_path / "in.zarr")
    return spectra, partial(unmix.quantify, pure=pure, path_length=1.0), tmp_path / "in.zarr", tmp_path / "out.zarr"


def opened(path):
    return xr.open_zarr(path, consolidated=False).load()


def same(found, spectra, work):
    expected = work(spectra)
    assert set(found.data_vars) == set(expected.data_vars)
    for name in ("concentration", "lower", "upper", "detection_limit", "fitted"):
        np.testing.assert_allclose(found[name], expected[name], rtol=1e-10, atol=1e-14)
    assert found.verdict.values.tolist() == expected.verdict.values.tolist()
    assert found.reason.values.tolist() == expected.reason.values.tolist()
    assert found.label.values.tolist() == spectra.label.values.tolist()
    assert found.attrs["caution"] == expected.attrs["caution"]
    assert found.attrs["settings"] == expected.attrs["settings"]


@pytest.mark.parametrize("workers", [1, 2])
def test_blocks_equal_the_answer_in_memory(job, workers):
    spectra, work, source, target = job
    told = []
    done = stream(work, source, target, room=ROOM, rows=5, workers=workers, progress=lambda *at: told.append(at))
    same(opened(target), spectra, work)
    assert sorted(told)[-1] == (23, 23)
    assert (done.blocks, done.found_done, sum(done.verdicts.values())) == (5, 0, 23)
    assert [path.name for path in target.parent.iterdir() if path.name.startswith("out")] == ["out.zarr"]


def test_an_image(job, tmp_path):
    spectra, work, _, target = job
    cube = xr.DataArray(spectra.values[:20].reshape(5, 4, -1), dims=("y", "x", "wavelength"),
                        coords={"wavelength": spectra.wavelength}, attrs=spectra.attrs)  # fmt: skip
    unmix.write(cube, tmp_path / "cube.zarr")
    stream(work, tmp_path / "cube.zarr", target, room=ROOM, rows=2, workers=1)
    np.testing.assert_allclose(opened(target).concentration, work(cube).concentration, rtol=1e-10)


class Stopped(Exception):
    pass


def test_a_run_that_stopped_goes_on_without_redoing_blocks(job):
    spectra, work, source, target = job

    def stop(done, _total):
        if done == 10:
            raise Stopped

    with pytest.raises(Stopped):
        stream(work, source, target, room=ROOM, rows=5, workers=1, progress=stop)
    assert not target.exists()
    unfinished = target.with_name("out.zarr.unfinished")
    stamps = {path.name: path.stat().st_mtime_ns for path in (unfinished / "done").iterdir()}
    assert set(stamps) == {"0", "1"}
    with pytest.raises(WriteError, match="left over from a run that was stopped"):
        stream(work, source, target, room=ROOM, rows=5, workers=1)
    with pytest.raises(WriteError, match="the rows differs"):
        stream(work, source, target, room=ROOM, rows=6, workers=1, resume=True)
    other = partial(work, baseline=2)
    with pytest.raises(WriteError, match="the settings differs"):
        stream(other, source, target, room=ROOM, rows=5, workers=1, resume=True)
    done = stream(work, source, target, room=ROOM, rows=5, workers=1, resume=True)
    assert (done.found_done, sum(done.verdicts.values())) == (2, 23)
    same(opened(target), spectra, work)
    assert not unfinished.exists()


def test_a_damaged_record_is_not_resumed(job):
    _, work, source, target = job
    unfinished = target.with_name("out.zarr.unfinished")
    (unfinished / "done").mkdir(parents=True)
    (unfinished / "job.json").write_text("{")
    with pytest.raises(WriteError, match="record is damaged"):
        stream(work, source, target, room=ROOM, resume=True)


def test_nothing_is_written_when_the_input_is_bad(job):
    _, work, source, target = job
    with pytest.raises(InputError, match="rows is 0"):
        stream(work, source, target, room=ROOM, rows=0)
    with pytest.raises(InputError, match="baseline"):
        stream(partial(work, baseline=-2), source, target, room=ROOM)
    with pytest.raises(InputError, match="workers is 0"):
        stream(work, source, target, room=ROOM, workers=0)
    target.mkdir()
    with pytest.raises(WriteError, match="exists already"):
        stream(work, source, target, room=ROOM)
    assert sorted(path.name for path in target.parent.iterdir() if path.is_dir()) == ["in.zarr", "out.zarr"]


def test_an_existing_store_is_replaced_only_at_the_end(job):
    spectra, work, source, target = job
    stream(work, source, target, room=ROOM, workers=1)
    other = partial(work, baseline=None)

    def look(_done, _total):
        assert json.loads(opened(target).attrs["settings"])["baseline"] == 1

    stream(other, source, target, room=ROOM, workers=1, overwrite=True, progress=look)
    same(opened(target), spectra, other)


def test_one_worker_of_two_is_killed_and_nothing_is_lost(job):
    spectra, work, source, target = job

    with distributed.LocalCluster(n_workers=2, threads_per_worker=1, processes=True, dashboard_address=None) as cluster:
        workers = [worker.pid for worker in cluster.workers.values()]

        def kill_once(done, _total):
            if len(workers) == 2 and done >= 2:
                os.kill(workers.pop(), signal.SIGKILL)

        done = stream(work, source, target, room=ROOM, rows=1, scheduler=cluster.scheduler_address,
                      progress=kill_once)  # fmt: skip
    assert len(workers) == 1
    assert sum(done.verdicts.values()) == 23
    same(opened(target), spectra, work)
