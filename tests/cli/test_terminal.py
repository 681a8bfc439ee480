import io

import pytest

from unmix.cli import terminal
from unmix.cli.terminal import (
    Cell,
    Column,
    coloured,
    columns_of,
    harmless,
    progress,
    shortened,
    table,
    wrapped,
)


class Screen(io.StringIO):
    def isatty(self):
        return True


COLUMNS = [Column("sample", cut=True), Column("value", right=True), Column("verdict")]


def test_a_table_is_aligned_and_numbers_are_flush_right():
    lines = table(COLUMNS, [["a", "1.5", "good"], ["long", "10.25", "bad"]]).splitlines()
    assert lines == [
        "sample  value  verdict",
        "------  -----  -------",
        "a         1.5  good",
        "long    10.25  bad",
    ]


def test_only_names_are_cut_and_never_numbers():
    row = ["x" * 200, "123456789.123456789", "unsupported"]
    lines = table(COLUMNS, [row], width=60).splitlines()
    assert max(map(columns_of, lines)) <= 60
    assert "123456789.123456789" in lines[-1]
    assert "\N{HORIZONTAL ELLIPSIS}" in lines[-1]


def test_wide_characters_take_two_columns():
    assert columns_of("水") == 2
    assert columns_of("e\u0301") == 1
    lines = table(COLUMNS, [["水水水", "1", "x"], ["abcdef", "2", "y"]]).splitlines()
    assert columns_of(lines[-1]) == columns_of(lines[-2])
    assert columns_of(shortened("水" * 20, 11)) <= 11


def test_text_of_a_file_cannot_steer_the_terminal():
    assert "\x1b" not in harmless("\x1b[2Jgone")
    assert "\u202e" not in harmless("\u202egpj.exe")
    assert harmless("two\nlines\t!") == "two lines !"
    assert "\x1b" not in table(COLUMNS, [["\x1b[31m", "1", "x"]])
    assert "\x1b" not in wrapped("\x1b[31m red")


def test_colour_only_on_a_terminal_that_wants_it(monkeypatch):
    monkeypatch.delenv("NO_COLOR", raising=False)
    monkeypatch.setenv("TERM", "xterm")
    assert coloured(Screen())
    assert not coloured(io.StringIO())
    monkeypatch.setenv("NO_COLOR", "1")
    assert not coloured(Screen())
    monkeypatch.delenv("NO_COLOR")
    monkeypatch.setenv("TERM", "dumb")
    assert not coloured(Screen())
    rows = [[Cell("a", "good"), "1", Cell("bad", "bad")]]
    assert "\x1b[32ma" in table(COLUMNS, rows, colour=True)
    assert "\x1b" not in table(COLUMNS, rows)


def test_paragraphs_fit_the_terminal(monkeypatch):
    monkeypatch.setenv("COLUMNS", "70")
    lines = wrapped("word " * 50, first="note: ", rest="  ").splitlines()
    assert max(map(len, lines)) <= 70
    assert lines[0].startswith("note: word")
    assert lines[1].startswith("  word")


@pytest.mark.parametrize(("columns", "width"), [("20", 60), ("100", 100), ("500", 120)])
def test_the_width_is_that_of_the_terminal_within_reason(monkeypatch, columns, width):
    monkeypatch.setenv("COLUMNS", columns)
    assert terminal.terminal_width() == width


def test_progress_is_silent_without_a_terminal(capsys):
    with progress("reading", after=0) as tick:
        tick(1, 2)
    assert capsys.readouterr().err == ""


def test_progress_shows_how_far_and_how_long_and_clears_itself(monkeypatch):
    screen = Screen()
    monkeypatch.setattr("sys.stderr", screen)
    times = iter([0.0, 0.5, 2.0, 2.01, 4.0])
    monkeypatch.setattr(terminal.time, "monotonic", lambda: next(times))
    with progress("reading") as tick:
        tick(1, 10)
        assert screen.getvalue() == ""
        tick(5, 10)
        tick(6, 10)
        tick(8, 10)
    text = screen.getvalue()
    assert "5/10 2 s left" in text
    assert "6/10" not in text
    assert "8/10 1 s left" in text
    assert text.endswith("\r\x1b[K")
