import warnings

import pytest
import typer

from unmix.cli.output import OutputFiles, Status, check_targets, errors_as_sentences, status_of
from unmix.errors import InputError, UnmixWarning, WriteError


@pytest.mark.parametrize(
    ("verdicts", "refused", "status"),
    [
        (["supported", "supported"], 0, Status.SUPPORTED),
        (["supported", "doubtful"], 0, Status.DOUBTFUL),
        (["unsupported"], 0, Status.DOUBTFUL),
        (["supported"], 1, Status.UNUSABLE),
        (["doubtful"], 1, Status.UNUSABLE),
    ],
)
def test_the_exit_status(verdicts, refused, status):
    assert status_of(verdicts, refused=refused) == status


def test_targets_are_refused_before_any_work(tmp_path):
    there = tmp_path / "there.csv"
    there.write_text("mine", encoding="utf-8")
    with pytest.raises(WriteError, match="exists already; choose another name or add --overwrite"):
        check_targets([there], overwrite=False)
    check_targets([there, None, tmp_path / "new.csv"], overwrite=True)
    with pytest.raises(WriteError, match="its folder does not exist"):
        check_targets([tmp_path / "no" / "x.csv"], overwrite=False)
    with pytest.raises(WriteError, match="is a folder"):
        check_targets([tmp_path], overwrite=True)
    with pytest.raises(WriteError, match="is asked for twice"):
        check_targets([tmp_path / "x.csv", tmp_path / "." / "x.csv"], overwrite=True)


def test_two_tables_cannot_share_standard_output(tmp_path):
    dash = type(tmp_path)("-")
    with pytest.raises(InputError, match="cannot both go to standard output"):
        OutputFiles(csv=dash, json=dash).check()
    assert OutputFiles(csv=dash).stream


def ended(error, *, debug=False):
    with pytest.raises(typer.Exit) as end, errors_as_sentences(debug):
        raise error
    return end.value.exit_code


@pytest.mark.parametrize(
    ("error", "status", "text"),
    [
        (InputError("baseline is 'x'", accepted="give 1"), 2, "unmix: baseline is 'x'; give 1"),
        (FileNotFoundError(2, "No such file", "a.csv"), 2, "unmix: a.csv: no such file"),
        (MemoryError(), 2, "not enough memory"),
        (ZeroDivisionError("division by zero"), 2, "a fault in unmix itself (ZeroDivisionError: division by zero)"),
        (KeyboardInterrupt(), 130, "stopped by Ctrl-C"),
    ],
)  # fmt: skip
def test_what_goes_wrong_becomes_a_sentence(error, status, text, capsys):
    assert ended(error) == status
    err = capsys.readouterr().err
    assert text in err
    assert "Traceback" not in err
    assert len(err.strip().splitlines()) == 1


@pytest.mark.parametrize("error", [InputError("x"), ZeroDivisionError("x"), OSError("x")])
def test_debug_lets_the_error_through(error):
    with pytest.raises(type(error)), errors_as_sentences(True):
        raise error


def test_an_exit_and_a_broken_pipe_pass():
    assert ended(typer.Exit(1)) == 1
    with pytest.raises(BrokenPipeError), errors_as_sentences(False):
        raise BrokenPipeError


def test_warnings_become_remarks_once_unless_shown_elsewhere(capsys):
    with errors_as_sentences(False) as shown:
        for text in ("taken as 1 cm", "taken as 1 cm", "said in the result"):
            warnings.warn(text, UnmixWarning, stacklevel=1)
        warnings.warn("not for the reader", RuntimeWarning, stacklevel=1)
        shown.add("said in the result")
    assert capsys.readouterr().err == "note: taken as 1 cm\n"


def test_control_characters_in_a_message_are_harmless(capsys):
    ended(InputError("'\x1b[2J' is no name"))
    assert "\x1b" not in capsys.readouterr().err
