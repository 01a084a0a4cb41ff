from __future__ import annotations

import math
from functools import partial

import numpy as np
import pytest
from scipy import stats
from scipy.spatial import cKDTree

from spheru.errors import CapacityError, UnknownNameError, ValidityError
from spheru.nuclei.placement import Clustered, Faces, Uniform
from spheru.nuclei.region import Region
from spheru.streams import stream

CUBE = Region(low=(0, 0, 0), high=(1, 1, 1), periodic=True)


def draw(placement, region, number, *, started=None, seed=3):
    started = number if started is None else started
    return placement.draw(started, number, region, partial(stream, seed))


def test_faces_lie_on_the_faces_by_their_area():
    box = Region(low=(1, 0, 0), high=(3, 3, 5), closed=True)
    position = draw(Faces(faces=(("z", "low"), ("z", "high"), ("x", "high"))), box, 200.0)
    low, high, side = position[:, 0] == 1.0, position[:, 0] == 3.0, position[:, 2] == 5.0
    assert (low.astype(int) + high + side == 1).all()
    # areas 3 * 5 (twice) and 2 * 3
    for on, area in ((low, 15.0), (high, 15.0), (side, 6.0)):
        assert on.sum() == pytest.approx(200 * area, abs=4 * math.sqrt(200 * area))
    assert box.holds(position).all()
    assert stats.kstest(position[low, 1] / 3.0, "uniform").pvalue > 1e-3


def test_faces_come_in_random_order():
    box = Region(low=(0, 0, 0), high=(1, 1, 1), closed=True)
    position = draw(Faces(faces=(("z", "low"), ("z", "high"))), box, 1000.0)
    first = position[: len(position) // 2, 0]
    assert first.mean() == pytest.approx(0.5, abs=4 * 0.5 / math.sqrt(len(first)))


def test_a_face_of_a_plane_layer_is_its_edge():
    layer = Region(low=(0, 0), high=(1, 2), closed=True, thickness=3.0)
    position = draw(Faces(faces=(("x", "low"),)), layer, 500.0)
    assert (position[:, 1] == 0.0).all()
    assert len(position) == pytest.approx(1500, abs=4 * math.sqrt(1500))
    with pytest.raises(ValidityError, match="z is not an axis of a plane"):
        draw(Faces(faces=(("z", "low"),)), layer, 500.0)


@pytest.mark.parametrize("dimension", [2, 3])
def test_clusters_have_the_mean_number_and_radius_asked_for(dimension):
    # so few and small that clusters do not overlap: they fall apart by distance
    box = Region(low=(0,) * dimension, high=(1,) * dimension, periodic=True)
    radius = 2e-4
    position = draw(Clustered(mean_number=8.0, radius=radius), box, 8 * 400.0)
    groups = _groups(position, 2 * radius)
    sizes = np.array([len(group) for group in groups])
    # a cluster of 0 nuclei is not seen: mean 8 / (1 - exp(-8)), variance about 8
    assert sizes.mean() == pytest.approx(8 / -math.expm1(-8), abs=4 * math.sqrt(8 / len(sizes)))
    assert len(sizes) == pytest.approx(400, abs=4 * 20)
    # even over a ball: two independent points are sqrt(2 D / (D + 2)) R apart in the mean square
    squares = [
        ((group[0::2][: len(group) // 2] - group[1::2]) ** 2).sum(axis=1) for group in groups
    ]
    apart = np.concatenate(squares) / radius**2
    error = apart.std() / math.sqrt(len(apart))
    assert apart.mean() == pytest.approx(2 * dimension / (dimension + 2), abs=4 * error)
    assert apart.max() <= 4.0


def _groups(position, reach):
    """Group points that a chain of steps below `reach` joins; leave out those at an edge."""
    seen = np.zeros(len(position), dtype=bool)
    groups = []
    near = cKDTree(position).query_ball_point(position, reach)
    for i in range(len(position)):
        if not seen[i]:
            members = np.array(near[i])
            seen[members] = True
            inside = (position[members] > reach).all() and (position[members] < 1 - reach).all()
            if inside:
                groups.append(position[members])
    return groups


def test_clusters_scatter_more_than_single_nuclei():
    counts = [
        len(draw(Clustered(mean_number=5.0, radius=0.1), CUBE, 100.0, seed=k)) for k in range(600)
    ]
    # compound Poisson: variance = mean (1 + mean number of a cluster)
    assert np.mean(counts) == pytest.approx(100, abs=4 * math.sqrt(600 / 600))
    assert np.var(counts) == pytest.approx(600, rel=4 * math.sqrt(2.2 / 600))


def test_part_of_a_cluster_has_started_earlier():
    clusters = Clustered(mean_number=40.0, radius=1e-3)
    late = draw(clusters, CUBE, 40 * 30.0)
    early = draw(clusters, CUBE, 40 * 30.0, started=4 * 30.0)
    assert len(early) == pytest.approx(120, abs=4 * math.sqrt(120 * 5))
    # the clusters are the same ones
    distance, _ = cKDTree(late, boxsize=1.0).query(early)
    assert distance.max() < 2e-3


EDGES = {
    "periodic": {"periodic": True},
    "closed": {"closed": True},
    "cut": {},
    "mixed": {"periodic": (True, False), "closed": (False, True)},
}


@pytest.mark.parametrize("edges", EDGES.values(), ids=EDGES.keys())
@pytest.mark.parametrize("radius", [0.15, 1.3], ids=["small", "wider than the region"])
def test_clusters_are_as_dense_near_an_edge_as_elsewhere(edges, radius):
    box = Region(low=(0, 0), high=(1, 1), **edges)
    clusters = Clustered(mean_number=3.0, radius=radius)
    parts = [draw(clusters, box, 300.0, seed=k) for k in range(80)]
    assert all(box.holds(position).all() for position in parts)
    for axis in (0, 1):
        counts = np.array([np.histogram(p[:, axis], 8, (0, 1))[0] for p in parts])
        error = counts.std(axis=0, ddof=1) / math.sqrt(80)
        assert (np.abs(counts.mean(axis=0) - 300 / 8) < 4 * error).all()


def test_members_of_a_cluster_do_not_stand_together_in_the_rows():
    position = draw(Clustered(mean_number=50.0, radius=1e-3), CUBE, 50 * 20.0)
    steps = np.linalg.norm(np.diff(position, axis=0), axis=1)
    assert np.mean(steps < 2e-3) < 0.15  # about 1 in 20 by chance; nearly all if unshuffled


@pytest.mark.parametrize(
    "placement",
    [Uniform(), Clustered(mean_number=2.0, radius=0.1), Faces(faces=(("z", "low"),))],
    ids=["uniform", "clustered", "faces"],
)
def test_nothing_comes_of_nothing(placement):
    box = Region(low=(0, 0, 0), high=(1, 1, 1), closed=True)
    assert draw(placement, box, 0.0).shape == (0, 3)


def test_bad_placements_are_refused():
    with pytest.raises(ValidityError, match="mean number above 0"):
        Clustered(mean_number=0.0, radius=1.0)
    with pytest.raises(ValidityError, match="radius above 0 m"):
        Clustered(mean_number=1.0, radius=math.inf)
    with pytest.raises(ValidityError, match="different faces"):
        Faces(faces=(("z", "low"), ("z", "low")))
    with pytest.raises(UnknownNameError, match="did you mean 'high'"):
        Faces(faces=(("z", "hihg"),))
    with pytest.raises(CapacityError, match="look at a section"):
        draw(Clustered(mean_number=1.0, radius=0.1), CUBE, 1e12)
