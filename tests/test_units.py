"""Quantities as text to SI numbers."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fieldmap.errors import InputError
from fieldmap.units import column_to_si, line_to_si, quoted, scale_to_si, si

WHERE = "campaign.toml, [magnet], key 'gap'"


@pytest.mark.parametrize(
    ("text", "unit", "value"),
    [
        ("30 mm", "m", 0.03),
        ("30mm", "m", 0.03),
        ("-600 mm", "m", -0.6),
        ("\u2212600 mm", "m", -0.6),
        ("+.5 mm", "m", 0.0005),
        ("5. um", "m", 5e-6),
        ("2 µm", "m", 2e-6),
        ("2 μm", "m", 2e-6),
        ("200 nV s s^-0.5", "V s s^-0.5", 200e-9),
        ("3 nV Hz^-0.5", "V s s^-0.5", 3e-9),
        ("1e-6 V s/s", "V s/s", 1e-6),
        ("2 uVs", "V s", 2e-6),
        ("2 uV*s", "V s", 2e-6),
        ("2 uV·s", "V s", 2e-6),
        ("2 uWb", "V s", 2e-6),
        ("0.3000 m^2", "m^2", 0.3),
        ("0.3000 m**2", "m^2", 0.3),
        ("0.3000 m²", "m^2", 0.3),
        ("3000 cm^2", "m^2", 0.3),
        ("5 uT", "T", 5e-6),
        ("12 G", "T", 12e-4),
        ("1.2 kG", "T", 0.12),
        ("3 kG cm", "T m", 3e-3),
        ("85 A", "A", 85.0),
        ("100 Hz", "Hz", 100.0),
        ("2 1/s", "Hz", 2.0),
        ("20 mm/s", "m/s", 0.02),
        ("1.2 m/min", "m/s", 0.02),
        ("20e-6", "1", 20e-6),
        ("20 ppm", "1", 20e-6),
        ("0.02 %", "1", 2e-4),
        (20e-6, "1", 20e-6),
        (3, "1", 3.0),
    ],
)
def test_a_quantity_becomes_an_si_number(text, unit, value):
    assert si(text, unit, WHERE) == pytest.approx(value, rel=1e-15)


def test_decimals_are_rounded_once():
    assert si("5 uT", "T", WHERE) == 5e-6
    assert si("0.1 mm", "m", WHERE) == 1e-4


IN_METRES = 'expected a quantity in m written as text, such as "30 mm"'
IN_VOLT_SECONDS = 'expected a quantity in V s written as text, such as "50 nV s"'
IN_AREAS = 'expected a quantity in m^2 written as text, such as "0.3000 m^2"'
IN_TESLA_METRES = 'expected a quantity in T m written as text, such as "0.2 T m"'
AS_RATIO = "expected a number without a unit, such as 20e-6"
FOREIGN = "which is not a unit of the dimension of"
WITH_BLANKS = 'put a blank between the units of a product, as in "T m"'
WITH_POINT = "write the decimal mark as a point"
WITH_CARETS = 'write exponents with ^, as in "m^2"'


@pytest.mark.parametrize(
    ("value", "unit", "sentence"),
    [
        (30, "m", f"the number 30 without a unit, {IN_METRES}; write the unit, in quotes."),
        ("30", "V s", f"'30' without a unit, {IN_VOLT_SECONDS}; add the unit."),
        ("30 s", "m", f"'30 s', {FOREIGN} 'm', {IN_METRES}."),
        ("30 smoots", "m", f"'30 smoots', where 'smoots' is not a known unit, {IN_METRES}."),
        (
            "1,5 mm",
            "m",
            f"'1,5 mm', where ',5 mm' is not a unit, {IN_METRES}; {WITH_POINT}.",
        ),
        ("0.3 m2", "m^2", f"'0.3 m2', where '2' is not a unit, {IN_AREAS}; {WITH_CARETS}."),
        ("0.2 Tm", "T m", f"'0.2 Tm', {FOREIGN} 'T m', {IN_TESLA_METRES}; {WITH_BLANKS}."),
        (True, "m", f"true or false, {IN_METRES}."),
        (["30 mm"], "m", f"a list, {IN_METRES}."),
        ("many", "1", f"'many', {AS_RATIO}."),
        (math.nan, "1", "nan, expected a finite number."),
        (10**400, "1", "inf, expected a finite number."),
        (
            "20 degC",
            "m",
            f"'20 degC', where 'degC' has an offset or is a logarithm, {IN_METRES}.",
        ),
    ],
)
def test_the_error_names_place_find_expectation_and_remedy(value, unit, sentence):
    with pytest.raises(InputError) as error:
        si(value, unit, WHERE)
    assert str(error.value) == f"{WHERE}: found {sentence}"


@pytest.mark.parametrize(
    "text",
    [
        "9**9**9",
        "1 m**9**9",
        "1 m^99999999",
        "__import__('os').getcwd()",
        "1 m.__class__",
        "1e999 mm",
        "1e308 km",
        "nan mm",
        "inf mm",
        "0x10 mm",
        "1_0 mm",
        "٣ mm",
        "1 /m",
        "1 m/",
        "1 m//m",
        "1 (m)",
        "1 m;m",
        "1 [length]",
        "m",
        "",
        "   ",
        "1 mm\0",
        "1 " + "m " * 500,
        "6 rpm",
    ],
)
def test_hostile_text_is_refused(text):
    for unit in ("m", "Hz"):
        with pytest.raises(InputError, match=r"expected a quantity in|finite number"):
            si(text, unit, WHERE)


@pytest.mark.parametrize(
    ("unit_text", "unit", "scale"),
    [("mm", "m", 1e-3), ("uV s", "V s", 1e-6), ("mV", "V", 1e-3), ("ms", "s", 1e-3), ("1", "1", 1)],
)
def test_column_units_have_scales(unit_text, unit, scale):
    assert scale_to_si(unit_text, unit, WHERE) == pytest.approx(scale, rel=1e-15)


def test_a_wrong_column_unit_is_an_error():
    with pytest.raises(InputError) as error:
        scale_to_si("mA", "V s", "pass_01.csv, column 'flux'")
    assert str(error.value) == (
        "pass_01.csv, column 'flux': found the unit 'mA', which is not a unit of the dimension of "
        "'V s', expected a unit such as 'V s'."
    )
    with pytest.raises(InputError, match="found the unit '', which is not a unit, expected"):
        scale_to_si("", "m", WHERE)


def test_temperatures_keep_degrees_celsius():
    assert line_to_si("degC", "degC", WHERE) == (1.0, 0.0)
    kelvin = column_to_si(np.array([273.15, 293.15]), "K", "degC", WHERE)
    np.testing.assert_allclose(kelvin, [0.0, 20.0], atol=1e-12)
    with pytest.raises(InputError, match="found the unit 'degF', expected 'degC' or 'K'"):
        line_to_si("degF", "degC", WHERE)


def test_a_column_is_converted_to_the_last_digit():
    np.testing.assert_array_equal(
        column_to_si(np.array([-600.001, 0.1, 3.0]), "mm", "m", WHERE), [-0.600001, 0.0001, 0.003]
    )


def test_quoted_text_is_short_and_printable():
    assert quoted("a\nb") == r"'a\nb'"
    assert len(quoted("x" * 1000)) == 62


@settings(deadline=None)
@given(st.floats(-1e12, 1e12), st.sampled_from(["m", "mm", "um", "km"]))
def test_written_and_read_back(value, unit):
    expected = value * {"m": 1.0, "mm": 1e-3, "um": 1e-6, "km": 1e3}[unit]
    assert si(f"{value!r} {unit}", "m", WHERE) == pytest.approx(expected, rel=1e-14)


@settings(deadline=None)
@given(st.text(max_size=200))
def test_any_text_is_a_finite_number_or_an_input_error(text):
    message = WHERE
    try:
        assert math.isfinite(si(text, "m", WHERE))
    except InputError as error:
        message = str(error)
    assert message.startswith(WHERE)
    assert "\n" not in message


@settings(deadline=None)
@given(st.text(alphabet="mVsTA0123456789.^*/·- eE", max_size=40))
def test_near_misses_are_a_finite_number_or_an_input_error(text):
    message = WHERE
    try:
        assert math.isfinite(si(text, "V s", WHERE))
    except InputError as error:
        message = str(error)
    assert message.startswith(WHERE)
