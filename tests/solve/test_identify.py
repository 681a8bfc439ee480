"""Which members of a library are in a sample, through the public function."""

import numpy as np
import pytest
import xarray as xr

import unmix
from unmix.errors import InputError, UnitError
from unmix.solve import LibrarySearch
from unmix.spectra import make_spectra

AXIS = np.arange(700.0, 1800, 2.0)
NAMES = [f"compound {i}" for i in range(30)]


@pytest.fixture
def library(rng):
    rows = np.zeros((30, AXIS.size))
    for i in range(30):
        for _ in range(rng.integers(4, 9)):
            rows[i] += rng.uniform(0.1, 1) / (1 + ((AXIS - rng.uniform(720, 1780)) / rng.uniform(5, 14)) ** 2)
    return make_spectra(rows, AXIS, dim="wavenumber", quantity="absorptivity", leading="component", labels=NAMES,
                        attrs={"per": "g/L"})  # fmt: skip


def sample(library, rng, amounts, noise=1e-3):
    rows = library.sel(component=list(amounts)).values
    y = np.array(list(amounts.values())) @ rows + 0.02 + 0.02 * (AXIS - 1250) / 550 + noise * rng.normal(size=AXIS.size)
    return make_spectra(y, AXIS, dim="wavenumber", quantity="absorbance", labels=["drum"])


def first(found, i=0):
    return [name for name in found.components.values[i, 0] if name]


def test_members_amounts_and_evidence(library, rng):
    want = {"compound 3": 0.6, "compound 12": 0.2, "compound 25": 0.05}
    found = unmix.identify(sample(library, rng, want), library, path_length=1)
    assert first(found) == list(want)
    assert found.verdict.values == ["supported"]
    np.testing.assert_allclose(found.concentration.values[0, 0, :3], list(want.values()), atol=3e-3)
    inside = (found.lower.values[0, 0, :3] <= list(want.values())) & (
        found.upper.values[0, 0, :3] >= list(want.values())
    )
    assert inside.sum() >= 2
    assert found.weight.values[0, 0] == found.weight.values.max() > 0.5
    assert "to be confirmed" in found.reason.values[0]
    assert found.concentration.attrs["units"] == "g/L"
    assert found.attrs["kind"] == "identify"
    assert np.nanstd(found.residual) < 1.1e-3


def test_a_member_that_is_not_there_is_said(library, rng):
    want = {"compound 3": 0.6, "compound 12": 0.2}
    rest = library.sel(component=[name for name in NAMES if name != "compound 12"])
    found = unmix.identify(sample(library, rng, want), rest, path_length=1)
    assert found.verdict.values[0] != "supported"
    assert "None of the library's spectra explains the band at" in found.reason.values[0]
    top = AXIS[library.sel(component="compound 12").values.argmax()]
    assert np.isfinite(found.misfit_position.values[0])
    assert abs(found.misfit_position.values[0] - top) < 1100


def test_near_twins_are_alternatives(library, rng):
    twin = (library.sel(component="compound 3") * (1 + 1e-3 * np.sin(AXIS / 30))).expand_dims("component")
    both = xr.concat([library, twin.assign_coords(component=["other 3"])], "component").assign_attrs(library.attrs)
    found = unmix.identify(sample(library, rng, {"compound 3": 0.5}, noise=5e-3), both, path_length=1)
    assert found.verdict.values[0] == "doubtful"
    assert "It may as well be" in found.reason.values[0]
    listed = {tuple(name for name in row if name) for row in found.components.values[0]}
    assert {("compound 3",), ("other 3",)} <= listed
    assert "in place of" in "".join(found.distinction.values[0])


def test_twins_that_an_error_of_the_library_would_exchange_are_said(library, rng):
    twin = (library.sel(component="compound 3") * (1 + 3e-3 * np.sin(AXIS / 30))).expand_dims("component")
    both = xr.concat([library, twin.assign_coords(component=["other 3"])], "component").assign_attrs(library.attrs)
    # so little noise that the data alone would decide
    found = unmix.identify(sample(library, rng, {"compound 3": 0.5}, noise=1e-5), both, path_length=1)
    assert found.verdict.values[0] == "doubtful"
    assert "would be enough to exchange compound 3 and other 3" in found.reason.values[0]


def test_what_is_known_helps(library, rng):
    spectrum = sample(library, rng, {"compound 3": 0.6, "compound 12": 0.2})
    found = unmix.identify(spectrum, library, include=["compound 7"], exclude=["compound 12"], path_length=1)
    for row in found.components.values[0]:
        assert "compound 7" in row
        assert "compound 12" not in row
    by_rule = unmix.identify(spectrum, library, exclude=lambda name: name.endswith("2"), path_length=1)
    assert "compound 12" not in by_rule.components.values


def test_many_samples_images_and_bad_ones(library, rng):
    rows = [sample(library, rng, {f"compound {i}": 0.5, f"compound {i + 5}": 0.2}).values[0] for i in range(3)]
    rows.append(np.full(AXIS.size, np.nan))
    cube = xr.DataArray(np.array(rows).reshape(2, 2, -1), dims=("y", "x", "wavenumber"), coords={"wavenumber": AXIS},
                        attrs={"quantity": "absorbance"})  # fmt: skip
    cube[0, 1, 100:120] = np.nan
    told = []
    found = unmix.identify(cube, library, path_length=1, progress=told.append)
    assert found.components.dims == ("y", "x", "candidate", "member")
    assert set(found.components.values[0, 1, 0]) - {""} == {"compound 1", "compound 6"}
    assert found.verdict.values[1, 1] == "doubtful"
    assert "No member of the library is seen" in found.reason.values[1, 1]
    assert told == [1, 2, 3, 4]


def test_scale_and_other_axes_do_not_matter(library, rng):
    spectrum = sample(library, rng, {"compound 3": 0.6, "compound 12": 0.2})
    fine = library.interp(wavenumber=np.arange(700.0, 1799, 0.7)).assign_attrs(library.attrs)
    scaled = (fine * xr.DataArray(10.0 ** rng.uniform(-3, 3, 30), dims="component")).assign_attrs(library.attrs)
    assert first(unmix.identify(spectrum, scaled, path_length=1)) != []
    assert set(first(unmix.identify(spectrum, scaled, path_length=1))) == {"compound 3", "compound 12"}


def test_twins_and_dead_members_are_told(library, rng):
    dead = library.isel(component=[0]).copy(data=np.zeros((1, AXIS.size))).assign_coords(component=["nothing"])
    same = (2 * library.isel(component=[3])).assign_coords(component=["double 3"])
    more = xr.concat([library, dead, same], "component").assign_attrs(library.attrs)
    found = unmix.identify(sample(library, rng, {"compound 3": 0.6}), more, path_length=1)
    assert "'double 3' has the same spectrum as 'compound 3', which stands for both" in found.attrs["notes"]
    assert "nothing" in found.attrs["notes"]
    assert first(found) == ["compound 3"]


@pytest.mark.parametrize(
    ("options", "kind", "told"),
    [
        ({"max_components": 0}, InputError, "max_components is 0"),
        ({"include": ["compound x"]}, InputError, "'compound x', which the library does not hold"),
        ({"include": ["compound 1"], "exclude": ["compound 1"]}, InputError, "included and excluded"),
        ({"exclude": NAMES}, InputError, "no member of the library may be chosen"),
        ({"include": "compound 1"}, InputError, "lists of names"),
    ],
)
def test_bad_questions_are_refused(library, rng, options, kind, told):
    with pytest.raises(kind, match=told):
        unmix.identify(sample(library, rng, {"compound 3": 0.6}), library, **options)


def test_bad_libraries_are_refused(library, rng):
    spectrum = sample(library, rng, {"compound 3": 0.6})
    with pytest.raises(InputError, match="empty"):
        unmix.identify(spectrum, library[:0])
    with pytest.raises(UnitError):
        unmix.identify(spectrum, library.assign_attrs(quantity="reflectance"))
    alone = unmix.identify(spectrum, library[3:4], path_length=1)
    assert first(alone) == ["compound 3"]


def test_the_estimator_gives_the_amounts(library, rng):
    spectrum = sample(library, rng, {"compound 3": 0.6, "compound 12": 0.2})
    found = LibrarySearch().fit(library.values).transform(spectrum.values)
    assert set(np.flatnonzero(found[0])) == {3, 12}
    np.testing.assert_allclose(found[0, [3, 12]], [0.6, 0.2], atol=5e-3)
