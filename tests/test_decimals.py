"""Decimal text loses nothing and stays short."""

from __future__ import annotations

import math
from decimal import Decimal

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fieldmap.bench.decimals import quantity_text, shifted_text
from fieldmap.units import si

finite = st.floats(allow_nan=False, allow_infinity=False)


@pytest.mark.parametrize(
    ("value", "places", "text"),
    [
        (0.03, 3, "30"),
        (-0.48, 3, "-480"),
        (0.0004, 3, "0.4"),
        (1e-6, 6, "1"),
        (3e-9, 6, "0.003"),
        (0.0, 3, "0"),
        (-0.0, 3, "0"),
        (120.0, 0, "120"),
        (1e22, 0, "10000000000000000000000"),
        (1e-300, 3, "1E-297"),
        (0.1 + 0.2, 0, "0.30000000000000004"),
    ],
)
def test_examples(value, places, text):
    assert shifted_text(value, places) == text


@given(finite, st.integers(-12, 12))
def test_the_point_moves_and_no_digit_is_lost(value, places):
    sign, digits, exponent = Decimal(repr(value)).as_tuple()
    assert Decimal(shifted_text(value, places)) == Decimal((sign, digits, exponent + places))


@settings(deadline=None)  # the first look-up builds the table of units
@given(finite.filter(lambda value: abs(value) < 1e250 and (value == 0 or abs(value) > 1e-250)))
def test_a_length_reads_back_exactly(value):
    assert si(quantity_text(value, "mm", 3, "m"), "m", "here") == value


@settings(deadline=None)
@given(st.floats(1e-12, 1e3))
def test_noise_reads_back_exactly(value):
    assert si(quantity_text(value, "nV s s^-0.5", 9, "V s s^-0.5"), "V s s^-0.5", "x") == value
    assert si(quantity_text(value, "um", 6, "m"), "m", "here") == value
    assert si(quantity_text(value, "V s", 0, "V s"), "V s", "here") == value


@pytest.mark.parametrize("value", [math.nan, math.inf])
def test_what_is_no_number_is_not_written(value):
    with pytest.raises(ValueError, match="finite"):
        quantity_text(value, "mm", 3, "m")
