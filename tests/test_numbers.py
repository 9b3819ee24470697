"""Digits and units of printed numbers."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from fieldmap.show.numbers import Scale, like, plain, rounded, scale_for


@pytest.mark.parametrize(
    ("value", "half_width", "expected"),
    [
        (400.00499, 0.0168804, ("400.005", "0.017")),
        (0.2000039865, 1.1586e-5, ("0.200004", "0.000012")),
        (-5.4296, 151.43, ("-10", "150")),
        (12345.6, 9.96, ("12346", "10")),  # rounding up adds no third digit
        (1.0, 0.0996, ("1.00", "0.10")),
        (1.0, 0.0994, ("1.000", "0.099")),
        (-0.0004, 0.1, ("0.00", "0.10")),  # no minus before zero
        (0.0, 2.5e-9, ("0.0000000000", "0.0000000025")),
        (1e6, 3e4, ("1000000", "30000")),
        (0.25, 0.0, ("0.25", "0")),
        (math.nan, 1.0, ("not known", "not known")),
        (1.5, math.inf, ("1.5", "not known")),
    ],
)
def test_rounding_follows_the_uncertainty(value, half_width, expected):
    assert rounded(value, half_width) == expected


@given(
    st.floats(-1e4, 1e4),
    st.floats(1e-9, 1e4),
)
def test_rounding_loses_less_than_a_twentieth_of_the_uncertainty(value, half_width):
    shown, width = rounded(value, half_width)
    assert len(width.replace(".", "").lstrip("0")) >= 2
    assert float(width) == pytest.approx(half_width, rel=0.051)
    assert abs(float(shown) - value) <= 0.051 * half_width + 1e-15 * abs(value)
    assert len(shown.partition(".")[2]) == len(width.partition(".")[2])


@pytest.mark.parametrize(
    ("unit", "values", "expected"),
    [
        ("m", [12.0], Scale("mm", 1e3)),
        ("m", [1e-6], Scale("mm", 1e3)),
        ("1", [3e-5], Scale("1e-4", 1e4)),
        ("T", [0.5, 1e-9], Scale("T", 1.0)),
        ("T", [-0.05], Scale("mT", 1e3)),
        ("T", [4e-5], Scale("µT", 1e6)),
        ("T m", [2.0], Scale("T·m", 1.0)),
        ("T m", [-3e-4], Scale("mT·m", 1e3)),
        ("V s", [2e-9], Scale("nV·s", 1e9)),
        ("T", [], Scale("T", 1.0)),
        ("T", [0.0, math.nan], Scale("T", 1.0)),
        ("furlong", [3.0], Scale("furlong", 1.0)),
    ],
)
def test_units_fit_the_largest_number(unit, values, expected):
    assert scale_for(unit, values) == expected


def test_plain_numbers():
    assert plain(380.5) == "380.5"
    assert plain(0.1 + 0.2) == "0.3"
    assert like(0.123456, "7.12") == "0.12"
    assert like(math.inf, "7.12") == "not known"
