"""Pages opened from disk in a real browser, without a network: they draw, sort, find and copy without an error."""

import json
import re
import shutil
import subprocess

import numpy as np
import pandas as pd
import pytest

import unmix
from unmix.report.page import report
from unmix.spectra import make_spectra

CHROMIUM = next(filter(None, map(shutil.which, ("chromium", "chromium-browser", "google-chrome"))), None)
pytestmark = pytest.mark.skipif(CHROMIUM is None, reason="no Chromium on this machine")

HOSTILE = "<script>document.title='owned'</script><img src=x onerror=alert(1)>\u202e\u2028 '\"&amp; 🧪"


def opened(path, profile, dark=False):
    """The page after its script ran, and what it wrote to the console."""
    done = subprocess.run(
        [CHROMIUM, "--headless", "--no-sandbox", "--disable-gpu", "--disable-background-networking",
         "--no-first-run", "--virtual-time-budget=4000", "--enable-logging=stderr", "--window-size=1200,900",
         f"--blink-settings=preferredColorScheme={0 if dark else 1}",
         f"--user-data-dir={profile}", "--dump-dom", path.as_uri()],
        capture_output=True, text=True, timeout=90, check=False,
    )  # fmt: skip
    return done.stdout, re.findall(r"CONSOLE.*", done.stderr)


def acted(path, script):
    """The same page with a script at its end that acts on it and leaves what it saw in the element ``seen``."""
    text = re.sub(r"<meta http-equiv=.*?>", "", path.read_text(encoding="utf-8"), count=1)
    act = f"document.getElementById('seen').textContent = JSON.stringify((() => {{{script}}})())"
    ending = f"<pre id='seen'></pre><script>{act}</script>"
    other = path.with_name("acted.html")
    other.write_text(text.replace("</body>", f"{ending}</body>"), encoding="utf-8")
    return other


def seen(dom):
    found = re.search(r'<pre id="seen">(.*?)</pre>', dom, re.S).group(1)
    return json.loads(found.replace("&amp;", "&").replace("&lt;", "<").replace("&gt;", ">"))


def test_the_policy_of_the_page_stops_a_script_that_is_not_its_own(composition, tmp_path):
    page = report(composition, tmp_path / "page.html")
    text = page.read_text(encoding="utf-8").replace(
        "</body>", "<script>document.title = 'owned'</script></body>"
    )
    page.write_text(text, encoding="utf-8")
    dom, console = opened(page, tmp_path / "profile")
    assert "<title>owned" not in dom
    assert any("Content Security Policy" in line for line in console)


def test_hostile_names_are_shown_as_text(make_composition, tmp_path):
    long = "long " * 2000
    names = [HOSTILE, long, "=cmd|' /C calc'!A0", "%{y}<b>bold</b>"]
    result = make_composition(4, names=names, labels=[HOSTILE, long, "plain", "@more"])
    result = result.assign_attrs(title=HOSTILE, notes=json.dumps([HOSTILE]), caution=HOSTILE)
    dom, console = opened(report(result, tmp_path / "page.html"), tmp_path / "profile", dark=True)
    assert console == []
    assert "<title>owned" not in dom
    assert "<img" not in dom
    assert "&lt;script&gt;document.title='owned'" in dom


SORT_AND_FIND = """
  const rows = () => [...document.querySelectorAll('#all tbody tr')].filter(r => !r.hidden);
  const names = () => rows().map(r => r.cells[1].innerText);
  seen.drawn = document.querySelectorAll('.plot.drawn').length;
  seen.first = names();
  const head = document.querySelectorAll('#all thead th');
  head[1].querySelector('button').click(); seen.byName = names(); seen.sort = head[1].getAttribute('aria-sort');
  head[2].querySelector('button').click(); seen.byAmount = names();
  head[2].querySelector('button').click(); seen.down = names();
  document.querySelector('.tile').click(); seen.tile = names();
  document.querySelector('.tile').click();
  const find = document.getElementById('find'); find.value = 'saturated'; find.dispatchEvent(new Event('input'));
  seen.found = names();
"""

OPEN_AND_ZOOM = """
  const details = document.getElementById('s0-2');
  details.open = true; details.dispatchEvent(new Event('toggle'));
  const plot = details.querySelector('.plot');
  seen.curves = {};
  plot.data.forEach(t => { seen.curves[t.meta.curve + (t.meta.component ?? '')] = t.y; });
  Plotly.restyle(plot, {visible: 'legendonly'}, [0]);
  Plotly.relayout(plot, {'xaxis.range': [1800, 1600]});
  seen.shown = plot.data[0].visible; seen.range = plot.layout.xaxis.range;
"""


def test_a_page_sorts_finds_opens_zooms_and_draws_the_curves_of_the_result(composition, tmp_path):
    page = report(composition, tmp_path / "page.html")
    script = f"const seen = {{}}; {{ {SORT_AND_FIND} }} {{ {OPEN_AND_ZOOM} }} return seen;"
    dom, console = opened(acted(page, script), tmp_path / "profile")
    told = seen(dom)
    assert console == []
    assert "main-svg" in dom
    assert told["drawn"] == 1
    assert told["first"][:2] == ["drum 2", "drum 3"]
    assert told["byName"] == [f"drum {i + 1}" for i in range(8)]
    assert told["sort"] == "ascending"
    amounts = composition["concentration"].values[:, 0]
    assert told["byAmount"] == [f"drum {i + 1}" for i in np.argsort(amounts)]
    assert told["down"] == told["byAmount"][::-1]
    assert told["tile"] == ["drum 2"]
    assert told["found"] == ["drum 3"]
    assert told["shown"] == "legendonly"
    assert told["range"] == [1800, 1600]
    check_curves(told["curves"], composition, sample=2)


def check_curves(curves, result, sample):
    one = result.isel(sample=sample)
    used, noise = one["used"].values, float(one["noise_level"])
    drawn = {
        name: np.array([np.nan if v is None else v for v in y], dtype=float) for name, y in curves.items()
    }
    measured = one["measured"].values
    np.testing.assert_allclose(drawn["measured"][used], measured[used], atol=0.02 * noise)
    np.testing.assert_allclose(drawn["outside"][~used], measured[~used], atol=0.02 * noise)
    assert np.isnan(drawn["measured"][~used]).all()
    np.testing.assert_allclose(drawn["fitted"][used], one["fitted"].values[used], atol=0.1 * noise)
    np.testing.assert_allclose(drawn["residual"][used], one["residual"].values[used], atol=0.02 * noise)
    np.testing.assert_allclose(drawn["baseline"], one["baseline"].values, atol=0.1 * noise)
    contribution = float(one["concentration"][1]) * result["pure_signal"].values[1]
    np.testing.assert_allclose(drawn["contribution1"], contribution, atol=1e-6)


def test_the_page_of_a_conditioning_draws_with_a_shared_script_beside_it(design, tmp_path):
    page = report(design, tmp_path / "page.html", assets=tmp_path / "shared files")
    assert page.stat().st_size < 300_000
    dom, console = opened(page, tmp_path / "profile")
    assert console == []
    assert dom.count('class="plot js-plotly-plot drawn"') == 1


def test_pages_of_calibrations_and_predictions_draw(rng, tmp_path):
    axis = np.arange(4000.0, 4600, 20)
    pure = np.exp(-(((axis - np.array([[4150.0], [4400]])) / 60) ** 2))
    c = rng.uniform(0.2, 2, (30, 2))
    names = [f"run {i}" for i in range(30)]
    spectra = make_spectra(c @ pure + 1e-3 * rng.normal(size=(30, axis.size)), axis, dim="wavenumber",
                           quantity="absorbance", labels=names)  # fmt: skip
    made = unmix.calibrate(spectra, pd.DataFrame({"water": c[:, 0]}, index=names), permutations=0, unit="g/L")
    for name, result in (("calibration", made), ("prediction", unmix.predict(made, spectra))):
        dom, console = opened(report(result, tmp_path / f"{name}.html"), tmp_path / f"profile {name}")
        assert console == []
        # figures are drawn when they come into sight
        assert dom.count("data-figure=") >= 2
        assert "js-plotly-plot" in dom
