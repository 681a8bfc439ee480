import json
import re

import pytest

from unmix.report.markup import LONGEST, Markup, element, escaped, figure_text, name_of, script_json, shown

HOSTILE = [
    "<script>alert(1)</script>", "\"><img src=x onerror=alert(1)>", "</script><script>", "<!--", "&lt;b&gt;",
    "\u202egnp.exe", "🧪 \u2028 \u2029", "\x00\x07\x1b[31m", "' onmouseover='x", "x" * 10_000,
]  # fmt: skip


@pytest.mark.parametrize("text", HOSTILE)
def test_text_stays_text_in_elements_and_attributes(text):
    made = element("p", text, title=text)
    assert made.count("<") == 2
    assert re.fullmatch(r'<p title="[^"<>]*">[^<>]*</p>', made, re.S)
    assert not re.search(r"[\x00-\x08\x0b-\x1f\x7f]", made)


def test_elements_nest_and_flatten():
    made = element("ul", [element("li", text) for text in ("a", "b")], None, class_="x", hidden=True, id=None)
    assert made == '<ul class="x" hidden><li>a</li><li>b</li></ul>'
    assert isinstance(made, Markup)
    assert escaped(made) == made


@pytest.mark.parametrize("text", HOSTILE)
def test_json_in_a_script_cannot_end_it_and_comes_back(text):
    made = script_json({"name": text, text: 1})
    assert "<" not in made
    assert ">" not in made
    assert made.isascii()
    assert json.loads(made) == {"name": text, text: 1}


def test_json_in_a_script_holds_no_nan():
    with pytest.raises(ValueError, match="JSON"):
        script_json({"x": float("nan")})


@pytest.mark.parametrize("text", HOSTILE)
def test_figures_obey_no_markup_in_names(text):
    made = figure_text(text)
    assert "<" not in made
    assert "$" not in figure_text("$x^2$")
    assert len(made) < 400


def test_long_texts_are_cut_and_say_so():
    made = shown("x" * 10_000)
    assert len(made) < LONGEST + 40
    assert made.endswith("(10000 characters)")
    assert name_of("drum").startswith('<bdi dir="auto">drum')
