"""Importing is light: heavy packages are loaded by what needs them and by nothing else."""

import json
import subprocess
import sys

import pytest

#: what ``import unmix`` must not load; numpy and xarray come with the modules that need them
HEAVY = ["sklearn", "numba", "plotly", "dask", "distributed", "typer", "pandas", "xarray", "scipy", "numpy",
         "h5netcdf", "h5py", "zarr", "openpyxl", "pymcr", "IPython", "matplotlib"]  # fmt: skip


def loaded(code):
    """Top-level packages in a fresh interpreter after running some code."""
    script = f"{code}\nimport sys, json\nprint(json.dumps(sorted({{name.split('.')[0] for name in sys.modules}})))"
    run = subprocess.run([sys.executable, "-c", script], check=True, capture_output=True, text=True)
    return set(json.loads(run.stdout.splitlines()[-1]))


def test_the_door_loads_nothing_heavy():
    assert loaded("import unmix") & set(HEAVY) == set()


def test_the_door_tells_its_names_without_loading_them():
    assert loaded("import unmix; dir(unmix); unmix.__all__; unmix.__version__") & set(HEAVY) == set()


#: xarray itself loads pandas; beyond that each task loads what it needs alone
TASKS = {
    "read": ("import unmix; unmix.read", ["sklearn", "numba", "plotly", "dask", "typer", "pymcr", "matplotlib"]),
    "quantify": ("import unmix; unmix.quantify", ["sklearn", "numba", "plotly", "dask", "typer", "pymcr", "h5py"]),
    "conditioning": ("import unmix; unmix.conditioning", ["sklearn", "numba", "plotly", "dask", "typer", "pymcr"]),
    "report": ("import unmix; unmix.report", ["sklearn", "numba", "dask", "typer", "pymcr", "matplotlib"]),
    "command line": ("import unmix.cli", ["sklearn", "numba", "plotly", "dask", "pandas", "xarray", "scipy", "numpy"]),
    "kernels": ("import unmix.kernels.gls", ["xarray", "pandas", "sklearn", "numba", "plotly", "typer", "dask"]),
}


@pytest.mark.parametrize("task", TASKS)
def test_each_task_loads_what_it_needs(task):
    code, absent = TASKS[task]
    assert loaded(code) & set(absent) == set()


def test_importing_prints_nothing_and_leaves_logging_alone():
    code = (
        "import logging, warnings\nbefore = list(logging.root.handlers), list(warnings.filters)\nimport unmix\n"
        "unmix.quantify, unmix.read, unmix.report\n"
        "assert (logging.root.handlers, logging.getLogger('unmix').handlers) == (before[0], [])"
    )
    run = subprocess.run([sys.executable, "-c", code], check=True, capture_output=True, text=True)
    assert run.stdout == ""
    assert run.stderr == ""
