"""A measurement put together: drawn truths, an outside picture, fields, warnings."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import ndimage
from scipy.spatial import cKDTree
from scipy.special import ndtri
from skimage import data, filters, segmentation

from spheru.errors import DataError, UnknownNameError, ValidityError
from spheru.image.frame import Frame
from spheru.image.label_image import LabelImage
from spheru.run.measure import measure_images
from tests.measure.reference import image_of, voronoi


def discs(diameters, pixel, *, seed=3):
    """Draw discs with room between them, at places that the pixels do not know."""
    rng = np.random.default_rng(seed)
    side = math.ceil(max(diameters)) + 3
    across = math.ceil(math.sqrt(len(diameters)))
    labels = np.zeros((across * side, across * side), dtype=int)
    y, x = np.mgrid[:side, :side] + 0.5
    for k, diameter in enumerate(diameters):
        row, column = side * (k // across), side * (k % across)
        centre = side / 2 + rng.random(2) - 0.5
        disc = (y - centre[0]) ** 2 + (x - centre[1]) ** 2 < diameter**2 / 4
        labels[row : row + side, column : column + side][disc] = k + 1
    return LabelImage(labels=labels, frame=Frame(shape=labels.shape, pixel=pixel, closed=True))


def test_a_lognormal_set_of_discs_has_its_moments():
    # D = 20 exp(0.3 z): the z are the midpoints of 400 equal shares, so nothing scatters; moments
    # <D^k> = 20^k exp(k^2 0.09/2)
    share = (np.arange(400) + 0.5) / 400
    diameters = 20 * np.exp(0.3 * ndtri(share))
    found = measure_images(discs(diameters, 5e-7))
    summary, moment = found.summary, lambda k: np.mean(diameters**k)
    for key, pixels in {
        "number_mean_diameter_um": moment(1),
        "area_weighted_mean_diameter_um": moment(3) / moment(2),
        "volume_weighted_mean_diameter_um": moment(4) / moment(3),
        "diameter_standard_deviation_um": diameters.std(),
        "diameter_d50_by_number_um": np.median(diameters),
    }.items():
        assert summary[key] == pytest.approx(pixels * 0.5, rel=0.005), key
    assert moment(1) == pytest.approx(20 * math.exp(0.045), rel=0.01)
    assert summary["mean_area_um2"] == pytest.approx(math.pi / 4 * moment(2) * 0.25, rel=0.005)
    assert summary["mean_circularity"] == pytest.approx(1.0, abs=0.01)
    assert summary["mean_aspect"] == pytest.approx(1.0, abs=0.02)
    assert "grain-size numbers are meant for structures that fill it" in " ".join(found.warnings)
    assert found.body == ()


def coins():
    """Return skimage's coins (bundled; from Pompeii, Brooklyn Museum) as a mask of two labels."""
    picture = data.coins()
    elevation = filters.sobel(picture)
    markers = np.zeros(picture.shape, dtype=int)
    markers[picture < 30] = 1
    markers[picture > 150] = 2
    found = segmentation.watershed(elevation, markers)
    return ndimage.binary_fill_holes(found == 2)


def test_the_coins_of_an_outside_picture_are_24_of_37_to_63_pixels():
    # by eye in the grey picture: 4 rows of 6 coins; the smallest 39 wide and 35 high, the largest
    # 63.5 wide and 62 high
    mask = coins()
    image = LabelImage(labels=mask.astype(np.uint8), frame=Frame(shape=mask.shape, pixel=1e-3))
    found = measure_images(image, kind="patch", floor=20e-3, edges="none")
    used = found.sizes.weight > 0
    assert found.sizes.count == 24
    diameter = np.sort(found.sizes.diameter[used]) * 1e3
    assert diameter[0] == pytest.approx(math.sqrt(39 * 35), abs=1)
    assert diameter[-1] == pytest.approx(math.sqrt(63.5 * 62), abs=1)
    assert (found.shapes.circularity[used] > 0.8).all()
    assert (found.shapes.aspect[used] < 1.25).all()


def test_hexagons_measure_as_they_were_drawn():
    # centres on a triangular grid of 40 pixels, turned by 0.2 rad: area 40^2 sqrt(3)/2
    n, apart = 600, 40.0
    i, j = np.mgrid[-30:31, -30:31]
    base = np.stack([(i + 0.5 * j).ravel(), (math.sqrt(3) / 2 * j).ravel()], axis=1) * apart
    turn = np.array([[math.cos(0.2), -math.sin(0.2)], [math.sin(0.2), math.cos(0.2)]])
    y, x = np.mgrid[:n, :n] + 0.5
    owner = cKDTree(base @ turn + n / 2).query(np.stack([y, x], axis=-1))[1]
    found = measure_images(image_of(owner + 1, pixel=1e-6))
    area = apart**2 * math.sqrt(3) / 2
    summary = found.summary
    assert summary["mean_area_um2"] == pytest.approx(area, rel=0.003)
    assert summary["number_density_per_mm2"] == pytest.approx(1e6 / area, rel=0.03)
    assert summary["diameter_standard_deviation_um"] < 0.3
    assert summary["mean_aspect"] == pytest.approx(1.0, abs=0.02)
    # pi/(2 sqrt 3) = 0.9069, 2 % high at 42 pixels across as stated
    assert summary["mean_circularity"] == pytest.approx(0.9069, rel=0.025)


def test_fields_pool_by_their_area_and_give_the_intervals():
    fields = [voronoi(seed, side=8, across=10, cut=True) for seed in range(5)]
    found = measure_images(fields)
    each = [measure_images(one) for one in fields]
    density = np.array([one.sizes.statistics.number_density.value for one in each])
    pooled = found.sizes.statistics.number_density
    assert pooled.value == pytest.approx(density.mean())
    half = 2.776445 * density.std(ddof=1) / math.sqrt(5)  # Student's t at 4
    assert pooled.high - pooled.value == pytest.approx(half)
    assert found.sizes.count == sum(one.sizes.count for one in each)
    assert len(found.planimetric.fields) == 5
    assert "5 fields" in found.summary["measured"]["intervals"]


def test_a_larger_field_counts_for_more():
    small, large = np.array([[1, 2]]), np.array([[1, 1, 2, 2, 3, 3, 4, 4]]).repeat(2, axis=0)
    found = measure_images(
        [image_of(a.repeat(8, 0).repeat(8, 1), closed=True) for a in (small, large)]
    )
    # 2 in 128 pixels, 4 in 1024: together 6 in 1152
    assert found.sizes.statistics.number_density.value == pytest.approx(6 / 1152)


def test_the_numbers_scale_with_the_pixel():
    image = voronoi(1, side=12, across=10, cut=True)
    one, two = (
        measure_images(image_of(image.labels, pixel=pixel), edges="guard-frame").summary
        for pixel in (1e-6, 3e-6)
    )
    for key, power in (
        ("number_mean_diameter_um", 1),
        ("mean_area_um2", 2),
        ("number_density_per_mm2", -2),
        ("boundary_density_per_mm", -1),
        ("mean_aspect", 0),
        ("mean_circularity", 0),
    ):
        for end in ("", "_ci95_low", "_ci95_high"):
            assert two[key + end] == pytest.approx(one[key + end] * 3.0**power)


def test_a_body_is_measured_by_volume():
    found = measure_images(voronoi(1, side=5, across=10, dimension=3))
    assert found.planimetric is None
    assert found.intercepts is None
    summary = found.summary
    assert summary["mean_volume_um3"] == pytest.approx(1e18, rel=0.2)
    # Poisson-Voronoi, 1 per m3: mean diameter 1.2156 m (computed from exact cells)
    assert summary["number_mean_diameter_um"] == pytest.approx(1.2156e6, rel=0.07)
    assert 0.6 < summary["mean_sphericity"] < 0.95


def test_a_section_that_falls_apart_says_so():
    labels = np.kron([[1, 2, 1], [3, 2, 4]], np.ones((12, 12), dtype=int))
    found = measure_images(image_of(labels))
    assert found.fields[0].patches == 5
    assert "4 labels fall into 5 patches" in found.warnings[0]
    apart = measure_images(image_of(labels), kind="patch")
    assert len(apart.sizes) == 5
    assert apart.fields[0].owner.tolist() == [1, 2, 1, 3, 4]


@pytest.mark.parametrize("edges", ["none", "exclude"])
def test_biased_rules_are_called_biased(edges):
    found = measure_images(voronoi(1, side=8, across=10, cut=True), edges=edges)
    assert any("is biased" in note for note in found.warnings)


def photograph():
    return data.coins()


FAULTS = {
    "nothing": (np.zeros((9, 9), int), {}, DataError, "nothing but 0"),
    "one label": (np.ones((9, 9), int), {}, DataError, r"one label only \(1\).*--patches"),
    "photograph": (photograph(), {}, DataError, "looks like a photograph"),
    "unknown rule": (np.eye(9, dtype=int) + 1, {"edges": "guard"}, UnknownNameError, "edge rule"),
    "negative floor": (np.eye(9, dtype=int) + 1, {"floor": -1.0}, ValidityError, "0 m and up"),
    "names": (np.eye(9, dtype=int) + 1, {"names": ["a", "b"]}, ValidityError, "a name for each"),
}


@pytest.mark.parametrize(("labels", "more", "fault", "message"), FAULTS.values(), ids=FAULTS)
def test_what_cannot_be_measured_is_refused(labels, more, fault, message):
    with pytest.raises(fault, match=message):
        measure_images(image_of(labels), **more)


def test_planes_and_bodies_do_not_mix():
    plane = image_of(np.arange(1, 10).reshape(3, 3))
    body = image_of(np.arange(1, 28).reshape(3, 3, 3))
    with pytest.raises(ValidityError, match="planes or bodies alone"):
        measure_images([plane, body])
    with pytest.raises(ValidityError, match="at least one"):
        measure_images([])


def test_circles_apart_are_unfolded_into_spheres():
    # spheres of diameter 20 at 1 per 40^3: 20/40^3 circles per area, at random heights
    random = np.random.default_rng(11)
    side, diameter, spacing = 1200, 20.0, 40.0
    labels = np.zeros((side, side), np.uint32)
    y, x = np.ogrid[:side, :side]
    count = random.poisson(side**2 * diameter / spacing**3)
    for k in range(count):
        radius = np.sqrt(diameter**2 / 4 - random.uniform(-diameter / 2, diameter / 2) ** 2)
        cy, cx = random.uniform(0, side, 2)
        lo = [slice(max(int(c - 12), 0), int(c + 13)) for c in (cy, cx)]
        disc = (y[lo[0]] + 0.5 - cy) ** 2 + (x[:, lo[1]] + 0.5 - cx) ** 2 <= radius**2
        labels[tuple(lo)][disc] = k + 1
    image = LabelImage(labels=labels, frame=Frame(shape=labels.shape, pixel=1e-6))
    found = measure_images(image)
    spheres = found.spheres
    # circles hide others and some are smaller than a pixel: a tenth is allowed beside 4 errors
    expected = 1 / (spacing * 1e-6) ** 3
    error = float(np.sqrt((spheres.error**2).sum()))
    assert abs(spheres.number_density - expected) < 4 * error + 0.1 * expected
    assert spheres.per_volume.argmax() == len(spheres.per_volume) - 1
    shown = found.summary["spheres_if_this_is_a_section_through_them"]
    assert "ill-conditioned" in shown["warning"]


def test_a_full_picture_is_not_unfolded_into_spheres():
    labels = np.arange(1, 101, dtype=np.uint32).reshape(10, 10).repeat(12, 0).repeat(12, 1)
    image = LabelImage(labels=labels, frame=Frame(shape=labels.shape, pixel=1e-6, periodic=True))
    assert measure_images(image).spheres is None
