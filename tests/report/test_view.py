import numpy as np
import pytest
import xarray as xr

from unmix.errors import InputError
from unmix.report.view import Composition, Result, refused_of, results_of


def test_one_result_or_several(composition):
    assert len(results_of(composition)) == 1
    assert len(results_of([composition, composition])) == 2


@pytest.mark.parametrize(
    ("broken", "message"),
    [
        (lambda r: r["concentration"], "a result is a Dataset, not a DataArray"),
        (lambda _: [], "there is no result"),
        (lambda r: r.assign_attrs(kind="guess"), "a result of kind 'guess' cannot be shown"),
        (lambda _: xr.Dataset(), "a result of kind 'None' cannot be shown"),
        (lambda r: r.drop_vars(["verdict", "lower"]), "the result lacks the variable 'lower', 'verdict'"),
        (lambda r: [r, r.assign_attrs(kind="conditioning")], "different kinds"),
    ],
)
def test_what_is_no_result_is_refused_in_a_sentence(composition, broken, message):
    with pytest.raises(InputError, match=message):
        results_of(broken(composition))


def test_problems_come_first(composition):
    view = Composition(composition)
    assert view.order()[:3] == [1, 2, 0]
    assert [view.samples[i] for i in view.order()[:2]] == ["drum 2", "drum 3"]


def test_an_image_is_seen_as_rows(composition):
    image = composition.drop_vars(["label", "file"]).isel(sample=slice(0, 6))
    image = image.assign_coords(y=("sample", [0, 0, 0, 1, 1, 1]), x=("sample", [0, 1, 2] * 2))
    image = image.set_index(sample=["y", "x"]).unstack("sample")
    view = Composition(image)
    assert len(view) == 6
    assert view.leading == ("y", "x")
    assert view.samples[0] == "y 1, x 1"
    assert view.table("concentration").shape == (6, 4)
    np.testing.assert_allclose(view.curve("measured", 4), composition["measured"].values[4])
    np.testing.assert_allclose(view.table("upper")[4], composition["upper"].values[4])


def test_missing_variables_are_nan(composition):
    bare = composition[["concentration", "lower", "upper", "verdict", "reason"]]
    view = Composition(bare)
    assert np.isnan(view.per_sample("noise_level")).all()
    assert np.isnan(view.table("detection_limit")).all()
    assert view.unexplained(0) == []
    assert view.confused_with() == [""] * 4
    assert view.detected()[0].tolist() == [True, True, True, False]


def test_bands_come_strongest_first(composition):
    score = composition["misfit_score"].copy()
    position = composition["misfit_position"].copy()
    score[1] = [10.0, -50.0]
    position[1] = [900.0, 1740.0]
    found = Composition(composition.assign(misfit_score=score, misfit_position=position)).unexplained(1)
    assert [band["score"] for band in found] == [-50.0, 10.0]


def test_contributions_and_baseline_make_the_fit(composition):
    view = Composition(composition)
    total = view.contributions(3).sum(axis=0) + view.curve("baseline", 3)
    np.testing.assert_allclose(total, view.curve("fitted", 3), atol=1e-12)


def test_refused_files_of_all_results(composition):
    one = composition.assign_attrs(refused='{"a.jdx": "empty"}')
    assert refused_of([one, composition]) == {"a.jdx": "empty"}
    assert Result(composition).sentences("notes") == ["drum_3.jdx: 37 saturated channels left out"]
    assert Result(composition.assign_attrs(notes="plain text")).sentences("notes") == ["plain text"]
