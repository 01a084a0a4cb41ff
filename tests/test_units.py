from __future__ import annotations

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from spheru.errors import UnitError
from spheru.units import describe, format_si, from_si, to_si, unit_of

# text, SI unit, value worked by hand
VALUES = [
    pytest.param("10 K/min", "K/s", 10 / 60, id="rate"),
    pytest.param("-10 K/min", "K/s", -10 / 60, id="heating"),
    pytest.param("130 degC", "K", 403.15, id="celsius"),
    pytest.param("130 °C", "K", 403.15, id="degree-sign"),
    pytest.param("130 ℃", "K", 403.15, id="celsius-sign"),
    pytest.param("−20 degC", "K", 253.15, id="unicode-minus"),
    pytest.param("68 degF", "K", 293.15, id="fahrenheit"),
    pytest.param("10 degC/min", "K/s", 10 / 60, id="degree-in-a-compound-is-a-difference"),
    pytest.param("0.3 °C/MPa", "K/Pa", 3e-7, id="shift"),
    pytest.param("5 um", "m", 5e-6, id="micrometre"),
    pytest.param("5um", "m", 5e-6, id="no-blank"),
    pytest.param("5 µm", "m", 5e-6, id="micro-sign"),
    pytest.param("5 μm", "m", 5e-6, id="greek-mu"),
    pytest.param("5\u00a0um", "m", 5e-6, id="no-break-space"),
    pytest.param("5 micron", "m", 5e-6, id="micron"),
    pytest.param("2 mil", "m", 5.08e-5, id="mil-is-a-thousandth-of-an-inch"),
    pytest.param("1.5e12 1/m^3", "1/m^3", 1.5e12, id="per-volume"),
    pytest.param("1e12 /m^3", "1/m^3", 1e12, id="leading-slash"),
    pytest.param("1e12 m^-3", "1/m^3", 1e12, id="negative-power"),
    pytest.param("1e12 m^(-3)", "1/m^3", 1e12, id="bracketed-power"),
    pytest.param("1e12 m⁻³", "1/m^3", 1e12, id="raised-power"),
    pytest.param("3 1/mm³", "1/m^3", 3e9, id="raised-below-the-line"),
    pytest.param("1 1/(m^3 s)", "1/(m^3 s)", 1.0, id="brackets"),
    pytest.param("1 m⁻³·s⁻¹", "1/(m^3 s)", 1.0, id="middle-dot"),
    pytest.param("500 ppm", "1", 5e-4, id="ppm"),
    pytest.param("0.5 wt%", "1", 5e-3, id="weight-percent"),
    pytest.param("5 %", "1", 0.05, id="percent"),
    pytest.param("0.1 phr", "1", 1e-3, id="phr-is-no-picohour"),
    pytest.param("2 mg/kg", "1", 2e-6, id="ratio"),
    pytest.param("0.905 g/cm3", "kg/m^3", 905.0, id="density"),
    pytest.param("10 MPa", "Pa", 1e7, id="pressure"),
    pytest.param("300 kg/mol", "kg/mol", 300.0, id="molar-mass"),
    pytest.param("1 kcal/mol", "J/mol", 4184.0, id="calorie"),
    pytest.param("1 erg/cm^2", "J/m^2", 1e-3, id="erg"),
    pytest.param("180 deg", "rad", math.pi, id="angle"),
    pytest.param("3 lb/ft^3", "kg/m^3", 3 * 0.45359237 / 0.3048**3, id="rare-unit-from-pint"),
]

# text, SI unit, part of the message
FAULTS = [
    pytest.param(
        "10 C", "K/s", "expected a rate like '10 K/min', got '10 C'", id="coulomb-is-no-rate"
    ),
    pytest.param("10 C", "K", "did you mean degC?", id="coulomb-is-no-temperature"),
    pytest.param("25 celsius", "K", "did you mean degC?", id="scale-under-another-name"),
    pytest.param("10", "K/s", "a number needs its unit", id="bare-number"),
    pytest.param("1,5 K/min", "K/s", "write a decimal point, not a comma", id="decimal-comma"),
    pytest.param("10 K", "K/s", "expected a rate like '10 K/min', got '10 K'", id="dimension"),
    pytest.param("3 deg", "1", "expected a share", id="angle-is-no-share"),
    pytest.param("6270 J/mol K", "J/(mol K)", "ambiguous, bracket", id="ambiguous-product"),
    pytest.param("6 W/m^2·K", "W/(m^2 K)", "ambiguous, bracket", id="ambiguous-dot"),
    pytest.param("-300 degC", "K", "below absolute zero", id="absolute-zero"),
    pytest.param("1e999 um", "m", "too large", id="overflow"),
    pytest.param("nan um", "m", "expected a length", id="nan"),
    pytest.param("um", "m", "expected a length", id="no-number"),
    pytest.param("", "m", "expected a length", id="empty"),
    pytest.param("1_000 um", "m", "no unit", id="underscore"),
    pytest.param("1 000 um", "m", "no unit", id="thousands-blank"),
    pytest.param("5 furlog", "m", "'furlog' is no known unit", id="unknown"),
    pytest.param("5 kdegC", "K", "no known unit", id="prefix-on-a-scale"),
    pytest.param("1 degree_Celsius", "K", "no unit", id="name-of-the-library"),
    pytest.param("5 True", "1", "no unit", id="word-of-the-language"),
    pytest.param("1 m(", "m", "no unit", id="open-bracket"),
    pytest.param(f"1 {'(' * 300}m{')' * 300}", "m", "no unit", id="deep-brackets"),
]


@pytest.mark.parametrize(("text", "unit", "value"), VALUES)
def test_text_becomes_its_si_value(text, unit, value):
    assert to_si(text, unit) == pytest.approx(value, rel=1e-15)


@pytest.mark.parametrize(("text", "unit", "message"), FAULTS)
def test_fault_says_what_was_expected(text, unit, message):
    with pytest.raises(UnitError) as fault:
        to_si(text, unit)
    assert message in str(fault.value)
    assert "\n" not in str(fault.value)


def test_difference_of_temperature_is_given_in_kelvin():
    assert to_si("20 K", "K", difference=True) == 20.0
    with pytest.raises(UnitError, match="write the difference in K"):
        to_si("20 degC", "K", difference=True)


def test_number_of_a_file_is_refused_with_advice():
    with pytest.raises(UnitError, match=r"expected a rate like '10 K/min', got 10; .* in quotes"):
        to_si(10, "K/s")


def test_conversion_rounds_only_once():
    # 0.1 um written as a decimal is the double nearest to 1e-7, not 0.1 * 1e-6
    assert to_si("0.1 um", "m") == 1e-7
    assert to_si("205 degC", "K") == 478.15


def _number_or_message(text, unit):
    """Return the message of a fault; the like of one where there was none."""
    try:
        value = to_si(text, unit)
    except UnitError as fault:
        return str(fault)
    assert math.isfinite(value)
    return f"expected {describe(unit)[0]}: {value}"


@given(st.text(max_size=40))
@settings(max_examples=300, deadline=None)
def test_any_text_gives_a_number_or_a_unit_error(text):
    assert _number_or_message(text, "m").startswith("expected a length")


_PARTS = st.sampled_from(
    ["1", "K", "degC", "um", "m", "s", "min", "/", "*", "^", "-3", "2", "(", ")", " ", "%", "wt%",
     "·", "⁻³", "°C", "C", "phr", "J", "mol", "**", ",", ".", "e", "h", "kPa"]
)  # fmt: skip


@given(number=st.floats(allow_nan=True), parts=st.lists(_PARTS, max_size=7))
@settings(max_examples=400, deadline=None)
def test_any_string_of_units_gives_a_number_or_a_unit_error(number, parts):
    text = f"{number} {''.join(parts)}"
    assert _number_or_message(text, "K/s").startswith("expected a rate")


@given(
    value=st.floats(min_value=1e-9, max_value=1e9),
    unit=st.sampled_from(["um", "inch", "m", "mil", "nm"]),
)
@settings(deadline=None)
def test_length_written_in_full_reads_back(value, unit):
    assert to_si(format_si(value, unit, digits=17), "m") == pytest.approx(value, rel=1e-15)


def test_si_value_in_another_unit():
    assert from_si(403.15, "degC") == 130.0
    assert from_si(1 / 6, "K/min") == pytest.approx(10.0, rel=1e-15)
    assert math.isnan(from_si(math.nan, "um"))
    with pytest.raises(UnitError, match="'umm' is no known unit"):
        from_si(1.0, "umm")


def test_unit_is_kept_in_plain_letters():
    assert unit_of("1.5 µm") == "um"
    assert unit_of("3e12 1/m^3") == "1/m^3"


def test_every_example_reads_as_what_it_is_an_example_of():
    for unit in ("1", "K", "K/s", "s", "m", "1/m^3", "1/m^2", "Pa", "kg/m^3", "J/mol", "J/m^2",
                 "J/kg", "K/Pa", "kg/mol", "m/s", "1/K", "1/K^2", "K^2", "1/(m^3 s)", "rad", "1/s",
                 "J/m^3"):  # fmt: skip
        assert to_si(describe(unit)[1], unit) > 0
    assert to_si(describe("K", difference=True)[1], "K", difference=True) == 20.0
