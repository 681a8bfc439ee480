"""Each sample on the page of a composition: verdict and reason, amounts, facts, figure, unexplained bands."""

import math
from collections.abc import Sequence

import numpy as np

from unmix.report.markup import Markup, element, name_of
from unmix.report.numbers import Amount, amount, significant
from unmix.report.view import VERDICTS, Composition
from unmix.report.words import advice, curve_summary

#: a sign before each verdict, so that colour is never the only difference
SIGNS = {"supported": "\N{HEAVY CHECK MARK}", "doubtful": "?", "unsupported": "\N{MULTIPLICATION X}"}

#: how to read the figure of a sample
GUIDE = (
    "Each figure shows, from above: measured (broad) and fitted (thin); what is left over, on a band of two standard "
    "deviations of the noise; what each component adds. Orange marks what no component explains. Drag to zoom, "
    "double-click to go back, click an entry of a legend to hide its curve."
)


def badge(verdict: str) -> Markup:
    """A verdict as a small label with sign, word and colour."""
    known = verdict if verdict in SIGNS else "doubtful"
    sign = element("span", SIGNS[known], aria_hidden="true")
    return element("span", sign, " ", verdict or "no verdict", class_=f"badge {known}")


def amounts_of(view: Composition, sample: int) -> list[Amount]:
    """The amounts of one sample as a person reads them."""
    table = {
        name: view.table(name)[sample] for name in ("concentration", "lower", "upper", "standard_uncertainty")
    }
    detected = view.detected()[sample]
    return [
        amount(
            table["concentration"][j], table["lower"][j], table["upper"][j],
            detected=bool(detected[j]), uncertainty=table["standard_uncertainty"][j],
        )
        for j in range(len(view.components))
    ]  # fmt: skip


def samples(views: Sequence[Composition]) -> Markup:
    """Every sample with its reason, table, figure and facts; the most pressing is open."""
    listed = [(view, number, i) for number, view in enumerate(views) for i in view.order()]
    rank = {verdict: place for place, verdict in enumerate(VERDICTS)}
    listed.sort(key=lambda entry: rank.get(entry[0].verdicts[entry[2]], -1))
    tools = element(
        "div",
        element("button", "Open all", type="button", id="open-all"),
        element("button", "Close all", type="button", id="close-all"),
        element("span", "", id="printed", class_="print-only"),
        class_="tools",
    )
    parts = [_sample(view, number, i, first=k == 0) for k, (view, number, i) in enumerate(listed)]
    heading = element("h2", "Sample by sample", id="samples")
    guide = element("p", GUIDE, class_="small")
    return element("section", heading, guide, tools, parts, aria_labelledby="samples")


def _sample(view: Composition, number: int, sample: int, *, first: bool) -> Markup:
    file = view.files[sample]
    summary = element(
        "summary",
        element("h3", name_of(view.samples[sample])),
        badge(view.verdicts[sample]),
        name_of(file, "span") if file and file != view.samples[sample] else None,
    )
    verdict = element(
        "div",
        element("p", element("strong", "Why: "), sentence(view.reasons[sample])),
        element("p", element("strong", "Next: "), advice(view, sample)),
        class_=f"verdict {view.verdicts[sample]}",
    )
    drawn = view.dim and all(name in view.data for name in ("measured", "fitted", "residual"))
    figure = element(
        "figure",
        element("div", "", class_="plot", data_result=str(number), data_sample=str(sample), role="img",
                aria_label=curve_summary(view, sample)),
        element("button", "Copy curves", type="button", class_="copy-curves"),
    ) if drawn else None  # fmt: skip
    grid = element("div", element("div", _composition_table(view, sample), class_="scroll"),
                   element("div", verdict, _facts(view, sample)), class_="pair")  # fmt: skip
    return element("details", summary, grid, figure, _bands_table(view, sample), _budget(view, sample),
                   id=f"s{number}-{sample}", class_="sample", open=first)  # fmt: skip


def sentence(text: str) -> str:
    """A reason as a sentence of its own."""
    cut = text[:1].upper() + text[1:] if text else "No reason is given."
    return cut if cut.endswith((".", "!", "?")) else f"{cut}."


def _composition_table(view: Composition, sample: int) -> Markup:
    unit = view.concentration_unit
    limits = view.table("detection_limit")[sample]
    harm = view.table("misfit_harm")[sample]
    shifted = bool(np.any(harm > 0))
    tops = [
        n for n in (*view.table("upper")[sample], *view.table("concentration")[sample]) if math.isfinite(n)
    ]
    top = max(tops, default=0.0)
    rows = []
    for j, (name, one) in enumerate(zip(view.components, amounts_of(view, sample), strict=True)):
        rows.append(
            element(
                "tr",
                element("th", name_of(name), scope="row"),
                element("td", one.value, class_="number value"),
                element(
                    "td",
                    one.interval if one.found else ("not detected" if one.known else "not determined"),
                    class_="number",
                ),
                element("td", _bar(view, sample, j, top), class_="bar"),
                element("td", significant(limits[j], 2), class_="number"),
                element("td", significant(harm[j], 2), class_="number") if shifted else None,
            )
        )
    level = float(view.data.attrs.get("level", math.nan))
    interval = f"{level:.0%} interval" if math.isfinite(level) else "Interval"
    titles = [
        "Component",
        "Amount",
        interval,
        "",
        "Detection limit",
        *(["Shift by misfit"] if shifted else []),
    ]
    head = [
        element("th", title, element("span", unit, class_="unit") if title and title != "Component" else None,
                scope="col", class_="" if title == "Component" else "number")
        if title else element("td")
        for title in titles
    ]  # fmt: skip
    caption = element("caption", "Composition of ", name_of(view.samples[sample]), class_="hidden")
    return element("table", caption, element("thead", element("tr", head)), element("tbody", rows))


def _bar(view: Composition, sample: int, component: int, top: float) -> Markup | None:
    """A bar up to the value with its interval as a whisker; only the interval where nothing was detected."""
    value, lower, upper = (
        view.table(name)[sample, component] for name in ("concentration", "lower", "upper")
    )
    if not (top > 0 and math.isfinite(value) and math.isfinite(lower) and math.isfinite(upper)):
        return None
    at = [f"{min(max(100 * number / top, 0.0), 100.0):.2f}" for number in (value, lower, upper)]
    marks = []
    if view.detected()[sample, component]:
        marks.append(element("rect", x="0", y="3", width=at[0], height="8"))
    marks.append(element("path", d=f"M{at[1]} 7H{at[2]}M{at[1]} 3v8M{at[2]} 3v8"))
    return element("svg", marks, viewBox="-1 0 102 14", preserveAspectRatio="none", aria_hidden="true")


def _facts(view: Composition, sample: int) -> Markup:
    def one(variable: str, digits: int = 3) -> str:
        return significant(view.per_sample(variable)[sample], digits)

    def whole(variable: str) -> str:
        number = view.per_sample(variable)[sample]
        return f"{number:.0f}" if math.isfinite(number) else significant(number)

    facts = [
        ("Noise of a channel", f"{one('noise_level', 2)} {view.unit('measured')}".strip()),
        ("Largest misfit score", f"{one('misfit_z')} (limit {one('misfit_limit')})"),
        ("Lack of fit", f"{one('lack_of_fit', 2)} %"),
        ("Channels used", f"{whole('channels_used')} of {view.axis.size}"),
        ("Saturated, missing", f"{whole('channels_saturated')}, {whole('channels_missing')}"),
        ("Path factor", one("path_factor")),
    ]
    if view.per_sample("stray_light")[sample] > 0:
        facts.append(("Stray light", f"{100 * view.per_sample('stray_light')[sample]:.2g} %"))
    return element("dl", [element("div", element("dt", name), element("dd", text)) for name, text in facts])


def _budget(view: Composition, sample: int) -> Markup | None:
    """What each input quantity contributes to the standard uncertainty of each amount."""
    if "contribution" not in view.data:
        return None
    parts = view.contribution(sample)
    names = [str(name) for name in view.data["source"].values]
    shown = [k for k in range(len(names)) if np.nanmax(np.nan_to_num(parts[:, k]), initial=0.0) > 0]
    if not shown:
        return None
    unit = view.concentration_unit
    titles = [*(names[k].capitalize() for k in shown), "Standard uncertainty"]
    head = [element("th", "Component", scope="col"),
            *(element("th", title, element("span", unit, class_="unit"), scope="col", class_="number")
              for title in titles)]  # fmt: skip
    whole = view.table("standard_uncertainty")[sample]
    rows = [
        element("tr", element("th", name_of(name), scope="row"),
                [element("td", significant(number, 2), class_="number") for number in (*parts[j, shown], whole[j])])
        for j, name in enumerate(view.components)
    ]  # fmt: skip
    caption = element("caption", "Where the uncertainty comes from: contributions, whose root sum of squares is the "
                                 "standard uncertainty (JCGM 100)")  # fmt: skip
    return element("div", element("table", caption, element("thead", element("tr", head)), element("tbody", rows)),
                   class_="scroll bands")  # fmt: skip


def _short(number: float, digits: int) -> str:
    """A number without the noughts that only fill its digits up."""
    return f"{number:.{digits}g}" if 1e-4 <= abs(number) < 1e6 else significant(number, digits)


def _bands_table(view: Composition, sample: int) -> Markup | None:
    bands = view.unexplained(sample)
    if not bands:
        return None
    unit = view.axis_unit
    titles = (f"Position ({unit})", f"Width ({unit})", "Height", "Score")
    head = [element("th", title, scope="col", class_="number") for title in titles]
    rows = [
        element("tr", [element("td", _short(band[key], digits), class_="number")
                       for key, digits in (("position", 5), ("width", 2), ("height", 2), ("score", 3))])
        for band in bands
    ]  # fmt: skip
    caption = element(
        "caption", "Bands that no component explains (a negative one is in the fit but not in the sample)"
    )
    return element("div", element("table", caption, element("thead", element("tr", head)),
                                  element("tbody", rows)), class_="scroll bands")  # fmt: skip
