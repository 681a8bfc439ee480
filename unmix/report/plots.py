"""One function a figure: a result in, a plotly figure out; nothing is computed that is not in the result.

The figures work in a notebook; the page takes the same figures as patterns and fills in the curves of a
sample when it is opened.
"""

from typing import Any

import numpy as np
import plotly.graph_objects as go
import xarray as xr

from unmix.errors import InputError
from unmix.report.markup import figure_text
from unmix.report.view import Composition, Result, results_of

#: colours that colour-blind readers tell apart (after Okabe and Ito), readable on white and on black
COLOURS = ("#0072B2", "#D55E00", "#009E73", "#CC79A7", "#E69F00", "#56B4E9")
#: with these, the seventh component and those that follow are told apart by the line
DASHES = ("solid", "dash", "dot", "dashdot")
#: thin lines, which the page draws in the colour of its text, and the broad line that they lie on
INK = "#3b4654"
PALE = "#9fb4c7"
_WARN = "rgba(213,94,0,0.22)"
_BAND = "rgba(0,114,178,0.14)"
_GRID = "rgba(128,128,128,0.25)"


def line_of(component: int) -> dict[str, Any]:
    """Colour and dash of a component, the same in every figure."""
    return {
        "color": COLOURS[component % len(COLOURS)],
        "dash": DASHES[component // len(COLOURS) % len(DASHES)],
        "width": 1.5,
    }


def _composition(result: xr.Dataset) -> Composition:
    found = results_of(result)[0]
    if found.attrs["kind"] != "quantify":
        raise InputError("this figure needs what unmix.quantify returned")
    if any(name not in found for name in ("measured", "fitted", "residual")):
        raise InputError("the result has no curves (measured, fitted, residual)",
                         accepted="give the whole Dataset that unmix.quantify returned")  # fmt: skip
    return Composition(found)


def fit_figure(result: xr.Dataset, sample: int = 0) -> go.Figure:
    """Measured against fitted, the residual below, and what each component contributes, on one spectral axis.

    Parameters
    ----------
    result : Dataset
        From ``unmix.quantify``.
    sample : int
        Index along the leading dimensions, all flattened.

    Returns
    -------
    plotly Figure
        Each trace names in ``meta`` the curve it shows.

    Raises
    ------
    InputError
        When the result is of another kind or has no curves, or there is no such sample.
    """
    view = _composition(result)
    if not 0 <= sample < len(view):
        raise InputError(f"there is no sample {sample}", accepted=f"give 0 to {len(view) - 1}")
    drawn = [trace for trace in fit_traces(view, sample) if np.isfinite(trace["y"]).any()]
    figure = go.Figure(drawn, fit_layout(view, sample))
    figure.layout.template = go.layout.Template()
    return figure


def fit_traces(view: Composition, sample: int) -> list[dict[str, Any]]:
    """The curves of one sample; ``meta`` says which is which."""
    curves = {name: view.curve(name, sample) for name in ("measured", "fitted", "residual", "baseline")}
    inside = np.isfinite(curves["residual"])
    within, without = (
        np.where(inside, curves["measured"], np.nan),
        np.where(inside, np.nan, curves["measured"]),
    )
    traces = [
        _trace(view, within, "measured", "measured", "y", color=PALE, width=4),
        _trace(view, without, "outside", "measured, not used", "y", color=PALE, width=2, dash="dot"),
        _trace(view, curves["fitted"], "fitted", "fitted", "y", color=INK, width=1.2),
        _trace(view, curves["baseline"], "baseline", "baseline", "y", color=INK, width=1, dash="dash"),
        _trace(view, curves["residual"], "residual", "residual", "y2", color=INK, width=1),
    ]
    for j, (name, values) in enumerate(zip(view.components, view.contributions(sample), strict=True)):
        trace = _trace(view, values, "contribution", figure_text(name, 22), "y3")
        traces.append(trace | {"line": line_of(j), "meta": {"curve": "contribution", "component": j}})
    return traces


def _trace(view: Result, values: Any, curve: str, name: str, yaxis: str, **line: Any) -> dict[str, Any]:
    legend = {"y": "legend", "y2": "legend2", "y3": "legend3"}[yaxis]
    at = view.breaks()
    x, y = np.insert(view.axis, at, view.axis[at]), np.insert(np.asarray(values, dtype=float), at, np.nan)
    return {
        "type": "scatter", "mode": "lines", "x": x, "y": y, "name": name, "yaxis": yaxis,
        "legend": legend, "meta": {"curve": curve}, "line": line, "connectgaps": False,
    }  # fmt: skip


def _axis(title: str, **more: Any) -> dict[str, Any]:
    return {
        "title": {"text": title, "font": {"size": 12}, "standoff": 8},
        "gridcolor": _GRID,
        "zeroline": False,
        "hoverformat": ".4~g",
        "automargin": True,
        "ticks": "outside",
        "ticklen": 4,
        "tickcolor": _GRID,
        **more,
    }


def _spectral_axis(view: Result, **more: Any) -> dict[str, Any]:
    return _axis(view.axis_title, autorange="reversed" if view.falls else True, **more) | {
        "hoverformat": ".6~g"
    }


def fit_layout(view: Composition, sample: int) -> dict[str, Any]:
    """Axes, legends and marks of the figure of one sample."""
    unit = view.unit("measured")
    title = "Absorbance" if unit in ("", "absorbance") else f"Signal ({unit})"
    zero = {"zeroline": True, "zerolinecolor": "rgba(128,128,128,0.6)"}
    legend = {
        "x": 1.01,
        "xanchor": "left",
        "yanchor": "top",
        "font": {"size": 12},
        "bgcolor": "rgba(0,0,0,0)",
    }
    return {
        "height": 740,
        "margin": {"l": 70, "r": 20, "t": 36, "b": 52},
        "hovermode": "x unified",
        "xaxis": _spectral_axis(view, anchor="y3"),
        "yaxis": _axis(title, domain=[0.64, 1.0]),
        "yaxis2": _axis("Residual", domain=[0.41, 0.59], exponentformat="power", **zero),
        "yaxis3": _axis("Contribution", domain=[0.0, 0.36], **zero),
        "legend": legend | {"y": 1.0},
        "legend2": legend | {"y": 0.59},
        "legend3": legend | {"y": 0.36},
        "shapes": fit_marks(view, sample),
    }


def fit_marks(view: Composition, sample: int) -> list[dict[str, Any]]:
    """What is drawn behind the curves of one sample: the noise band and the bands that are not explained."""
    marks = []
    noise = view.per_sample("noise_level")[sample]
    labelled: list[float] = []
    if np.isfinite(noise) and noise > 0:
        marks.append({
            "type": "rect", "xref": "x domain", "yref": "y2", "x0": 0, "x1": 1, "layer": "below",
            "y0": -2 * noise, "y1": 2 * noise, "fillcolor": _BAND, "line": {"width": 0},
        })  # fmt: skip
    for band in view.unexplained(sample):
        half = abs(band["width"]) if np.isfinite(band["width"]) else 0.0
        for yref in ("y2 domain", "y domain"):
            marks.append({
                "type": "rect", "xref": "x", "yref": yref, "x0": band["position"] - half, "y0": 0,
                "x1": band["position"] + half, "y1": 1, "layer": "below", "fillcolor": _WARN,
                "line": {"width": 0},
            })  # fmt: skip
        # A label that would lie over another one is left out; the table below the figure has them all
        if all(abs(band["position"] - other) > 0.09 * np.ptp(view.axis) for other in labelled):
            labelled.append(band["position"])
            marks[-1]["label"] = {
                "text": f"{band['position']:.4g}",
                "textposition": "top center",
                "font": {"size": 11},
            }
    return marks


def signal_figure(result: xr.Dataset) -> go.Figure:
    """The pure spectra per unit amount, and below them the part of each that nothing else can imitate.

    Parameters
    ----------
    result : Dataset
        From ``unmix.conditioning``.

    Returns
    -------
    plotly Figure

    Raises
    ------
    InputError
        When the result has no pure spectra or no net analyte signals.
    """
    view = Result(results_of(result)[0])
    if any(name not in view.data for name in ("pure_signal", "net_signal")):
        raise InputError("the result has no signals (pure_signal, net_signal)",
                         accepted="give the whole Dataset that unmix.conditioning returned")  # fmt: skip
    figure = go.Figure(signal_traces(view), signal_layout(view))
    figure.layout.template = go.layout.Template()
    return figure


def limits_figure(result: xr.Dataset) -> go.Figure:
    """Detection limits over those wanted, against path length and resolution.

    Parameters
    ----------
    result : Dataset
        From ``unmix.conditioning`` with ``wanted``.

    Returns
    -------
    plotly Figure

    Raises
    ------
    InputError
        When no limits were wanted.
    """
    view = Result(results_of(result)[0])
    if "path_limit" not in view.data:
        raise InputError("the result holds no advice", accepted="give unmix.conditioning the limits that are wanted")
    figure = go.Figure(limits_traces(view), limits_layout(view))
    figure.layout.template = go.layout.Template()
    return figure


def limits_traces(view: Result) -> list[dict[str, Any]]:
    """One curve a component in each of the two panels."""
    wanted = view.per_component("wanted")
    traces = []
    for name, at, xaxis, yaxis in (("path_limit", "path_multiple", "x", "y"),
                                   ("resolution_limit", "resolution", "x2", "y2")):  # fmt: skip
        values = view.data[name].transpose(..., "component").values
        x = np.asarray(view.data[at].values, dtype=float)
        for j, component in enumerate(view.components):
            ratio = np.where(np.isfinite(values[:, j]), values[:, j] / wanted[j], np.nan)
            traces.append({
                "type": "scatter", "mode": "lines", "x": x, "y": ratio, "name": figure_text(component, 22),
                "xaxis": xaxis, "yaxis": yaxis, "legendgroup": str(j), "showlegend": xaxis == "x", "line": line_of(j),
                "meta": {"curve": name, "component": j},
            })  # fmt: skip
    return traces


def limits_layout(view: Result) -> dict[str, Any]:
    """Axes of the figure of detection limits; the wish is the line at one."""
    line = {"type": "line", "xref": "paper", "x0": 0, "x1": 1, "yref": "y", "y0": 1, "y1": 1,
            "line": {"color": INK, "width": 1, "dash": "dash"}}  # fmt: skip
    logarithmic = {"type": "log", "exponentformat": "power", "dtick": 1}
    return {
        "height": 420,
        "margin": {"l": 70, "r": 20, "t": 24, "b": 52},
        "hovermode": "x unified",
        "xaxis": _axis("Path over the planned one", domain=[0.0, 0.56], anchor="y", **logarithmic),
        "yaxis": _axis("Detection limit over that wanted", anchor="x", **logarithmic),
        "xaxis2": _axis(f"Resolution ({view.unit('resolution')})", domain=[0.64, 1.0], anchor="y2", rangemode="tozero"),
        "yaxis2": _axis("", anchor="x2", matches="y", showticklabels=False, **logarithmic),
        "legend": {"x": 1.01, "xanchor": "left", "y": 1.0, "yanchor": "top", "bgcolor": "rgba(0,0,0,0)"},
        "shapes": [line],
    }


def signal_traces(view: Result) -> list[dict[str, Any]]:
    """Pure spectra and net analyte signals, one colour a component."""
    traces = []
    for curve, yaxis in (("pure_signal", "y"), ("net_signal", "y2")):
        values = view.data[curve].transpose("component", view.dim).values
        for j, component in enumerate(view.components):
            trace = _trace(view, values[j], curve, figure_text(component, 22), yaxis)
            # One legend for both panels, in which an entry hides or shows a component in both
            grouped = {"legendgroup": str(j), "showlegend": yaxis == "y", "legend": "legend"}
            traces.append(trace | grouped | {"line": line_of(j), "meta": {"curve": curve, "component": j}})
    return traces


def signal_layout(view: Result) -> dict[str, Any]:
    """Axes and legend of the figure of pure spectra."""
    unit = view.unit("pure_signal")
    behind = f" ({unit})" if unit else ""
    return {
        "height": 540,
        "margin": {"l": 70, "r": 20, "t": 36, "b": 52},
        "hovermode": "x unified",
        "xaxis": _spectral_axis(view, anchor="y2"),
        "yaxis": _axis(f"Pure spectrum{behind}", domain=[0.54, 1.0]),
        "yaxis2": _axis(f"Net signal{behind}", domain=[0.0, 0.46]),
        "legend": {"x": 1.01, "xanchor": "left", "y": 1.0, "yanchor": "top", "bgcolor": "rgba(0,0,0,0)"},
    }
