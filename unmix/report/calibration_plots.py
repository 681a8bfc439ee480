"""Figures of calibrations and predictions: a Dataset in, a plotly figure out; nothing is computed that is not in it."""

from typing import Any

import numpy as np
import plotly.graph_objects as go
import xarray as xr

from unmix.errors import InputError
from unmix.report.markup import figure_text
from unmix.report.plots import COLOURS, INK, _axis, line_of
from unmix.spectra import labels_of
from unmix.units import SPECTRAL_UNITS, axis_title

#: verdict -> colour and sign of its points
MARKS = {"supported": (COLOURS[0], "circle"), "doubtful": (COLOURS[4], "diamond"), "unsupported": (COLOURS[1], "x")}

_LEGEND = {"x": 1.01, "xanchor": "left", "y": 1.0, "yanchor": "top", "bgcolor": "rgba(0,0,0,0)"}
_MARGIN = {"l": 70, "r": 20, "t": 24, "b": 52}


def _figure(parts: dict[str, Any]) -> go.Figure:
    figure = go.Figure(parts["data"], parts["layout"])
    figure.layout.template = go.layout.Template()
    return figure


def _need(data: xr.Dataset, kind: str) -> None:
    if data.attrs.get("kind") != kind:
        raise InputError(f"this figure needs a {kind}, not a result of kind '{data.attrs.get('kind')}'")


def _unit(data: xr.Dataset, j: int) -> str:
    unit = str(data["property_unit"].values[j])
    return "" if unit == "1" else f" ({unit})"


def _points(x: Any, y: Any, name: str, text: Any, **more: Any) -> dict[str, Any]:
    return {"type": "scatter", "mode": "markers", "x": np.asarray(x, dtype=float), "y": np.asarray(y, dtype=float),
            "name": name, "text": [str(one) for one in text], "marker": {"size": 7}, "meta": {"curve": name},
            "hovertemplate": "%{text}<br>%{x:.4~g}, %{y:.4~g}<extra></extra>", **more}  # fmt: skip


def _line(x: Any, y: Any, name: str, **more: Any) -> dict[str, Any]:
    return {"type": "scatter", "mode": "lines", "x": np.asarray(x, dtype=float), "y": np.asarray(y, dtype=float),
            "name": name, "line": {"color": INK, "width": 1, "dash": "dash"}, "hoverinfo": "skip",
            "meta": {"curve": name}, **more}  # fmt: skip


def fit_of_property(data: xr.Dataset, j: int) -> dict[str, Any]:
    """Predicted against reference values of samples left out and fitted, and the errors below."""
    y = np.asarray(data["reference"].values[:, j], dtype=float)
    out, fitted = (np.asarray(data[name].values[:, j], dtype=float) for name in ("left_out", "fitted"))
    names = [str(one) for one in data["sample"].values]
    ends = np.array([min(y.min(), np.nanmin(out)), max(y.max(), np.nanmax(out))])
    traces = [
        _points(y, fitted, "fitted", names, marker={"size": 5, "color": COLOURS[5]}, opacity=0.6),
        _points(y, out, "left out", names, marker={"size": 7, "color": COLOURS[0]}),
        _line(ends, ends, "equal", showlegend=False),
        _points(y, out - y, "error", names, marker={"size": 7, "color": COLOURS[0]}, yaxis="y2", showlegend=False),
        _line(ends, [0, 0], "none", yaxis="y2", showlegend=False),
    ]
    name, unit = figure_text(str(data["property"].values[j]), 30), _unit(data, j)
    layout = {
        "height": 560, "margin": _MARGIN, "legend": _LEGEND, "hovermode": "closest",
        "xaxis": _axis(f"Reference {name}{unit}", anchor="y2"),
        "yaxis": _axis(f"Predicted {name}{unit}", domain=[0.36, 1.0]),
        "yaxis2": _axis(f"Error{unit}", domain=[0.0, 0.3]),
    }  # fmt: skip
    return {"data": traces, "layout": layout}


def error_curve(data: xr.Dataset) -> dict[str, Any]:
    """Error of cross-validation against the number of latent variables, the chosen one marked."""
    number = np.asarray(data["components"].values, dtype=float)
    chosen = data.sizes["latent"]
    traces = []
    for j, name in enumerate(data["property"].values):
        curve = np.asarray(data["curve"].values[:, j], dtype=float)
        size = curve / curve[0]
        traces.append(_line(number, size, figure_text(str(name), 22), line=line_of(j), mode="lines+markers",
                            hoverinfo="x+y"))  # fmt: skip
    mark = {"type": "line", "xref": "x", "yref": "paper", "x0": chosen, "x1": chosen, "y0": 0, "y1": 1,
            "line": {"color": INK, "width": 1, "dash": "dot"}}  # fmt: skip
    layout = {
        "height": 340, "margin": _MARGIN, "legend": _LEGEND, "shapes": [mark], "showlegend": True,
        "xaxis": _axis("Latent variables (dotted: chosen)", dtick=1),
        "yaxis": _axis("SECV over that of the mean", rangemode="tozero"),
    }  # fmt: skip
    return {"data": traces, "layout": layout}


def regression_vector(data: xr.Dataset) -> dict[str, Any]:
    """Regression vectors with two standard uncertainties of the jackknife."""
    dim = str(data["x_mean"].dims[0])
    axis = np.asarray(data[dim].values, dtype=float)
    traces = []
    for j, name in enumerate(data["property"].values):
        b, u = (np.asarray(data[key].values[j], dtype=float) for key in ("coefficient", "coefficient_uncertainty"))
        hidden = {"line": {"width": 0}, "legendgroup": str(j), "showlegend": False}
        traces += [_line(axis, b - 2 * u, "low") | hidden,
                   _line(axis, b + 2 * u, "high") | hidden | {"fill": "tonexty", "fillcolor": "rgba(0,114,178,0.18)"},
                   _line(axis, b, figure_text(str(name), 22), line=line_of(j), legendgroup=str(j),
                         hoverinfo="x+y")]  # fmt: skip
    layout = {
        "height": 380, "margin": _MARGIN, "legend": _LEGEND, "showlegend": True,
        "xaxis": _axis(axis_title(dim), autorange="reversed" if SPECTRAL_UNITS.get(dim) == "cm-1" else True),
        "yaxis": _axis("Regression vector", zeroline=True, zerolinecolor="rgba(128,128,128,0.6)"),
    }  # fmt: skip
    return {"data": traces, "layout": layout}


def distances(data: xr.Dataset) -> dict[str, Any]:
    """Q against T2 as shares of their limits, on log axes; beyond one a sample is unlike the calibration."""
    calibration = data.attrs["kind"] == "calibration"
    names = ("q_left_out", "t2_left_out") if calibration else ("q_residual", "t2")
    q, t2 = (np.maximum(np.asarray(data[name].values, dtype=float).ravel(), 1e-300) for name in names)
    q, t2 = q / float(data["q_limit"]), t2 / float(data["t2_limit"])
    if calibration:
        labels = [str(one) for one in data["sample"].values]
        odd = np.array([bool(str(why)) for why in data["outlier_reason"].values])
        sets = [("left-out sample", ~odd, MARKS["supported"]), ("proposed outlier", odd, MARKS["unsupported"])]
    else:
        labels = labels_of(data["predicted"].transpose(..., "property"))
        verdict = data["verdict"].values.ravel().astype(str)
        sets = [(word, verdict == word, mark) for word, mark in MARKS.items()]
    traces = [_points(t2[at], q[at], word, np.array(labels)[at], marker={"size": 8, "color": colour, "symbol": sign})
              for word, at, (colour, sign) in sets if at.any()]  # fmt: skip
    limit = {"type": "line", "line": {"color": INK, "width": 1, "dash": "dash"}}
    layout = {
        "height": 420, "margin": _MARGIN, "legend": _LEGEND, "showlegend": True, "hovermode": "closest",
        "shapes": [limit | {"xref": "x", "yref": "paper", "x0": 1, "x1": 1, "y0": 0, "y1": 1},
                   limit | {"xref": "paper", "yref": "y", "x0": 0, "x1": 1, "y0": 1, "y1": 1}],
        "xaxis": _axis("Hotelling T2 over its limit", type="log", exponentformat="power"),
        "yaxis": _axis("Q over its limit", type="log", exponentformat="power"),
    }  # fmt: skip
    return {"data": traces, "layout": layout}


def chart_of_property(data: xr.Dataset, j: int) -> dict[str, Any]:
    """Predicted values in their order, or over time, with intervals; verdicts by colour and sign."""
    leading = [str(dim) for dim in data["predicted"].dims if dim != "property"]
    value, low, high = (np.asarray(data[name].transpose(*leading, "property").values, dtype=float).reshape(
        -1, data.sizes["property"])[:, j] for name in ("predicted", "lower", "upper"))  # fmt: skip
    labels = np.array(labels_of(data["predicted"].transpose(*leading, "property")))
    verdict = data["verdict"].values.ravel().astype(str)
    timed = len(leading) == 1 and "time" in data.coords and data["time"].dims == (leading[0],)
    x: Any = data["time"].values.astype(str) if timed else np.arange(1, value.size + 1)
    traces = []
    for word, (colour, sign) in MARKS.items():
        at = verdict == word
        if at.any():
            up, down = (high - value)[at], (value - low)[at]
            traces.append({
                "type": "scatter", "mode": "markers", "x": x[at], "y": value[at], "name": word,
                "text": labels[at].tolist(), "marker": {"size": 7, "color": colour, "symbol": sign},
                "meta": {"curve": word},
                "error_y": {"type": "data", "array": np.where(np.isfinite(up), up, 0.0), "symmetric": False,
                            "arrayminus": np.where(np.isfinite(down), down, 0.0), "thickness": 1, "width": 0},
                "hovertemplate": "%{text}<br>%{y:.4~g}<extra></extra>",
            })  # fmt: skip
    ranges = [float(data[name].values[j]) for name in ("lowest", "highest")]
    shapes = [{"type": "rect", "xref": "paper", "yref": "y", "x0": 0, "x1": 1, "y0": ranges[0], "y1": ranges[1],
               "fillcolor": "rgba(0,114,178,0.08)", "line": {"width": 0}, "layer": "below"}]  # fmt: skip
    name = figure_text(str(data["property"].values[j]), 30)
    layout = {
        "height": 380, "margin": _MARGIN, "legend": _LEGEND, "showlegend": True, "hovermode": "closest",
        "shapes": shapes, "xaxis": _axis("Time" if timed else "Sample, in the order given"),
        "yaxis": _axis(f"Predicted {name}{_unit(data, j)}"),
    }  # fmt: skip
    return {"data": traces, "layout": layout}


def predicted_figure(calibration: xr.Dataset, property: int = 0) -> go.Figure:
    """Predicted against reference values.

    Parameters
    ----------
    calibration : Dataset
        The ``data`` of a calibration.
    property : int
        Which property.

    Returns
    -------
    plotly Figure

    Raises
    ------
    InputError
        For another kind of result.
    """
    _need(calibration, "calibration")
    return _figure(fit_of_property(calibration, property))


def chart_figure(prediction: xr.Dataset, property: int = 0) -> go.Figure:
    """Predicted values with intervals in their order or over time.

    Parameters
    ----------
    prediction : Dataset
        From ``unmix.predict``.
    property : int
        Which property.

    Returns
    -------
    plotly Figure

    Raises
    ------
    InputError
        For another kind of result.
    """
    _need(prediction, "prediction")
    return _figure(chart_of_property(prediction, property))


def interpretation_figure(found: xr.Dataset, property: int = 0) -> go.Figure:
    """Regression vector, importance and selectivity ratio of each channel.

    Parameters
    ----------
    found : Dataset
        From ``unmix.interpret``.
    property : int
        Which property.

    Returns
    -------
    plotly Figure

    Raises
    ------
    InputError
        For another kind of result.
    """
    _need(found, "interpretation")
    dim = next(str(d) for d in found["coefficient"].dims if d != "property")
    axis = np.asarray(found[dim].values, dtype=float)
    traces = []
    for place, (name, title) in enumerate((("coefficient", "Regression vector"), ("importance", "VIP"),
                                           ("selectivity_ratio", "Selectivity ratio"))):  # fmt: skip
        traces.append(_line(axis, found[name].values[property], title, line=line_of(place), hoverinfo="x+y",
                            yaxis=f"y{place + 1}" if place else "y"))  # fmt: skip
    unit = str(found["coefficient"].attrs["units"])
    layout = {
        "height": 640, "margin": _MARGIN, "showlegend": False,
        "xaxis": _axis(axis_title(dim), anchor="y3",
                       autorange="reversed" if SPECTRAL_UNITS.get(dim) == "cm-1" else True),
        "yaxis": _axis(f"Regression vector ({unit})", domain=[0.7, 1.0]),
        "yaxis2": _axis("VIP", domain=[0.36, 0.64], rangemode="tozero"),
        "yaxis3": _axis("Selectivity ratio", domain=[0.0, 0.3], rangemode="tozero"),
    }  # fmt: skip
    return _figure({"data": traces, "layout": layout})
