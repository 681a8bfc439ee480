import base64
import hashlib
import html.parser
import json
import re
from importlib import resources

import numpy as np
import pytest

from unmix.errors import InputError, WriteError
from unmix.report.page import page, report
from unmix.report.view import Composition
from unmix.report.words import advice, lead


class Outline(html.parser.HTMLParser):
    """Elements that are open, headings, and everything that could fetch something."""

    void = frozenset({"meta", "link", "br", "input", "line", "rect", "path"})

    def __init__(self):
        super().__init__()
        self.open, self.headings, self.fetched, self.ids, self.errors = [], [], [], [], []
        self.kept = None

    def handle_starttag(self, tag, attrs):
        found = dict(attrs)
        self.fetched += [
            value for key, value in attrs if key in ("src", "href") and not (value or "").startswith("#")
        ]
        self.ids += [found["id"]] if "id" in found else []
        if tag not in self.void:
            self.open.append(tag)
        if tag in ("h1", "h2", "h3"):
            self.headings.append(tag)

    def handle_endtag(self, tag):
        if not self.open or self.open.pop() != tag:
            self.errors.append(tag)


def outline(text):
    found = Outline()
    found.feed(text)
    return found


def without_library(text):
    return re.sub(r"<script>/\*\*.*?</script>", "", text, flags=re.S)


def test_the_page_is_well_formed_and_fetches_nothing(composition, design):
    for text in (page([composition]), page([design])):
        found = outline(text)
        assert found.errors == []
        assert found.open == []
        assert found.fetched == []
        assert len(set(found.ids)) == len(found.ids)
        assert found.headings[0] == "h1"
        assert found.headings.count("h1") == 1
        assert '<html lang="en">' in text


def test_only_the_scripts_of_the_page_are_allowed(composition):
    text = page([composition])
    policy = re.search(r'Content-Security-Policy" content="([^"]*)"', text).group(1)
    assert policy.startswith("default-src 'none'")
    assert "http" not in policy
    scripts = re.findall(r"<script>(.*?)</script>", text, re.S)
    digests = {base64.b64encode(hashlib.sha256(one.encode()).digest()).decode() for one in scripts}
    assert set(re.findall(r"'sha256-([^']+)'", policy)) == digests
    assert "unsafe-inline" not in re.search(r"script-src[^;]*", policy).group(0)


def test_the_first_screen_answers(composition):
    text = without_library(page([composition]))
    first = text[: text.index("Sample by sample")]
    assert "6 of 8 answers are supported" in first
    assert "do not use the values" in first
    assert "Find out what absorbs at 1740 cm-1" in first
    assert "Measure again with a shorter path or diluted" in first
    assert "The answer covers the listed components only." in first
    assert first.index("drum 2") < first.index("drum 1")


def test_a_component_at_its_bound_is_a_limit(composition):
    text = without_library(page([composition]))
    row = re.search(r'<td class="number" data-v="0">(.*?)</td>', text).group(1)
    assert "&lt; 0.018" in row
    assert "to" not in re.sub("<[^>]*>", "", row)


def test_the_sections_of_the_page(composition):
    result = composition.assign_attrs(refused=json.dumps({"bad.jdx": "the file is empty"}))
    text = without_library(page([result]))
    for part in ("A band at 1740 cm-1", "Bands that no component explains", "Variance inflation", "hardly told apart",
                 "absorbances of the components add up", "drum_3.jdx: 37 saturated channels", "ab" * 32,
                 "the file is empty", "Nothing is known about variation", "2030-01-01T12:00:00+00:00"):  # fmt: skip
        assert part in text, part


def test_the_data_of_the_page_is_json_with_every_sample(composition):
    text = page([composition, composition])
    data = json.loads(
        re.search(r'<script type="application/json" id="data">(.*?)</script>', text, re.S).group(1)
    )
    assert set(data["samples"]) == {f"{place}-{i}" for place in (0, 1) for i in range(8)}
    assert len(data["results"]) == 2


def test_a_result_without_curves_still_gives_its_tables(composition):
    bare = composition[["concentration", "lower", "upper", "verdict", "reason"]].drop_vars("file")
    bare = bare.assign_attrs(kind="quantify")
    text = page([bare])
    assert "drum 2" in text
    assert 'class="plot"' not in text
    assert outline(text).errors == []


def test_a_sample_without_an_answer_is_shown(composition):
    names = ["concentration", "lower", "upper", "standard_uncertainty", "detection_limit"]
    blank = composition.assign(
        {name: composition[name].where(composition["label"] != "drum 1") for name in names}
    )
    blank["fitted"][0] = np.nan
    blank["residual"][0] = np.nan
    text = without_library(page([blank]))
    assert "not determined" in text
    bare = re.sub(r"<script.*?</script>|<style.*?</style>", "", text, flags=re.S)
    assert not re.search(r"\b(nan|inf|None)\b", bare)


def test_results_of_different_components_share_a_table(composition, make_composition):
    other = make_composition(2, names=["isopropanol", "ether"], axis=np.arange(900.0, 1400.0, 2.0))
    text = without_library(page([composition, other]))
    assert "not asked" in text
    assert "650 to 3998 cm-1, 838 channels" in text
    assert "900 to 1398 cm-1, 250 channels" in text


def test_the_words_count_and_agree(composition):
    one = Composition(composition.isel(sample=[0]))
    assert lead([one]) == "This answer is supported: use the values with their intervals."
    all_good = composition.isel(sample=[0, 3])
    assert lead([Composition(all_good)]).startswith("All 2 answers are supported")
    assert "1 is doubtful" in lead([Composition(composition)])


def test_advice_follows_from_what_is_wrong(composition):
    view = Composition(composition)
    assert advice(view, 0) == "Use the values with their intervals."
    negative = composition.assign(misfit_score=-composition["misfit_score"])
    assert advice(Composition(negative), 1).startswith("Check the pure spectra at 1740 cm-1")
    broad = composition.assign(misfit_width=composition["misfit_width"] * 12)
    assert "try a baseline of higher order" in advice(Composition(broad), 1)
    alike = composition.drop_vars(["misfit_position"]).assign(
        variance_inflation=composition["variance_inflation"] * 5
    )
    assert "regions in which the components differ" in advice(Composition(alike), 1)


def test_a_page_of_two_hundred_samples_stays_small(make_composition, tmp_path):
    result = make_composition(200, axis=np.arange(650.0, 4001.0))
    assert report(result, tmp_path / "page.html").stat().st_size < 8_000_000


def test_a_page_is_replaced_only_when_asked(composition, tmp_path):
    path = report(composition, tmp_path / "page.html")
    with pytest.raises(WriteError, match="exists already"):
        report(composition, path)
    assert report(composition, path, overwrite=True) == path
    with pytest.raises(InputError, match="a result is a Dataset"):
        report(composition["concentration"], tmp_path / "other.html")


def test_the_shared_script_is_written_once(composition, tmp_path):
    first = report(composition, tmp_path / "a.html", assets=tmp_path / "lib")
    stamp = next((tmp_path / "lib").iterdir()).stat().st_mtime_ns
    second = report(composition, tmp_path / "b.html", assets=tmp_path / "lib")
    assert [entry.stat().st_mtime_ns for entry in (tmp_path / "lib").iterdir()] == [stamp]
    assert 'src="lib/plotly-' in first.read_text(encoding="utf-8")
    assert second.stat().st_size < 400_000


def colours(css, block):
    return dict(re.findall(r"--([a-z-]+):\s*(#[0-9a-f]{6})", css[css.index(block) :].split("}")[0]))


def contrast(one, other):
    def light(colour):
        parts = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
        linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in parts]
        return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]

    high, low = sorted((light(one), light(other)), reverse=True)
    return (high + 0.05) / (low + 0.05)


@pytest.mark.parametrize("block", [":root {", ":root:not(.printing) {"])
def test_text_keeps_the_contrast_of_wcag_aa(block):
    """WCAG 2.2, success criterion 1.4.3: 4.5 to 1 for text of ordinary size."""
    css = (resources.files("unmix.report") / "assets" / "page.css").read_text(encoding="utf-8")
    found = colours(css, block)
    pairs = [("ink", "page"), ("ink", "soft"), ("quiet", "page"), ("quiet", "soft"), ("link", "page"),
             ("good-ink", "good"), ("doubt-ink", "doubt"), ("bad-ink", "bad"), ("bad-ink", "page"),
             ("ink", "good"), ("ink", "doubt"), ("ink", "bad")]  # fmt: skip
    for ink, ground in pairs:
        assert contrast(found[ink], found[ground]) >= 4.5, (ink, ground)
