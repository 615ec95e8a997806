"""Quantities with units to SI numbers and back."""

import math

import pytest

from doe import units

# Written from the definitions of the prefixes and of the units, not from the code.
FACTORS = {
    "nm": 10.0**-9,
    "um": 10.0**-6,
    "mm": 10.0**-3,
    "m": 1.0,
    "deg": math.radians(1),
    "mrad": 10.0**-3,
    "rad": 1.0,
    "arcmin": math.radians(1) / 60,
    "fs": 10.0**-15,
    "ps": 10.0**-12,
    "ns": 10.0**-9,
    "uJ": 10.0**-6,
    "mJ": 10.0**-3,
    "J": 1.0,
    "mW": 10.0**-3,
    "W": 1.0,
    "kW": 10.0**3,
    "J/cm^2": 10.0**4,
    "%": 0.01,
}


def test_every_unit_is_in_the_table_of_this_test():
    assert set(FACTORS) <= set(units.ALL)
    assert set(units.ALL) - set(FACTORS) <= {"K", "px", "W/cm^2"}


@pytest.mark.parametrize("unit", FACTORS)
@pytest.mark.parametrize("number", ["1", "2.5", "-0.125", "3e2", "+.5", "1E-3"])
def test_a_quantity_is_its_number_times_the_unit(unit, number):
    value = units.parse(f" {number} {unit} ", units.ALL, "1 m")
    assert value == pytest.approx(float(number) * FACTORS[unit], rel=1e-15)
    assert units.parse(f"{number}{unit}", units.ALL, "1 m") == value


def test_the_same_length_in_two_units_is_the_same_number():
    """0.1 um times 1e-6 in floats would differ from 100 nm in the last bit."""
    for nanometres in range(1, 5000, 7):
        micrometres = f"{nanometres // 1000}.{nanometres % 1000:03d} um"
        one = units.parse(f"{nanometres} nm", units.LENGTH, "")
        assert units.parse(micrometres, units.LENGTH, "") == one
        assert one == float(f"{nanometres}e-9")


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "not a number"),
        ("nm", "not a number"),
        ("nan nm", "not a number"),
        ("inf nm", "not a number"),
        ("1,5 nm", "not a known unit"),
        ("5", "unit is missing"),
        ("5 parsec", "not a known unit"),
        ("5 deg", "does not fit here"),
        ("1e999 m", "finite"),
        ("1e9999 m", "known unit"),
        ("5 NM", "not a known unit"),
        ("0x10 nm", "known unit"),
        ("5 nm nm", "not a known unit"),
    ],
)
def test_what_is_no_quantity_is_told(text, words):
    with pytest.raises(units.UnitError) as caught:
        units.parse(text, units.LENGTH, "1030 nm")
    assert words in caught.value.problem
    assert "nm, um, mm or m" in caught.value.allowed
    assert caught.value.fix


def test_a_misspelt_unit_brings_the_nearest():
    with pytest.raises(units.UnitError) as caught:
        units.parse("5 nmm", units.LENGTH, "1030 nm")
    assert '"5 nm"' in caught.value.fix or '"5 mm"' in caught.value.fix


@pytest.mark.parametrize("scale", ["LENGTH", "ANGLE", "TIME", "ENERGY", "POWER"])
def test_a_shown_value_is_read_back_within_its_digits(scale):
    table = getattr(units, scale)
    for exponent in range(-4, 5):
        for number in (1.0, 1.2345, -7.5, 9.9999):
            value = number * 10.0**exponent * min(table.values())
            again = units.parse(units.show(value, table, 6), table, "")
            assert again == pytest.approx(value, rel=1e-5)


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (1.03e-6, "1.03 um"),
        (500e-9, "500 nm"),
        (1e-3, "1 mm"),
        (1e-6, "1 um"),
        (2.0, "2 m"),
        (0.0, "0 nm"),
        (-20e-6, "-20 um"),
        (3e-10, "0.3 nm"),
    ],
)
def test_a_length_is_shown_in_the_largest_fitting_unit(value, text):
    assert units.length(value) == text


def test_angles_and_shares_are_shown_for_readers():
    assert units.angle(math.radians(2.5)) == "2.5 deg"
    assert units.angle(0.001) == "1 mrad"
    assert units.percent(0.8642) == "86.42 %"


def test_lengths_become_whole_nanometres():
    assert units.in_nm(1.03e-3) == 1_030_000
    assert units.in_nm(390.625e-9) == 391
    assert units.in_um(1.5e-6) == pytest.approx(1.5)
