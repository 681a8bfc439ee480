import json


def test_two_dyes_can_be_told_apart(laboratory, unmix):
    status, out, err = unmix("conditioning", "--pure", "pure", "--noise", "0.0005", "--json", "out.json")
    assert status == 0
    assert "wrote out.json" in err
    assert "well apart" in out
    rows = json.loads((laboratory / "out.json").read_text(encoding="utf-8"))["rows"]
    assert {row["component"] for row in rows} == {"azure", "crimson"}
    assert all(0 < row["detection_limit"] < 0.1 for row in rows)


def test_two_alike_cannot(laboratory, unmix, lab):
    lab["write"](laboratory / "pure" / "twin.csv", lab["axis"], 1.001 * lab["absorptivity"]("azure"), "(g/L)-1 cm-1")
    status, out, _ = unmix("conditioning", "--pure", "pure", "--report", "out.html")
    assert status == 1
    assert "hardly told apart" in out
    assert "unsupported" in out
    assert "hardly told apart" in (laboratory / "out.html").read_text(encoding="utf-8")


def test_without_noise_there_is_no_detection_limit(laboratory, unmix):
    _, out, _ = unmix("conditioning", "--pure", "pure", "--quiet", "--csv", "-")
    assert ",,g/L," in out.splitlines()[1]


def test_bad_input_is_one_sentence(laboratory, unmix):
    status, _, err = unmix("conditioning", "--pure", "nowhere")
    assert status == 2
    assert err == "unmix: nowhere: there is no such file\n"


def test_advice_for_wanted_limits(laboratory, unmix):
    status, out, _ = unmix("conditioning", "--pure", "pure", "--noise", "0.001", "--wanted", "crimson=1e-3,azure=1e-3",
                           "--typical", "5", "--report", "page.html")  # fmt: skip
    assert status == 0
    assert "co-added" in out
    page = (laboratory / "page.html").read_text(encoding="utf-8")
    assert "How to reach the wanted detection limits" in page
    status, _, err = unmix("conditioning", "--pure", "pure", "--noise", "0.001", "--wanted", "crimson=much")
    assert (status, "--wanted is" in err) == (2, True)
