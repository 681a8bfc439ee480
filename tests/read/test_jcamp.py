"""JCAMP-DX files: labels, blocks, pages, checks, units."""

import re

import numpy as np
import pytest

from unmix.errors import ReadError
from unmix.read import read_file
from unmix.read.found import Options

HEADER = {
    "TITLE": "t", "JCAMP-DX": "4.24", "DATA TYPE": "INFRARED SPECTRUM", "XUNITS": "1/CM", "YUNITS": "ABSORBANCE",
    "XFACTOR": "1", "YFACTOR": "0.1", "FIRSTX": "100", "LASTX": "104", "NPOINTS": "5", "FIRSTY": "0.1",
}  # fmt: skip
TABLE = "(X++(Y..Y))\n100A1B1C1\n103D1E1"
DIFDUP = "(X++(Y..Y))\n100A0JJ\n102A2JJ\n104A4"


def text(table=TABLE, *, label="XYDATA", end="##END=\n", **changes):
    entries = {**HEADER, "YFACTOR": "0.01", **{name.replace("_", " "): value for name, value in changes.items()}}
    head = "".join(f"##{name}={value}\n" for name, value in entries.items() if value is not None)
    return f"{head}##{label}={table}\n{end}"


def found(tmp_path, content, **options):
    path = tmp_path / "f.jdx"
    path.write_bytes(content if isinstance(content, bytes) else content.encode("latin-1"))
    return read_file(path, Options(**options))


def one(tmp_path, content, **options):
    (single,) = found(tmp_path, content, **options)
    return single


def test_plain_block(tmp_path):
    spectrum = one(tmp_path, text())
    assert spectrum.values.tolist() == [[0.11, 0.21, 0.31, 0.41, 0.51]]
    assert spectrum.axis.tolist() == [100, 101, 102, 103, 104]
    assert (spectrum.dim, spectrum.quantity, spectrum.labels) == ("wavenumber", "absorbance", ["t"])
    assert spectrum.notes == []
    assert spectrum.facts["packing"] == "SQZ"


@pytest.mark.parametrize("change", [
    lambda t: t.replace("\n", "\r\n"), lambda t: t.replace("\n", "\r"), lambda t: "\ufeff" + t,
    lambda t: t.replace("##NPOINTS=", "##N_Points = "), lambda t: t.replace("##DATA TYPE", "##datatype"),
    lambda t: t.replace("##FIRSTX=100", "##FIRST-X= 100 $$ the first\n$$ ##NPOINTS= 7"),
    lambda t: t.replace("100A1B1C1", " 100 A1 B1 C1  $$ a remark"), lambda t: "\n$$ remark\n" + t,
    lambda t: t.replace("100A1B1C1", "100+11+21+31"), lambda t: t.replace("103D1E1", "+1.03E+02 41 51"),
    lambda t: t.replace("##END", "## end"), lambda t: t.replace("##TITLE", "  ##Title"), lambda t: t + "\n\n",
    lambda t: t.replace("##XYDATA=", "##$PRIVATE= x=y\n##= a remark\n##XYDATA= "),
    lambda t: t.encode("utf-16"), lambda t: t.encode("utf-8-sig"),
])  # fmt: skip
def test_spellings_that_mean_the_same(tmp_path, change):
    changed = change(text())
    content = changed if isinstance(changed, bytes) else changed.encode("utf-8")
    spectrum = one(tmp_path, content)
    assert spectrum.values.tolist() == [[0.11, 0.21, 0.31, 0.41, 0.51]]
    assert spectrum.notes == []


def test_latin_title(tmp_path):
    assert one(tmp_path, text(TITLE="Öl, 25 µm")).labels == ["Öl, 25 µm"]


def test_falling_axis_is_turned(tmp_path):
    spectrum = one(tmp_path, text("(X++(Y..Y))\n104A1B1\n102C1D1E1", FIRSTX="104", LASTX="100"))
    assert spectrum.axis.tolist() == [100, 101, 102, 103, 104]
    assert spectrum.values[0].tolist() == [0.51, 0.41, 0.31, 0.21, 0.11]
    assert spectrum.facts["direction"] == "descending"


def test_missing_ordinates(tmp_path):
    spectrum = one(tmp_path, text("(X++(Y..Y))\n100A1?C1\n103 ? 51"))
    np.testing.assert_array_equal(spectrum.values[0], [0.11, np.nan, 0.31, np.nan, 0.51])


CHECKS = [
    (text(NPOINTS="6"), "line 10: ##NPOINTS= says 6 but the table holds 5 points"),
    (text(NPOINTS=None), "line 11: ##NPOINTS= is missing"),
    (text(TABLE.replace("103D1", "104D1")), r"line 14: the line starts at 104 but its place is 103 \(X-check\)"),
    (text(TABLE.replace("100A1", "10A1")), r"line 13: the line starts at 10 but its place is 100 \(X-check\)"),
    (text(DIFDUP.replace("102A2", "102A3")), r"line 14: the line starts with 13 but the line before ends with 12 "
     r"\(Y-check\)"),
    (text(FIRSTY="0.7"), "line 11: ##FIRSTY= says 0.7 but the table has 0.11"),
    (text(end=""), "line 1: the block that starts here has no ##END="),
    (text(FIRSTX=None), "line 11: ##FIRSTX= is missing"),
    (text(LASTX=None, DELTAX="1"), "line 12: ##LASTX= is missing"),
]  # fmt: skip


@pytest.mark.parametrize(("content", "message"), CHECKS)
def test_failed_check_is_an_error_or_a_note_with_its_line(tmp_path, content, message):
    with pytest.raises(ReadError, match=f"^f.jdx, {message}.*checks='warn' reads the file nevertheless$"):
        found(tmp_path, content)
    notes = one(tmp_path, content, checks="warn").notes
    assert any(re.match(message, note) for note in notes)


@pytest.mark.parametrize(("content", "message"), [
    (text(YFACTOR="1e307", FIRSTY=None), "the ordinate at point 2 of 5 is too large for a number"),
    (text(XFACTOR="0"), "line 6: ##XFACTOR= is zero"),
    (text(YFACTOR="one"), "line 7: ##YFACTOR= is 'one'; it is a finite number"),
    (text(YFACTOR="0,1"), "line 7: ##YFACTOR= is '0,1'|line 7: ##YFACTOR= is zero"),
    (text(NPOINTS="1e999"), "##NPOINTS= is '1e999'"),
    (text(LASTX="100"), "##FIRSTX= and ##LASTX= are both 100"),
    (text(LASTX=None), "neither ##LASTX= nor ##DELTAX="),
    (text("(R++(Z..Z) $$"), "the data table is empty"),
    (text("(A..B)\n1 2"), r"the table has the form '\(A..B\)'; unmix reads"),
    (text(XUNITS="SECONDS"), "line 4: axis unit 'SECONDS' is not understood; give cm-1"),
    (text(XUNITS=None), "the unit of the axis is not stated; give it as unit="),
    (text(label="PEAK TABLE", table="(XY..XY)\n100,1"), "the file holds a peak table, no spectrum"),
    (text(label="NOTHING", table=""), "the file holds no data table"),
    ("##JCAMP-DX=4.24\n##END=\n", "the file has no ##TITLE="),
    (text(end="##XYDATA=(X++(Y..Y))\n100 1\n##END=\n"), "line 15: the block holds two data tables"),
    (text(end="##NPOINTS= 7\n##END=\n"), "##NPOINTS= stands twice and says '5' and '7'"),
])  # fmt: skip
def test_what_cannot_be_read_at_all(tmp_path, content, message):
    for checks in ("error", "warn"):
        with pytest.raises(ReadError, match=message):
            found(tmp_path, content, checks=checks)


def test_truncated_file_is_refused_wherever_it_is_cut(tmp_path):
    whole = text(DIFDUP)
    for at in range(1, len(whole) - 3):
        with pytest.raises(ReadError):
            found(tmp_path, whole[:at])


def test_rounded_and_cut_off_abscissae_pass(tmp_path):
    header = {"FIRSTX": "400.2", "LASTX": "409.8", "NPOINTS": "17", "YFACTOR": "1", "FIRSTY": None}
    step = (409.8 - 400.2) / 16
    for printed in (round, int):
        lines = [f"{printed(400.2 + i * step)} 1 1 1 1" for i in range(0, 16, 4)] + [f"{printed(409.8)} 1"]
        assert one(tmp_path, text("(X++(Y..Y))\n" + "\n".join(lines), **header)).notes == []


def test_abscissa_beside_the_next_ordinate_passes(tmp_path):
    assert one(tmp_path, text("(X++(Y..Y))\n100A0JJ\n103A2JJ\n105A4")).notes == []


@pytest.mark.parametrize(("changes", "note"), [
    ({"MAXY": "51"}, "line 12: ##MAXY= says 51 but the table has 0.51; the header gives it in percent"),
    ({"FIRSTY": "11"}, "line 11: ##FIRSTY= says 11 but the table has 0.11; the header gives it in percent"),
    ({"MINY": "0.0"}, "line 12: ##MINY= says 0 but the table has 0.11"),
    ({"DELTAX": "2"}, "line 12: ##DELTAX= says 2 but ##FIRSTX=, ##LASTX= and ##NPOINTS= make it 1; the latter is used"),
    ({"MAXX": "200"}, "line 12: ##MAXX= says 200 but the table has 104"),
])  # fmt: skip
def test_header_that_disagrees_is_noted(tmp_path, changes, note):
    assert one(tmp_path, text(**changes)).notes == [note]


def test_first_ordinate_before_its_factor_is_noted(tmp_path):
    changed = text(YFACTOR="0.0001", FIRSTY="11")
    assert one(tmp_path, changed).notes == [
        "line 11: ##FIRSTY= says 11 but the table has 0.0011; the header gives it before its factor"
    ]


@pytest.mark.parametrize("table", ["(XY..XY)\n100,11; 101.5,21\n103 31\n104,41 104.5,51",
                                   "(X,Y)\n100,11\n101.5,21\n103,31\n104,41\n104.5,51"])  # fmt: skip
def test_pairs(tmp_path, table):
    for label in ("XYPOINTS", "XYDATA"):
        spectrum = one(tmp_path, text(table, label=label, LASTX="104.5"))
        assert spectrum.axis.tolist() == [100, 101.5, 103, 104, 104.5]
        assert spectrum.values.tolist() == [[0.11, 0.21, 0.31, 0.41, 0.51]]
        assert spectrum.notes == []


def test_pairs_are_checked(tmp_path):
    with pytest.raises(ReadError, match="##LASTX= says 104 but the table has 105 there"):
        found(tmp_path, text("(XY..XY)\n100,11\n101,21\n102,31\n103,41\n105,51", label="XYPOINTS"))
    with pytest.raises(ReadError, match="the axis does not run one way: 102 is followed by 101 at point 4 of 5"):
        found(tmp_path, text("(XY..XY)\n100,11\n101,21\n102,31\n101,41\n104,51", label="XYPOINTS"))
    with pytest.raises(ReadError, match="##NPOINTS= says 5 but the table holds 4 points"):
        found(tmp_path, text("(XY..XY)\n100,11\n101,21\n102,31\n104,51", label="XYPOINTS"))


def link(*inner, blocks=None, title="l"):
    body = "".join(inner)
    count = len(inner) if blocks is None else blocks
    return f"##TITLE={title}\n##JCAMP-DX=4.24\n##DATA TYPE=LINK\n##BLOCKS={count}\n{body}##END=\n"


def test_link_files_nested_or_not(tmp_path):
    inner = [text(TITLE="a"), text(TITLE="b")]
    assert [spectrum.labels for spectrum in found(tmp_path, link(*inner))] == [["a"], ["b"]]
    assert [s.labels for s in found(tmp_path, link(link(*inner), text(TITLE="c")))] == [["a"], ["b"], ["c"]]
    assert len(found(tmp_path, link(*inner, blocks=3))) == 2  # the outer block counted too
    assert len(found(tmp_path, "".join(inner))) == 2  # one file after the other
    with pytest.raises(ReadError, match="##BLOCKS= says 5 but 2 blocks follow"):
        found(tmp_path, link(*inner, blocks=5))
    with pytest.raises(ReadError, match="has no ##END="):
        found(tmp_path, link(*inner).removesuffix("##END=\n"))
    peaks = text("(XY..XY)\n100,1", label="PEAK TABLE")
    (spectrum,) = found(tmp_path, link(text(), peaks))
    assert spectrum.notes == ["a peak table in the file is left out"]


NTUPLES = """##TITLE=run\n##JCAMP-DX=5.01\n##DATA TYPE=UV/VIS SPECTRUM\n##NTUPLES=UV/VIS SPECTRUM
##VAR_NAME=WAVELENGTH,ABSORBANCE,TIME\n##SYMBOL=X,Y,T\n##VAR_TYPE=INDEPENDENT,DEPENDENT,PAGE
##VAR_FORM=AFFN,ASDF,AFFN\n##VAR_DIM=4,4,2\n##UNITS=NANOMETERS,%T,SECONDS\n##FIRST=400,11,0\n##LAST=406,44,1
##FACTOR=1,1,1\n##PAGE=T=0\n##DATA TABLE=(X++(Y..Y)), XYDATA\n400A1J1J1J1\n406D4
##PAGE=T=1\n##NPOINTS=3\n##LASTX=404\n##DATA TABLE=(X++(Y..Y)), XYDATA\n400+12+23+34
##PAGE=T=2\n##NPOINTS=2\n##DATA TABLE=(XY..XY), XYPOINTS\n400,15\n406,25\n##END NTUPLES=\n##END=\n"""


def test_pages(tmp_path):
    first, second, third = found(tmp_path, NTUPLES)
    assert first.labels == ["run, T=0"]
    assert first.axis.tolist() == [400, 402, 404, 406]
    np.testing.assert_allclose(first.values, [[0.11, 0.22, 0.33, 0.44]], rtol=1e-14)
    assert (first.dim, first.quantity) == ("wavelength", "transmittance")
    assert second.axis.tolist() == [400, 402, 404]
    assert third.values.tolist() == [[0.15, 0.25]]


def test_pages_of_two_ordinates(tmp_path):
    pages = NTUPLES.replace("SYMBOL=X,Y,T", "SYMBOL=X,R,I").replace("UNITS=NANOMETERS,%T,SECONDS", "UNITS=NM,A,A")
    pages = pages.replace("FIRST=400,11,0", "FIRST=400,11,12").replace("VAR_DIM=4,4,2", "VAR_DIM=4,4,4")
    pages = pages.replace("FACTOR=1,1,1", "FACTOR=1,0.1,0.1").replace("T=0", "N=1").replace("T=1", "N=2")
    pages = pages.replace("(Y..Y)", "(R..R)", 1).replace("(Y..Y)", "(I..I)", 1).replace("(XY..XY)", "(XI..XI)")
    several = found(tmp_path, pages.replace("FIRST=400,11,12", "FIRST=400,1.1,1.2"))
    assert [one.values[0, 0] for one in several] == pytest.approx([1.1, 1.2, 1.5])
    assert [one.notes for one in several] == [[], [], []]
    for wrong in ("400,7.7,1.2", "400,1.1,7.7"):
        with pytest.raises(ReadError, match=r"##FIRSTY= says 7.7 but the table has 1.\d"):
            found(tmp_path, pages.replace("FIRST=400,11,12", f"FIRST={wrong}"))


@pytest.mark.parametrize(("old", "new", "message"), [
    ("##SYMBOL=X,Y,T\n", "", "the NTUPLES block has no ##SYMBOL="),
    ("(X++(Y..Y))", "(X++(R..R))", "names no variables of ##SYMBOL=; the variables are 'X', 'Y', 'T'"),
    ("##VAR_DIM=4,4,2", "##VAR_DIM=5,5,2", "##VARDIM= says 5|##NPOINTS= says 5 but the table holds 4 points"),
    ("##FIRST=400,11,0", "##FIRST=400,77,0", "##FIRSTY= says 77 but the table has 11"),
    ("##FACTOR=1,1,1", "##FACTOR=1,x,1", "##FACTOR= is 'x'"),
])  # fmt: skip
def test_broken_pages(tmp_path, old, new, message):
    with pytest.raises(ReadError, match=message):
        found(tmp_path, NTUPLES.replace(old, new))


@pytest.mark.parametrize(("changes", "dim", "axis"), [
    ({"XUNITS": "NANOMETERS"}, "wavelength", 100), ({"XUNITS": "MICROMETERS"}, "wavelength", 1e5),
    ({"XUNITS": "cm-1"}, "wavenumber", 100), ({"XUNITS": "Wavelength (nm)"}, "wavelength", 100),
    ({"DATA TYPE": "RAMAN SPECTRUM"}, "raman_shift", 100), ({"XUNITS": "Raman shift / cm-1"}, "raman_shift", 100),
])  # fmt: skip
def test_axis_units(tmp_path, changes, dim, axis):
    spectrum = one(tmp_path, text(**changes))
    assert spectrum.dim == dim
    assert spectrum.axis[0] == pytest.approx(axis)


def test_arguments_settle_what_the_file_does_not_say(tmp_path):
    spectrum = one(tmp_path, text(XUNITS="POINTS", YUNITS="SIGNAL"), unit="nm", quantity="absorbance")
    assert (spectrum.dim, spectrum.quantity, spectrum.notes) == ("wavelength", "absorbance", [])
    spectrum = one(tmp_path, text(), unit="um", quantity="%T")
    assert spectrum.notes == [
        "the file says that its axis is in '1/CM'; read as 'um' as asked",
        "the file says that its ordinates are 'ABSORBANCE'; read as '%T' as asked",
        "the header says '%T' but no value exceeds 0.51; taken as percent as it says, give quantity='transmittance' if "
        "these are fractions",
    ]


def test_quantity_that_is_not_understood_is_kept(tmp_path):
    spectrum = one(tmp_path, text(YUNITS="GLOWS"))
    assert spectrum.quantity == "GLOWS"
    assert spectrum.notes == ["ordinate unit 'GLOWS' is not understood; kept as text"]
    assert one(tmp_path, text(YUNITS=None)).quantity == "not stated"


def test_transmittance_scale_is_decided_by_the_header_and_checked_against_the_data(tmp_path):
    def values(units, factor):
        spectrum = one(tmp_path, text(YUNITS=units, YFACTOR=factor, FIRSTY=None))
        return spectrum.values[0, 0], spectrum.notes

    assert values("TRANSMITTANCE", "0.01") == (0.11, [])
    assert values("% TRANSMITTANCE", "1") == (0.11, [])
    value, notes = values("TRANSMITTANCE", "1")
    assert value == 0.11
    assert notes == ["the header says 'TRANSMITTANCE', a fraction, but the values reach 51; taken as percent"]
    value, notes = values("% TRANSMITTANCE", "0.01")
    assert value == pytest.approx(0.0011)
    assert "taken as percent as it says" in notes[0]


def test_kubelka_munk_and_absorptivity(tmp_path):
    spectrum = one(tmp_path, text(YUNITS="KUBELKA-MUNK"))
    assert spectrum.quantity == "reflectance"
    reflectance = spectrum.values
    np.testing.assert_allclose((1 - reflectance) ** 2 / (2 * reflectance), [[0.11, 0.21, 0.31, 0.41, 0.51]])
    spectrum = one(tmp_path, text(YUNITS="(micromol/mol)-1m-1 (base 10)"))
    assert (spectrum.quantity, spectrum.per) == ("absorptivity", "umol/mol m")
    assert one(tmp_path, text(YUNITS="ABSORPTIVITY"), per="g/L", quantity="L/(mol cm)").per == "g/L"


@pytest.mark.parametrize(("written", "path"), [("25 um", 0.0025), ("1 CM", 1), ("10 m", 1000), ("0.5mm", 0.05)])
def test_path_length(tmp_path, written, path):
    assert one(tmp_path, text(PATHLENGTH=written)).coords["path_length"] == [pytest.approx(path)]


def test_path_length_without_unit_is_left_out(tmp_path):
    spectrum = one(tmp_path, text(PATHLENGTH="0.1"))
    assert spectrum.coords == {}
    assert spectrum.notes == ["##PATHLENGTH= is '0.1', without a unit that is understood; left out"]
