"""One self-contained page from a result: the parts put together, style and script inside, nothing fetched.

Template, style and script are in ``assets``; what the page says is put together in the other modules of report.
"""

import base64
import hashlib
import os
from collections.abc import Sequence
from importlib import resources
from pathlib import Path
from string import Template
from typing import Any
from urllib.parse import quote

import xarray as xr
from plotly.offline import get_plotlyjs, get_plotlyjs_version

from unmix.files import whole_file
from unmix.report import background, curves, details, overview, plots
from unmix.report.calibration_page import calibration_parts, prediction_parts
from unmix.report.candidates import candidate_parts
from unmix.report.markup import element, escaped, script_json, shown
from unmix.report.view import Composition, Result, results_of

#: what makes the page of each kind that has no composition
OTHER_PARTS = {"calibration": calibration_parts, "prediction": prediction_parts, "identify": candidate_parts}


def report(
    result: Any,
    path: str | os.PathLike[str],
    *,
    overwrite: bool = False,
    assets: str | os.PathLike[str] | None = None,
) -> Path:
    """Write a result as one page that works without a network.

    Parameters
    ----------
    result : Dataset or sequence of Dataset
        From ``unmix.quantify``, ``unmix.conditioning``, ``unmix.predict`` or ``unmix.identify``, or a calibration;
        several of one kind (samples on different axes) share the page.
    path : path
        The HTML file.
    overwrite : bool
        Whether a file of this name may be replaced.
    assets : path, optional
        A folder for the drawing library, so that many pages can share one copy; inside the page by default.

    Returns
    -------
    Path
        The file that was written.

    Raises
    ------
    InputError
        When it is no result, lacks what cannot be done without, or kinds are mixed.
    WriteError
        When the file exists already or cannot be written.

    Examples
    --------
    >>> import tempfile, unmix
    >>> from unmix.spectra import make_spectra
    >>> pure = make_spectra([[1.0, 0.5, 0.1, 0.0, 0.0], [0.0, 0.1, 0.4, 0.9, 0.3]], [400, 450, 500, 550, 600],
    ...                     dim="wavelength", quantity="absorptivity", leading="component",
    ...                     labels=["red", "blue"], attrs={"per": "g/L"})
    >>> spectra = make_spectra([[0.51, 0.32, 0.33, 0.55, 0.19]], [400, 450, 500, 550, 600], dim="wavelength",
    ...                        quantity="absorbance", labels=["dye bath"])
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     unmix.report(unmix.quantify(spectra, pure), Path(folder) / "dyes.html").name
    'dyes.html'
    """
    several = results_of(getattr(result, "data", result) if hasattr(result, "preparation") else result)
    target = Path(path)
    script = _shared_script(Path(assets), target) if assets is not None else None
    text = page(several, script=script)
    with whole_file(target, overwrite) as beside:
        beside.write_text(text, encoding="utf-8", newline="\n")
    return target


def page(results: Sequence[xr.Dataset], *, script: str | None = None) -> str:
    """The text of the page; ``script`` is the address of the drawing library where it is not to stand inside."""
    kind = results[0].attrs["kind"]
    if kind in OTHER_PARTS:
        title, subtitle, main, data = OTHER_PARTS[kind](results)
    elif kind == "conditioning":
        designs = [Result(one) for one in results]
        title, subtitle, main, data = _design_parts(designs)
    else:
        title, subtitle, main, data = _composition_parts([Composition(one) for one in results])
    behaviour = _asset("page.js")
    scripts = [behaviour]
    if script is None:
        scripts.append(get_plotlyjs())
        library = f"<script>{scripts[1]}</script>"
    else:
        library = str(element("script", src=script))
    allowed = [f"'sha256-{_sha256(text)}'" for text in scripts] + (["'self'", "file:"] if script else [])
    return Template(_asset("page.html")).substitute(
        title=escaped(shown(title)),
        subtitle=escaped(subtitle),
        policy=" ".join(allowed),
        style=_asset("page.css"),
        main=escaped(main),
        data=script_json(data),
        library=library,
        behaviour=f"<script>{behaviour}</script>",
    )


def _composition_parts(views: Sequence[Composition]) -> tuple[str, str, list[Any], dict[str, Any]]:
    number = sum(len(view) for view in views)
    components = list(dict.fromkeys(name for view in views for name in view.components))
    said = f"{number} {'sample' if number == 1 else 'samples'}, {len(components)} listed components"
    made = views[0].text("created")[:10]
    main = [
        overview.trust(views),
        overview.overview(views),
        background.refusals(views),
        background.caution(views),
        details.samples(views),
        background.conditioning(views),
        background.remarks(views),
        background.provenance(views),
    ]
    data: dict[str, Any] = {"results": [], "samples": {}}
    for place, view in enumerate(views):
        if not view.dim or any(name not in view.data for name in ("measured", "fitted", "residual")):
            data["results"].append(None)
            continue
        data["results"].append(curves.shared(view) | {"figure": _pattern(view)})
        for i in range(len(view)):
            marks = plots.fit_marks(view, i)
            data["samples"][f"{place}-{i}"] = curves.of_sample(view, i) | {"shapes": marks}
    subtitle = ", ".join(part for part in (said, made) if part)
    return views[0].text("title") or "Composition", subtitle, main, data


def _pattern(view: Composition) -> dict[str, Any]:
    """The figure of a sample without its curves, which the page fills in."""
    bare = [{key: part for key, part in trace.items() if key not in ("x", "y")}
            for trace in plots.fit_traces(view, 0)]  # fmt: skip
    return {"data": bare, "layout": plots.fit_layout(view, 0) | {"shapes": []}}


def _design_parts(designs: Sequence[Result]) -> tuple[str, str, list[Any], dict[str, Any]]:
    main: list[Any] = []
    figures = []
    for view in designs:
        main += [background.measurable(view), background.advice(view), background.conditioning([view])]
        if all(name in view.data for name in ("pure_signal", "net_signal")):
            figures.append(_packed(plots.signal_traces(view), plots.signal_layout(view)))
            label = (
                "Pure spectra of all components and, below, the part of each that nothing else can imitate"
            )
            plot = element(
                "div", "", class_="plot", data_figure=str(len(figures) - 1), role="img", aria_label=label
            )
            main.append(element("figure", plot, element("figcaption", f"{label}.")))
        if "path_limit" in view.data:
            figures.append(_packed(plots.limits_traces(view), plots.limits_layout(view)))
            label = "Detection limits, as shares of those wanted, against path length and resolution"
            plot = element("div", "", class_="plot", data_figure=str(len(figures) - 1), role="img", aria_label=label)
            main.append(element("figure", plot, element("figcaption", f"{label}. Below the line the wish is met.")))
        main += background.alikeness(view)
    main += [background.caution(designs), background.remarks(designs), background.provenance(designs)]
    said = f"{len(designs[0].components)} components"
    made = designs[0].text("created")[:10]
    title = designs[0].text("title") or "What these pure spectra allow"
    return title, ", ".join(part for part in (said, made) if part), main, {"figures": figures}


def _packed(traces: Sequence[dict[str, Any]], layout: dict[str, Any]) -> dict[str, Any]:
    packed = [trace | {key: curves.plain(trace[key]) for key in ("x", "y")} for trace in traces]
    return {"data": packed, "layout": layout}


def _asset(name: str) -> str:
    return (resources.files("unmix.report") / "assets" / name).read_text(encoding="utf-8")


def _sha256(text: str) -> str:
    return base64.b64encode(hashlib.sha256(text.encode("utf-8")).digest()).decode("ascii")


def _shared_script(folder: Path, page_path: Path) -> str:
    """Put the drawing library into a folder, unless it is there, and give its address as the page sees it."""
    folder.mkdir(parents=True, exist_ok=True)
    target = folder / f"plotly-{get_plotlyjs_version()}.min.js"
    text = get_plotlyjs()
    if not (target.exists() and target.read_text(encoding="utf-8") == text):
        with whole_file(target, overwrite=True) as beside:
            beside.write_text(text, encoding="utf-8", newline="\n")
    return quote(Path(os.path.relpath(target, page_path.parent)).as_posix())
