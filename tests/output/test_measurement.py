"""The folder and the figures of a measurement."""

from __future__ import annotations

import json

import numpy as np
import pytest
from matplotlib.collections import LineCollection

from spheru.errors import FolderError
from spheru.output.measurement import grain_table, save_measurement
from spheru.output.plots.distribution import plot_distribution
from spheru.output.plots.outlines import plot_outlines, plot_test_lines
from spheru.run.measure import measure_images
from tests.measure.reference import image_of, voronoi


@pytest.fixture(scope="module")
def image():
    return image_of(voronoi(2, side=12, across=16, cut=True).labels, pixel=5e-7)


@pytest.fixture(scope="module")
def found(image):
    return measure_images(image, edges="counting-frame", guard=15e-6, floor=5e-6, names=["v"])


def shares_of(ax):
    return {line.get_label(): line.get_ydata() for line in ax.lines if "d50" in line.get_label()}


def test_cumulative_curves_rise_to_one_hundred_and_pass_their_marks(found):
    above, below = plot_distribution(found.sizes, title="v")
    curves = shares_of(below)
    assert [name.split(":")[0] for name in curves] == ["by number", "by area", "by volume"]
    for share in curves.values():
        assert share[-1] == pytest.approx(100)
        assert (np.diff(share) >= 0).all()
    half = 1e6 * found.sizes.quantiles(0.5, weighting="area")
    assert f"d50 = {half:.3g} µm" in list(curves)[1]
    assert below.get_xlabel() == "equivalent diameter (µm)"
    assert below.get_ylabel() == "share up to this diameter (%)"
    assert above.get_title(loc="left") == "v"
    assert "counting frame, guard 15 µm" in next(t.get_text() for t in below.texts).replace(
        "\n", " "
    )


def test_outlines_tell_by_colour_what_counts_and_show_the_frame(found):
    ax = plot_outlines(found.fields[0])
    names = [text.get_text() for text in ax.get_legend().get_texts()]
    assert names[:2] == ["counts", "not used: edge rule"]
    frame = next(patch for patch in ax.patches if patch.get_gid() == "guard")
    assert frame.get_xy() == pytest.approx((15, 15))
    assert frame.get_width() == pytest.approx(12 * 16 * 0.5 - 30)
    colours = ax.images[0].get_array()
    used = (colours == (221, 233, 245)).all(axis=-1).mean()
    assert 0.1 < used < 0.7


def test_test_lines_are_drawn_with_their_intersections_in_place(found):
    lines = found.intercepts.lines
    ax = plot_test_lines(found.fields[0], lines)
    drawn = [c for c in ax.collections if isinstance(c, LineCollection)]
    assert len(drawn) == 4
    for lines_of_one, dots in zip(
        drawn, (line for line in ax.lines if line.get_gid() == "intersections"), strict=True
    ):
        ends = np.array([path.vertices for path in lines_of_one.get_paths()])
        points = np.column_stack(dots.get_data())
        assert 1 <= len(ends) <= 12
        for point in points:  # on one of the lines of its direction
            along = ends[:, 1] - ends[:, 0]
            aside = point - ends[:, 0]
            across = along[:, 0] * aside[:, 1] - along[:, 1] * aside[:, 0]
            away = np.abs(across) / np.hypot(*along.T)
            assert away.min() < 0.5  # um: a pixel


def test_the_table_has_a_row_for_each_grain_with_units(found):
    head, *rows = grain_table(found.fields).splitlines()
    assert head == (
        "field,label,patch,area_um2,diameter_um,perimeter_um,aspect,circularity,centre_x_um,"
        "centre_y_um,touches_edge,pixels,weight_per_mm2"
    )
    assert len(rows) == len(found.sizes)
    cells = rows[0].split(",")
    assert float(cells[3]) == pytest.approx(int(cells[11]) * 0.25)


def test_a_body_has_a_table_and_a_distribution_but_no_pictures(tmp_path):
    body = measure_images(voronoi(1, side=3, across=8, dimension=3))
    save_measurement(body, tmp_path / "there")
    assert sorted(p.name for p in (tmp_path / "there").iterdir()) == [
        "distribution.png",
        "grains.csv",
        "measure.json",
        "sizes.csv",
    ]
    head = (tmp_path / "there" / "grains.csv").read_text().splitlines()[0]
    assert "volume_um3,diameter_um,surface_um2,aspect,sphericity,centre_x_um" in head


def test_a_write_that_fails_leaves_nothing(found, tmp_path, monkeypatch):
    def broken(_fields):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("spheru.output.measurement.grain_table", broken)
    with pytest.raises(FolderError, match="No space left"):
        save_measurement(found, tmp_path / "deep" / "there")
    assert list(tmp_path.iterdir()) == []


def test_the_record_is_json_without_nan(found, tmp_path):
    save_measurement(found, tmp_path / "there", extra={"seed": None})
    record = json.loads((tmp_path / "there" / "measure.json").read_text())
    assert record["seed"] is None
    assert set(record["files"]) == {p.name for p in (tmp_path / "there").iterdir()} - {
        "measure.json"
    }
