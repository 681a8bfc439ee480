"""Files appear whole or not at all; cells cannot become formulas."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from unmix.errors import WriteError
from unmix.files import harmless_cell, read_cell, whole_file


def fill(path, overwrite=False, then=lambda: None):
    with whole_file(path, overwrite) as beside:
        beside.write_text("mine")
        then()


def test_file_appears_only_after_the_block(tmp_path):
    with whole_file(tmp_path / "out.csv") as beside:
        beside.write_text("one")
        assert beside.suffix == ".csv"
        assert not (tmp_path / "out.csv").exists()
    assert [path.name for path in tmp_path.iterdir()] == ["out.csv"]


def test_failure_leaves_the_old_file_and_nothing_else(tmp_path):
    (tmp_path / "out.csv").write_text("old")
    with pytest.raises(ZeroDivisionError):
        fill(tmp_path / "out.csv", overwrite=True, then=lambda: 1 / 0)
    assert [path.read_text() for path in tmp_path.iterdir()] == ["old"]


def test_existing_file_is_refused_unless_asked(tmp_path):
    (tmp_path / "out.csv").write_text("old")
    with pytest.raises(WriteError, match=r"out\.csv: exists already; choose another name"):
        fill(tmp_path / "out.csv")
    with whole_file(tmp_path / "out.csv", overwrite=True) as beside:
        beside.write_text("new")
    assert (tmp_path / "out.csv").read_text() == "new"


def test_file_that_appears_meanwhile_is_not_replaced(tmp_path):
    with pytest.raises(WriteError, match="exists already"):
        fill(tmp_path / "out.csv", then=lambda: (tmp_path / "out.csv").write_text("theirs"))
    assert [path.read_text() for path in tmp_path.iterdir()] == ["theirs"]


def test_folder_replaces_folder(tmp_path):
    (tmp_path / "s.zarr").mkdir()
    (tmp_path / "s.zarr" / "old").write_text("x")
    with whole_file(tmp_path / "s.zarr", overwrite=True) as beside:
        beside.mkdir()
        (beside / "new").write_text("y")
    assert [str(path.relative_to(tmp_path)) for path in sorted(tmp_path.rglob("*"))] == [
        "s.zarr",
        "s.zarr/new",
    ]


def test_missing_folder_and_disk_errors_are_write_errors(tmp_path):
    with (
        pytest.raises(WriteError, match="its folder does not exist"),
        whole_file(tmp_path / "no" / "out.csv"),
    ):
        pass
    with pytest.raises(WriteError, match="could not be written"), whole_file(tmp_path / "out.csv") as beside:
        (beside / "below a file that is not there").write_text("x")


@pytest.mark.parametrize(
    "text", ["=1+1", "+1+1", "-2+3", "@SUM(A1)", "\tx", "\r=1", " =1", "\uff1d1", "'=1", "-", "+a"]
)
def test_formulas_are_disarmed(text):
    assert harmless_cell(text) == f"'{text}"


@pytest.mark.parametrize("text", ["toluene", "-0.5", "+1e-3", "", "2-butanone", "'quoted'", "a=b"])
def test_harmless_texts_stay(text):
    assert harmless_cell(text) == text


@given(st.one_of(st.text(), st.from_regex(r"'*[=+\-@].*")))
def test_every_text_comes_back(text):
    assert read_cell(harmless_cell(text)) == text
