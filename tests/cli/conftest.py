"""A small laboratory on disk: two pure spectra and a few samples, as files that a person would have."""

import numpy as np
import pytest

from unmix.cli import main

AXIS = np.arange(400.0, 701.0, 2.0)
DYES = {"crimson": [(520, 60, 0.05), (560, 40, 0.03)], "azure": [(610, 50, 0.08), (440, 60, 0.02)]}


def absorptivity(name, axis=AXIS):
    return sum(h / (1 + ((axis - at) / (w / 2)) ** 2) for at, w, h in DYES[name])


def write_csv(path, axis, values, heading="Absorbance"):
    rows = [f"Wavelength (nm),{heading}", *(f"{x:g},{y:.7f}" for x, y in zip(axis, values, strict=True))]
    path.write_text("\n".join([*rows, ""]), encoding="ascii")


def sample(red, blue, seed, axis=AXIS):
    noise = np.random.default_rng(seed).normal(0, 2e-4, axis.size)
    return red * absorptivity("crimson", axis) + blue * absorptivity("azure", axis) + 0.01 + noise


@pytest.fixture
def laboratory(tmp_path, monkeypatch):
    """A working folder with ``pure/``, ``samples/`` and nothing else."""
    (tmp_path / "pure").mkdir()
    (tmp_path / "samples").mkdir()
    for name in DYES:
        write_csv(tmp_path / "pure" / f"{name}.csv", AXIS, absorptivity(name), "(g/L)-1 cm-1")
    for k, (red, blue) in enumerate([(4.0, 6.0), (0.0, 8.0)], start=1):
        write_csv(tmp_path / "samples" / f"vat{k}.csv", AXIS, sample(red, blue, k))
    monkeypatch.chdir(tmp_path)
    monkeypatch.setenv("COLUMNS", "80")
    return tmp_path


@pytest.fixture
def unmix(capfd):
    """Run a command in this process: status, standard output, standard error."""

    def run(*arguments):
        with pytest.raises(SystemExit) as end:
            main([str(part) for part in arguments])
        out, err = capfd.readouterr()
        return end.value.code or 0, out, err

    return run


@pytest.fixture
def lab():
    """The makers of this laboratory's files."""
    return {"axis": AXIS, "sample": sample, "write": write_csv, "absorptivity": absorptivity}
