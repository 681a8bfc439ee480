"""What stands first on the page of a composition: can it be trusted, and the table of all samples."""

import math
from collections.abc import Sequence

from unmix.report.details import amounts_of, badge
from unmix.report.markup import Markup, element, name_of
from unmix.report.view import VERDICTS, Composition
from unmix.report.words import USE, advice, counts, lead


def trust(views: Sequence[Composition]) -> Markup:
    """The first screen's answer: how many samples can be used, and what is in question."""
    tiles = [
        element(
            "button",
            element("strong", str(number)),
            badge(verdict),
            element("span", USE[verdict], class_="use"),
            type="button", class_=f"tile {verdict}", data_verdict=verdict, aria_pressed="false",
            title=f"Show only samples that are {verdict}",
        )
        for verdict, number in counts(views).items()
        if number
    ]  # fmt: skip
    several = sum(len(view) for view in views) > 1
    return element(
        "section",
        element("h2", "Can this be trusted?", id="trust"),
        element("p", lead(views), class_="lead"),
        element("div", tiles, class_="tiles") if several else None,
        aria_labelledby="trust",
    )


def overview(views: Sequence[Composition]) -> Markup:
    """One table with all samples, those with a problem on top; each name leads to the details."""
    names = list(dict.fromkeys(name for view in views for name in view.components))
    units = {view.concentration_unit for view in views}
    unit = units.pop() if len(units) == 1 else ""
    head = [_heading("Verdict", "text"), _heading("Sample", "text")]
    for name in names:
        head.append(_heading(name_of(name), "number", unit))
    head.append(_heading("What to do next", "text"))
    listed = [(view, number, i) for number, view in enumerate(views) for i in range(len(view))]
    rank = {verdict: place for place, verdict in enumerate(VERDICTS)}
    listed.sort(key=lambda entry: rank.get(entry[0].verdicts[entry[2]], -1))
    rows = [_overview_row(view, number, i, names, unit) for view, number, i in listed]
    level = float(views[0].data.attrs.get("level", math.nan))
    below = f"Below each value its interval ({level:.0%} confidence)." if math.isfinite(level) else ""
    caption = f"{below} \N{LESS-THAN SIGN} means: not detected, below this upper limit."
    tools = element(
        "div",
        element("label", "Find ", element("input", type="search", id="find", placeholder="sample or reason")),
        element("button", "Copy table", type="button", id="copy-overview"),
        element("span", "", id="copied", role="status"),
        class_="tools",
    )
    table = element(
        "table",
        element("caption", caption),
        element("thead", element("tr", head)),
        element("tbody", rows),
        id="all", class_="sortable",
    )  # fmt: skip
    scroll = element("div", table, class_="scroll", tabindex="0", role="region", aria_labelledby="overview")
    heading = element("h2", "How much of each, and how sure", id="overview")
    return element("section", heading, tools if len(listed) > 1 else None, scroll, aria_labelledby="overview")


def _heading(title: Markup | str, kind: str, unit: str = "") -> Markup:
    button = element("button", title, type="button")
    below = element("span", unit, class_="unit") if unit else None
    return element("th", button, below, scope="col", class_=kind, data_kind=kind)


def _overview_row(view: Composition, number: int, sample: int, names: Sequence[str], unit: str) -> Markup:
    amounts = dict(zip(view.components, amounts_of(view, sample), strict=True))
    exact = dict(zip(view.components, view.table("concentration")[sample], strict=True))
    verdict = view.verdicts[sample]
    cells = [
        element("td", badge(verdict), data_v=str(VERDICTS.index(verdict) if verdict in VERDICTS else -1)),
        element("th", element("a", name_of(view.samples[sample]), href=f"#s{number}-{sample}"), scope="row"),
    ]
    for name in names:
        if name not in amounts:
            cells.append(element("td", "not asked", class_="number absent"))
            continue
        one = amounts[name]
        value = exact[name]
        cells.append(
            element(
                "td",
                element("span", one.value, class_="value" if one.known else "value absent"),
                element("span", "" if unit else f" {view.concentration_unit}", class_="unit"),
                element("span", one.interval if one.found else "", class_="interval"),
                class_="number",
                data_v=f"{value:.6g}" if math.isfinite(value) else None,
            )
        )
    cells.append(element("td", advice(view, sample), class_="next"))
    reason = view.reasons[sample][:300]
    return element("tr", cells, data_verdict=verdict, data_find=f"{view.samples[sample][:100]} {reason}")
