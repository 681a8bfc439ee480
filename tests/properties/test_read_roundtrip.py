"""Whatever is written is read back as it was, for random spectra in every form; any text is read or refused."""

import tempfile
import warnings
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

import unmix
from unmix.errors import ReadError, UnmixWarning
from unmix.read import read_file
from unmix.read.found import Options
from unmix.read.ordinates import decode
from unmix.read.pack import pack
from unmix.spectra import make_spectra

ORDINARY = settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.too_slow])
#: titles without the blanks that JCAMP-DX does not keep apart
TITLES = st.text(st.characters(exclude_categories=["C", "Z"], exclude_characters="$'\""), min_size=1, max_size=12)


def axes(min_size=2, max_size=40):
    even = st.builds(lambda start, step, n: start + step * np.arange(n), st.floats(1, 5000), st.floats(1e-3, 20),
                     st.integers(min_size, max_size))  # fmt: skip
    uneven = st.lists(st.floats(1, 1e5), min_size=min_size, max_size=max_size, unique=True).map(np.sort)
    return st.one_of(even, uneven).filter(lambda axis: (np.diff(axis) > 1e-9 * axis[-1]).all())


@st.composite
def spectra(draw, *, labels=TITLES):
    axis = draw(axes())
    n = draw(st.integers(1, 4))
    ordinates = st.one_of(st.floats(-1e6, 1e6, allow_subnormal=False), st.floats(0, 3).map(lambda y: round(y, 4)),
                          st.just(np.nan))  # fmt: skip
    values = draw(hnp.arrays(np.float64, (n, axis.size), elements=ordinates))
    names = draw(st.lists(labels, min_size=n, max_size=n, unique=True))
    dim = draw(st.sampled_from(["wavenumber", "wavelength", "raman_shift"]))
    return make_spectra(values, axis, dim=dim, quantity="absorbance", labels=names)


def back(written, name, **options):
    with tempfile.TemporaryDirectory() as folder, warnings.catch_warnings():
        warnings.simplefilter("ignore", UnmixWarning)
        return unmix.read(unmix.write(written, Path(folder) / name, **options))


@ORDINARY
@given(spectra())
def test_affn_and_pairs_keep_every_digit(written):
    read = back(written, "s.jdx")
    np.testing.assert_array_equal(read.values, written.values)
    dim = written.dims[1]
    np.testing.assert_allclose(read[dim].values, written[dim].values, rtol=1e-12)
    assert read.label.values.tolist() == written.label.values.tolist()


@ORDINARY
@given(spectra())
def test_difdup_keeps_the_stated_resolution(written):
    read = back(written, "s.jdx", form="DIFDUP")
    top = np.nanmax(np.abs(written.values), axis=1, initial=0.0, keepdims=True)
    assert (np.isnan(read.values) == np.isnan(written.values)).all()
    assert np.nan_to_num(np.abs(read.values - written.values) - 2.5e-9 * top * (1 + 1e-6)).max() <= 0


@ORDINARY
@given(spectra(), st.sampled_from(["s.csv", "s.tsv", "s.nc"]))
def test_tables_and_stores_keep_everything(written, name):
    read = back(written, name)
    np.testing.assert_array_equal(read.values, written.values)
    np.testing.assert_array_equal(read[written.dims[1]].values, written[written.dims[1]].values)


@given(
    hnp.arrays(np.float64, st.integers(1, 200), elements=st.one_of(st.integers(-9, 9), st.integers(-(10**9), 10**9),
                                                                  st.just(np.nan))),
    st.integers(40, 120),
)  # fmt: skip
def test_packing_is_undone_by_decoding(ordinates, width):
    lines = list(pack([str(i) for i in range(ordinates.size)], ordinates, width=width))
    found = decode("\n".join(lines).encode(), path="", line=1, limit=10**6)
    np.testing.assert_array_equal(found.values, ordinates)
    assert found.faults == []
    assert max(map(len, lines)) <= width


@st.composite
def mixed_lines(draw):
    """Ordinates in AFFN, PAC and SQZ, mixed within a line, and the numbers they stand for."""
    numbers = draw(st.lists(st.integers(-9999, 9999), min_size=1, max_size=60))
    text = ""
    for i, number in enumerate(numbers):
        form = draw(st.sampled_from("APS"))
        digits = str(abs(number))
        if form == "S":
            code = "@ABCDEFGHI"[int(digits[0])] if number >= 0 else "@abcdefghi"[int(digits[0])]
            word = code + digits[1:]
        else:
            word = f"{number:+d}" if form == "P" else f" {number}"
        text += (f"\n{i}" if i and i % 7 == 0 else "") + word
    return "0" + text, numbers


@given(mixed_lines())
def test_forms_mix_within_a_line(mixed):
    text, numbers = mixed
    assert decode(text.encode(), path="", line=1, limit=10**6).values.tolist() == numbers


@ORDINARY
@given(st.one_of(st.text(max_size=400).map(lambda text: text.encode("utf-8")), st.binary(max_size=400),
                 st.text("0123456789.,;\t\n -+eEnm()ABCabc#\"", max_size=400).map(str.encode)))  # fmt: skip
def test_any_bytes_are_read_or_refused(data):
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "x"
        path.write_bytes(data)
        try:
            found = read_file(path, Options("warn", "absorbance", "nm"))
        except ReadError:
            return
        for one in found:
            assert (np.diff(one.axis) > 0).all()


@pytest.mark.parametrize("delimiter", [",", ";", "\t", "|"])
@pytest.mark.parametrize("decimal", [".", ","])
@given(values=hnp.arrays(np.float64, (5, 3), elements=st.floats(-5, 5).map(lambda y: round(y, 4))))
def test_numbers_are_read_the_same_in_every_dialect(delimiter, decimal, values):
    if delimiter == decimal:
        return
    rows = [delimiter.join(["Wavelength (nm)", "a (A)", "b (A)", "c (A)"])]
    for i, row in enumerate(values):
        cells = [f"{400 + i / 2:.1f}", *(repr(float(y)) for y in row)]
        rows.append(delimiter.join(cell.replace(".", decimal) for cell in cells))
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "x.txt"
        path.write_text("\n".join(rows))
        (found,) = read_file(path, Options())
    np.testing.assert_array_equal(found.values, values.T)
    assert found.axis.tolist() == [400, 400.5, 401, 401.5, 402]
