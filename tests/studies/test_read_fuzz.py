"""Damaged files: each is read or refused with ReadError, without hanging and in bounded memory.

A few hundred in the ordinary tests, a hundred thousand in the study. The memory bound, measured by tracemalloc, is
64 MiB and a thousand times the size of the file.
"""

import re
import time
import tracemalloc
import warnings
from pathlib import Path

import numpy as np
import pytest

import unmix
from unmix.errors import ReadError, UnmixWarning
from unmix.read import read_file
from unmix.read.found import Options
from unmix.spectra import make_spectra

MEMORY_BASE, MEMORY_FACTOR = 64 * 2**20, 1000
SECONDS = 5.0
REFERENCE = Path(__file__).parents[1] / "reference" / "jcamp"
NTUPLES = b"""##TITLE= t\n##JCAMP-DX= 5.01\n##DATA TYPE= UV/VIS SPECTRUM\n##NTUPLES= UV/VIS SPECTRUM
##VAR_NAME= WAVELENGTH, ABSORBANCE, TIME\n##SYMBOL= X, Y, T\n##VAR_TYPE= INDEPENDENT, DEPENDENT, PAGE
##VAR_FORM= AFFN, ASDF, AFFN\n##VAR_DIM= 4, 4, 2\n##UNITS= NANOMETERS, ABSORBANCE, SECONDS\n##FIRST= 400, 0.1, 0
##LAST= 406, 0.4, 1\n##FACTOR= 1, 0.1, 1\n##PAGE= T=0\n##DATA TABLE= (X++(Y..Y)), XYDATA\n400A1J1J1J1\n406D4
##PAGE= T=1\n##DATA TABLE= (X++(Y..Y)), XYDATA\n400+1+2+3+4\n##END NTUPLES=\n##END=\n"""
PAIRS = b"""##TITLE= p\n##JCAMP-DX= 4.24\n##DATA TYPE= INFRARED SPECTRUM\n##XUNITS= 1/CM\n##YUNITS= %T\n##NPOINTS= 3
##XYPOINTS= (XY..XY)\n400.5, 98.1; 402, 97\n403.25 1.2E+01 $$ end\n##END=\n"""
TABLES = [
    b"Wavelength (nm),a,b\n,Absorbance,Absorbance\n400,0.1,0.2\n401,0.3,0.4\n402,0.5,\n",
    b"# quantity: %T\ncm-1;x\n4000,5;98,2\n4001,5;97,1\n4002,5;95\n",
    b"sample,conc,400 nm,401 nm,402 nm\nA1,0.5,0.1,0.2,0.3\nA2,0.7,0.2,0.3,0.4\n",
    "\ufeffnm\tAbs\n200\t0.1\n201\t0.2\n202\t0.3\n".encode("utf-16-le"),
    b"a,,b,\nWavelength (nm),Abs,Wavelength (nm),Abs\n400,0.1,400,0.2\n401,0.3,401,0.4\n402,0.5,,\n",
]
WORDS = [b"1000000000000", b"-1", b"0", b"1E+300", b"NaN", b"inf", b"##END=", b"##TITLE= x", b"$$", b"?", b"s99999999",
         b"Z9", b"(XY..XY)", b"(X++(Y..Y))", b"##DATA TYPE= LINK", b"##NPOINTS= 1000000000000", b"##XFACTOR= 0",
         b"##PAGE= N=1", b"##SYMBOL= X", b"\xff", b"\0", b"\xe9", b"\x22", b",,,,", b";", b"\t",
         b"1e-400", b"_", b"%"]  # fmt: skip


def seeds(folder):
    """Small files of every kind, as the published ones are but with the middle of their tables left out."""
    found = [NTUPLES, PAIRS, *TABLES]
    for path in sorted(REFERENCE.glob("*.jdx")):
        data = path.read_bytes()
        found.append(data[:1500] + b"\n##END=\n")
    rng = np.random.default_rng(1)
    spectra = make_spectra(rng.normal(size=(2, 60)).round(3), np.arange(60) + 400.0, dim="wavelength",
                           quantity="absorbance", labels=["a", "b"])  # fmt: skip
    for form in ("AFFN", "DIFDUP"):
        found.append(unmix.write(spectra, folder / f"{form}.jdx", form=form).read_bytes())
    found.append(unmix.write(spectra, folder / "t.csv").read_bytes())
    return found


def damaged(rng, pool):  # noqa: PLR0912 - one branch a kind of damage
    """One file of the pool with one to four kinds of damage."""
    data = bytearray(pool[rng.integers(len(pool))])
    for _ in range(rng.integers(1, 5)):
        n = max(len(data), 1)
        at, to = sorted(rng.integers(0, n, 2))
        kind = rng.integers(9)
        if kind == 0:
            for place in rng.integers(0, n, rng.integers(1, 6)):
                if data:
                    data[place % len(data)] ^= 1 << int(rng.integers(8))
        elif kind == 1:
            del data[at:]
        elif kind == 2:
            del data[at:to]
        elif kind == 3:
            data[at:at] = data[at:to] * int(rng.integers(1, 4))
        elif kind == 4:
            data[at:at] = WORDS[rng.integers(len(WORDS))]
        elif kind == 5:
            numbers = list(re.finditer(rb"[-+]?\d+\.?\d*", bytes(data)))
            if numbers:
                spot = numbers[rng.integers(len(numbers))].span()
                data[spot[0] : spot[1]] = WORDS[rng.integers(6)]
        elif kind == 6:
            lines = bytes(data).split(b"\n")
            i, j = rng.integers(0, len(lines), 2)
            lines[i], lines[j] = lines[j], lines[i]
            data = bytearray(b"\n".join(lines))
        elif kind == 7:
            other = pool[rng.integers(len(pool))]
            data[at:to] = other[at : at + int(rng.integers(0, 400))]
        else:
            opening = b"##TITLE= n\n##JCAMP-DX= 4.24\n##DATA TYPE= LINK\n##BLOCKS= 1\n"
            depth = int(rng.integers(1, 60))
            data = bytearray(opening * depth + bytes(data) + b"\n##END=\n" * depth)
        del data[200_000:]
    return bytes(data)


def read_or_refuse(path, data, checks):
    """Read bytes; what became of them, the seconds it took."""
    path.write_bytes(data)
    start = time.perf_counter()
    try:
        for one in read_file(path, Options(checks, "absorbance" if checks == "warn" else None)):
            assert np.isfinite(one.axis).all()
            assert (np.diff(one.axis) > 0).all()
            assert one.values.shape == (len(one.labels), one.axis.size)
    except ReadError as error:
        message = str(error)
        outcome = "refused"
    else:
        message = ""
        outcome = "read"
    assert len(message) < 1000
    return outcome, time.perf_counter() - start


def run(folder, runs, measured):
    rng = np.random.default_rng(20260101)
    pool = seeds(folder)
    outcomes = {"read": 0, "refused": 0}
    slowest = largest = 0.0
    path = folder / "damaged"
    for i in range(runs):
        data = damaged(rng, pool)
        measure = i % measured == 0
        if measure:
            tracemalloc.start()
        outcome, seconds = read_or_refuse(path, data, ("error", "warn")[i % 2])
        if measure:
            peak = tracemalloc.get_traced_memory()[1]
            tracemalloc.stop()
            largest = max(largest, peak / (MEMORY_BASE + MEMORY_FACTOR * len(data)))
        outcomes[outcome] += 1
        slowest = max(slowest, seconds)
    return outcomes, slowest, largest


def test_damaged_files_are_read_or_refused(tmp_path):
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", UnmixWarning)
        outcomes, slowest, largest = run(tmp_path, 400, 4)
    assert outcomes["refused"] > 100
    assert outcomes["read"] > 20
    assert slowest < SECONDS
    assert largest < 1


@pytest.mark.study
def test_a_hundred_thousand_damaged_files(tmp_path):
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", UnmixWarning)
        outcomes, slowest, largest = run(tmp_path, 100_000, 50)
    print(f"{outcomes}, slowest {slowest:.3f} s, memory at most {largest:.2f} of the bound")
    assert outcomes["refused"] > 20_000
    assert outcomes["read"] > 5_000
    assert slowest < SECONDS
    assert largest < 1


def test_endless_counts_allocate_nothing(tmp_path):
    header = (b"##TITLE= t\n##JCAMP-DX= 4.24\n##DATA TYPE= INFRARED SPECTRUM\n##XUNITS= 1/CM\n##YUNITS= ABSORBANCE\n"
              b"##FIRSTX= 0\n##LASTX= 999999999999\n##NPOINTS= 1000000000000\n##XYDATA= (X++(Y..Y))\n")  # fmt: skip
    for table in (b"0A1J1J1\n", b"0A1s99999999999\n", b"0A1s99999999999999999999\n"):
        tracemalloc.start()
        (tmp_path / "huge.jdx").write_bytes(header + table + b"##END=\n")
        with pytest.raises(ReadError, match=r"ordinates|points|digits"):
            read_file(tmp_path / "huge.jdx", Options())
        peak = tracemalloc.get_traced_memory()[1]
        tracemalloc.stop()
        assert peak < 2**20


def test_many_blocks_share_one_budget(tmp_path):
    block = (b"##TITLE= t\n##XUNITS= 1/CM\n##YUNITS= ABSORBANCE\n##FIRSTX= 1\n##LASTX= 900001\n##NPOINTS= 900001\n"
             b"##XYDATA= (X++(Y..Y))\n1A1%Z00000\n##END=\n")  # fmt: skip
    (tmp_path / "many.jdx").write_bytes(
        b"##TITLE= l\n##DATA TYPE= LINK\n##BLOCKS= 50\n" + block.replace(b"%Z", b"%Y1") * 50 + b"##END=\n"
    )
    with pytest.raises(ReadError, match="repeat counts ask for"):
        read_file(tmp_path / "many.jdx", Options("warn"))


@pytest.mark.parametrize("depth", [10, 5_000])
def test_deep_nesting_is_no_recursion(tmp_path, depth):
    inner = PAIRS.decode()
    text = "##TITLE= l\n##DATA TYPE= LINK\n##BLOCKS= 1\n" * depth + inner + "##END=\n" * depth
    (tmp_path / "deep.jdx").write_text(text)
    assert len(read_file(tmp_path / "deep.jdx", Options())) == 1
