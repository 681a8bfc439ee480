"""The demo sets: what is committed comes from the script, reads without a remark, and shows what it promises."""

import csv
import importlib.util
import re
import runpy
import shutil
from pathlib import Path
from types import ModuleType

import numpy as np
import pytest
import xarray as xr

import unmix
from unmix.cli import main
from unmix.kernels import BoolArray, FloatArray

SET = Path(__file__).parent.parent / "demo_sets" / "recovered_solvent"
DRUMS = sorted(path.name for path in (SET / "drums").iterdir())
CLEAN = ("drum-01", "drum-02", "drum-03", "drum-04")


@pytest.fixture(scope="module")
def script() -> ModuleType:
    spec = importlib.util.spec_from_file_location("recovered_solvent_make", SET / "make.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="module")
def pure() -> xr.DataArray:
    return unmix.read(SET / "pure")


@pytest.fixture(scope="module")
def truth() -> dict[str, dict[str, str]]:
    with (SET / "truth.csv").open(encoding="ascii", newline="") as file:
        return {row["sample"]: row for row in csv.DictReader(file)}


def _answer(label: str, pure: xr.DataArray, baseline: int = 1) -> xr.Dataset:
    (path,) = (SET / "drums").glob(f"{label}.*")
    return unmix.quantify(unmix.read(path), pure, baseline=baseline)


def _amounts(truth: dict[str, dict[str, str]], answer: xr.Dataset) -> FloatArray:
    row = truth[str(answer.label.values[0])]
    return np.array([float(row[name]) for name in answer.component.values])


def _inside(truth: dict[str, dict[str, str]], answer: xr.Dataset) -> BoolArray:
    true = _amounts(truth, answer)
    inside: BoolArray = (answer.lower.values[0] <= true) & (true <= answer.upper.values[0])
    return inside


def _text(answer: xr.Dataset) -> str:
    return str(answer.reason.values[0])


def test_script_makes_the_committed_files(script: ModuleType, tmp_path: Path) -> None:
    script.main(tmp_path)
    made = {path.relative_to(tmp_path): path.read_bytes() for path in tmp_path.rglob("*") if path.is_file()}
    kept = {
        path.relative_to(SET): path.read_bytes()
        for path in SET.rglob("*")
        if path.is_file() and path.suffix in (".jdx", ".csv")
    }
    assert made.keys() == kept.keys()
    assert [str(name) for name in made if made[name] != kept[name]] == []
    assert sum(map(len, kept.values())) < 2_000_000


@pytest.mark.parametrize("index", range(8))
def test_drum_is_read_as_it_was_measured(script: ModuleType, index: int) -> None:
    drum = script.DRUMS[index]
    (path,) = (SET / "drums").glob(f"{drum.label}.*")
    read = unmix.read(path)
    assert read.attrs["quantity"] == "absorbance"
    assert read.label.values.tolist() == [drum.label]
    assert read.path_length.values.tolist() == [drum.path_cm]
    measured = script.measure(drum, read.wavenumber.values, np.random.default_rng([script.SEED, index]))
    # the files keep five decimals or more
    np.testing.assert_allclose(read.values[0], measured, rtol=0, atol=5.1e-6)


def test_pure_spectra_are_read_as_they_were_made(script: ModuleType, pure: xr.DataArray) -> None:
    assert (pure.attrs["quantity"], pure.attrs["per"]) == ("absorptivity", "g/L")
    assert sorted(pure.label.values) == sorted(script.LISTED)
    for spectrum in pure:
        made = script.absorptivity(str(spectrum.label.values), pure.wavenumber.values)
        np.testing.assert_allclose(spectrum.values, made, rtol=0, atol=5.1e-7)


def test_truth_names_the_drums_and_the_pure_spectra(
    truth: dict[str, dict[str, str]], pure: xr.DataArray, script: ModuleType
) -> None:
    assert sorted(truth) == sorted(Path(name).stem for name in DRUMS)
    columns = {"sample", *map(str, pure.label.values), "unlisted", "unlisted compound", "unit"}
    assert all(set(row) == columns and row["unit"] == "g/L" for row in truth.values())
    for drum in script.DRUMS:
        assert sum(drum.parts) == pytest.approx(1.0)
        assert bool(truth[drum.label]["unlisted compound"]) == (float(truth[drum.label]["unlisted"]) > 0)


def test_pure_spectra_can_be_told_apart(pure: xr.DataArray) -> None:
    found = unmix.conditioning(pure)
    assert float(found.condition_index.max()) < 5.0
    assert str(found.verdict.values) == "supported"


def _blocks(language: str) -> list[str]:
    text = (SET / "README.md").read_text(encoding="utf-8")
    return re.findall(rf"^```{language}\n(.*?)^```", text, flags=re.MULTILINE | re.DOTALL)


@pytest.fixture
def in_a_copy(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    shutil.copytree(SET, tmp_path / "copy")
    monkeypatch.chdir(tmp_path / "copy")
    return tmp_path / "copy"


@pytest.mark.parametrize(("line", "status"), list(enumerate([1, 0, 0, 0, 1])))
def test_commands_of_the_readme(in_a_copy: Path, line: int, status: int, capsys: pytest.CaptureFixture[str]) -> None:
    commands = _blocks("")[0].splitlines()
    assert len(commands) == 5
    with pytest.raises(SystemExit) as ended:
        main(commands[line].split()[1:])
    assert ended.value.code == status
    assert "isopropanol" in capsys.readouterr().out
    assert (in_a_copy / "drums.html").exists() == ("--report" in commands[line])


def test_python_of_the_readme(in_a_copy: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (code,) = _blocks("python")
    (in_a_copy / "snippet.py").write_text(code, encoding="utf-8")
    runpy.run_path("snippet.py")
    shown = capsys.readouterr().out
    assert shown.count("'supported'") == len(CLEAN)


def test_readme_speaks_of_every_drum() -> None:
    text = (SET / "README.md").read_text(encoding="utf-8")
    # the first three share a line: drum-01, -02, -03
    assert [name for name in DRUMS if name[4:7] not in text] == []
    assert "flammable" in text


def test_clean_drums_come_out_right(pure: xr.DataArray, truth: dict[str, dict[str, str]]) -> None:
    answers = [_answer(label, pure) for label in CLEAN] + [_answer("drum-08", pure, baseline=2)]
    assert [str(one.verdict.values[0]) for one in answers] == ["supported"] * len(answers)
    # 25 intervals at 95%: two misses or fewer in 87% of such sets
    assert np.count_nonzero(~np.concatenate([_inside(truth, one) for one in answers])) <= 2
    for one in answers:
        far = np.abs(one.concentration.values[0] - _amounts(truth, one)) / one.standard_uncertainty.values[0]
        assert far.max() < 3.5


def test_absent_components_get_a_limit(pure: xr.DataArray) -> None:
    found = _answer("drum-04", pure).sel(component=["acetone", "water"])
    assert not found.detected.any()
    assert (found.lower == 0).all()
    assert (found.upper > 0).all()
    assert (found.upper < 0.3).all()


def test_unlisted_compound_is_flagged_where_it_absorbs(pure: xr.DataArray, truth: dict[str, dict[str, str]]) -> None:
    assert truth["drum-05"]["unlisted compound"] == "dichloromethane"
    found = _answer("drum-05", pure)
    assert str(found.verdict.values[0]) != "supported"
    for band in (738.0, 1265.0):
        assert float(np.abs(found.misfit_position - band).min()) <= 4.0
    assert "not explained" in _text(found)
    assert _inside(truth, found).all()


def test_saturated_bands_are_named_and_left_out(pure: xr.DataArray) -> None:
    found = _answer("drum-06", pure)
    assert str(found.verdict.values[0]) != "supported"
    assert "saturated" in _text(found)
    # whatever is within noise of the flat tops is out
    assert float(found.measured.where(found.used).max()) < 1.5


def test_narrow_region_cannot_tell_components_apart(pure: xr.DataArray, truth: dict[str, dict[str, str]]) -> None:
    found = _answer("drum-07", pure)
    assert str(found.verdict.values[0]) == "unsupported"
    assert "cannot be told apart" in _text(found)
    assert all(name in _text(found) for name in ("acetone", "ethyl acetate"))
    assert _inside(truth, found).all()


def test_bent_baseline_is_noticed(pure: xr.DataArray, truth: dict[str, dict[str, str]]) -> None:
    found = _answer("drum-08", pure)
    assert str(found.verdict.values[0]) != "supported"
    assert "not explained" in _text(found)
    assert _inside(truth, found).all()


def test_the_library_finds_what_is_not_on_the_list(truth: dict[str, dict[str, str]]) -> None:
    library = unmix.read(SET / "library")
    assert library.sizes["sample"] >= 40
    found = unmix.identify(unmix.read(SET / "drums" / "drum-05.jdx"), library)
    names = [str(name) for name in found.components.values[0, 0] if name]
    assert "dichloromethane" in names
    assert set(names) == {"isopropanol", "acetone", "ethyl acetate", "toluene", "water", "dichloromethane"}
    at = names.index("dichloromethane")
    true = float(truth["drum-05"]["unlisted"])
    assert found.concentration.values[0, 0, at] == pytest.approx(true, rel=0.02)
    assert found.verdict.values[0] == "supported"
