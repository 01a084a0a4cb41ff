import math
import pickle
from dataclasses import replace

import numpy as np
import pytest

from spheru.errors import UnknownNameError, ValidityError
from spheru.material.growth_law import Branch, LauritzenHoffmanGrowth
from spheru.material.record import REFERENCE_PRESSURE, MaterialRecord, Provenance
from spheru.material.site_law import ExponentialSites

RECORD = MaterialRecord(
    name="test",
    title="Test polymer",
    t_m0=483.15,
    t_g=269.15,
    t_m_observed=438.15,
    growth=LauritzenHoffmanGrowth(
        branches=(Branch(g0=283.0, kg=5.5e5),),
        u_star=6270.0,
        t_inf=239.15,
        t_m0=483.15,
        driving_force_factor=False,
    ),
    sites=ExponentialSites(a=0.156, b=15.1, ceiling=1e16),
    site_includes=frozenset({"induction"}),
    density_crystal=936.0,
    density_amorphous=855.0,
    density_melt=765.0,
    heat_of_fusion=2.07e5,
    crystallinity=0.55,
    growth_factor=1.3,
    site_factor=3.0,
    tm0_per_pressure=0.275e-6,
    tg_per_pressure=0.2e-6,
    provenance={"growth.law": Provenance(value="x", mark="memory", source="y")},
)


def test_pressure_moves_melting_glass_and_the_end_of_transport():
    pressed = RECORD.at_pressure(40e6 + REFERENCE_PRESSURE)  # + 11 K and + 8 K
    assert pressed.t_m0 == pytest.approx(494.15)
    assert pressed.t_m_observed == pytest.approx(449.15)
    assert pressed.t_g == pytest.approx(277.15)
    assert pressed.growth.window() == pytest.approx((247.15, 494.15))
    assert float(pressed.undercooling(400.0)) == pytest.approx(94.15)
    assert pressed.sites == RECORD.sites


def test_pressure_makes_crystals_grow_faster_at_a_hold_near_melting():
    assert float(RECORD.at_pressure(50e6).growth.rate(413.15)) > 3 * float(
        RECORD.growth.rate(413.15)
    )


@pytest.mark.parametrize("pressure", [REFERENCE_PRESSURE, 101325.0, 98e3])
def test_weather_moves_nothing(pressure):
    assert RECORD.at_pressure(pressure) is RECORD


def test_record_without_shifts_refuses_a_pressure_but_not_the_atmosphere():
    plain = replace(RECORD, tm0_per_pressure=None)
    assert plain.at_pressure(REFERENCE_PRESSURE) is plain
    with pytest.raises(ValidityError, match="K/MPa"):
        plain.at_pressure(1e7)


@pytest.mark.parametrize("pressure", [0.0, -1e5, math.nan, 1.01e8])
def test_impossible_or_too_high_pressures_are_refused(pressure):
    with pytest.raises(ValidityError, match="pressure"):
        RECORD.at_pressure(pressure)


def test_record_travels_to_another_process():
    assert pickle.loads(pickle.dumps(RECORD)) == RECORD  # noqa: S301 (our own bytes)
    assert isinstance(hash(RECORD), int)


def test_undercooling_is_negative_in_the_melt():
    assert np.sign(RECORD.undercooling([500.0, 483.15, 400.0])).tolist() == [-1.0, 0.0, 1.0]
    assert RECORD.heat_of_fusion_volume == pytest.approx(2.07e5 * 936.0)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"t_m_observed": 490.0}, "observed melting <= equilibrium"),
        ({"t_g": 440.0}, "glass transition < observed"),
        ({"t_m0": 480.0}, "growth law with the record's"),
        ({"density_melt": 0.0}, "density_melt"),
        ({"heat_of_fusion": math.nan}, "heat_of_fusion"),
        ({"crystallinity": 1.1}, "crystallinity"),
        ({"crystallinity": 0.0}, "crystallinity"),
        ({"birefringence": 1.0}, "birefringence"),
        ({"growth_factor": 0.9}, "growth_factor"),
        ({"site_decades": (13.0, 11.0)}, "decades"),
        ({"tm0_per_pressure": -1e-7}, "tm0_per_pressure"),
        ({"fold_surface_energy": math.inf}, "fold_surface_energy"),
    ],
    ids=str,
)
def test_contradictory_records_are_refused(change, message):
    with pytest.raises(ValidityError, match=f"record test: .*{message}"):
        replace(RECORD, **change)


def test_unknown_effect_is_answered_with_the_known_ones():
    with pytest.raises(UnknownNameError, match="melt memory"):
        replace(RECORD, site_includes=frozenset({"melt"}))
