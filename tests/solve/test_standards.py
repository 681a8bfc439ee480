"""Learning pure spectra and variation from standards, and quantifying with what was learnt."""

import json

import numpy as np
import pandas as pd
import pytest
import xarray as xr

import unmix
from unmix.errors import InputError
from unmix.spectra import make_spectra

AXIS = np.arange(400.0, 700, 3)
PURE = np.exp(-(((AXIS - np.array([[460.0], [540], [620]])) / 45) ** 2))
NAMES = ["amber", "blue", "coral"]


def measured(rng, c, labels=None, noise=2e-4):
    """Spectra with a baseline that changes from sample to sample and a volume error of half a percent."""
    c = np.asarray(c, dtype=float)
    wander = rng.normal(size=(len(c), 3)) * [0.01, 0.01, 0.005]
    shapes = np.vstack([np.ones(AXIS.size), np.linspace(-1, 1, AXIS.size), np.sin(AXIS / 40)])
    values = (
        c * (1 + 0.005 * rng.normal(size=(len(c), 1))) @ PURE
        + wander @ shapes
        + noise * rng.normal(size=(len(c), AXIS.size))
    )
    return make_spectra(values, AXIS, dim="wavelength", quantity="absorbance", labels=labels)


@pytest.fixture
def standards(rng):
    c = rng.uniform(0.2, 3, (24, 3)) * (rng.random((24, 3)) < 0.75)
    c[0], c[1], c[2] = [1, 0, 0], [0, 1, 0], [0, 0, 1]
    labels = [f"std {i}" for i in range(24)]
    return measured(rng, c, labels), pd.DataFrame(c, index=labels, columns=NAMES)


def test_left_out_standards_are_covered_and_new_samples_too(standards, rng):
    spectra, table = standards
    learnt = unmix.learn_pure(spectra, table, unit="mg/L")
    assert learnt.verdict.item() == "supported"
    assert learnt.attrs["per"] == "mg/L"
    truth = rng.uniform(0.2, 3, (300, 3)) * (rng.random((300, 3)) < 0.75)
    found = unmix.quantify(measured(rng, truth), learnt)
    inside = (found.lower.values <= truth) & (truth <= found.upper.values)
    # 24 standards: the coverage itself is uncertain
    assert 0.88 < inside.mean() <= 1.0
    pure = make_spectra(PURE, AXIS, dim="wavelength", quantity="absorptivity", leading="component", labels=NAMES)
    plain = unmix.quantify(measured(rng, truth), pure, path_length=1, baseline=None)
    error, other = (np.sqrt(np.mean((one.concentration.values - truth) ** 2)) for one in (found, plain))
    assert error < 0.8 * other
    half = np.median((found.upper - found.lower).values[truth > 0] / 2)
    assert half < 3.5 * error
    assert "24 standards that were left out" in found.attrs["reproducibility"]
    # all of the uncertainty comes from the standards
    parts = found.contribution.sum("sample")
    assert (parts.sel(source="between samples") > 0).all()
    assert (parts.sel(source="noise of the spectrum") == 0).all()


def test_bare_pure_spectra_say_what_they_do_not_know(rng):
    pure = make_spectra(PURE, AXIS, dim="wavelength", quantity="absorptivity", leading="component", labels=NAMES)
    found = unmix.quantify(measured(rng, [[1, 2, 0.5]]), pure, path_length=1)
    assert "how well measurements repeat from sample to sample is unknown" in found.attrs["reproducibility"]


def test_rows_are_matched_by_name_and_not_by_order(standards, rng):
    spectra, table = standards
    shuffled = table.iloc[rng.permutation(24)]
    one, other = unmix.learn_pure(spectra, table), unmix.learn_pure(spectra, shuffled)
    np.testing.assert_array_equal(one.pure, other.pure)
    array = xr.DataArray(table.to_numpy(), dims=("sample", "component"),
                         coords={"sample": table.index, "component": NAMES})  # fmt: skip
    np.testing.assert_array_equal(unmix.learn_pure(spectra, array).pure, one.pure)


def test_a_mislabelled_standard_is_named(standards):
    spectra, table = standards
    wrong = table.copy()
    wrong.loc["std 9"] = wrong.loc["std 9"].to_numpy()[::-1] + 1.0
    found = unmix.learn_pure(spectra, wrong)
    assert found.verdict.item() == "doubtful"
    assert "'std 9'" in found.reason.item()
    assert found.outlying.sel(sample="std 9").item()


def test_a_bent_relation_is_named(rng):
    c = np.column_stack([np.repeat(np.linspace(0.5, 3, 8), 3), np.tile([0.0, 1, 2], 8)])
    y = (c - np.array([0.12, 0]) * c**2) @ PURE[:2] + 3e-4 * rng.normal(size=(24, AXIS.size))
    labels = [f"s{i}" for i in range(24)]
    spectra = make_spectra(y, AXIS, dim="wavelength", quantity="absorbance", labels=labels)
    found = unmix.learn_pure(spectra, pd.DataFrame(c, index=labels, columns=NAMES[:2]))
    assert found.verdict.item() == "doubtful"
    assert "amber" in found.reason.item()
    assert "bend" in found.reason.item()
    assert found.bent.values[0] < 0.01


def test_an_unlisted_component_is_flagged_in_the_metric(standards, rng):
    spectra, table = standards
    learnt = unmix.learn_pure(spectra, table)
    alien = measured(rng, [[1.0, 1, 1]] * 3)
    alien = alien + 0.2 * np.exp(-(((AXIS - 500) / 8) ** 2))
    found = unmix.quantify(alien.assign_attrs(spectra.attrs), learnt)
    assert (found.verdict.values != "supported").all()
    assert "500" in found.reason.values[0] or "49" in found.reason.values[0]


def test_groups_are_left_out_together(standards):
    spectra, table = standards
    days = np.repeat(["mon", "tue", "wed", "thu"], 6)
    found = unmix.learn_pure(spectra, table, groups=days)
    again = unmix.learn_pure(spectra, table, groups=days.tolist())
    np.testing.assert_array_equal(found.left_out_group, again.left_out_group)
    with pytest.raises(InputError, match="3 entries for 24"):
        unmix.learn_pure(spectra, table, groups=["a", "b", "c"])


def test_paths_regions_and_missing_channels(standards, rng):
    spectra, table = standards
    thin = spectra.assign_coords(path_length=("sample", np.full(24, 1.0)))
    learnt = unmix.learn_pure(thin, table, regions=[(420, 660)])
    assert learnt.wavelength.values.min() >= 420
    sample = measured(rng, [[1.0, 2, 0.5]])
    double = (2 * sample).assign_attrs(sample.attrs)
    found = unmix.quantify(double, learnt, path_length=2.0)
    np.testing.assert_allclose(
        found.concentration, unmix.quantify(sample, learnt, path_length=1.0).concentration, rtol=0.05
    )
    holed = sample.copy(data=np.where(sample.wavelength > 640, np.nan, sample.values))
    wider = unmix.quantify(holed, learnt, path_length=1.0)
    whole = unmix.quantify(sample, learnt, path_length=1.0)
    assert (wider.standard_uncertainty >= whole.standard_uncertainty - 1e-9).all()
    diluted = unmix.quantify(sample, learnt, path_length=1.0, dilution=10, dilution_uncertainty=0.1)
    np.testing.assert_allclose(diluted.concentration, 10 * whole.concentration, rtol=1e-9)
    expected = np.hypot(10 * whole.standard_uncertainty, 0.1 * diluted.concentration)
    np.testing.assert_allclose(diluted.standard_uncertainty, expected, rtol=1e-9)


@pytest.mark.parametrize(
    ("change", "told"),
    [
        (lambda s, t: (s, t.drop("std 3")), "std 3"),
        (lambda s, t: (s, t.rename(index={"std 3": "std x"})), "std 3"),
        (lambda s, t: (s, t.assign(amber=[*t.amber[:-1], np.nan])), "amber"),
        (lambda s, t: (s, t.assign(amber=-1.0)), "amber"),
        (lambda s, t: (s[:4], t.iloc[:4]), "three standards|standards for"),
        (lambda s, t: (s, t.assign(blue=2 * t.amber)), "always change together"),
        (lambda s, t: (s.where(s.wavelength != 502), t), "no value at 502 nm"),
    ],
)
def test_standards_that_cannot_be_used_are_refused(standards, change, told):
    spectra, table = change(*standards)
    with pytest.raises(InputError, match=told):
        unmix.learn_pure(spectra, table)


def test_what_cannot_be_changed_after_learning(standards, rng):
    learnt = unmix.learn_pure(*standards)
    sample = measured(rng, [[1.0, 2, 0.5]])
    asked = {"regions cannot be changed": {"regions": [(450, 600)]}, "axis is given": {"axis": "shift"},
             "constraints is given": {"constraints": {"sum": 1.0}}}  # fmt: skip
    for told, options in asked.items():
        with pytest.raises(InputError, match=told):
            unmix.quantify(sample, learnt, **options)
    with pytest.raises(InputError, match="kind 'unknown'"):
        unmix.quantify(sample, xr.Dataset())


def test_provenance(standards):
    learnt = unmix.learn_pure(*standards, unit="mg/L")
    assert json.loads(learnt.attrs["settings"])["unit"] == "mg/L"
    assert learnt.attrs["kind"] == "learnt"
