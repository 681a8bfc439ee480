"""How messages are put together, and that a program can read the fields."""

import pytest

from unmix.errors import (
    AxisError,
    InputError,
    ReadError,
    UnitError,
    UnmixError,
    UnmixWarning,
    WriteError,
    listed,
    suggestion,
)


def test_a_message_has_place_thing_and_what_is_accepted():
    error = UnmixError("the value is 7", where="a.csv, line 3", accepted="give 1 to 5")
    assert str(error) == "a.csv, line 3: the value is 7; give 1 to 5"
    assert (error.message, error.where, error.accepted) == ("the value is 7", "a.csv, line 3", "give 1 to 5")
    assert str(UnmixError("the value is 7")) == "the value is 7"


@pytest.mark.parametrize(
    ("path", "line", "start"),
    [("a.csv", 3, "a.csv, line 3: "), ("a.csv", 0, "a.csv: "), ("", 3, "line 3: "), ("", 0, "")],
)
def test_a_reading_error_names_file_and_line(path, line, start):
    error = ReadError("'x' is no number", path=path, line=line)
    assert str(error) == f"{start}'x' is no number"
    assert (error.path, error.line) == (path, line)


@pytest.mark.parametrize(
    ("own", "refined"),
    [
        (ReadError, ValueError),
        (InputError, ValueError),
        (UnitError, InputError),
        (AxisError, InputError),
        (WriteError, OSError),
    ],
)
def test_every_error_is_also_the_built_in_that_it_refines(own, refined):
    assert issubclass(own, refined)
    assert issubclass(own, UnmixError)
    assert issubclass(UnmixWarning, UserWarning)


def test_offenders_are_named_up_to_five_and_then_counted():
    assert listed(["a"]) == "'a'"
    assert listed("abcde") == "'a', 'b', 'c', 'd', 'e'"
    assert listed("abcdefgh") == "'a', 'b', 'c', 'd', 'e' and 3 more"
    assert listed([]) == ""


def test_near_names_are_suggested_and_far_ones_are_not():
    assert suggestion("B-07", ["B-7", "A-1"]) == "; did you mean 'B-7'?"
    assert suggestion("toluene", ["water", "acetone"]) == ""
    assert suggestion("a", []) == ""
