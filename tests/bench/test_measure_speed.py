"""CPU time and memory of measuring 8192 x 8192 pixels with 1e5 grains, against scikit-image.

Run with ``python -m pytest tests/bench -m bench -s``. It fails on a wrong number, never on a time.
"""

from __future__ import annotations

import resource
import sys
import time

import numpy as np
import pytest
from skimage.measure import regionprops_table

from spheru.births import Births
from spheru.growth.exact import tessellate
from spheru.image.frame import Frame
from spheru.image.label_image import LabelImage
from spheru.measure.labels import sum_labels
from spheru.measure.shapes import measure_shapes
from spheru.measure.sizes import sizes_of_sums
from spheru.run.measure import measure_images

pytestmark = pytest.mark.bench

SIDE, GRAINS, PART = 8192, 100_000, 2048

say = sys.stdout.write


def map_of(side, grains):
    rng = np.random.default_rng(0)
    births = Births(position=rng.random((grains, 2)) * side, grown_length=np.zeros(grains))
    labels = tessellate(births, Frame(shape=(side, side), pixel=1.0)).labels
    return LabelImage(labels=np.array(labels), frame=Frame(shape=(side, side), pixel=1.0))


def cpu(work):
    start = time.process_time()
    result = work()
    return time.process_time() - start, result


def sizes_and_shapes(image):
    sums = sum_labels(image)
    return sizes_of_sums(image, sums, edges="none"), measure_shapes(image, sums)


def test_a_large_map_is_measured_in_seconds_within_four_times_its_memory():
    measure_images(map_of(256, 100))  # to compile
    image = map_of(SIDE, GRAINS)
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    seconds, found = cpu(lambda: measure_images(image))
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    say(
        f"\nmeasure, {SIDE}^2, {len(found.sizes)} grains: {seconds:.2f} s CPU (aim 4); peak of the "
        f"process {peak * 1024 / image.labels.nbytes:.2f} times the image, growth of the map "
        f"included; before {before * 1024 / image.labels.nbytes:.2f}\n"
    )
    assert found.sizes.pixels.sum() == SIDE**2


def test_sizes_and_shapes_against_scikit_image():
    image = map_of(PART, GRAINS * PART**2 // SIDE**2)
    sizes_and_shapes(image)
    ours, (sizes, shapes) = cpu(lambda: sizes_and_shapes(image))
    names = ("area", "equivalent_diameter_area", "centroid", "bbox", "perimeter_crofton",
             "axis_major_length", "axis_minor_length")  # fmt: skip
    theirs, table = cpu(lambda: regionprops_table(np.asarray(image.labels), properties=names))
    say(f"\nsizes and shapes, {PART}^2: {ours:.3f} s against {theirs:.2f} s of scikit-image, "
        f"{theirs / ours:.0f} times (aim 5)\n")  # fmt: skip
    assert sizes.pixels == pytest.approx(table["area"])
    whole = (~sizes.touches_edge) & (sizes.pixels > 400)
    aspect = table["axis_major_length"][whole] / table["axis_minor_length"][whole]
    assert shapes.aspect[whole] == pytest.approx(aspect, rel=0.02)  # it counts pixels as points
    ratio = shapes.boundary[whole] / table["perimeter_crofton"][whole]
    assert ratio.mean() == pytest.approx(1.0, abs=0.02)
