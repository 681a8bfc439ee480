"""Methods: written, read back, applied to both sides, and what is said about a file that cannot be used."""

import inspect

import numpy as np
import pytest
import xarray as xr

from unmix import prepare
from unmix.errors import InputError, ReadError, WriteError
from unmix.method import Method
from unmix.prepare.additivity import require_additive
from unmix.spectra import make_spectra

AXIS = np.arange(800.0, 860.0, 2.0)


@pytest.fixture
def spectra():
    values = np.random.default_rng(1).normal(size=(4, AXIS.size)) + 3
    return make_spectra(values, AXIS, dim="wavenumber", quantity="absorbance", labels=list("abcd"))


def same_steps(one, other):
    assert [type(step) for step in one] == [type(step) for step in other]
    for mine, theirs in zip(one, other, strict=True):
        assert str(mine.get_params()) == str(theirs.get_params())


def test_every_step_comes_back_from_its_text(spectra):
    given = {"VapourRemoval": {"vapour": (AXIS % 4).tolist()},
             "Standardisation": {"first": [0, 1], "weights": [[0.5, 0.5], [0.25, 0.75]], "offset": [0.0, 0.5],
                                 "axis": [1.0, 2.0]}}  # fmt: skip
    steps = [getattr(prepare, name)(**given.get(name, {})) for name in sorted(prepare.STEPS)]
    method = Method(
        steps, 'all "of" them, 5 µm\\\n', "quantify", {"baseline": 2, "level": 1e-05, "regions": [[1.0, 2]]}
    )
    back = Method.from_text(method.to_text())
    same_steps(back.steps, method.steps)
    assert (back.name, back.solver, back.settings) == (method.name, method.solver, method.settings)


def test_a_file_is_written_whole_and_read_back(tmp_path, spectra):
    method = Method([prepare.SavitzkyGolay(window=7, derivative=1), prepare.Regions(keep=[(810, 850.5)])])
    path = method.save(tmp_path / "m.toml")
    back = Method.from_file(path)
    xr.testing.assert_identical(back.apply(spectra), method.apply(spectra))
    with pytest.raises(WriteError, match="exists already"):
        method.save(path)
    method.save(path, overwrite=True)


def test_a_method_does_what_its_steps_do_in_order(spectra):
    first, second = prepare.SavitzkyGolay(window=5, derivative=1), prepare.Normalise("length")
    prepared = Method([first, second]).apply(spectra)
    expected = second.fit_transform(first.fit_transform(spectra))
    xr.testing.assert_identical(prepared, expected)


def test_learning_is_done_once_and_then_travels_in_the_file(spectra):
    method = Method([prepare.MultiplicativeScatterCorrection(), prepare.MeanCentre()])
    assert method.learns
    with pytest.raises(InputError, match=r"step 1, MultiplicativeScatterCorrection, learns .* method.fit"):
        method.apply(spectra)
    fitted = method.fit(spectra)
    assert not fitted.learns
    assert method.learns
    one = fitted.apply(spectra.isel(sample=[0]))
    back = Method.from_text(fitted.to_text())
    np.testing.assert_array_equal(back.apply(spectra).values[:1], one.values)
    np.testing.assert_allclose(fitted.apply(spectra).mean("sample"), 0, atol=1e-12)


def test_labelled_spectra_in_a_method_are_written_with_their_axis(spectra, tmp_path):
    vapour = make_spectra(np.tile([0.0, 1.0], AXIS.size // 2), AXIS, dim="wavenumber", quantity="absorbance")
    method = Method([prepare.VapourRemoval(vapour, regions=[(800, 840)])])
    back = Method.from_text(method.to_text())
    xr.testing.assert_identical(back.apply(spectra).drop_attrs(), method.apply(spectra).drop_attrs())
    lines = "\n".join(f"{x:g},{x % 4 / 2:g}" for x in AXIS)
    (tmp_path / "vapour.csv").write_text(f"wavenumber (cm-1),vapour\n{lines}\n")
    text = 'unmix_method = 1\n[[step]]\nuse = "VapourRemoval"\nvapour = { file = "vapour.csv" }\n'
    with pytest.raises(ReadError, match="what the numbers are is not stated"):
        Method.from_text(text, folder=tmp_path)
    named = Method.from_text(text.replace(" }", ', quantity = "absorbance" }'), folder=tmp_path)
    assert named.steps[0].vapour.sizes["wavenumber"] == AXIS.size


def test_additivity_is_asked_of_all_steps(spectra):
    linear, scaled = Method([prepare.SavitzkyGolay()]), Method([prepare.SavitzkyGolay(), prepare.Normalise()])
    assert linear.additive
    assert not scaled.additive
    require_additive(linear.steps, "quantify")
    with pytest.raises(InputError, match=r"quantify needs .* Normalise does not keep that"):
        require_additive(scaled.steps, "quantify")


GOOD = """# what we do to drums
unmix_method = 1
name = "drums"

[[step]]
use = "SavitzkyGolay"   # smooth
window = 11

[[step]]
use = "Regions"
keep = [[900, 1800]]

[solver]
use = "quantify"
baseline = 1
"""


@pytest.mark.parametrize(
    ("old", "new", "line", "text"),
    [
        ("window = 11", "window = 10", 7, "SavitzkyGolay: window is 10; give an odd whole number from 1"),
        ("window = 11", "windows = 11", 7, "no parameter 'windows'; did you mean 'window'"),
        ('use = "Regions"', 'use = "Region"', 10, "step 2: use is 'Region'; did you mean 'Regions'"),
        ("keep = [[900, 1800]]", "keep = 900", 11, "Regions: keep is 900; give a list"),
        ('use = "quantify"', 'use = "quantity"', 14, "'quantity'; did you mean 'quantify'"),
        ("unmix_method = 1", "unmix_method = 2", 2, "is of version 2; unmix_method = 1 is understood"),
        ("unmix_method = 1", "", 0, "has no 'unmix_method'"),
        ("window = 11", "window 11", 7, "is not TOML"),
        ('name = "drums"', "name = 3", 3, "name is 3; give a text"),
        ('name = "drums"', 'nam = "drums"', 3, "'nam' is not an entry of a method; did you mean 'name'"),
        ("[[step]]\nuse = \"Reg", "[step]\nuse = \"Reg", 9, "is not TOML"),
        ("keep = [[900, 1800]]", "keep = { lines = 3 }", 11, "keep has 'lines'; give { file"),
        ('use = "Regions"\nkeep = [[900, 1800]]', 'use = "VapourRemoval"', 10, "VapourRemoval needs 'vapour'"),
    ],
)  # fmt: skip
def test_an_entry_that_cannot_be_used_is_named_with_its_line(old, new, line, text):
    assert old in GOOD
    with pytest.raises(ReadError) as caught:
        Method.from_text(GOOD.replace(old, new), where="drums.toml")
    assert caught.value.line == line
    assert text in str(caught.value)
    assert str(caught.value).startswith("drums.toml" + (f", line {line}: " if line else ": "))


def test_options_of_the_solver_are_checked_by_the_solver_with_the_line():
    method = Method.from_text(GOOD, where="drums.toml")
    assert method.settings_for("quantify", ["baseline", "level"]) == {"baseline": 1}
    with pytest.raises(ReadError, match=r"drums.toml, line 15: quantify has no option 'baseline'.*'base_line'"):
        method.settings_for("quantify", ["base_line"])
    with pytest.raises(InputError, match="'drums' is for quantify, but resolve was asked for"):
        method.settings_for("resolve", [])
    with pytest.raises(InputError, match="names no solver"):
        Method().settings_for("resolve", [])


def test_spectra_written_into_a_file_are_checked_too():
    entry = '[step.vapour]\nalong = "width"\nquantity = "absorbance"\naxis = [1, 2]\nvalues = [[1, 2]]'
    text = GOOD.replace('use = "Regions"\nkeep = [[900, 1800]]', f'use = "VapourRemoval"\n{entry}')
    with pytest.raises(ReadError, match=r"line 11: vapour: .* spectral dimension"):
        Method.from_text(text, where="m.toml")


def test_files_that_are_no_methods(tmp_path):
    with pytest.raises(ReadError, match="could not be read"):
        Method.from_file(tmp_path / "none.toml")
    (tmp_path / "bytes.toml").write_bytes(b"\xff\xfe\x00")
    with pytest.raises(ReadError, match="is not text in UTF-8"):
        Method.from_file(tmp_path / "bytes.toml")


def test_a_method_is_made_of_steps():
    with pytest.raises(InputError, match="made of steps, not of str"):
        Method(["SavitzkyGolay"])
    with pytest.raises(InputError, match="settings 'baseline' are given without a solver"):
        Method(settings={"baseline": 1})
    with pytest.raises(InputError, match="solver is 'quantfy'; did you mean 'quantify'"):
        Method(solver="quantfy")
    with pytest.raises(InputError, match="keep is a set, which a method file cannot hold"):
        Method([prepare.Regions(keep={(1, 2)})]).to_text()


def test_parameters_are_written_in_the_order_of_the_signature():
    text = Method([prepare.AsymmetricLeastSquares(penalty=10.0)]).to_text()
    keys = [line.split(" = ")[0] for line in text.splitlines() if " = " in line][2:]
    order = list(inspect.signature(prepare.AsymmetricLeastSquares).parameters)
    assert keys == [name for name in order if name != "weights"]
