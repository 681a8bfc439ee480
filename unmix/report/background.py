"""The parts of a page that every kind of result has: conditioning, refusals, notes, caution, provenance."""

from collections.abc import Sequence
from typing import Any

import numpy as np

from unmix.report.details import badge, sentence
from unmix.report.markup import Markup, element, name_of, shown
from unmix.report.numbers import significant
from unmix.report.view import Result, refused_of
from unmix.report.words import HARDLY_APART, OVERLAPS, apartness, confused_pairs


def section(identity: str, title: str, *parts: Any) -> Markup:
    """A part of the page under a heading that links can lead to."""
    return element("section", element("h2", title, id=identity), parts, aria_labelledby=identity)


def table(caption: str, titles: Sequence[str], kinds: str, rows: Sequence[Sequence[Any]]) -> Markup:
    """A table whose first column names its rows; ``kinds`` has a letter a column, n for numbers, t for texts."""
    classes = ["number" if kind == "n" else "" for kind in kinds]
    head = [
        element("th", title, scope="col", class_=kind) for title, kind in zip(titles, classes, strict=True)
    ]
    body = [
        element(
            "tr",
            element("th", row[0], scope="row", class_=classes[0]),
            [element("td", cell, class_=kind) for cell, kind in zip(row[1:], classes[1:], strict=True)],
        )
        for row in rows
    ]
    made = element(
        "table", element("caption", caption), element("thead", element("tr", head)), element("tbody", body)
    )
    return element("div", made, class_="scroll")


def conditioning(views: Sequence[Result]) -> Markup | None:
    """How well the components can be told apart, per set of channels that was used."""
    shown_views: list[Result] = []
    for view in views:
        if "variance_inflation" in view.data and not any(_same(view, other) for other in shown_views):
            shown_views.append(view)
    if not shown_views:
        return None
    parts = [_conditioning_of(view, several=len(shown_views) > 1) for view in shown_views]
    explained = (
        f"Variance inflation says how much the overlap with the others and the baseline raises the variance of an "
        f"amount; from {OVERLAPS:.0f} on a component is said to overlap, from {HARDLY_APART:.0f} on to be hardly "
        "told apart. The own signal is the share of a spectrum that nothing else in the fit can imitate."
    )
    return section("conditioning", "Can the components be told apart?", parts,
                    element("p", explained, class_="small"))  # fmt: skip


def _same(one: Result, other: Result) -> bool:
    return one.components == other.components and np.array_equal(
        one.per_component("variance_inflation"), other.per_component("variance_inflation"), equal_nan=True
    )


def _conditioning_of(view: Result, *, several: bool) -> list[Markup]:
    inflation, own = view.per_component("variance_inflation"), view.per_component("selectivity")
    confused = view.confused_with()
    limits = (
        view.per_component("detection_limit") if view.kind == "conditioning" else np.full(own.size, np.nan)
    )
    limited = bool(np.isfinite(limits).any())
    unit = view.unit("detection_limit")
    titles = ["Component", "In words", "Variance inflation", "Own signal", "Most easily taken for"]
    if limited:
        titles.append(f"Detection limit ({unit})" if unit else "Detection limit")
    rows = [
        [
            name_of(name),
            apartness(inflation[j]),
            significant(inflation[j], 3),
            f"{own[j]:.1%}" if np.isfinite(own[j]) else significant(own[j]),
            name_of(confused[j] or "\N{EN DASH}"),
            *([significant(limits[j], 2)] if limited else []),
        ]
        for j, name in enumerate(view.components)
    ]
    parts = [element("h3", _range(view))] if several else []
    pairs = confused_pairs(view)
    if pairs:
        told = "; ".join(f"{shown(one)} from {shown(other)}" for one, other in pairs)
        parts.append(element("p", f"Hardly told apart here: {told}.", class_="warning"))
    if "condition_index" in view.data and view.data["condition_index"].ndim == 0:
        largest = float(view.data["condition_index"])
        parts.append(element("p", f"Largest condition index {significant(largest)}."))
    return [
        *parts,
        table(
            "Overlap of the pure spectra with each other and the baseline",
            titles,
            "ttnnt" + "n" * limited,
            rows,
        ),
    ]


def _range(view: Result) -> str:
    if not view.dim:
        return ""
    return f"{view.axis.min():.6g} to {view.axis.max():.6g} {view.axis_unit}, {view.axis.size} channels"


def measurable(view: Result) -> Markup | None:
    """The verdict of ``conditioning`` with its reason."""
    if "verdict" not in view.data:
        return None
    reason = str(view.data["reason"].item()) if "reason" in view.data else ""
    told = sentence(reason) if reason else None
    said = element("p", badge(str(view.data["verdict"].item())), " ", told, class_="lead")
    return section("trust", "Can this mixture be measured at all?", said)


def advice(view: Result) -> Markup | None:
    """What to change so that wanted detection limits are reached, and what each change reaches."""
    said = view.sentences("advice")
    if not said or "wanted" not in view.data:
        return None
    ways = [("as planned", "present_limit"), ("these windows alone", "window_limit"), ("more scans", "scans_limit")]
    columns = [view.per_component(name) for _, name in (("wanted", "wanted"), *ways)]
    best = int(np.argmin(np.abs(view.data["path_multiple"].values - view.data["recommended_path"].item())))
    columns.append(np.asarray(view.data["path_limit"].transpose("path", "component").values[best], dtype=float))
    titles = ["Component", "Wanted", *(name.capitalize() for name, _ in ways), "Other path"]
    rows = [[name_of(name), *(significant(column[j], 2) for column in columns)]
            for j, name in enumerate(view.components)]  # fmt: skip
    unit = view.unit("present_limit")
    made = table(f"Detection limits with each change alone, {unit}", titles, "t" + "n" * len(columns), rows)
    told = element("ul", [element("li", one) for one in said])
    return section("advice", "How to reach the wanted detection limits", told, made)


def alikeness(view: Result) -> list[Markup]:
    """The angles between pure spectra, and the directions in which variance mixes."""
    parts = []
    names = [name_of(name) for name in view.components]
    if "spectral_angle" in view.data:
        angles = view.data["spectral_angle"].values
        rows = [
            [names[i], *(_angle(angles[i, j]) if i != j else "" for j in range(len(names)))]
            for i in range(len(names))
        ]
        text = "Angle between two pure spectra, degrees; 90 is fully apart, below 10 is nearly alike"
        parts.append(
            section(
                "angles", "How alike are they?", table(text, ["", *names], "t" + "n" * len(names), rows)
            )
        )
    if "variance_proportion" in view.data and "condition_index" in view.data:
        shares = view.data["variance_proportion"].transpose("term", "component").values
        index = view.data["condition_index"].values
        order = np.argsort(-index)[:8]
        weak = [
            [significant(index[t], 3), *(f"{shares[t, j]:.0%}" for j in range(len(names)))] for t in order
        ]
        text = (
            "Share of each variance that belongs to a direction; an index above 30 with two shares above 50% names "
            "components that cannot be told apart"
        )
        parts.append(
            section(
                "shares",
                "Which directions are weak?",
                table(text, ["Condition index", *names], "n" * (len(names) + 1), weak),
            )
        )
    return parts


def _angle(angle: float) -> Markup:
    text = significant(angle, 3)
    return element("span", text, class_="close" if angle < 10 else "")


def refusals(views: Sequence[Result]) -> Markup | None:
    """Files of the run that could not be used, with the reason."""
    found = refused_of([view.data for view in views])
    if not found:
        return None
    rows = [[name_of(file), shown(reason)] for file, reason in found.items()]
    made = table(f"{len(found)} not answered", ["File", "Reason"], "tt", rows)
    return section("refused", "Files that could not be used", made)


def remarks(views: Sequence[Result]) -> Markup | None:
    """Reproducibility, assumptions and notes, each sentence once."""
    parts: list[Markup] = []
    for attribute, title in (("assumptions", "Assumed"), ("notes", "Done and left out")):
        texts = list(dict.fromkeys(text for view in views for text in view.sentences(attribute)))
        if texts:
            parts += [element("h3", title), element("ul", [element("li", text) for text in texts])]
    known = list(
        dict.fromkeys(view.text("reproducibility") for view in views if view.text("reproducibility"))
    )
    if known:
        parts += [element("h3", "Between repeated measurements"), *(element("p", text) for text in known)]
    return section("notes", "What the answer rests on", parts) if parts else None


def caution(views: Sequence[Result]) -> Markup | None:
    """The caution that goes with every answer."""
    texts = list(dict.fromkeys(view.text("caution") for view in views if view.text("caution")))
    if not texts:
        return None
    return element("aside", element("p", element("strong", "Caution. "), " ".join(texts)), class_="caution")


def provenance(views: Sequence[Result]) -> Markup:
    """How the result came about: method, settings, versions, input files with their digests, date."""
    parts: list[Markup] = []
    for view in views:
        facts: list[tuple[str, str]] = [("Method", view.text("method")), ("Made", view.text("created"))]
        if view.text("regions"):
            facts.append(("Regions", view.text("regions")))
        for attribute in ("settings", "versions"):
            entries = view.entries(attribute)
            if isinstance(entries, dict):
                told = ", ".join(f"{key} {_brief(value)}" for key, value in entries.items())
                facts.append((attribute.capitalize(), told))
        if "seed" in view.data.attrs:
            facts.append(("Seed", view.text("seed")))
        if len(views) > 1:
            parts.append(element("h3", _range(view)))
        told_facts = [element("div", element("dt", key), element("dd", text)) for key, text in facts if text]
        parts.append(element("dl", told_facts, class_="wide"))
    digests = _digests(views)
    if digests:
        rows = [[name_of(file), element("code", digest)] for file, digest in digests.items()]
        listing = table("SHA-256 of every file that went in", ["File", "Digest"], "tt", rows)
        parts.append(
            element("details", element("summary", f"Input files ({len(digests)})"), listing, class_="files")
        )
    return section("provenance", "How it came about", parts)


def _brief(value: Any) -> str:
    return "none" if value is None else shown(value)


def _digests(views: Sequence[Result]) -> dict[str, str]:
    found: dict[str, str] = {}
    for view in views:
        entries = view.entries("inputs")
        for files in entries.values() if isinstance(entries, dict) else ():
            found.update({str(k): str(v) for k, v in files.items()} if isinstance(files, dict) else {})
    return found
