import numpy as np
import pytest

from unmix.errors import InputError
from unmix.report.plots import COLOURS, DASHES, fit_figure, line_of, signal_figure


def by_curve(figure):
    return {f"{trace.meta['curve']}{trace.meta.get('component', '')}": trace for trace in figure.data}


def test_the_figure_of_a_sample_shows_the_curves_of_the_result(composition):
    traces = by_curve(fit_figure(composition, 2))
    used = composition["used"].values[2]
    measured = composition["measured"].values[2]
    np.testing.assert_array_equal(traces["measured"].y[used], measured[used])
    np.testing.assert_array_equal(traces["outside"].y[~used], measured[~used])
    np.testing.assert_array_equal(traces["fitted"].y, composition["fitted"].values[2])
    np.testing.assert_array_equal(traces["residual"].y, composition["residual"].values[2])
    np.testing.assert_array_equal(traces["residual"].x, composition["wavenumber"].values)
    amount = float(composition["concentration"][2, 1])
    np.testing.assert_allclose(traces["contribution1"].y, amount * composition["pure_signal"].values[1])
    assert traces["contribution1"].name == "acetone"


def test_nothing_is_drawn_that_is_not_there(composition):
    assert "outside" not in by_curve(fit_figure(composition, 0))
    assert "baseline" not in by_curve(fit_figure(composition.drop_vars("baseline"), 0))


def test_infrared_axes_fall_and_others_rise(composition):
    assert fit_figure(composition).layout.xaxis.autorange == "reversed"
    visible = composition.rename(wavenumber="wavelength")
    visible["wavelength"].attrs["units"] = "nm"
    figure = fit_figure(visible)
    assert figure.layout.xaxis.autorange is True
    assert figure.layout.xaxis.title.text == "Wavelength (nm)"


def test_every_axis_has_a_title(composition, design):
    for figure in (fit_figure(composition), signal_figure(design)):
        axes = [axis for name, axis in figure.layout.to_plotly_json().items() if name[1:5] == "axis"]
        assert len(axes) >= 3
        assert all(axis["title"]["text"] for axis in axes)


def test_the_noise_band_and_the_unexplained_band_are_marked(composition):
    shapes = fit_figure(composition, 1).layout.shapes
    noise = float(composition["noise_level"][1])
    assert (shapes[0].y0, shapes[0].y1) == (-2 * noise, 2 * noise)
    bands = [shape for shape in shapes if shape.xref == "x"]
    assert {shape.yref for shape in bands} == {"y domain", "y2 domain"}
    assert (bands[0].x0, bands[0].x1) == (1722.0, 1758.0)
    assert bands[-1].label.text == "1740"
    assert [shape for shape in fit_figure(composition, 0).layout.shapes if shape.xref == "x"] == []


def test_no_line_is_drawn_across_a_gap_between_regions(composition):
    axis = composition["wavenumber"]
    cut = composition.sel(wavenumber=axis[(axis < 1000) | (axis > 2000)])
    trace = by_curve(fit_figure(cut))["fitted"]
    gap = np.flatnonzero(np.isnan(trace.y))
    assert gap.size == 1
    assert trace.y.size == cut.sizes["wavenumber"] + 1
    assert (trace.x[gap[0] - 1], trace.x[gap[0] + 1]) == (998.0, 2002.0)


def test_labels_of_neighbouring_bands_do_not_lie_over_each_other(composition):
    position, score = composition["misfit_position"].copy(), composition["misfit_score"].copy()
    width = composition["misfit_width"].copy()
    position[1], score[1], width[1] = [1750.0, 1740.0], [20.0, 41.0], [18.0, 18.0]
    near = composition.assign(misfit_position=position, misfit_score=score, misfit_width=width)
    labels = [shape.label.text for shape in fit_figure(near, 1).layout.shapes if shape.label.text]
    assert labels == ["1740"]


def test_components_are_told_apart_by_colour_and_then_by_dash():
    lines = [(line_of(j)["color"], line_of(j)["dash"]) for j in range(len(COLOURS) * len(DASHES))]
    assert len(set(lines)) == len(lines)


def test_markup_in_a_name_is_not_obeyed(make_composition):
    figure = fit_figure(make_composition(3, names=["<b>x</b>", "%{y}", "$a$", "y" * 500]))
    names = [trace.name for trace in figure.data if trace.meta["curve"] == "contribution"]
    assert names[0] == "&lt;b&gt;x&lt;/b&gt;"
    assert len(names[3]) == 22


def test_pure_spectra_and_net_signals_share_a_legend(design):
    figure = signal_figure(design)
    assert len(figure.data) == 8
    assert [trace.showlegend for trace in figure.data] == [True] * 4 + [False] * 4
    np.testing.assert_array_equal(figure.data[5].y, design["net_signal"].values[1])


def test_what_cannot_be_drawn_is_refused_in_a_sentence(composition, design):
    with pytest.raises(InputError, match="no curves"):
        fit_figure(composition.drop_vars("fitted"))
    with pytest.raises(InputError, match="there is no sample 8; give 0 to 7"):
        fit_figure(composition, 8)
    with pytest.raises(InputError, match=r"needs what unmix.quantify returned"):
        fit_figure(design)
    with pytest.raises(InputError, match="no signals"):
        signal_figure(design.drop_vars("net_signal"))
