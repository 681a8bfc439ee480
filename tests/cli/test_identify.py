import csv

import numpy as np
import pytest

from unmix import write
from unmix.spectra import make_spectra

AXIS = np.arange(700.0, 1800, 4.0)


@pytest.fixture
def shelf(tmp_path, monkeypatch, rng):
    """A library of twelve and two samples, of which one holds something else."""
    rows = np.zeros((13, AXIS.size))
    for i in range(13):
        for _ in range(6):
            rows[i] += rng.uniform(0.2, 1) / (1 + ((AXIS - rng.uniform(720, 1780)) / 9) ** 2)
    names = [f"compound {i}" for i in range(12)]
    library = make_spectra(rows[:12], AXIS, dim="wavenumber", quantity="absorptivity", leading="component",
                           labels=names, attrs={"per": "g/L"})  # fmt: skip
    values = np.array([0.6 * rows[2] + 0.3 * rows[9], 0.6 * rows[2] + 0.4 * rows[12]])
    samples = make_spectra(values + 1e-3 * rng.normal(size=values.shape), AXIS, dim="wavenumber", quantity="absorbance",
                           labels=["clean", "strange"])  # fmt: skip
    write(library, tmp_path / "library.nc")
    write(samples, tmp_path / "samples.csv")
    monkeypatch.chdir(tmp_path)
    return tmp_path


def test_members_are_named_and_the_strange_is_said(shelf, unmix):
    status, out, err = unmix("identify", "samples.csv", "--library", "library.nc", "--path-length", "1 cm",
                             "--csv", "found.csv", "--report", "found.html")  # fmt: skip
    assert status == 1
    assert "compound 2" in out
    assert "compound 9" in out
    assert "None of the library's spectra explains the band" in " ".join(out.split())
    assert "wrote found.csv" in err
    with (shelf / "found.csv").open(encoding="utf-8-sig", newline="") as file:
        rows = list(csv.DictReader(file))
    best = [row for row in rows if row["sample"] == "clean" and float(row["rank"]) == 1]
    assert {row["component"] for row in best} == {"compound 2", "compound 9"}
    assert {row["unit"] for row in best} == {"g/L"}
    page = (shelf / "found.html").read_text(encoding="utf-8")
    assert page.index("strange") < page.index("clean:")
    assert "Candidate mixtures, the likeliest first" in page


def test_names_that_the_library_lacks(shelf, unmix):
    status, _, err = unmix("identify", "samples.csv", "--library", "library.nc", "--include", "compund 2")
    assert status == 2
    assert "which the library does not hold, did you mean 'compound 2'" in " ".join(err.split()) or "compound 2" in err
