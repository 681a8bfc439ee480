"""Tables of text: layouts, delimiters, decimal marks, headings, metadata, and what is refused or asked for."""

import numpy as np
import pytest

from unmix.errors import ReadError
from unmix.read import read_file
from unmix.read.found import Options

PLAIN = "Wavelength (nm),Absorbance\n400,0.1\n401,0.2\n402,0.3\n"


def found(tmp_path, content, **options):
    path = tmp_path / "t.csv"
    path.write_bytes(content if isinstance(content, bytes) else content.encode("utf-8"))
    return read_file(path, Options(**options))


def one(tmp_path, content, **options):
    (single,) = found(tmp_path, content, **options)
    return single


@pytest.mark.parametrize("content", [
    PLAIN,
    PLAIN.replace(",", "\t"),
    PLAIN.replace(",", ";"),
    PLAIN.replace(",", " | ").replace(" | ", "|"),
    PLAIN.replace(",", ";").replace(".", ","),
    PLAIN.replace(",", "\t").replace(".", ","),
    PLAIN.replace(",", ", "),
    PLAIN.replace("\n", "\r\n"),
    PLAIN.replace("\n", "\r"),
    "\ufeff" + PLAIN,
    PLAIN.encode("utf-16"),
    PLAIN.encode("utf-16-le"),
    PLAIN.encode("utf-16-be"),
    PLAIN.encode("utf-32"),
    "\n\n" + PLAIN.replace("\n", "\n\n"),
    "# made by hand\n" + PLAIN,
    "// 2026\n! remark\n" + PLAIN,
    '"Wavelength (nm)","Absorbance"\n"400","0.1"\n"401","0.2"\n"402","0.3"\n',
    '"Wavelength (nm)","Absorbance"\n"400","0,1"\n"401","0,2"\n"402","0,3"\n',
    "Wavelength (nm)   Absorbance\n  400   0.1\n  401   0.2\n  402   0.3\n",
    "Wavelength (nm),Absorbance,\n400,0.1,\n401,0.2,\n402,0.3,\n",
    "Wavelength,nm,Absorbance\n400,0.1\n401,0.2\n402,0.3\n",
    '"Wavelength, nm",Absorbance\n400,0.1\n401,0.2\n402,0.3\n',
    "Wavelength,Absorbance\nnm,AU\n400,0.1\n401,0.2\n402,0.3\n",
    "TITLE\tx\nXUNITS\tNANOMETERS\nYUNITS\tABSORBANCE\nFIRSTX\t400.0\nXYDATA\n" + PLAIN[26:].replace(",", "\t"),
    "X axis: nm\nY axis: Absorbance\n400,0.1\n401,0.2\n402,0.3\n",
    PLAIN + "\n[Comments]\nSample name\tx\nfooter, 7\n",
    PLAIN.replace("400,", "400.0,").replace("0.1", ".1").replace("0.2", "2e-1").replace("0.3", "+3.0E-01"),
])  # fmt: skip
def test_one_spectrum_written_in_many_ways(tmp_path, content):
    spectrum = one(tmp_path, content)
    assert spectrum.axis.tolist() == [400, 401, 402]
    assert spectrum.values.tolist() == [[0.1, 0.2, 0.3]]
    assert (spectrum.dim, spectrum.quantity) == ("wavelength", "absorbance")


@pytest.mark.parametrize(
    "content",
    [
        "400 0.1\n401 0.2\n402 0.3\n",
        "400,0.1,\n401,0.2,\n402,0.3,\n",
        "402,0.3\n401,0.2\n400,0.1\n",
        "Wavelength,x\n400,0.1\n401,0.2\n402,0.3\n",
    ],
)
def test_arguments_say_what_a_table_does_not(tmp_path, content):
    spectrum = one(tmp_path, content, unit="nm", quantity="absorbance")
    assert spectrum.axis.tolist() == [400, 401, 402]
    assert spectrum.values.tolist() == [[0.1, 0.2, 0.3]]


COLUMNS = "Wavelength (nm),first,second\n400,0.1,0.5\n401,0.2,0.6\n402,0.3,0.7\n"
ROWS = "sample,400,401,402\nfirst,0.1,0.2,0.3\nsecond,0.5,0.6,0.7\n"


@pytest.mark.parametrize(("content", "options"), [
    (COLUMNS, {"quantity": "absorbance"}),
    ("quantity: absorbance\n" + COLUMNS, {}),
    ("# quantity: absorbance\n" + COLUMNS, {}),
    ("cm-1,first,second\n402,0.3,0.7\n401,0.2,0.6\n400,0.1,0.5\n", {"quantity": "absorbance"}),
    ("nm,first (A),second (A)\n400,0.1,0.5\n401,0.2,0.6\n402,0.3,0.7\n", {}),
    ("nm,first_Abs,second_Abs\n400,0.1,0.5\n401,0.2,0.6\n402,0.3,0.7\n", {}),
    ("nm,first (%T),second (%T)\n400,10,50\n401,20,60\n402,30,70\n", {}),
    (",first,second\nWavelength (nm),Absorbance,Absorbance\n400,0.1,0.5\n401,0.2,0.6\n402,0.3,0.7\n", {}),
    ("Sample,first,second\nnm,Abs,Abs\n400,0.1,0.5\n401,0.2,0.6\n402,0.3,0.7\n", {}),
    ("first,second\n400,0.1,0.5\n401,0.2,0.6\n402,0.3,0.7\n", {"unit": "nm", "quantity": "absorbance"}),
    ("Wavelength (nm);first;second\n400;0,1;0,5\n401;0,2;0,6\n402;0,3;0,7\n", {"quantity": "absorbance"}),
    (ROWS, {"unit": "nm", "quantity": "absorbance"}),
    (ROWS.replace("sample", ""), {"unit": "nm", "quantity": "absorbance"}),
    ("name,400 nm,401 nm,402 nm\nfirst,0.1,0.2,0.3\nsecond,0.5,0.6,0.7\n", {"quantity": "absorbance"}),
    ("X400,X401,X402,name\n0.1,0.2,0.3,first\n0.5,0.6,0.7,second\n", {"unit": "nm", "quantity": "absorbance"}),
    ("name;400 nm;401 nm;402 nm\nfirst;0,1;0,2;0,3\nsecond;0,5;0,6;0,7\n", {"quantity": "absorbance"}),
    ("first,,second,\nnm,Abs,nm,Abs\n400,0.1,400,0.5\n401,0.2,401,0.6\n402,0.3,402,0.7\n", {}),
])  # fmt: skip
def test_two_spectra_in_many_layouts(tmp_path, content, options):
    several = found(tmp_path, content, **options)
    labels = [label for spectrum in several for label in spectrum.labels]
    assert labels == ["first", "second"]
    np.testing.assert_allclose(np.concatenate([s.values for s in several]), [[0.1, 0.2, 0.3], [0.5, 0.6, 0.7]],
                               rtol=1e-15)  # fmt: skip
    for spectrum in several:
        assert spectrum.axis.tolist() == [400, 401, 402]


def test_facts_beside_rows_become_coordinates(tmp_path):
    content = ("id,copper (mmol/L),batch,path (mm),400,401,402\n"
               "a,0.5,x,10,0.1,0.2,0.3\nb,,y,2,0.2,0.3,0.4\n")  # fmt: skip
    spectrum = one(tmp_path, content, unit="nm", quantity="absorbance")
    assert spectrum.labels == ["a", "b"]
    np.testing.assert_array_equal(spectrum.coords["copper (mmol_L)"], [0.5, np.nan])
    assert spectrum.coords["batch"] == ["x", "y"]
    assert spectrum.coords["path_length"] == [1.0, 0.2]


def test_facts_above_columns_become_coordinates(tmp_path):
    content = "sample,a,b\ntime,0,10\nPath length,1 cm,25 um\nnm,Abs,Abs\n400,0.1,0.2\n401,0.2,0.3\n"
    spectrum = one(tmp_path, content)
    assert spectrum.labels == ["a", "b"]
    assert spectrum.coords == {"time": [0, 10], "path_length": [1.0, 0.0025]}


@pytest.mark.parametrize(
    "content",
    [
        "sample,a,b\npath (um),25,25\nnm,Abs,Abs\n400,0.1,0.2\n401,0.2,0.3\n",
        "sample,a\npath length (um),25\nnm,Abs\n400,0.1\n401,0.2\n",
        "Path length (um),25\nnm,Abs\n400,0.1\n401,0.2\n",
        "Cell length: 25 um\nnm,Abs\n400,0.1\n401,0.2\n",
        "# path: 25 um\nnm,Abs\n400,0.1\n401,0.2\n",
    ],
)
def test_path_lengths_are_found(tmp_path, content):
    spectrum = one(tmp_path, content)
    assert set(spectrum.coords["path_length"]) == {0.0025}
    assert spectrum.dim == "wavelength"


def test_path_lengths_without_unit_are_left_out(tmp_path):
    spectrum = one(tmp_path, "sample,a,b\nPath length,1,2\nnm,Abs,Abs\n400,0.1,0.2\n401,0.2,0.3\n")
    assert spectrum.coords == {}
    assert spectrum.notes == ["the path lengths under 'Path length' have no unit that is understood; left out"]


def test_numeric_headings_of_columns(tmp_path):
    content = "Wavelength (nm),0,10,20\n400,0.1,0.2,0.3\n401,0.2,0.3,0.4\n402,0.3,0.4,0.5\n"
    spectrum = one(tmp_path, content, quantity="absorbance")
    assert spectrum.labels == ["0", "10", "20"]
    assert spectrum.axis.tolist() == [400, 401, 402]


def test_columns_of_facts_behind_the_spectra(tmp_path):
    content = "name,400 nm,401 nm,402 nm,conc,batch\na,0.1,0.2,0.3,5,x\nb,0.2,0.3,0.4,6,y\n"
    spectrum = one(tmp_path, content, quantity="absorbance")
    assert spectrum.labels == ["a", "b"]
    assert spectrum.coords == {"conc": [5, 6], "batch": ["x", "y"]}
    assert spectrum.values.shape == (2, 3)


def test_ambiguous_orientation_asks(tmp_path):
    content = "Wavelength (nm),400,410,420\n1000,0.1,0.2,0.3\n1010,0.2,0.3,0.4\n1020,0.3,0.4,0.5\n"
    with pytest.raises(ReadError, match="both the first column and a line of headings could be the axis; give "
                                        "orientation='columns'"):  # fmt: skip
        found(tmp_path, content, quantity="absorbance")
    columns = one(tmp_path, content, quantity="absorbance", orientation="columns")
    assert columns.axis.tolist() == [1000, 1010, 1020]
    rows = one(tmp_path, content, quantity="absorbance", orientation="rows")
    assert rows.axis.tolist() == [400, 410, 420]
    assert rows.labels == ["1000", "1010", "1020"]


def test_a_row_number_is_no_axis(tmp_path):
    content = '"","y","V1","V2"\n"1",88.6,0.1,0.2\n"2",88.8,0.2,0.3\n"3",89.4,0.3,0.4\n'
    with pytest.raises(ReadError, match="the first column only counts the rows"):
        found(tmp_path, content, unit="nm", quantity="absorbance")
    content = ",400,401,402\n1,0.1,0.2,0.3\n2,0.2,0.3,0.4\n"
    assert one(tmp_path, content, unit="nm", quantity="absorbance").labels == ["1", "2"]


def test_component_headings_carry_their_units(tmp_path):
    content = "wavelength_nm,HbO2_cm-1_per_M,Hb_cm-1_per_M\n250,106112,112736\n252,105552,112736\n"
    spectrum = one(tmp_path, content)
    assert spectrum.labels == ["HbO2", "Hb"]
    assert (spectrum.quantity, spectrum.per, spectrum.dim) == ("absorptivity", "mol/L", "wavelength")
    spectrum = one(tmp_path, "nm,HbO2 (M-1 cm-1),Hb (M-1 cm-1)\n250,1,2\n252,3,4\n")
    assert (spectrum.labels, spectrum.per) == (["HbO2", "Hb"], "mol/L")


def test_one_letter_names_are_names_where_not_every_column_is_a_unit(tmp_path):
    spectrum = one(tmp_path, "nm,A,B,T\n400,1,2,3\n401,2,3,4\n", quantity="absorbance")
    assert spectrum.labels == ["A", "B", "T"]
    spectrum = one(tmp_path, "nm,A\n400,1\n401,2\n")
    assert (spectrum.labels, spectrum.quantity) == ([""], "absorbance")


@pytest.mark.parametrize(("content", "options", "message"), [
    (PLAIN.replace(" (nm)", ""), {}, "axis unit 'Wavelength' is not understood; give cm-1, nm.* as unit="),
    (PLAIN.replace("Absorbance", "x"), {}, "what the numbers are is not stated; give it as quantity="),
    ("400,0.1\n401,0.2\n", {"quantity": "A"}, "the unit of the axis is not stated; give it as unit="),
    (PLAIN.replace("0.2", "abc"), {}, "line 3: 'abc' in column 2 is not a number; a number with decimal point"),
    (PLAIN.replace("0.2", "0.2.1"), {}, "line 3: '0.2.1' in column 2 is not a number"),
    (PLAIN.replace("0.2", "1_0"), {}, "line 3: '1_0' in column 2 is not a number"),
    (PLAIN.replace("0.2", "inf"), {}, "line 3: 'inf' in column 2 is not a number"),
    (PLAIN.replace("0.2", "\u0661"), {}, "line 3: '\u0661' in column 2 is not a number"),
    (PLAIN.replace("400,0.1", "400"), {}, "line 2: the row has 1 cells but the rows from line 3 on have 2"),
    (PLAIN.replace("0.1", "x"), {}, "line 2: 'x' in column 2 is not a number"),
    (PLAIN.replace("401,0.2", "401"), {}, "line 3: the row has 1 cells but the rows before it have 2"),
    (PLAIN.replace("401,0.2", "401,0.2,5"), {}, "line 3: the row has 3 cells"),
    (PLAIN.replace("401", ""), {}, "line 3: the axis has no number in column 1"),
    (PLAIN.replace("401", "399"), {}, "line 4: the axis does not run one way: 399 is followed by 402"),
    (PLAIN.replace("401", "400"), {}, "line 3: the axis does not run one way: 400 is followed by 400"),
    (PLAIN.replace("401,0.2", "remark\n401,0.2"), {}, "line 3: text stands between rows of numbers"),
    ("nm;x (A)\n4000;1.234,5\n4001;1.235,5\n", {}, "is not a number|no rows of numbers"),
    ("nm;x (counts)\n400;1 234\n401;1 235\n", {}, "no rows of numbers|not a number"),
    ("nm;x (counts)\n1,400;1,234\n1,401;1,235\n", {}, "line 2: '1,400' may hold a decimal comma or a thousands mark; "
     "give decimal=','"),
    ("nm,x (A),y (%T)\n400,1,2\n401,2,3\n", {}, "different quantities: 'x \\(A\\)', 'y \\(%T\\)'"),
    ("nm,x (A),y\n400,1,2\n401,2,3\n", {}, "the headings of 'y' do not say what the numbers are, but others do"),
    ("a,b\nc,d\n", {}, "no rows of numbers were found"),
    ("hello\n", {}, "no rows of numbers were found"),
    ("sample,400,402,401,403\nx,1,2,3,4\ny,2,3,4,5\n", {"unit": "nm", "quantity": "A"},
     "the axis does not run one way: 402 is followed by 401 at point 3 of 4"),
    ("yarn,train,,\n100,1,3.0,3.1\n80,1,3.1,3.2\n90,1,3,3\n", {"unit": "nm", "quantity": "A"},
     "the axis does not run one way: 80 is followed by 90"),
    ("yarn,train,a,b\n100,1,3.0,3.1\n80,1,3.1,3.2\n90,1,3,3\n", {"unit": "nm", "quantity": "A"},
     "neither the first column nor a line of headings is an axis"),
    ("nm,a,b\n400,,\n401,,\n", {}, "what the numbers are|empty|no rows"),
])  # fmt: skip
def test_what_is_refused_names_the_place_and_the_way_out(tmp_path, content, options, message):
    with pytest.raises(ReadError, match=message):
        found(tmp_path, content, **options)


def test_decimal_argument_settles_doubtful_commas(tmp_path):
    spectrum = one(tmp_path, "um;x (A)\n1,400;1,234\n1,401;1,235\n", decimal=",")
    assert spectrum.axis.tolist() == [1400, 1401]
    assert spectrum.values.tolist() == [[1.234, 1.235]]


def test_missing_cells_are_missing_channels(tmp_path):
    cells = ["", "NaN", "n/a", "-", "?", "#N/A"]
    content = "nm,Abs\n" + "".join(f"{400 + i},{cell}\n" for i, cell in enumerate(cells)) + "500,0.5\n501,0.6\n"
    spectrum = one(tmp_path, content)
    assert np.isnan(spectrum.values[0, :6]).all()
    assert spectrum.values[0, 6:].tolist() == [0.5, 0.6]


def test_text_behind_the_numbers_is_noted(tmp_path):
    assert one(tmp_path, PLAIN + "\nend of file\n").notes == ["line 6: text behind the numbers is left out"]


def test_latin_text(tmp_path):
    spectrum = one(tmp_path, "nm,Gr\xfcn (A)\n400,0.1\n401,0.2\n".encode("latin-1"))
    assert spectrum.labels == ["Grün"]


def test_harmless_cells_come_back(tmp_path):
    assert one(tmp_path, "nm,'=a (A),'@b (A)\n400,1,2\n401,2,3\n").labels == ["=a", "@b"]


def test_no_text(tmp_path):
    with pytest.raises(ReadError, match="the file is not text; give JCAMP-DX, CSV"):
        found(tmp_path, bytes(range(256)) * 20)
    late = b"nm,Abs\n" + b"".join(b"%d,1\n" % (400 + i) for i in range(20_000)) + b"9\0,1\n"
    with pytest.raises(ReadError, match="line 20002: a zero byte stands in the text"):
        found(tmp_path, late)


def test_layout_is_told(tmp_path):
    facts = one(tmp_path, PLAIN.replace(",", ";").replace(".", ",")).facts
    assert facts["layout"] == "one spectrum a column, numbers from line 2"
    assert facts["cells"] == "semicolon, decimal comma, UTF-8"
    assert facts["direction"] == "ascending"
