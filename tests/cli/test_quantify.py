import csv
import io
import json

import pytest
import xarray as xr


def test_the_table_and_the_status_of_a_good_run(laboratory, unmix):
    status, out, err = unmix("quantify", "samples", "--pure", "pure", "--path-length", "1 cm")
    assert status == 0
    assert err == ""
    lines = out.splitlines()
    assert lines[0].split() == ["sample", "component", "amount", "lower", "upper", "unit", "verdict"]
    assert max(map(len, lines)) <= 80
    rows = {tuple(line.split()[:2]) for line in lines if line.startswith("vat")}
    assert rows == {("vat1", "azure"), ("vat2", "azure")}
    assert "All 2 answers are supported" in out
    assert "does not replace a validated method" in " ".join(out.split())


def test_a_component_that_is_not_there_is_a_limit(laboratory, unmix):
    _, out, _ = unmix("quantify", "samples/vat2.csv", "--pure", "pure")
    line = next(line for line in out.splitlines() if "crimson" in line)
    assert line.split()[1].startswith("<")


def test_amounts_are_right(laboratory, unmix):
    _, out, _ = unmix("quantify", "samples/vat1.csv", "--pure", "pure", "--csv", "-")
    rows = {row["component"]: row for row in csv.DictReader(io.StringIO(out))}
    assert float(rows["crimson"]["concentration"]) == pytest.approx(4.0, abs=0.02)
    assert float(rows["azure"]["concentration"]) == pytest.approx(6.0, abs=0.02)
    assert float(rows["azure"]["lower"]) < 6.0 < float(rows["azure"]["upper"])
    assert rows["azure"]["unit"] == "g/L"


def test_the_path_length_scales_the_amounts(laboratory, unmix):
    _, out, _ = unmix("quantify", "samples/vat1.csv", "--pure", "pure", "--csv", "-", "--path-length", "5 mm")
    rows = {row["component"]: row for row in csv.DictReader(io.StringIO(out))}
    assert float(rows["azure"]["concentration"]) == pytest.approx(12.0, abs=0.04)


def test_all_files_are_written_and_hold_the_same(laboratory, unmix):
    files = [f"--{kind}=out.{kind}" for kind in ("csv", "xlsx", "json", "netcdf")]
    status, out, err = unmix("quantify", "samples", "--pure", "pure", *files, "--report", "out.html", "--quiet")
    assert status == 0
    assert out == ""
    assert err.count("wrote") == 5
    table = list(csv.DictReader((laboratory / "out.csv").read_text(encoding="utf-8-sig").splitlines()))
    parsed = json.loads((laboratory / "out.json").read_text(encoding="utf-8"))
    assert [float(row["upper"]) for row in table] == [row["upper"] for row in parsed["rows"]]
    with xr.open_dataset(laboratory / "out.netcdf", engine="h5netcdf") as stored:
        assert stored["upper"].values.ravel().tolist() == [row["upper"] for row in parsed["rows"]]
        assert "vat1.csv" in stored.attrs["inputs"]
    assert "vat1" in (laboratory / "out.html").read_text(encoding="utf-8")


def test_an_existing_file_is_refused_before_the_work_and_replaced_when_asked(laboratory, unmix):
    (laboratory / "out.csv").write_text("mine", encoding="utf-8")
    status, out, err = unmix("quantify", "samples", "--pure", "pure", "--csv", "out.csv", "--json", "new.json")
    assert status == 2
    assert out == ""
    assert "out.csv: exists already; choose another name or add --overwrite" in err
    assert (laboratory / "out.csv").read_text(encoding="utf-8") == "mine"
    assert not (laboratory / "new.json").exists()
    assert unmix("quantify", "samples", "--pure", "pure", "--csv", "out.csv", "--overwrite")[0] == 0


def test_bad_files_are_listed_and_the_others_answered(laboratory, unmix):
    (laboratory / "samples" / "empty.csv").write_text("", encoding="utf-8")
    (laboratory / "samples" / "word.csv").write_text("hello\n", encoding="utf-8")
    far = "Wavelength (nm),Absorbance\n" + "".join(f"{x},{0.1}\n" for x in range(900, 950, 5))
    (laboratory / "samples" / "far.csv").write_text(far, encoding="utf-8")
    status, out, err = unmix("quantify", "samples", "--pure", "pure", "--json", "out.json")
    assert status == 2
    assert "vat1" in out
    assert "vat2" in out
    lines = err.splitlines()
    assert any(line.startswith("unmix: empty.csv: the file is empty") for line in lines)
    assert any(line.startswith("unmix: word.csv: ") for line in lines)
    assert any(line.startswith("unmix: far.csv: ") and "share no channel" in line for line in lines)
    refused = {entry["file"] for entry in json.loads((laboratory / "out.json").read_text(encoding="utf-8"))["refused"]}
    assert refused == {"empty.csv", "word.csv", "far.csv"}


def test_samples_on_several_axes_are_answered_in_one_table(laboratory, unmix, lab):
    axis = lab["axis"][20:120]
    lab["write"](laboratory / "samples" / "short.csv", axis, lab["sample"](2.0, 3.0, 9, axis))
    status, out, _ = unmix("quantify", "samples", "--pure", "pure", "--netcdf", "out.nc", "--report", "out.html")
    assert status == 0
    names = [line.split()[0] for line in out.splitlines() if line.startswith(("vat", "short"))]
    assert names == ["short", "vat1", "vat2"]
    for group in ("grid_1", "grid_2"):
        with xr.open_dataset(laboratory / "out.nc", group=group, engine="h5netcdf") as stored:
            assert stored.attrs["kind"] == "quantify"


def test_an_unlisted_compound_is_doubted_in_words(laboratory, unmix, lab):
    axis = lab["axis"]
    extra = 0.05 / (1 + ((axis - 480) / 8) ** 2)
    lab["write"](laboratory / "samples" / "odd.csv", axis, lab["sample"](4.0, 6.0, 3) + extra)
    status, out, _ = unmix("quantify", "samples/odd.csv", "--pure", "pure")
    assert status == 1
    text = " ".join(out.split())
    assert "is not explained" in text
    assert "Next: " in text


def test_labels_that_two_files_share_are_told_apart(laboratory, unmix, lab):
    for name in ("one", "two"):
        rows = "\n".join(f"{x:g},{y:.6f}" for x, y in zip(lab["axis"], lab["sample"](1, 2, 5), strict=True))
        text = f"Sample,same\nWavelength (nm),Absorbance\n{rows}\n"
        (laboratory / f"{name}.csv").write_text(text, encoding="utf-8")
    _, out, _ = unmix("quantify", "one.csv", "two.csv", "--pure", "pure", "--csv", "-")
    assert {row["sample"] for row in csv.DictReader(io.StringIO(out))} == {"same (one)", "same (two)"}


def test_labels_that_two_axes_share_are_told_apart(laboratory, unmix, lab):
    for name, axis in (("one", lab["axis"]), ("two", lab["axis"][10:])):
        rows = "\n".join(f"{x:g},{y:.6f}" for x, y in zip(axis, lab["sample"](1, 2, 5, axis), strict=True))
        text = f"Sample,same\nWavelength (nm),Absorbance\n{rows}\n"
        (laboratory / f"{name}.csv").write_text(text, encoding="utf-8")
    _, out, _ = unmix("quantify", "one.csv", "two.csv", "--pure", "pure", "--csv", "-")
    assert {row["sample"] for row in csv.DictReader(io.StringIO(out))} == {"same (one)", "same (two)"}


def test_a_path_length_in_one_file_does_not_stop_another_without(laboratory, unmix, lab):
    rows = "\n".join(f"{x:g},{y:.6f}" for x, y in zip(lab["axis"], lab["sample"](1, 2, 5), strict=True))
    text = f"Sample,thin\nPath length,5 mm\nWavelength (nm),Absorbance\n{rows}\n"
    (laboratory / "samples" / "thin.csv").write_text(text, encoding="utf-8")
    _, out, err = unmix("quantify", "samples", "--pure", "pure", "--csv", "-")
    amounts = {
        (row["sample"], row["component"]): float(row["concentration"]) for row in csv.DictReader(io.StringIO(out))
    }
    assert amounts["thin", "azure"] == pytest.approx(4.0, abs=0.04)
    assert amounts["vat1", "azure"] == pytest.approx(6.0, abs=0.02)
    assert "unmix:" not in err


@pytest.mark.parametrize(
    ("arguments", "text"),
    [
        (["samples", "--pure", "nowhere"], "unmix: nowhere: there is no such file"),
        (["nowhere", "--pure", "pure"], "unmix: nowhere: there is no such file"),
        (
            ["samples", "--pure", "pure", "--level", "2"],
            "unmix: level is 2.0; give a coverage between 0 and 1",
        ),
        (
            ["samples", "--pure", "pure", "--path-length", "-1 cm"],
            "--path-length is -1 cm, but a path is longer",
        ),
        (
            ["samples", "--pure", "pure", "--noise", "-1"],
            "noise is -1.0; give a standard deviation above zero",
        ),
        (["samples", "--pure", "pure", "--regions", "x"], "--regions: 'x' is not a region"),
        (["samples", "--pure", "pure", "--baseline", "x"], "--baseline is 'x'"),
        (["samples/vat1.csv", "--pure", "pure", "--regions", "10-20"], "vat1.csv: regions: (10, 20) nm"),
        (["samples"], "the pure spectra are not clear; give --pure, or --standards together with --amounts"),
    ],
)
def test_bad_input_is_one_sentence_and_status_two(laboratory, unmix, arguments, text):
    status, out, err = unmix("quantify", *arguments)
    assert status == 2
    assert out == ""
    assert text in err
    assert "Traceback" not in err


def test_a_bad_pure_spectrum_stops_the_run(laboratory, unmix):
    (laboratory / "pure" / "empty.csv").write_text("", encoding="utf-8")
    status, out, err = unmix("quantify", "samples", "--pure", "pure")
    assert status == 2
    assert out == ""
    assert "empty.csv: a pure spectrum could not be read: the file is empty" in err


def test_debug_shows_the_error_itself(laboratory):
    from unmix.cli import main  # noqa: PLC0415
    from unmix.errors import InputError  # noqa: PLC0415

    with pytest.raises(InputError, match="level is"):
        main(["quantify", "samples", "--pure", "pure", "--level", "2", "--debug"])


def test_ctrl_c_ends_with_its_own_status_and_leaves_nothing_behind(laboratory, unmix, monkeypatch):
    def stop(*_args, **_kwargs):
        raise KeyboardInterrupt

    monkeypatch.setattr("unmix.cli.samples.read_each", stop)
    status, _, err = unmix("quantify", "samples", "--pure", "pure", "--csv", "out.csv")
    assert status == 130
    assert "stopped by Ctrl-C" in err
    assert sorted(entry.name for entry in laboratory.iterdir()) == ["pure", "samples"]


def test_constraints_and_uncertainties_of_path_and_dilution(laboratory, unmix):
    (laboratory / "known.toml").write_text("sum = [10.0, 0.01]\n[upper]\nazure = 7.0\n")
    status, out, err = unmix("quantify", "samples", "--pure", "pure", "--constraints", "known.toml", "--dilution", "2",
                             "--path-uncertainty", "0.01", "--path-length", "1 cm", "--json", "-")  # fmt: skip
    # the vats hold 10 and 8, diluted 20 and 16
    assert status == 1
    assert "The sum of all amounts was given as 10" in out
    (laboratory / "known.toml").write_text("sum = [")
    status, _, err = unmix("quantify", "samples", "--pure", "pure", "--constraints", "known.toml")
    assert status == 2
    assert "known.toml" in err
    assert "not a file of constraints" in " ".join(err.split())
