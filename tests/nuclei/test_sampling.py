from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from scipy import stats

from spheru.errors import CapacityError, UnknownNameError, ValidityError
from spheru.material.site_law import ExponentialSites
from spheru.nuclei.activation import Athermal
from spheru.nuclei.placement import Clustered, Faces, Uniform
from spheru.nuclei.region import Region
from spheru.nuclei.sampling import draw_births
from spheru.nuclei.source import Source
from spheru.nuclei.thinning import survivors
from spheru.thermal.clock import Clock
from spheru.thermal.history import History, Ramp
from tests.nuclei import reference

BOX = Region(low=(-1.0, 0.0, 2.0), high=(0.0, 2.0, 5.0), periodic=True)  # 6 m3
# rises evenly, rests, jumps at one grown length, rises again; times and lengths are uneven
CLOCK = reference.clock([0.0, 1.0, 3.0, 4.0, 6.0], grown_length=[0.0, 2.0, 3.0, 3.0, 7.0])
RISE = (0.0, 40.0, 40.0, 70.0, 100.0)


def source(numbers=RISE, name="given", placement=None):
    placement = Uniform() if placement is None else placement
    return Source(name=name, activation=reference.Given(numbers=numbers), placement=placement)


def draw(*sources, box=BOX, clock=CLOCK, **options):
    return draw_births(sources, clock, box, **{"seed": 5, "until": math.inf} | options)


def test_counts_are_poisson():
    counts = np.array([len(draw(source((0, 1, 2, 3, 4.0)), replica=k)) for k in range(600)])
    mean = 4.0 * 6.0
    assert counts.mean() == pytest.approx(mean, abs=4 * math.sqrt(mean / 600))
    # variance of the sample variance of a Poisson number: (mean + 2 mean^2) / n
    error = math.sqrt((mean + 2 * mean**2) / 600)
    assert counts.var(ddof=1) == pytest.approx(mean, abs=4 * error)


def test_births_follow_the_cumulative_number():
    births = draw(source(tuple(10.0 * n for n in RISE)))
    assert len(births) > 5000

    def share(time):
        return np.interp(time, CLOCK.time, RISE) / 100.0

    # false alarm in 1 of 1000 seeds
    assert stats.kstest(births.time, share).pvalue > 1e-3
    assert not ((births.time > 1.0) & (births.time < 3.0)).any()
    assert births.temperature == pytest.approx(400.0 - births.time)
    assert births.grown_length == pytest.approx(
        np.interp(births.time, CLOCK.time, CLOCK.grown_length)
    )
    jump = np.mean(births.grown_length == 3.0)  # 30 of 100 start while nothing grows
    assert jump == pytest.approx(0.3, abs=4 * math.sqrt(0.21 / len(births)))


def test_places_are_even_and_do_not_depend_on_time():
    births = draw(source(tuple(10.0 * n for n in RISE)))
    for axis in range(3):
        place = births.position[:, axis]
        uniform = stats.uniform(BOX.low[axis], BOX.extent[axis])
        assert stats.kstest(place, uniform.cdf).pvalue > 1e-3
        assert abs(stats.spearmanr(place, births.time).statistic) < 4 / math.sqrt(len(births))


def test_rows_are_ordered_by_grown_length_then_source():
    early = source((3.0, 3.0, 3.0, 3.0, 3.0), "early")
    births = draw(source(), early, source(name="same"))
    keys = list(zip(births.grown_length.tolist(), births.origin.tolist(), strict=True))
    assert sorted(keys) == keys
    assert births.origin_names == ("given", "early", "same")
    assert (births.grown_length[births.origin == 1] == 0.0).all()


def test_what_is_there_from_the_start_is_born_at_the_first_node():
    births = draw(source((20.0, 20.0, 30.0, 30.0, 30.0)))
    start = births.time == 0.0
    assert (births.temperature[start] == 400.0).all()
    assert (births.time[~start] > 1.0).all()
    assert start.sum() == pytest.approx(120, abs=4 * math.sqrt(120))


@pytest.mark.parametrize(
    ("until", "number"),
    [(0.0, 0.0), (1.0, 20.0), (2.5, 40.0), (3.0, 70.0), (5.0, 85.0), (7.0, 100.0), (9.0, 100.0)],
    ids=["start", "in a rise", "in a rest", "after a jump", "in the last", "end", "beyond"],
)
def test_nothing_is_drawn_after_until(until, number):
    births = draw(source(tuple(10.0 * n for n in RISE)), until=until)
    assert (births.grown_length <= until * (1 + 1e-12)).all()
    assert len(births) == pytest.approx(60 * number, abs=4 * math.sqrt(60 * number))


def test_a_source_more_changes_no_births_of_the_others():
    extras = [
        source((7.0, 9.0, 9.0, 9.0, 90.0), "more"),
        source(name="walls", placement=Faces(faces=(("z", "low"),))),
        source(name="clusters", placement=Clustered(mean_number=4.0, radius=0.1)),
    ]
    box = Region(low=(0, 0, 0), high=(1, 2, 3), closed=True)
    alone = draw(source(), box=box)
    together = draw(source(), *extras, box=box)
    kept = together.take(together.origin == 0)
    for column in ("position", "grown_length", "time", "temperature"):
        assert np.array_equal(getattr(kept, column), getattr(alone, column))
    assert set(together.origin.tolist()) == {0, 1, 2, 3}


def test_equal_sources_are_independent():
    births = draw(source(), source())
    first, second = births.take(births.origin == 0), births.take(births.origin == 1)
    assert not np.isin(first.position, second.position).any()
    assert not np.isin(first.time, second.time).any()


def test_the_same_seed_gives_the_same_bytes_and_others_do_not():
    sources = (source(), source(placement=Clustered(mean_number=3.0, radius=0.2)))
    one, same = draw(*sources), draw(*sources)
    for column in ("position", "grown_length", "time", "temperature", "origin"):
        assert getattr(one, column).tobytes() == getattr(same, column).tobytes()
    alive = [survivors(one, BOX, threads=k).tobytes() for k in (1, 2)]
    assert alive[0] == alive[1]
    for other in (draw(*sources, seed=6), draw(*sources, replica=1)):
        assert other.position.tobytes() != one.position.tobytes()


def test_a_plane_layer_counts_over_its_thickness():
    layer = Region(low=(0, 0), high=(2.0, 3.0), periodic=True, thickness=5.0)
    births = draw(source(), box=layer)
    assert births.dimension == 2
    assert len(births) == pytest.approx(3000, abs=4 * math.sqrt(3000))


def test_athermal_sites_start_at_their_own_undercooling():
    # cooling 410 -> 380 K, heating to 395 K, cooling to 370 K, all at 1 K/s; sites exp(dT / 5 K)
    turns = (410.0, 380.0, 395.0, 370.0)
    pairs = itertools.pairwise(turns)
    history = History(segments=tuple(Ramp(start=a, end=b, duration=abs(a - b)) for a, b in pairs))
    law = ExponentialSites(a=0.2, b=0.0, ceiling=1e9)
    activation = Athermal(law=law, t_m0=400.0)
    clock = Clock.from_history(
        history, lambda kelvins: np.full_like(kelvins, 1e-3), breakpoints=activation.temperatures()
    )
    births = draw(Source(name="sites", activation=activation), box=BOX, clock=clock)
    # exp(0.2 * 30) * 6 = 403.43 * 6 = 2420.6
    assert len(births) == pytest.approx(2420.6, abs=4 * math.sqrt(2420.6))
    undercooling = 400.0 - births.temperature
    expected = (np.exp(0.2 * undercooling) - 1) / (math.exp(6.0) - 1)
    assert stats.kstest(expected[undercooling > 1e-6], "uniform").pvalue > 1e-3
    warm = (births.time > 30.0) & (births.time < 60.0)  # up to 395 K and back to 380 K
    assert not warm.any()
    assert births.grown_length == pytest.approx(1e-3 * births.time, abs=1e-12)


@pytest.mark.parametrize(
    ("options", "error", "words"),
    [
        ({"until": -1.0}, ValidityError, "`until` of 0 m or above"),
        ({"until": math.nan}, ValidityError, "`until` of 0 m or above"),
        ({"sources": ()}, ValidityError, "1 to 256 sources, got 0"),
        ({"sources": (source(),) * 257}, ValidityError, "1 to 256 sources, got 257"),
        ({"sources": (source((0, 1, 2, 1, 3)),)}, ValidityError, "never falls"),
        ({"sources": (source((0, 1, 2, 3, math.inf)),)}, ValidityError, "finite number"),
        ({"sources": (source((-1.0, 1, 2, 3, 4)),)}, ValidityError, "'given'"),
        ({"sources": (source((0, 1, 2, 3, 1e12)),)}, CapacityError, "make the sample smaller"),
        (
            {"sources": (source(placement=Faces(faces=(("z", "low"),))),)},
            ValidityError,
            "z is periodic",
        ),
    ],
    ids=[
        "until < 0", "until nan", "no source", "too many", "falls", "inf", "negative", "labels",
        "face of a periodic axis",
    ],
)  # fmt: skip
def test_faults_are_named(options, error, words):
    options = dict(options)
    sources = options.pop("sources", (source(),))
    with pytest.raises(error, match=words):
        draw(*sources, **options)


def test_unknown_faces_are_answered_with_the_known_ones():
    with pytest.raises(UnknownNameError, match="Known: x, y, z"):
        Faces(faces=(("w", "low"),))
