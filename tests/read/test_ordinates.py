"""Packed ordinates: every form, what separates values, missing ones, and what is refused with its line."""

import numpy as np
import pytest

from unmix.errors import ReadError
from unmix.read.ordinates import decode, decode_pairs, last_digit
from unmix.read.pack import pack


def values(text, limit=1000):
    return decode(text.encode("latin-1"), path="f.jdx", line=10, limit=limit)


@pytest.mark.parametrize(("text", "expected"), [
    ("0 1.5 -2.25 +3", [1.5, -2.25, 3]),
    ("0 1.5E+02 2e-01 3.E+1", [150, 0.2, 30]),
    ("0 1.5E2 2.0E1", [150, 20]),  # no packed digit in sight, so E is an exponent
    ("0E4A2", [54, 12]),  # packed digits in sight, so E is one
    ("5.0E+02A1B2", [11, 22]),
    ("0 1,2;3\t4", [1, 2, 3, 4]),
    ("0 1 ? 3", [1, np.nan, 3]),
    ("0A1?C3", [11, np.nan, 33]),
    ("-0.5+1-2", [1, -2]),
    ("0A1 J2\nK", None),
    ("0A%%J", [1, 1, 1, 2]),
    ("0AT", [1, 1]),
    ("0AJT\n2C", [1, 2, 3]),
    ("0AJT\n2CT", [1, 2, 3, 3]),  # the count repeats the check, of which one is dropped
    ("0AB\n2C", [1, 2, 3]),  # no check where the line before does not end in a difference
    ("0 12345678901234 123456789012345678", [12345678901234, 123456789012345678]),
])  # fmt: skip
def test_forms(text, expected):
    if expected is None:
        with pytest.raises(ReadError, match="line 11: the line does not start with an abscissa"):
            values(text)
        return
    np.testing.assert_array_equal(values(text).values, expected)


@pytest.mark.parametrize(("text", "message"), [
    ("", "line 10: the data table is empty"),
    ("\n\n", "line 10: the data table is empty"),
    ("0 1\n2", "line 11: the line holds an abscissa but no ordinate"),
    ("0 1\nA1", "line 11: the line does not start with an abscissa"),
    ("0J1", "line 10: the line starts with a difference, but every line starts with a full ordinate"),
    ("0AJ\n2J", "line 11: the line starts with a difference"),
    ("0T", "line 10: a repeat count has nothing before it to repeat"),
    ("0ATU", "line 10: a repeat count has nothing before it to repeat"),
    ("0A\n1T", "line 11: a repeat count has nothing before it to repeat"),
    ("0?J", "line 10: a difference follows a missing ordinate"),
    ("0 1\n2 #", "line 11: the character '#' does not belong in a data table"),
    ("0 1 -", "line 10: a sign stands without a number"),
    ("0 1.2.3", "line 10: '1.2.3' is not a number"),
    ("0 .", r"line 10: '\.' is not a number"),
    ("0A1.5", "line 10: a packed value is not a whole number of up to 14 digits"),
    ("0A1234567890123456", "line 10: a packed value is not a whole number of up to 14 digits"),
    ("0 1E+999", "line 10: a number is too large"),
    ("0As5", "line 10: the repeat counts ask for 95 ordinates but at most 50 can belong here"),
])  # fmt: skip
def test_what_is_no_table(text, message):
    with pytest.raises(ReadError, match=f"^f.jdx, {message}"):
        values(text, limit=50)


def test_failed_check_is_listed_with_its_line():
    found = values("0A1J1\n1B3K\n3B5\n3B9")
    assert found.faults == [(11, "the line starts with 23 but the line before ends with 22 (Y-check)")]
    assert found.checked.tolist() == [False, True, True, False]
    assert found.values.tolist() == [11, 22, 25, 29]


def test_place_of_every_line():
    found = values("10 1 2\n12.5 3\n+13.25A1J\n15B2")
    assert found.index.tolist() == [0, 2, 3, 4]
    assert found.x.tolist() == [10, 12.5, 13.25, 15]
    assert found.x_unit.tolist() == [1, 0.1, 0.01, 1]
    assert found.forms == {"AFFN", "SQZ", "DIF"}


def test_pairs():
    x, y = decode_pairs(b"(1,2)(3,4.5)\n5 ?; 7 1E+01", path="f", line=1)
    np.testing.assert_array_equal(x, [1, 3, 5, 7])
    np.testing.assert_array_equal(y, [2, 4.5, np.nan, 10])


@pytest.mark.parametrize(("text", "message"), [
    (b"1,2\n3", "line 6: the line does not hold whole pairs"),
    (b"1,2\n3,A4", "line 6: a packed value stands in a table of pairs"),
    (b"1,2\n?,4", "line 6: an abscissa is missing"),
])  # fmt: skip
def test_broken_pairs(text, message):
    with pytest.raises(ReadError, match=message):
        decode_pairs(text, path="f", line=5)


@pytest.mark.parametrize(("word", "unit"), [("450", 1), ("450.", 1), ("0.10", 0.01), ("1.5E+03", 100), ("1e-2", 0.01)])
def test_last_printed_digit(word, unit):
    assert last_digit(word) == pytest.approx(unit, rel=1e-12)


def test_packing_keeps_lines_short_and_ends_with_a_check():
    rng = np.random.default_rng(0)
    ordinates = np.cumsum(rng.integers(-3, 4, 500)) + 1e6
    ordinates[[0, 77, 78]] = np.nan
    lines = list(pack([f"{i}" for i in range(500)], ordinates, width=60))
    assert max(map(len, lines)) <= 60
    found = values("\n".join(lines))
    np.testing.assert_array_equal(found.values, ordinates)
    assert found.faults == []
    np.testing.assert_array_equal(found.x, found.index)


def test_packing_a_constant_is_one_count():
    assert list(pack(["0", "1", "2", "3"], np.full(4, 7.0), width=80)) == ["0G%U", "3G"]
