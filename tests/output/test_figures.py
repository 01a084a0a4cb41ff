"""The figures of sizes, conversion and material: units, means, peaks, what the caption says."""

from __future__ import annotations

import io
from dataclasses import replace

import numpy as np
import pytest
from matplotlib.figure import Figure
from PIL import Image

from spheru.errors import FolderError
from spheru.image.frame import Frame
from spheru.image.label_image import LabelImage
from spheru.material.growth_law import Branch, LauritzenHoffmanGrowth
from spheru.material.record import MaterialRecord
from spheru.material.site_law import ExponentialSites
from spheru.measure.sizes import measure_sizes
from spheru.output.plots.canvas import _palette, png, root_figure
from spheru.output.plots.conversion import plot_conversion, plot_fraction, plot_heat_flow
from spheru.output.plots.material import plot_growth, plot_material, save_material
from spheru.output.plots.sizes import plot_sizes
from tests.output.reference import conversion_curves, voronoi_map


def caption_of(ax):
    """Return the caption without its line breaks."""
    return next(t for t in ax.texts if t.get_gid() == "caption").get_text().replace("\n", " ")


def legend_of(ax):
    return [text.get_text() for text in ax.get_legend().get_texts()]


@pytest.fixture(scope="module")
def sizes():
    return measure_sizes(voronoi_map((300, 300), 400, periodic=True))


def test_sizes_carry_units_weighting_and_interval(sizes):
    ax = plot_sizes(sizes, title="run", caption="Seed 7.")
    assert ax.get_xlabel() == "equivalent diameter (µm)"
    assert ax.get_ylabel() == "density of the distribution (1/µm)"
    assert ax.get_title(loc="left") == "run"
    number, area = legend_of(ax)
    mean = sizes.statistics.number_mean_diameter
    low, high = (f"{1e6 * end:.3g}" for end in (mean.low, mean.high))
    assert number == f"by number: mean {1e6 * mean.value:.3g} µm (95 %: {low} to {high})"
    assert area.startswith("by area: mean")
    caption = caption_of(ax)
    assert "circles of equal area (2D), n = 400" in caption
    assert "Edge rule: every piece counts as it is" in caption
    assert caption.endswith("Seed 7.")


def test_each_distribution_of_sizes_has_an_area_of_one(sizes):
    ax = plot_sizes(sizes)
    assert len(ax.patches) == 4  # outline and fill of each
    for stairs in ax.patches:
        values, edges, _ = stairs.get_data()
        assert (values * np.diff(edges)).sum() == pytest.approx(1)


def test_means_are_marked_where_they_lie(sizes):
    marks = {
        line.get_gid(): line.get_xdata()[0] for line in plot_sizes(sizes).lines if line.get_gid()
    }
    assert marks == {
        "mean by number": pytest.approx(1e6 * sizes.statistics.number_mean_diameter.value),
        "mean by area": pytest.approx(1e6 * sizes.statistics.size_weighted_mean_diameter.value),
    }


def test_sizes_of_a_volume_are_weighted_by_volume():
    ax = plot_sizes(measure_sizes(voronoi_map((30, 30, 30), 60, periodic=True)))
    assert legend_of(ax)[1].startswith("by volume")
    assert "spheres of equal volume (3D)" in caption_of(ax)


def test_too_few_spherulites_for_an_interval_are_said():
    ax = plot_sizes(measure_sizes(voronoi_map((90, 90), 30)))
    assert "Too few spherulites for intervals" in caption_of(ax)
    assert "95 %" not in "".join(legend_of(ax))


def test_no_spherulite_that_counts_is_said():
    image = LabelImage(labels=np.ones((5, 5), int), frame=Frame(shape=(5, 5), pixel=1e-6))
    ax = plot_sizes(measure_sizes(image))
    assert "no spherulite" in [text.get_text() for text in ax.texts]
    png(ax)


def test_conversion_on_cooling_stands_against_temperature():
    fraction, flow = plot_conversion(conversion_curves(), caption="Seed 7.")
    assert fraction.get_ylabel() == "transformed fraction (-)"
    assert flow.get_ylabel() == "heat flow, exo up (W/g)"
    assert flow.get_xlabel() == "temperature, on cooling (°C)"
    assert legend_of(fraction) == ["simulated", "mean field"]
    assert [line.get_linestyle() for line in fraction.lines] == ["-", "--"]
    low, high = flow.get_xlim()
    assert 105 < low < 115
    assert 125 < high < 135
    caption = caption_of(flow)
    assert "averaged over 0.2 K (4.8 s)" in caption
    assert caption.endswith("Seed 7.")


def test_peaks_are_marked_at_their_temperature():
    flow = plot_heat_flow(conversion_curves())
    marks = [text for text in flow.texts if text.get_gid() == "peak"]
    assert [mark.get_text() for mark in marks] == ["120.0 °C", "126.9 °C"]
    top = conversion_curves().heat_flow.max() * 1e-3
    assert marks[0].xy == pytest.approx((120.0, top), rel=0.01)


def test_conversion_at_rest_stands_against_time():
    _, flow = plot_conversion(conversion_curves(cooling=False))
    assert flow.get_xlabel() == "time since the start (min)"
    mark = next(text for text in flow.texts if text.get_gid() == "peak")
    # 1 - 2^-(t/h)^3 is steepest at h (2/(3 ln 2))^(1/3) = 10 min * 0.98710
    assert float(mark.get_text().removesuffix(" min")) == pytest.approx(9.871, abs=0.08)  # a step
    assert "averaged over 4.8 s" in caption_of(flow)


@pytest.mark.parametrize(
    ("duration", "unit"), [(100.0, "s"), (1400.0, "min"), (5e4, "h")], ids=["s", "min", "h"]
)
def test_unit_of_time_follows_the_duration(duration, unit):
    curves = conversion_curves(cooling=False)
    curves.time = curves.time * duration / curves.time[-1]
    assert plot_fraction(curves).get_xlabel() == f"time since the start ({unit})"


def test_nothing_transformed_still_draws():
    curves = conversion_curves(cooling=False)
    for name in ("fraction", "fraction_estimate", "heat_flow", "heat_flow_estimate"):
        setattr(curves, name, np.zeros_like(curves.time))
    _, flow = plot_conversion(curves)
    assert not [text for text in flow.texts if text.get_gid() == "peak"]
    png(flow)


@pytest.fixture
def record():
    growth = LauritzenHoffmanGrowth(
        branches=(Branch(g0=300.0, kg=5.5e5),),
        u_star=6270.0,
        t_inf=240.0,
        t_m0=480.0,
        driving_force_factor=False,
        fitted_range=(380.0, 420.0),
    )
    return MaterialRecord(
        name="some",
        title="Some polymer",
        t_m0=480.0,
        t_g=270.0,
        t_m_observed=440.0,
        growth=growth,
        sites=ExponentialSites(a=0.15, b=15.0, ceiling=1e16, fitted_range=(60.0, 100.0)),
        density_crystal=936.0,
        density_amorphous=855.0,
        density_melt=765.0,
        heat_of_fusion=2e5,
        crystallinity=0.5,
        growth_factor=1.3,
        site_factor=3.0,
    )


def test_material_shows_both_laws_solid_only_where_they_were_fitted(record):
    growth, sites = plot_material(record)
    assert growth.get_ylabel() == "growth rate (µm/s)"
    assert sites.get_ylabel() == "sites active by then (1/mm³)"
    assert sites.get_xlabel() == "temperature (°C)"
    assert growth.get_yscale() == sites.get_yscale() == "log"
    for ax in (growth, sites):  # undercoolings of 60 and 100 K are 420 and 380 K
        fitted = next(line for line in ax.lines if line.get_label() == "fitted")
        assert fitted.get_linestyle() == "-"
        shown = fitted.get_xdata()[np.isfinite(fitted.get_ydata())]
        assert shown.min() == pytest.approx(380 - 273.15, abs=0.2)
        assert shown.max() == pytest.approx(420 - 273.15, abs=0.2)
    law = next(line for line in sites.lines if line.get_label() == "extrapolated")
    at = np.abs(law.get_xdata() - (400 - 273.15)).argmin()
    undercooling = 480 - 273.15 - law.get_xdata()[at]
    assert law.get_ydata()[at] == pytest.approx(np.exp(0.15 * undercooling + 15) * 1e-9)
    assert "factor of 1.3 (growth) and 3 (sites)" in caption_of(sites)


def test_slow_growth_is_shown_per_minute(record):
    slow = replace(record, growth=record.growth.scaled(0.01))
    assert plot_growth(slow).get_ylabel() == "growth rate (µm/min)"


def test_a_record_without_site_law_says_so(record):
    _, sites = plot_material(replace(record, sites=None, site_decades=(12.0, 15.0)))
    assert sites.texts[0].get_text().startswith("no site law in the record")
    assert sites.get_ylim() == pytest.approx((1e2, 1e7))  # 1e3 to 1e6 per mm3, and a decade


def test_material_figure_is_written_whole_or_refused(record, tmp_path):
    save_material(record, tmp_path / "a.png")
    with Image.open(tmp_path / "a.png") as picture:
        assert picture.size == (975, 840)
    with pytest.raises(FolderError, match="cannot be written"):
        save_material(record, tmp_path / "nowhere" / "a.png")


@pytest.mark.parametrize(
    "draw",
    [
        pytest.param(lambda ax, sizes: plot_sizes(sizes, ax=ax), id="sizes"),
        pytest.param(lambda ax, _: plot_fraction(conversion_curves(), ax=ax), id="fraction"),
        pytest.param(lambda ax, _: plot_heat_flow(conversion_curves(), ax=ax), id="heat flow"),
    ],
)
def test_axes_of_the_caller_are_drawn_on(draw, sizes):
    figure = Figure(layout="constrained")
    ax = figure.subplots(1, 2)[1]
    assert draw(ax, sizes) is ax
    assert root_figure(ax) is figure


def test_figures_have_the_same_bytes_each_time_and_no_metadata(sizes):
    one, other = (png(plot_sizes(sizes, title="t")) for _ in range(2))
    assert one == other
    assert Image.open(io.BytesIO(one)).info == {}


def test_a_long_title_is_cut_short(sizes):
    title = plot_sizes(sizes, title="word " * 40).get_title(loc="left")
    assert title.endswith(" ...")
    assert len(title) <= 60


def test_palette_keeps_the_commonest_colours_and_takes_the_nearest_for_others():
    greys = np.arange(256, dtype=np.uint8).repeat(4).reshape(256, 4)
    picture = np.concatenate([greys, greys, [[10, 10, 11, 255]]])[None].astype(np.uint8)
    picture[..., 3] = 255
    index, colours = _palette(picture)
    np.testing.assert_array_equal(colours[index][0, :512], picture[0, :512, :3])
    assert colours[index][0, 512].tolist() == [10, 10, 10]
