import math

import pytest

from unmix.cli import demo
from unmix.cli.demo import demo_sets, read_truth
from unmix.errors import InputError


def test_the_sets_are_listed_with_a_line_each(unmix):
    status, out, _ = unmix("demo")
    assert status == 0
    assert "recovered_solvent\n" in out
    assert "solvent-recovery works" in out
    assert "unmix demo recovered_solvent --report" in out


def test_a_set_runs_and_is_compared_with_the_truth(unmix, tmp_path, monkeypatch):
    monkeypatch.setenv("COLUMNS", "80")
    page = tmp_path / "page.html"
    status, out, err = unmix("demo", "recovered_solvent", "--report", page)
    assert status == 0
    assert "wrote" in err
    lines = out.splitlines()
    assert lines[0].split() == ["sample", "component", "true", "amount", "interval", "unit", "holds", "it"]
    clean = [line for line in lines if line.startswith(("drum-01", "drum-03"))]
    assert all(line.split()[-1] == "yes" for line in clean)
    assert f"unmix quantify {demo_sets()['recovered_solvent'] / 'drums'} --pure" in out
    assert "Demo: recovered solvent (invented data)" in page.read_text(encoding="utf-8")


def test_an_unknown_set_is_refused_with_the_nearest(unmix):
    status, _, err = unmix("demo", "recoverd_solvent")
    assert status == 2
    assert "there is no demo set 'recoverd_solvent'; did you mean 'recovered_solvent'?" in err


def test_sets_inside_the_package_come_first(tmp_path, monkeypatch):
    for name in ("package/demo_sets/inside", "demo_sets/beside"):
        (tmp_path / name / "pure").mkdir(parents=True)
    monkeypatch.setattr(demo.resources, "files", lambda _: tmp_path / "package")
    assert list(demo_sets()) == ["inside"]
    (tmp_path / "package" / "demo_sets" / "inside" / "pure").rmdir()
    assert list(demo_sets()) == ["beside"]
    (tmp_path / "demo_sets" / "beside" / "pure").rmdir()
    with pytest.raises(InputError, match="the demo sets are not installed"):
        demo_sets()


def test_the_truth_is_read_as_numbers(tmp_path):
    assert read_truth(tmp_path / "truth.csv") == {}
    (tmp_path / "truth.csv").write_text("sample,a,note\nx,1.5,odd\n", encoding="utf-8")
    truth = read_truth(tmp_path / "truth.csv")["x"]
    assert truth["a"] == 1.5
    assert math.isnan(truth["note"])
