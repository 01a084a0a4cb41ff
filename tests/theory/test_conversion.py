from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.errors import ValidityError
from spheru.theory.conversion import mean_field
from spheru.thermal.clock import Clock
from spheru.thermal.history import History, Hold, Quench, Ramp
from tests.theory import reference
from tests.thermal.reference import T_M0, growth, schneider, sites

END = 12.0
FIELD = mean_field([0.0, 2.0], [1.0, 1.0], dimension=2)


@pytest.mark.parametrize("dimension", [2, 3])
@pytest.mark.parametrize(
    ("start", "rate"),
    [(1.0, 0.0), (0.0, 1.0), (0.5, 2.0)],
    ids=["all-at-once", "constant-rate", "mixed"],
)
def test_finals_agree_with_adaptive_quadrature_even_on_two_nodes(dimension, start, rate):
    field = mean_field([0.0, END], [start, start + rate * END], dimension=dimension)
    wanted = reference.finals(END, start=start, birth=lambda _: rate, dimension=dimension)
    assert field.number_density == pytest.approx(wanted["number"], rel=1e-7)
    assert field.boundary_density == pytest.approx(wanted["boundary"], rel=1e-7)
    assert field.mean_arrival == pytest.approx(wanted["mean"], rel=1e-7)
    if dimension == 3:
        assert field.triple_line_density == pytest.approx(wanted["lines"], rel=1e-7)
        assert field.section_count == pytest.approx(wanted["lines"] / 4, rel=1e-7)
    else:
        assert field.triple_line_density is None
        assert field.section_count is None


@pytest.mark.parametrize("dimension", [2, 3])
def test_curved_births_converge_to_adaptive_quadrature(dimension):
    """Births that rise as exp(3 s): the density is then only nearly linear between nodes."""
    nodes = np.linspace(0, 3, 4001)
    field = mean_field(nodes, 0.1 * np.exp(3 * nodes), dimension=dimension)
    wanted = reference.finals(
        3.0, start=0.1, birth=lambda s: 0.3 * math.exp(3 * s), dimension=dimension
    )
    assert field.number_density == pytest.approx(wanted["number"], rel=1e-6)
    assert field.boundary_density == pytest.approx(wanted["boundary"], rel=1e-6)
    assert field.mean_arrival == pytest.approx(wanted["mean"], rel=1e-6)
    at = 2500
    case = {"start": 0.1, "birth": lambda s: 0.3 * math.exp(3 * s), "dimension": dimension}
    assert field.extended[at] == pytest.approx(reference.extended(nodes[at], **case), rel=1e-6)
    assert field.extended_slope[at] == pytest.approx(reference.slope(nodes[at], **case), rel=1e-6)


COOLINGS = {
    "10-K-per-min": History(segments=(Ramp.until(start=430.0, end=360.0, rate=10 / 60),)),
    "100-K-per-min": History(segments=(Ramp.until(start=430.0, end=320.0, rate=100 / 60),)),
    "quench": History(
        segments=(Quench(start=430.0, target=350.0, time_constant=60.0, duration=400.0),)
    ),
}


@pytest.mark.parametrize("name", COOLINGS)
def test_cooling_agrees_with_the_rate_equations(name):
    """Schneider, Koeppl and Berger's equations by an independent solver, to 1e-6."""
    history = COOLINGS[name]
    clock = Clock.from_history(history, growth, breakpoints=(T_M0,))
    field = mean_field(clock.grown_length, sites(clock.lowest_temperature), dimension=3)

    def temperature(t):
        segment = history.segments[0]
        if name == "quench":
            return segment.target + (segment.start - segment.target) * math.exp(-t / 60.0)
        return segment.start + (segment.end - segment.start) * t / segment.duration

    wanted = schneider(temperature, (0.0, history.duration))
    assert field.fraction_final == pytest.approx(1.0, abs=1e-12)
    assert field.number_density == pytest.approx(wanted["number"], rel=1e-6)
    assert field.boundary_density == pytest.approx(wanted["boundary"], rel=1e-6)
    assert field.triple_line_density == pytest.approx(wanted["lines"], rel=1e-6)
    assert field.average(clock.time) == pytest.approx(wanted["mean_time"], rel=1e-6)
    times = np.linspace(0, history.duration, 300)
    fraction = np.interp(times, clock.time, field.fraction)
    np.testing.assert_allclose(fraction, wanted["fraction"](times), atol=1e-6)
    half = clock.time_at(field.grown_length_at(0.5))
    assert wanted["fraction"](half) == pytest.approx(0.5, abs=1e-6)


def test_long_hold_is_resolved_in_a_few_passes():
    """10^6 s at constant temperature; everything happens in the first minute."""
    history = History(segments=(Hold(temperature=400.0, duration=1e6),))
    clock = Clock.from_history(history, lambda kelvins: np.full_like(kelvins, 1e-6))
    passes = 0
    while True:
        born = 1e13 * -np.expm1(-clock.time)  # sites that use themselves up within seconds
        field = mean_field(clock.grown_length, born, dimension=3)
        wanted = field.refinement(1e-3)
        if wanted.size == 0:
            break
        passes += 1
        assert passes < 8
        clock = clock.refined(clock.time_at(wanted))
    assert clock.time.size < 10_000
    assert np.diff(field.fraction).max() < 2e-3
    # in units of 10 um, which take 10 s: 1e13 m^-3 are 1e-2, used up at 10 per unit of length
    exact = reference.finals(
        8.0,
        start=0.0,
        birth=lambda s: 1e13 * 1e-15 * 10 * math.exp(-10 * s),
        dimension=3,
    )
    assert field.number_density == pytest.approx(exact["number"] * 1e15, rel=1e-6)
    assert field.boundary_density == pytest.approx(exact["boundary"] * 1e5, rel=1e-6)
    assert field.mean_arrival == pytest.approx(exact["mean"] * 1e-5, rel=1e-6)


def test_jump_of_density_counts_with_what_is_left():
    """A second burst of 5 nuclei at R = 0.5, D = 2: exp(-pi/4) of them survive."""
    field = mean_field([0.0, 0.5, 0.5, 9.0], [1.0, 1.0, 6.0, 6.0], dimension=2)
    assert field.number_density == pytest.approx(1 + 5 * math.exp(-math.pi / 4), rel=1e-12)
    assert field.survivors_to_come[:3].tolist() == pytest.approx(
        [5 * math.exp(-math.pi / 4), 5 * math.exp(-math.pi / 4), 0.0]
    )


def test_populations_add_up():
    nodes = np.linspace(0, 4, 801)
    seeds, sites_then = np.full(nodes.size, 0.3), 0.2 * nodes**2
    field = mean_field(nodes, seeds + sites_then, dimension=3)
    parts = field.shares(seeds), field.shares(sites_then)
    assert sum(parts) == pytest.approx(field.number_density, rel=1e-12)
    assert parts[0] == pytest.approx(0.3)
    alone = mean_field(nodes, seeds, dimension=3), mean_field(nodes, sites_then, dimension=3)
    np.testing.assert_allclose(
        alone[0].extended + alone[1].extended, field.extended, rtol=1e-12, atol=1e-14
    )


def test_history_that_ends_early_counts_what_is_there():
    field = mean_field([0.0, 0.3], [1.0, 1.0], dimension=3)
    assert field.fraction_final == pytest.approx(1 - math.exp(-4 * math.pi / 3 * 0.027))
    assert field.boundary_density < 0.1 * mean_field([0, 9], [1, 1], dimension=3).boundary_density
    assert np.isinf(field.grown_length_at(0.5))
    assert math.isfinite(field.mean_arrival)
    assert field.survivors_to_come[-1] == 0


def test_nothing_born_leaves_nothing():
    field = mean_field([0.0, 1.0, 1.0], [0.0, 0.0, 0.0], dimension=3)
    assert field.fraction_final == field.number_density == field.boundary_density == 0
    assert math.isnan(field.mean_arrival)
    assert field.refinement().size == 0


def test_refinement_ends_at_a_jump():
    nodes = np.array([0.0, 0.3, 0.3 * (1 + 1e-9), 5.0])
    density = np.array([1.0, 1.0, 9.0, 9.0])
    for _ in range(5):
        field = mean_field(nodes, density, dimension=3)
        new = field.refinement(1e-2)
        assert not np.any((new > nodes[1]) & (new < 0.3 * (1 + 1e-9)))
        if new.size == 0:
            break
        merged = np.union1d(nodes, new)
        nodes, density = merged, np.interp(merged, nodes, density)
    assert new.size == 0


@pytest.mark.parametrize(
    ("call", "said"),
    [
        pytest.param(lambda: mean_field([0, 1], [1, 1], dimension=1), "2 or 3", id="dimension"),
        pytest.param(lambda: mean_field([0, 1], [1], dimension=2), "as many", id="shapes"),
        pytest.param(lambda: FIELD.average([1.0]), "expected 2 values", id="average"),
        pytest.param(lambda: FIELD.shares([1.0]), "expected 2 densities", id="shares"),
        pytest.param(lambda: FIELD.grown_length_at(1.0), "< 1", id="fraction"),
        pytest.param(lambda: FIELD.refinement(0.0), "above 0", id="tolerance"),
    ],
)
def test_faults_are_named(call, said):
    with pytest.raises(ValidityError, match=said):
        call()


def test_front_density_while_growing():
    """Fronts of nuclei that start together: 4 pi R^2 exp(-4 pi R^3/3) per volume."""
    radius = np.linspace(0.0, 1.5, 31)
    field = mean_field(radius, np.ones(31), dimension=3)
    wanted = 4 * np.pi * radius**2 * np.exp(-4 * np.pi / 3 * radius**3)
    np.testing.assert_allclose((1 - field.fraction) * field.extended_slope, wanted, atol=1e-12)
