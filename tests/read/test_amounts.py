"""Tables of amounts as laboratories write them."""

import pytest

from unmix.errors import ReadError
from unmix.read.amounts import read_amounts, split_unit


def write(path, text, encoding="utf-8"):
    path.write_bytes(text.encode(encoding))
    return path


@pytest.mark.parametrize(
    ("text", "encoding"),
    [
        ("name,copper (mol/L),nickel (mol/L)\na,0.1,0\nb,0.25,1.5\n", "utf-8"),
        ("name;copper (mol/L);nickel (mol/L)\na;0,1;0\nb;0,25;1,5\n", "utf-8-sig"),
        ("# made in May\n\nname\tcopper [mol/L]\tnickel [mol/L]\na\t0.1\t0\nb\t0.25\t1.5\n", "utf-16"),
        ('"name","copper (mol/L)","nickel (mol/L)"\r\n"a",0.1,0\r\n"b",0.25,1.5\r\n', "latin-1"),
    ],
)
def test_forms_that_are_understood(tmp_path, text, encoding):
    table = read_amounts(write(tmp_path / "amounts.csv", text, encoding))
    assert table.index.tolist() == ["a", "b"]
    assert table.columns.tolist() == ["copper", "nickel"]
    assert table.to_numpy().tolist() == [[0.1, 0.0], [0.25, 1.5]]
    assert table.attrs["units"] == "mol/L"


def test_a_workbook(tmp_path):
    openpyxl = pytest.importorskip("openpyxl")
    book = openpyxl.Workbook()
    for row in (["name", "copper (g/L)"], ["a", 0.5], ["b", 2]):
        book.active.append(row)
    book.save(tmp_path / "amounts.xlsx")
    table = read_amounts(tmp_path / "amounts.xlsx")
    assert table["copper"].tolist() == [0.5, 2.0]


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("", "empty"),
        ("name\na\n", "no comma, semicolon or tab"),
        ("name,copper\n", "2 columns and 0 rows"),
        ("name,copper\na,1\na,2\n", "'a' has more than one row"),
        ("name,copper\na,much\n", "'much' for 'copper' of sample 'a'"),
        ("name,copper\na,1,2\n", "row has 3 cells but the header 2"),
        ("name,copper (g/L),nickel (mol/L)\na,1,2\n", "different units"),
        ("name,copper\na,\n", "is not a number"),
    ],
)
def test_tables_that_are_refused(tmp_path, text, told):
    with pytest.raises(ReadError, match=told):
        read_amounts(write(tmp_path / "amounts.csv", text))


def test_a_file_that_is_not_there(tmp_path):
    with pytest.raises(ReadError, match="no such file"):
        read_amounts(tmp_path / "nothing.csv")


def test_units_behind_names():
    assert split_unit("copper (mol/L)") == ("copper", "mol/L")
    assert split_unit("  copper ") == ("copper", "")
    assert split_unit("(II)") == ("(II)", "")
