"""The pages of a calibration and of predictions, part by part."""

import math
from collections.abc import Sequence
from typing import Any

import numpy as np
import xarray as xr

from unmix.report import background, calibration_plots, curves
from unmix.report.calibrations import figure_rows, prediction_rows
from unmix.report.details import badge, sentence
from unmix.report.markup import Markup, element, name_of
from unmix.report.numbers import significant
from unmix.report.view import VERDICTS, Result
from unmix.report.words import USE

#: rows of a table of predictions on the page; the files have them all
MOST_ROWS = 2000

#: what to do next, by the verdict of a calibration
_NEXT = {
    "supported": "Use it for samples like those it was made from; every prediction says whether it is one.",
    "doubtful": "Read the reason, mend what it names, and calibrate again before the values are relied on.",
    "unsupported": "Do not use it: its predictions would mislead.",
}

_SETS = {"calibration": "fitted (SEC)", "cross-validation": "left out (SECV)", "nested": "choice left out too",
         "test": "test set (SEP)"}  # fmt: skip


def _plain(value: Any) -> Any:
    """Arrays as lists, also inside mappings."""
    if isinstance(value, np.ndarray):
        return value.tolist()
    return {key: _plain(one) for key, one in value.items()} if isinstance(value, dict) else value


#: figures of merit in their columns, and their digits
_DIGITS = {"error": 3, "bias": 2, "bias_p": 2, "slope": 3, "r2": 4, "rpd": 3, "lowest": 3, "highest": 3}


class Figures:
    """Figures of a page, in the order of their places."""

    def __init__(self) -> None:
        self.packed: list[dict[str, Any]] = []

    def add(self, parts: dict[str, Any], label: str) -> Markup:
        """The place of a figure."""
        traces = []
        for trace in parts["data"]:
            one = {key: _plain(value) for key, value in trace.items()}
            one |= {key: curves.plain(np.asarray(trace[key], dtype=float)) for key in ("x", "y")
                    if np.asarray(trace[key]).dtype.kind in "fiu"}  # fmt: skip
            traces.append(one)
        self.packed.append({"data": traces, "layout": parts["layout"]})
        plot = element("div", "", class_="plot", data_figure=str(len(self.packed) - 1), role="img", aria_label=label)
        return element("figure", plot, element("figcaption", f"{label}."))


def calibration_parts(datasets: Sequence[xr.Dataset]) -> tuple[str, str, list[Any], dict[str, Any]]:
    """Title, subtitle, parts and data of the page of a calibration."""
    figures = Figures()
    main: list[Any] = []
    for data in datasets:
        verdict = str(data["verdict"].item())
        told = element("p", badge(verdict), " ", sentence(str(data["reason"].item())), class_="lead")
        main.append(background.section("trust", "Can this calibration be trusted?", told,
                                       element("p", element("strong", "Next: "), _NEXT.get(verdict, ""))))  # fmt: skip
        main.append(background.section("figures", "How large are its errors?", _merit(data)))
        for j, name in enumerate(data["property"].values):
            label = f"{name}: predicted against reference values, errors below"
            main.append(figures.add(calibration_plots.fit_of_property(data, j), label))
        curve = figures.add(calibration_plots.error_curve(data), "Error of cross-validation against latent variables")
        chosen = f"Chosen: {data.sizes['latent']}, validation: {data.attrs.get('validation', '')}."
        main.append(background.section("choice", "How many latent variables?", curve,
                                       element("p", chosen, class_="small")))  # fmt: skip
        vector = figures.add(calibration_plots.regression_vector(data),
                             "Regression vector, two standard uncertainties shaded")  # fmt: skip
        main.append(background.section("vector", "What does it look at?", vector))
        apart = figures.add(calibration_plots.distances(data), "Q and T2 of left-out samples over their limits")
        main.append(background.section("unlike", "Are there unlike samples?", apart, _outliers(data)))
    views = [Result(one) for one in datasets]
    main += [background.caution(views), background.remarks(views), background.provenance(views)]
    first = datasets[0]
    said = f"{first.sizes['sample']} samples, {first.sizes['latent']} latent variables, {views[0].text('created')[:10]}"
    return views[0].text("title"), said, main, {"figures": figures.packed}


def _merit(data: xr.Dataset) -> Markup:
    titles = ["Property", "Samples", "Error", "Bias", "p of bias", "Slope", "R2", "RPD", "From", "To"]
    rows = []
    for row in figure_rows(data):
        unit = f" {row['unit']}" if row["unit"] else ""
        name = f"{row['property']}, {_SETS.get(str(row['set']), row['set'])}"
        numbers = [_number(row[key], digits) for key, digits in _DIGITS.items()]
        rows.append([name_of(name), f"{row['samples']:.0f}", f"{numbers[0]}{unit}", *numbers[1:]])
    return element("div", background.table("Errors are root mean squares; a bias with a small p value is not chance",
                                           titles, "t" + "n" * 9, rows), class_="scroll")  # fmt: skip


def _float(value: Any) -> float:
    return float(value) if isinstance(value, float) else math.nan


def _number(value: Any, digits: int) -> str:
    return significant(float(value), digits) if isinstance(value, (int, float)) else "\N{EN DASH}"


def _outliers(data: xr.Dataset) -> Markup:
    rows = [[name_of(str(name)), str(why)] for name, why in
            zip(data["sample"].values, data["outlier_reason"].values, strict=True) if str(why)]  # fmt: skip
    if not rows:
        return element("p", "No sample is proposed as an outlier.")
    return background.table("Samples proposed as outliers; none was removed", ["Sample", "Why"], "tt", rows)


def prediction_parts(datasets: Sequence[xr.Dataset]) -> tuple[str, str, list[Any], dict[str, Any]]:
    """Title, subtitle, parts and data of the page of predictions."""
    figures = Figures()
    main: list[Any] = []
    verdicts = [str(one) for data in datasets for one in data["verdict"].values.ravel()]
    main.append(trust_of(verdicts, _doubt(datasets[0])))
    for data in datasets:
        for j, name in enumerate(data["property"].values):
            label = f"{name} with its intervals; the calibrated range is shaded"
            main.append(figures.add(calibration_plots.chart_of_property(data, j), label))
    main.append(background.section("values", "What was found", _values(datasets)))
    for data in datasets:
        main.append(background.section("unlike", "Are the spectra like those of the calibration?", figures.add(
            calibration_plots.distances(data), "Q and Hotelling T2 over their limits")))  # fmt: skip
    views = [Result(one) for one in datasets]
    main += [background.refusals(views), background.caution(views), background.remarks(views),
             background.provenance(views)]  # fmt: skip
    return views[0].text("title"), f"{len(verdicts)} samples, {views[0].text('created')[:10]}", main, {
        "figures": figures.packed}  # fmt: skip


def trust_of(verdicts: Sequence[str], doubt: Markup | None = None) -> Markup:
    """How many samples have each verdict."""
    counts = [(word, verdicts.count(word)) for word in VERDICTS if word in verdicts]
    tiles = [element("div", element("strong", str(number)), badge(word), element("span", USE[word], class_="use"),
                     class_=f"tile {word}") for word, number in counts]  # fmt: skip
    return background.section("trust", "Can this be trusted?", element("div", tiles, class_="tiles"), doubt)


def _doubt(data: xr.Dataset) -> Markup | None:
    own = str(data.attrs.get("calibration_verdict", ""))
    if own in ("", "supported"):
        return None
    return element("p", f"The calibration itself is {own}: see its own page.", class_="warning")


def _values(datasets: Sequence[xr.Dataset]) -> Markup:
    rank = {word: place for place, word in enumerate(VERDICTS)}
    rows = [row for data in datasets for row in prediction_rows(data)]
    rows.sort(key=lambda row: rank[str(row["verdict"])])
    cells = []
    for row in rows[:MOST_ROWS]:
        value, low, high = (_float(row[key]) for key in ("predicted", "lower", "upper"))
        cells.append([
            name_of(str(row["sample"])), name_of(str(row["property"])), badge(str(row["verdict"])),
            f"{significant(value, 4)} {row['unit']}".strip(), f"{significant(low, 4)} to {significant(high, 4)}",
            str(row["reason"]) if row["verdict"] != "supported" else "",
        ])  # fmt: skip
    level = float(datasets[0].attrs["level"])
    more = element("p", f"{len(rows) - MOST_ROWS} further rows are in the files.", class_="small") if (
        len(rows) > MOST_ROWS) else None  # fmt: skip
    titles = ["Sample", "Property", "Verdict", "Value", f"{level:.0%} interval", "Why"]
    made = background.table("Problems on top", titles, "tttnnt", cells)
    return element("div", made, more, class_="scroll")
