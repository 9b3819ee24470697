"""Headings of tables."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from fieldmap.readings.columns import Heading, parse_heading


@pytest.mark.parametrize(
    ("text", "name", "unit"),
    [
        ("position [mm]", "position", "mm"),
        (" position[mm] ", "position", "mm"),
        ("flux [ uV s ]", "flux", "uV s"),
        ("channel [2] [V]", "channel [2]", "V"),
        ("flux", "flux", None),
        ("flux]", "flux]", None),
        ("[mm]", "", "mm"),
        ("flux []", "flux", ""),
        ("", "", None),
    ],
)
def test_name_and_unit_are_parted(text, name, unit):
    assert parse_heading(text) == Heading(text.strip(), name, unit)


@given(st.text())
def test_any_text_has_a_heading(text):
    heading = parse_heading(text)
    assert heading.text == text.strip()
    assert heading.text.startswith(heading.name)
