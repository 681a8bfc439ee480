"""Mixtures found in a library: as rows, as a figure, and as a page."""

import math
from collections.abc import Sequence
from typing import Any

import numpy as np
import xarray as xr

from unmix.report import background
from unmix.report.calibration_page import Figures, trust_of
from unmix.report.details import badge, sentence
from unmix.report.markup import Markup, element, name_of
from unmix.report.numbers import significant
from unmix.report.plots import INK, PALE, _axis, _spectral_axis
from unmix.report.view import VERDICTS, Result, Row
from unmix.spectra import labels_of, spectral_dim

#: columns of the table of candidates, in their order
CANDIDATE_COLUMNS = (
    "sample", "file", "rank", "weight", "component", "concentration", "unit", "standard_uncertainty", "lower", "upper",
    "level", "distinction", "verdict", "reason",
)  # fmt: skip

#: samples with a figure of their own on the page
MOST_FIGURES = 30

_NUMBERS = ("concentration", "standard_uncertainty", "lower", "upper")


def candidate_rows(data: xr.Dataset) -> list[Row]:
    """One row a member of a candidate mixture.

    Parameters
    ----------
    data : Dataset
        From ``identify``.

    Returns
    -------
    list of dict
        Keys as in :data:`CANDIDATE_COLUMNS`; a candidate without members has one row without a name.
    """
    leading = [str(dim) for dim in data["verdict"].dims]
    labels = labels_of(data["measured"])
    named = "file" in data.coords and data["file"].dims == tuple(leading)
    files = [str(file) for file in data["file"].values.ravel()] if named else [""] * len(labels)
    shape = (len(labels), data.sizes["candidate"], data.sizes["member"])
    names = data["components"].transpose(*leading, "candidate", "member").values.reshape(shape)
    numbers = {key: data[key].transpose(*leading, "candidate", "member").values.reshape(shape) for key in _NUMBERS}
    weight = data["weight"].transpose(*leading, "candidate").values.reshape(shape[:2])
    apart = data["distinction"].transpose(*leading, "candidate").values.reshape(shape[:2])
    verdict, reason = (data[key].values.ravel().astype(str) for key in ("verdict", "reason"))
    unit = str(data["concentration"].attrs.get("units", ""))
    found: list[Row] = []
    for i, j in np.ndindex(shape[:2]):
        if not np.isfinite(weight[i, j]):
            continue
        for m in [m for m in range(shape[2]) if names[i, j, m]] or [0]:
            row: Row = {"sample": labels[i], "file": files[i], "rank": float(j + 1), "weight": float(weight[i, j]),
                        "component": str(names[i, j, m]), "unit": "" if unit == "1" else unit}  # fmt: skip
            row |= {key: _number(table[i, j, m]) for key, table in numbers.items()}
            row |= {"level": float(data.attrs["level"]), "distinction": str(apart[i, j]), "verdict": str(verdict[i]),
                    "reason": str(reason[i])}  # fmt: skip
            found.append(row)
    return found


def _number(value: Any) -> float | None:
    return float(value) if math.isfinite(value) else None


def figure_of_sample(data: xr.Dataset, sample: int) -> dict[str, Any]:
    """Measured against fitted by the first candidate, and what is left over."""
    view = Result(data)
    dim = spectral_dim(data["measured"])
    x = np.asarray(data[dim].values, dtype=float)
    curves = {name: np.asarray(data[name].values, dtype=float).reshape(-1, x.size)[sample]
              for name in ("measured", "fitted", "residual")}  # fmt: skip
    looks = {"measured": (PALE, 4, "y"), "fitted": (INK, 1.2, "y"), "residual": (INK, 1, "y2")}
    traces = [{"type": "scatter", "mode": "lines", "x": x, "y": curves[name], "name": name, "yaxis": yaxis,
               "line": {"color": colour, "width": width}, "meta": {"curve": name}}
              for name, (colour, width, yaxis) in looks.items()]  # fmt: skip
    layout = {
        "height": 420, "margin": {"l": 70, "r": 20, "t": 24, "b": 52}, "hovermode": "x unified",
        "legend": {"x": 1.01, "xanchor": "left", "y": 1.0, "yanchor": "top", "bgcolor": "rgba(0,0,0,0)"},
        "xaxis": _spectral_axis(view, anchor="y2"), "yaxis": _axis("Absorbance", domain=[0.4, 1.0]),
        "yaxis2": _axis("Residual", domain=[0.0, 0.32], zeroline=True, zerolinecolor="rgba(128,128,128,0.6)"),
    }  # fmt: skip
    return {"data": traces, "layout": layout}


def candidate_parts(datasets: Sequence[xr.Dataset]) -> tuple[str, str, list[Any], dict[str, Any]]:
    """Title, subtitle, parts and data of the page of a library search."""
    figures = Figures()
    verdicts = [str(one) for data in datasets for one in data["verdict"].values.ravel()]
    main: list[Any] = [trust_of(verdicts)]
    rank = {word: place for place, word in enumerate(VERDICTS)}
    samples = [(data, i, str(word)) for data in datasets for i, word in enumerate(data["verdict"].values.ravel())]
    samples.sort(key=lambda entry: rank.get(entry[2], -1))
    for place, (data, i, verdict) in enumerate(samples):
        label = labels_of(data["measured"])[i]
        reason = sentence(str(data["reason"].values.ravel()[i]))
        drawn = figures.add(figure_of_sample(data, i), f"{label}: measured against the first candidate") if (
            place < MOST_FIGURES) else None  # fmt: skip
        heading = element("h3", name_of(label), " ", badge(verdict))
        main.append(element("section", heading, element("p", reason), _table(data, i), drawn))
    views = [Result(one) for one in datasets]
    main += [background.refusals(views), background.caution(views), background.remarks(views),
             background.provenance(views)]  # fmt: skip
    said = f"{len(samples)} samples, {views[0].text('created')[:10]}"
    return views[0].text("title"), said, main, {"figures": figures.packed}


def _table(data: xr.Dataset, sample: int) -> Markup:
    label = labels_of(data["measured"])[sample]
    rows = [row for row in candidate_rows(data) if row["sample"] == label]
    cells, before = [], None
    for row in rows:
        new, before = row["rank"] != before, row["rank"]
        value, low, high = (one if isinstance(one := row[key], float) else math.nan
                            for key in ("concentration", "lower", "upper"))  # fmt: skip
        unit = f" {row['unit']}" if row["unit"] else ""
        head = [f"{row['rank']:.0f}", f"{row['weight']:.1%}"] if new else ["", ""]
        cells.append([*head, name_of(str(row["component"]) or "\N{EN DASH}"), f"{significant(value, 3)}{unit}",
                      f"{significant(low, 3)} to {significant(high, 3)}", str(row["distinction"]) if new else ""])
    level = float(data.attrs["level"])
    titles = ["Rank", "Evidence", "Member", "Amount", f"{level:.0%} interval", "Set apart from the first"]
    return background.table("Candidate mixtures, the likeliest first", titles, "nntnnt", cells)
