"""``conditioning``: what pure spectra allow, before any sample is measured."""

import json

import numpy as np
import pytest
import xarray as xr

import unmix
from unmix.errors import AxisError, InputError, UnitError
from unmix.spectra import make_spectra


def test_result_has_its_form_whatever_the_options(dyes):
    plain = unmix.conditioning(dyes.pure)
    noisy = unmix.conditioning(dyes.pure, noise=1e-3, regions=[(430, 600)], baseline=None)
    assert set(plain) == set(noisy)
    for found in (plain, noisy):
        for name, variable in found.items():
            assert variable.attrs["long_name"], name
            assert "units" in variable.attrs, name
    assert plain.sizes["term"] == 5
    assert noisy.sizes["term"] == 3
    assert plain.variance_proportion.dims == ("term", "component")
    assert plain.spectral_angle.dims == ("component", "component_2")
    assert plain.net_signal.dims == ("component", "wavelength")
    assert np.isnan(plain.detection_limit.values).all()
    assert noisy.detection_limit.attrs["units"] == "mg/L"
    assert plain.attrs["kind"] == "conditioning"
    assert plain.attrs["baseline"] == 1
    assert json.loads(noisy.attrs["settings"])["regions"] == [[430, 600]]


def test_columns_of_the_proportions_add_up_to_one(dyes):
    assert unmix.conditioning(dyes.pure).variance_proportion.sum("term").values == pytest.approx([1.0] * 3)


def test_selectivity_is_that_of_the_net_signal_and_inflation_its_inverse_square(dyes):
    found = unmix.conditioning(dyes.pure)
    share = np.linalg.norm(found.net_signal, axis=1) / np.linalg.norm(found.pure_signal, axis=1)
    assert found.selectivity.values == pytest.approx(share)
    assert found.variance_inflation.values == pytest.approx(1 / share**2)


def test_detection_limit_is_the_one_that_samples_get(dyes):
    designed = unmix.conditioning(dyes.pure, noise=dyes.noise).detection_limit.values
    measured = unmix.quantify(dyes.spectra, dyes.pure, noise=dyes.noise).detection_limit.values
    assert designed == pytest.approx(measured[0], rel=1e-6)


def test_detection_limit_follows_the_noise(dyes):
    once = unmix.conditioning(dyes.pure, noise=1e-3).detection_limit.values
    assert unmix.conditioning(dyes.pure, noise=2e-3).detection_limit.values == pytest.approx(2 * once)
    assert unmix.conditioning(dyes.pure, noise=np.full(301, 1e-3)).detection_limit.values == pytest.approx(once)
    quiet = np.where(dyes.pure.wavelength.values < 550, 1e-3, 1.0)
    part = unmix.conditioning(dyes.pure, noise=1e-3, regions=[(400, 549.5)], baseline=None)
    weighed = unmix.conditioning(dyes.pure, noise=quiet, baseline=None)
    assert weighed.detection_limit.values == pytest.approx(part.detection_limit.values, rel=2e-2)


def test_figures_do_not_depend_on_the_scale_of_a_spectrum(dyes):
    plain, scaled = unmix.conditioning(dyes.pure), unmix.conditioning(dyes.pure * [[1e-6], [1.0], [1e6]])
    for name in ("condition_index", "variance_proportion", "selectivity", "variance_inflation", "spectral_angle"):
        assert scaled[name].values == pytest.approx(plain[name].values, rel=1e-6, abs=1e-9), name
    assert scaled.confused_with.values.tolist() == plain.confused_with.values.tolist()


def test_axis_reversed_and_order_of_components(dyes):
    plain = unmix.conditioning(dyes.pure)
    turned = unmix.conditioning(dyes.pure[::-1, ::-1])
    assert turned.selectivity.values[::-1] == pytest.approx(plain.selectivity.values)
    assert turned.condition_index.values == pytest.approx(plain.condition_index.values)


def test_clear_components_are_supported_and_confused_with_nobody(solvents):
    found = unmix.conditioning(solvents.pure)
    assert found.verdict.item() == "supported"
    assert "can be told apart" in found.reason.item()
    assert found.confused_with.sel(component="alcohol").item() == ""


def test_a_double_is_unsupported_and_named(dyes):
    twin = (dyes.pure[:1] * 2).assign_coords(component=["ruby"])
    found = unmix.conditioning(xr.concat([dyes.pure, twin], "component").assign_attrs(dyes.pure.attrs), noise=1e-3)
    assert found.verdict.item() == "unsupported"
    assert "crimson and ruby cannot be told apart" in found.reason.item()
    assert found.confused_with.sel(component=["crimson", "ruby"]).values.tolist() == ["ruby", "crimson"]
    assert np.isinf(found.detection_limit.sel(component=["crimson", "ruby"]).values).all()
    assert np.isfinite(found.detection_limit.sel(component=["amber", "azure"]).values).all()
    assert found.spectral_angle.values[0, 3] == pytest.approx(0.0, abs=1e-6)


def test_a_narrow_region_confuses_what_the_whole_axis_tells_apart(dyes):
    whole, narrow = (unmix.conditioning(dyes.pure, regions=regions) for regions in (None, [(400, 415)]))
    assert narrow.condition_index.values.max() > 10 * whole.condition_index.values.max()
    assert narrow.verdict.item() != "supported"


def test_a_single_component(dyes):
    found = unmix.conditioning(dyes.pure[:1], baseline=None)
    assert found.selectivity.values == pytest.approx([1.0])
    assert found.condition_index.values == pytest.approx([1.0])
    assert found.confused_with.values.tolist() == [""]


def test_a_missing_channel_is_left_out(dyes):
    holed = dyes.pure.copy(data=np.where(dyes.pure.wavelength == 500, np.nan, dyes.pure.values))
    found = unmix.conditioning(holed)
    without = unmix.conditioning(dyes.pure.sel(wavelength=dyes.pure.wavelength != 500))
    assert found.selectivity.values == pytest.approx(without.selectivity.values)
    assert np.isnan(found.net_signal.values[:, 100]).all()


@pytest.mark.parametrize(
    ("options", "kind", "text"),
    [
        ({"noise": -1}, InputError, "noise is -1"),
        ({"noise": [1e-3, 1e-3]}, InputError, "2"),
        ({"baseline": 1.5}, InputError, "baseline is 1.5"),
        ({"baseline": "x"}, InputError, "baseline is 'x'"),
        ({"regions": [(600, 500)]}, InputError, "ends before it starts"),
        ({"regions": [(100, 200)]}, AxisError, "reaches beyond the axis"),
        ({"regions": [(500, 503)]}, InputError, "4 usable channels cannot determine 5 unknowns"),
    ],
)
def test_bad_options_are_refused(dyes, options, kind, text):
    with pytest.raises(kind, match=text):
        unmix.conditioning(dyes.pure, **options)


def test_bad_pure_spectra_are_refused(dyes):
    with pytest.raises(InputError, match="not labelled spectra"):
        unmix.conditioning(dyes.pure.values)
    with pytest.raises(UnitError, match="contributions of components do not add up"):
        unmix.conditioning(dyes.pure.assign_attrs(quantity="reflectance"))
    with pytest.raises(InputError, match="'amber' is zero"):
        unmix.conditioning(dyes.pure.copy(data=dyes.pure.values * [[1], [0], [1]]))
    with pytest.raises(InputError, match="appears more than once"):
        unmix.conditioning(make_spectra(np.ones((2, 5)), range(5), dim="wavelength", quantity="absorptivity",
                                        leading="component", labels=["a", "a"]))  # fmt: skip
