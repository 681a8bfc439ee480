"""Pages and figures of calibrations and predictions."""

import numpy as np
import pandas as pd
import pytest

import unmix
from unmix.errors import InputError
from unmix.report.calibration_plots import chart_figure, interpretation_figure, predicted_figure
from unmix.spectra import make_spectra

AXIS = np.arange(4000.0, 4600, 10)
PURE = np.exp(-(((AXIS - np.array([[4150.0], [4300], [4450]])) / 60) ** 2))
HOSTILE = "<script>alert(1)</script>"


def measured(rng, n, start=0, alien=0.0):
    c = rng.uniform(0.2, 2, (n, 3))
    x = c @ PURE + 1e-3 * rng.normal(size=(n, AXIS.size))
    x[-1] += alien * np.exp(-(((AXIS - 4230) / 15) ** 2))
    names = [f"{HOSTILE} {start + i}" for i in range(n)]
    spectra = make_spectra(x, AXIS, dim="wavenumber", quantity="absorbance", labels=names)
    return spectra, pd.DataFrame({"water": c[:, 0] + 0.01 * rng.normal(size=n), HOSTILE: c[:, 1]}, index=names)


@pytest.fixture
def made(rng):
    return unmix.calibrate(*measured(rng, 40), permutations=0, unit="g/L")


@pytest.fixture
def found(made, rng):
    return unmix.predict(made, measured(rng, 12, start=100, alien=1.0)[0])


def test_the_page_of_a_calibration(made, tmp_path):
    text = unmix.report(made, tmp_path / "page.html").read_text(encoding="utf-8")
    for part in ("Can this calibration be trusted?", "left out (SECV)", "g/L", "How many latent variables?",
                 "Regression vector", "Caution", "sha256"):  # fmt: skip
        assert part in text
    assert "<script>alert" not in text
    # the same from its Dataset
    assert unmix.report(made.data, tmp_path / "other.html").exists()


def test_the_page_of_predictions_puts_problems_on_top(found, tmp_path):
    text = unmix.report(found, tmp_path / "page.html").read_text(encoding="utf-8")
    assert "The spectrum holds something that the calibration does not know" in text
    rows = text.split("What was found")[1]
    assert rows.index("unsupported") < rows.index("supported</span>")
    assert "<script>alert" not in text
    assert "the calibrated range is shaded" in text


def test_figures_have_units_and_run_the_right_way(made, found):
    figure = predicted_figure(made.data)
    assert figure.layout.xaxis.title.text == "Reference water (g/L)"
    chart = chart_figure(found)
    assert chart.layout.yaxis.title.text == "Predicted water (g/L)"
    assert {trace.name for trace in chart.data} <= {"supported", "doubtful", "unsupported"}
    assert sum(len(trace.x) for trace in chart.data) == 12
    reading = interpretation_figure(unmix.interpret(made))
    assert reading.layout.xaxis.autorange == "reversed"
    assert reading.layout.xaxis.title.text == "Wavenumber (cm-1)"
    with pytest.raises(InputError, match="needs a calibration"):
        predicted_figure(found)


def test_predictions_over_time_stand_on_a_time_axis(made, rng):
    spectra = measured(rng, 6, start=300)[0]
    when = np.datetime64("2025-03-01T06:00") + np.arange(6) * np.timedelta64(15, "m")
    found = unmix.predict(made, spectra.rename(sample="time").assign_coords(time=when))
    chart = chart_figure(found)
    assert chart.layout.xaxis.title.text == "Time"
    assert str(chart.data[0].x[0]).startswith("2025-03-01T06:")


def test_missing_intervals_and_spectra_leave_gaps(made, rng, tmp_path):
    spectra = measured(rng, 4, start=400)[0]
    spectra[1, 5] = np.nan
    found = unmix.predict(made, spectra)
    text = unmix.report(found, tmp_path / "page.html").read_text(encoding="utf-8")
    assert "channels are missing" in text
