"""The tables of a run."""

from __future__ import annotations

import csv
import io
import math

import numpy as np
import pytest

from spheru.births import Births
from spheru.image.frame import Frame
from spheru.image.label_image import LabelImage
from spheru.measure.sizes import measure_sizes
from spheru.output.tables import conversion_table, size_table, spherulite_table
from tests.output.reference import conversion_curves, voronoi_map


def rows_of(text):
    return list(csv.DictReader(io.StringIO(text)))


def test_spherulite_row_by_hand():
    # 2 x 4 pixels of 2 um: label 1 owns nothing, label 2 six pixels, label 3 two
    labels = np.array([[2, 2, 2, 3], [2, 2, 2, 3]])
    births = Births(
        position=np.array([[0, 1, 1], [5.0, 2.0, 3.0], [-4, 2, 7]]) * 1e-6,
        grown_length=[0, 1e-6, 2e-6],
        time=[1.0, 2.5, 4.0],
        temperature=[400.0, 393.15, 390.0],
        origin=[0, 1, 0],
        origin_names=("material", "agent"),
    )
    frame = Frame(shape=(2, 4), pixel=2e-6, closed=True, plane_z=0.0)
    sizes = measure_sizes(LabelImage(labels=labels, frame=frame))
    first, second = rows_of(spherulite_table(sizes, births))
    assert first == {
        "label": "2",
        "nucleus_x_um": "3",
        "nucleus_y_um": "2",
        "nucleus_z_um": "5",
        "birth_time_s": "2.5",
        "birth_temperature_C": "120",
        "origin": "agent",
        "form": "",
        "area_um2": "24",  # 6 pixels of 4 um2
        "diameter_um": f"{math.sqrt(4 * 24 / math.pi):.9g}",
        "centre_x_um": "3",
        "centre_y_um": "2",
        "touches_edge": "no",
        "pixels": "6",
        "weight_per_mm2": "31250",  # one of a frame of 8 x 4 um
    }
    assert (second["label"], second["origin"], second["area_um2"]) == ("3", "material", "8")
    assert second["nucleus_z_um"] == "-4"


def test_a_volume_has_volumes_and_three_axes():
    image = voronoi_map((6, 7, 8), 5, periodic=True)
    rows = rows_of(spherulite_table(measure_sizes(image), image.births))
    assert sum(float(row["volume_um3"]) for row in rows) == pytest.approx(6 * 7 * 8)
    assert "area_um2" not in rows[0]
    position = image.births.position[int(rows[0]["label"]) - 1]
    found = [float(rows[0][f"nucleus_{axis}_um"]) for axis in "zyx"]
    assert found == pytest.approx(position * 1e6)
    assert float(rows[0]["centre_z_um"]) < 6


def test_a_picture_without_births_leaves_the_nuclei_empty():
    image = voronoi_map((20, 20), 5)
    rows = rows_of(spherulite_table(measure_sizes(image), None))
    assert {row["nucleus_x_um"] + row["birth_time_s"] + row["origin"] for row in rows} == {""}


def test_growth_in_a_plane_leaves_the_height_empty():
    image = voronoi_map((20, 20), 5)
    rows = rows_of(spherulite_table(measure_sizes(image), image.births))
    assert {row["nucleus_z_um"] for row in rows} == {""}
    assert all(row["nucleus_y_um"] for row in rows)


def test_conversion_in_the_units_of_its_columns():
    curves = conversion_curves()
    rows = rows_of(conversion_table(curves))
    assert list(rows[0]) == [
        "time_s",
        "temperature_C",
        "fraction_simulated",
        "fraction_mean_field",
        "heat_flow_W_per_g",
        "heat_flow_mean_field_W_per_g",
    ]
    assert len(rows) == curves.time.size
    assert float(rows[0]["temperature_C"]) == pytest.approx(150.0)
    middle = rows[150]
    assert float(middle["heat_flow_W_per_g"]) * 1000 == pytest.approx(curves.heat_flow[150])


@pytest.mark.parametrize(
    ("shape", "kind"), [((150, 150), "area"), ((20, 20, 20), "volume")], ids=["2D", "3D"]
)
def test_shares_of_the_classes(shape, kind):
    sizes = measure_sizes(voronoi_map(shape, 80, periodic=True))
    rows = rows_of(size_table(sizes))
    assert list(rows[0]) == [
        "diameter_from_um",
        "diameter_to_um",
        "spherulites",
        "number_share",
        "number_share_cumulative",
        f"{kind}_share",
        f"{kind}_share_cumulative",
    ]
    for name in ("number_share", f"{kind}_share"):
        shares = np.array([float(row[name]) for row in rows])
        sums = np.array([float(row[f"{name}_cumulative"]) for row in rows])
        np.testing.assert_allclose(sums, np.cumsum(shares), atol=1e-8)
        assert sums[-1] == pytest.approx(1)
    assert sum(int(row["spherulites"]) for row in rows) == sizes.count
    low, high = float(rows[3]["diameter_from_um"]) * 1e-6, float(rows[3]["diameter_to_um"]) * 1e-6
    inside = (sizes.diameter >= low) & (sizes.diameter < high)
    assert float(rows[3]["number_share"]) == pytest.approx(inside.mean())
    assert float(rows[3][f"{kind}_share"]) == pytest.approx(
        sizes.size[inside].sum() / sizes.size.sum()
    )


def test_without_a_spherulite_that_counts_only_the_header_is_left():
    image = LabelImage(labels=np.ones((5, 5), int), frame=Frame(shape=(5, 5), pixel=1e-6))
    sizes = measure_sizes(image)  # the only spherulite touches cut edges
    assert sizes.count == 0
    assert size_table(sizes).count("\n") == 1
