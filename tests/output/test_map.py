"""The figure of a map, read back from its pixels."""

from __future__ import annotations

import io

import numpy as np
import pytest
from matplotlib.figure import Figure
from PIL import Image
from scipy.ndimage import maximum_position

from spheru.errors import ValidityError
from spheru.image.frame import Frame
from spheru.image.label_image import LabelImage
from spheru.output.classes import round_down
from spheru.output.plots.canvas import png, root_figure
from spheru.output.plots.map import map_colours, plot_map, reduction
from tests.output.reference import voronoi_map


def pixels_of(ax):
    return np.asarray(Image.open(io.BytesIO(png(ax))).convert("RGB"))


def count_colours(image):
    return np.unique(map_colours(image).astype(int) @ [65536, 256, 1]).size


def corner_of(ax, picture):
    place = ax.get_position()
    return round((1 - place.y1) * picture.shape[0]), round(place.x0 * picture.shape[1])


@pytest.mark.parametrize(
    "shape",
    [
        pytest.param((1000, 1000), id="square"),
        pytest.param((901, 877), id="odd"),
        pytest.param((61, 90), id="small, blown up"),
        pytest.param((40, 1500), id="flat"),
        pytest.param((1500, 40), id="narrow, in strips"),
        pytest.param((1499, 701), id="odd, in strips"),
    ],
)
def test_every_pixel_of_the_map_is_one_of_the_picture(shape):
    image = voronoi_map(shape, 150)
    ax = plot_map(image, title="title", caption="caption " * 30)
    picture, colours = pixels_of(ax), map_colours(image)
    top, left = corner_of(ax, picture)
    shown = picture[top : top + colours.shape[0], left : left + colours.shape[1]]
    np.testing.assert_array_equal(shown, colours)


@pytest.mark.parametrize(
    ("shape", "pixel", "length"),
    [
        pytest.param((1000, 1000), 1e-6, 200, id="200 um of 1000"),
        pytest.param((500, 900), 0.4e-6, 100, id="100 um of 360"),
        pytest.param((61, 90), 0.1e-6, 2, id="2 um of 9, blown up"),
        pytest.param((1200, 60), 1e-6, 200, id="narrow"),
    ],
)
def test_scale_bar_is_as_long_as_it_says(shape, pixel, length):
    image = voronoi_map(shape, 60, pixel=pixel)
    ax = plot_map(image)
    picture, colours = pixels_of(ax), map_colours(image)
    top, left = corner_of(ax, picture)
    assert f"{length:g} µm" in [text.get_text().strip() for text in ax.texts]
    below = (picture[top + colours.shape[0] + 2 :] < 60).all(axis=2)
    first = below[:, left + 3].nonzero()[0]
    row = below[first[len(first) // 2], left:]
    blow_up = colours.shape[0] / shape[0]
    assert row.argmin() == round(length * 1e-6 / pixel * blow_up)
    assert round_down(length) == length


@pytest.mark.parametrize("periodic", [False, True])
def test_no_two_neighbours_share_a_colour(periodic):
    image = voronoi_map((800, 500), 400, periodic=periodic)
    colours = map_colours(image)
    # the brightest pixel of a label is one of its inside, not of its boundary
    bright = maximum_position(colours.sum(axis=2), image.labels, np.arange(1, 401))
    inside = [tuple(colours[place].tolist()) for place in bright]
    labels = image.labels.astype(int) - 1
    pad = "wrap" if periodic else "edge"
    for axis in (0, 1):
        padded = np.pad(labels, [(0, axis == 0), (0, axis == 1)], mode=pad)
        one, other = np.moveaxis(padded, axis, 0)[:-1], np.moveaxis(padded, axis, 0)[1:]
        differ = one != other
        assert all(
            inside[a] != inside[b]
            for a, b in set(zip(one[differ].tolist(), other[differ].tolist(), strict=True))
        )


def test_what_has_not_crystallised_is_grey_and_named():
    image = voronoi_map((800, 200), 20, reach=30)
    ax = plot_map(image)
    colours = map_colours(image)
    assert colours[image.labels == 0].max(axis=0).tolist() == [236, 236, 236]
    assert [text.get_text() for text in ax.get_legend().get_texts()] == ["not crystallised"]
    assert plot_map(voronoi_map((800, 200), 20)).get_legend() is None


def test_a_map_without_any_spherulite_is_grey():
    frame = Frame(shape=(3, 4), pixel=1e-6)
    ax = plot_map(LabelImage(labels=np.zeros((3, 4), int), frame=frame))
    assert ax.get_legend() is not None
    assert np.unique(map_colours(LabelImage(labels=np.zeros((3, 4), int), frame=frame))) == [236]


def test_boundaries_are_dark_but_left_out_where_they_would_cover_the_map():
    assert count_colours(voronoi_map((800, 300), 100)) == 20  # each with its darker twin
    assert count_colours(voronoi_map((800, 30), 800)) == 10


def test_a_large_map_is_thinned_and_the_caption_says_so():
    labels = np.arange(5000) // 50 + 1
    image = LabelImage(labels=labels[None].repeat(8, axis=0), frame=Frame(shape=(8, 5000), pixel=1))
    assert reduction(image.frame) == 2
    assert map_colours(image).shape == (4, 2500, 3)
    assert "every 2th" not in plot_map(image, caption="n = 100.").texts[-1].get_text()
    assert "every second pixel" in plot_map(image, caption="n = 100.").texts[-1].get_text()


def test_labels_may_have_gaps():
    labels = np.array([[40_000, 5, 7]], dtype=np.uint32)
    image = LabelImage(labels=labels, frame=Frame(shape=(1, 3), pixel=1e-6))
    # three colours, and the dark boundary of all but the last
    assert count_colours(image) == 5


def test_a_map_of_1000_pixels_stays_below_400_kib_and_has_no_metadata():
    content = png(plot_map(voronoi_map((1000, 1000), 3000), title="t", caption="c"))
    assert len(content) < 400 * 1024
    assert Image.open(io.BytesIO(content)).info == {}


def test_the_same_map_gives_the_same_bytes():
    image = voronoi_map((100, 120), 30)
    assert png(plot_map(image, title="t")) == png(plot_map(image, title="t"))


def test_axes_of_the_caller_are_drawn_on():
    figure = Figure(layout="constrained")
    one, other = figure.subplots(1, 2)
    assert plot_map(voronoi_map((30, 30), 9), ax=other) is other
    assert root_figure(other) is figure
    assert len(other.images) == 1
    assert len(one.images) == 0


def test_a_volume_is_refused():
    with pytest.raises(ValidityError, match="two axes"):
        plot_map(voronoi_map((4, 4, 4), 3))
