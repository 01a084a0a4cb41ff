"""The table of grain-size numbers, and what built it.

Rows of ASTM E112 from memory, each reproduced from N_A = 2^(G-1)/0.064516 mm-2, d = N_A^-1/2,
l = 0.32 * 2^(-G/2) mm; G = 12 with d = 0.0056 mm seen on exam-answer pages. ISO 643:
m = 8 * 2^G per mm2 (memory)."""

from __future__ import annotations

import math

import pytest

from spheru.measure.grain_number import (
    count_from_number,
    grain_size_row,
    intercept_from_number,
    number_from_count,
    number_from_intercept,
)

ROWS = [  # G, N_A [mm-2], mean area [mm2], d [um], l [um], N_L [mm-1]
    (-1, 3.88, 0.2581, 508.0, 452.5, 2.21),
    (0, 7.75, 0.1290, 359.2, 320.0, 3.12),
    (1, 15.50, 0.0645, 254.0, 226.3, 4.42),
    (2, 31.00, 0.0323, 179.6, 160.0, 6.25),
    (3, 62.00, 0.0161, 127.0, 113.1, 8.84),
    (4, 124.0, 0.00806, 89.8, 80.0, 12.5),
    (6, 496.0, 0.00202, 44.9, 40.0, 25.0),
    (7, 992.0, 0.00101, 31.8, 28.3, 35.36),
    (8, 1984.0, 0.00050, 22.5, 20.0, 50.0),
    (9, 3968.0, 0.00025, 15.9, 14.1, 70.7),
    (10, 7936.0, 0.00013, 11.2, 10.0, 100.0),
    (12, 31744.0, 3.2e-5, 5.6, 5.0, 200.0),
    (14, 126976.0, 8e-6, 2.8, 2.5, 400.0),
]


@pytest.mark.parametrize("row", ROWS, ids=[f"G{row[0]}" for row in ROWS])
def test_rows_of_the_table(row):
    number, per_area, mean_area, diameter, intercept, per_length = row
    found = grain_size_row(number)
    # each within half a unit of its last printed digit, N_A within its three digits
    assert found.per_area * 1e-6 == pytest.approx(per_area, rel=1.5e-3)
    digits = 4 if mean_area > 0.01 else 5 if mean_area > 1e-4 else 6
    assert found.mean_area * 1e6 == pytest.approx(mean_area, abs=0.51 * 10**-digits)
    assert found.diameter * 1e6 == pytest.approx(diameter, abs=0.051)
    assert found.mean_intercept * 1e6 == pytest.approx(intercept, abs=0.051)
    assert found.intercepts_per_length * 1e-3 == pytest.approx(per_length, rel=2e-3)


@pytest.mark.parametrize("row", ROWS, ids=[f"G{row[0]}" for row in ROWS])
def test_printed_counts_and_intercepts_give_their_number_back(row):
    number, per_area, _, _, intercept, _ = row
    assert number_from_count(per_area * 1e6) == pytest.approx(number, abs=2e-3)
    assert number_from_intercept(intercept * 1e-6) == pytest.approx(number, abs=1.5e-2)


@pytest.mark.parametrize("millimetres", [0.002, 0.02, 0.32, 0.4525])
def test_the_printed_formula_for_intercepts(millimetres):
    printed = -6.643856 * math.log10(millimetres) - 3.288
    assert number_from_intercept(millimetres * 1e-3) == pytest.approx(printed, abs=4e-4)


@pytest.mark.parametrize("per_mm2", [3.88, 100.0, 126976.0])
def test_the_printed_formula_for_counts(per_mm2):
    printed = 3.321928 * math.log10(per_mm2) - 2.954
    assert number_from_count(per_mm2 * 1e6) == pytest.approx(printed, abs=3e-4)


def test_the_table_has_a_ratio_of_intercept_to_diameter_built_in():
    for number in (-1.0, 5.0, 14.0):
        row = grain_size_row(number)
        assert row.mean_intercept / row.diameter == pytest.approx(0.890842, abs=2e-6)


def test_definition_per_square_inch_at_100_times():
    square_inch_at_100 = (25.4e-3 / 100) ** 2
    for number in (1, 2, 8):
        assert count_from_number(number) * square_inch_at_100 == pytest.approx(2 ** (number - 1))


@pytest.mark.parametrize("number", [-7, 0, 1, 8, 17])
def test_iso_counts_eight_times_a_power_of_two_per_mm2(number):
    assert count_from_number(number, scale="iso-643") == pytest.approx(8e6 * 2.0**number)
    difference = number_from_count(1e9) - number_from_count(1e9, scale="iso-643")
    assert difference == pytest.approx(math.log2(8 * 0.064516 * 2), abs=1e-9)


def test_a_wrong_formula_of_a_teaching_page_is_not_ours():
    # that page has -6.754 log10 l + 3.036 with l in mm: far from the table's row G = 8
    wrong = -6.754 * math.log10(0.02) + 3.036
    assert abs(number_from_intercept(20e-6) - 8) < 1e-9
    assert abs(wrong - 8) > 5


def test_both_numbers_of_voronoi_cells_differ_by_their_ratio():
    # l = pi/4 of N_A^(-1/2) instead of 0.890842: 2 log2(0.890842/0.785398) = 0.3635 finer
    number = number_from_intercept(math.pi / 4 * 1e-5) - number_from_count(1e10)
    assert number == pytest.approx(0.3635, abs=1e-4)
    assert intercept_from_number(number_from_intercept(3e-5)) == pytest.approx(3e-5)
