"""Published JCAMP-DX files and strings: every count, repeated ordinate and header figure is met.

Strings: Table VIIb and Table VI.3 of R. S. McDonald and P. A. Wilks, Appl. Spectrosc. 42 (1988) 151-162, as quoted in
two independent places. Files: see jcamp/README.md.
"""

import json
import re
from pathlib import Path

import numpy as np
import pytest

import unmix
from unmix.errors import ReadError
from unmix.read import read_each, read_file
from unmix.read.found import Options
from unmix.read.ordinates import decode

FOLDER = Path(__file__).parent / "jcamp"
FILES = sorted(FOLDER.glob("*.jdx"))

#: file -> points, first and last ordinate as printed in the table, times YFACTOR, in the order of the file
EXPECTED = {
    "ir_affn_ascending.jdx": [(3601, 400.0, 4000.0, 4480e-4, 7456e-4)],
    "ir_affn_crlf.jdx": [(3735, 4000.655017, 400.1619262, 7460 * 1.220703125e-2, None)],
    "ir_affn_descending.jdx": [(3951, 4400.007, 450.0, 68068800 * 9.5367e-7, 70168000 * 9.5367e-7)],
    "ir_affn_fractional_x.jdx": [(3435, 249.741, 3699.742, 1042663104 * 9.31323e-10, 1002329408 * 9.31323e-10)],
    "ir_difdup_descending.jdx": [(3951, 4400.0, 450.0, 82.25, 78.58)],
    "ir_link_five_blocks.jdx": [
        (1976, 4400.0, 450.0, 0.0467, None), (1976, 4400.0, 450.0, None, None), (3951, 4400.0, 450.0, None, None),
        (1976, 4400.0, 450.0, None, None), (3951, 4400.0, 450.0, None, 0.7228),
    ],
    "ir_pac_descending.jdx": [(3301, 4000.0, 700.0, 101.60, 101.24)],
    "uvvis_difdup_ascending.jdx": [(440, 250.0, 469.5, 1.1663, 0.1626)],
}  # fmt: skip


@pytest.mark.parametrize("text", [
    "0 1 2 3 3 2 1 0 -1 -2 -3", "0+1+2+3+3+2+1+0-1-2-3", "0 1BCCBA@abc", "0 1JJ%jjjjjj", "0 1JT%jX",
    "0+1 2CCB 1@-1b-3",
])  # fmt: skip
def test_one_set_of_ordinates_in_every_form(text):
    assert decode(text.encode(), path="", line=1, limit=99).values.tolist() == [1, 2, 3, 3, 2, 1, 0, -1, -2, -3]


def test_line_with_its_check_line():
    table = b"599.860@VKT%TLkj%J%KLJ%njKjL%kL%jJULJ%kLK1%lLMNPNPRLJ0QTOJ1P\n700.158A28"
    found = decode(table, path="", line=1, limit=99)
    assert found.values.astype(int).tolist() == [
        0, 0, 0, 0, 2, 4, 4, 4, 7, 5, 4, 4, 5, 5, 7, 10, 11, 11, 6, 5, 7, 6, 9, 9, 7, 10, 10, 9, 10, 11, 12, 15, 16, 16,
        14, 17, 38, 38, 35, 38, 42, 47, 54, 59, 66, 75, 78, 88, 96, 104, 110, 121, 128,
    ]  # fmt: skip
    assert found.faults == []
    assert found.index.tolist() == [0, 52]
    assert found.x[1] == pytest.approx(599.860 + 52 * 1.928808, abs=5e-4)


@pytest.mark.parametrize("path", FILES, ids=lambda path: path.stem)
def test_published_file_is_read_with_every_check_met(path):
    found = read_file(path, Options("error"))
    expected = EXPECTED[path.name]
    assert len(found) == len(expected)
    stated = [int(n) for n in re.findall(r"##NPOINTS=\s*(\d+)", path.read_text("latin-1"))]
    assert [one.axis.size for one in found] == stated
    for one, (points, first_x, last_x, first_y, last_y) in zip(found, expected, strict=True):
        assert one.axis.size == points
        falls = first_x > last_x
        assert one.facts["direction"] == ("descending" if falls else "ascending")
        assert (one.axis[0], one.axis[-1]) == (min(first_x, last_x), max(first_x, last_x))
        values = one.values[0, ::-1] if falls else one.values[0]
        percent = any("taken as percent" in note for note in one.notes)
        for value, text in ((values[0], first_y), (values[-1], last_y)):
            if text is not None:
                assert value == pytest.approx(text / 100 if percent else text, rel=1e-12)


def test_published_files_are_all_here():
    assert [path.name for path in FILES] == sorted(EXPECTED)


def test_headers_that_disagree_are_named():
    notes = {path.name: [note for one in read_file(path, Options()) for note in one.notes] for path in FILES}
    link = " ".join(notes["ir_link_five_blocks.jdx"])
    assert link.count("the header gives it in percent") == 5
    assert "line 16: ##MAXY= says 49.32 but the table has 0.4932" in link
    assert notes["ir_pac_descending.jdx"] == [
        "the header says 'TRANSMITTANCE', a fraction, but the values reach 101.9; taken as percent"
    ]
    assert notes["ir_affn_ascending.jdx"] == []
    assert notes["ir_affn_fractional_x.jdx"] == []


def test_whole_folder_keeps_each_axis_or_shares_one():
    with pytest.warns(unmix.errors.UnmixWarning):
        apart, refused = read_each(FOLDER / "ir_*.jdx")
    assert refused == {}
    assert sum(one.sizes["sample"] for one in apart) == 11
    with pytest.warns(unmix.errors.UnmixWarning):
        together = unmix.read(FOLDER / "ir_*.jdx")
    # The coarsest axis, 450 to 4400 by 2, within the shared range 700 to 3699.742
    assert together.wavenumber.values.tolist() == list(range(700, 3700, 2))
    assert len(set(together.label.values)) == 11
    assert len(json.loads(together.attrs["source_sha256"])) == 7


def test_every_changed_difference_is_caught(tmp_path):
    """The counter-test of the Y-check: no single changed difference inside the table passes."""
    data = (FOLDER / "uvvis_difdup_ascending.jdx").read_bytes()
    start = data.index(b"(X++(Y..Y))")
    places = [m.start() for m in re.finditer(rb"[J-Rj-r]", data) if m.start() > start + 12]
    rng = np.random.default_rng(3)
    for at in rng.choice(places, 60, replace=False):
        swapped = bytes([data[at] ^ 0x20])  # the same difference with the other sign
        (tmp_path / "changed.jdx").write_bytes(data[:at] + swapped + data[at + 1 :])
        with pytest.raises(ReadError, match="Y-check"):
            read_file(tmp_path / "changed.jdx", Options())


def test_every_lost_line_is_caught(tmp_path):
    for path in FILES:
        lines = path.read_bytes().split(b"\n")
        inside = [i for i, line in enumerate(lines) if re.match(rb"\s*[\d.]+ *[-+ @A-Ia-i]", line)]
        for at in (inside[0], inside[len(inside) // 2], inside[-1]):
            if at == inside[-1] and ("difdup" in path.name or "link" in path.name):
                continue  # it only repeats the last ordinate
            (tmp_path / path.name).write_bytes(b"\n".join(lines[:at] + lines[at + 1 :]))
            with pytest.raises(ReadError, match=r"check|NPOINTS|line"):
                read_file(tmp_path / path.name, Options())
