"""Readers of single values, and the search for the nearest word."""

import datetime as dt

import pytest
from hypothesis import given
from hypothesis import strategies as st

from fieldmap.errors import InputError
from fieldmap.readings.schema import (
    Key,
    choice,
    flag,
    nearest,
    number,
    one_of,
    quantity,
    read_section,
    shown,
    span,
    text,
    whole,
)

PLACE = "campaign.toml, [stage], key 'k'"
READERS = {
    "quantity": quantity("m", "not negative"),
    "number": number("positive"),
    "whole": whole(least=0),
    "polarity": whole(allowed=(1, -1)),
    "text": text(),
    "choice": choice("wire", "coil"),
    "flag": flag(),
    "span": span("m"),
}


@pytest.mark.parametrize(
    ("reader", "raw", "value"),
    [
        ("quantity", "0 mm", 0.0),
        ("number", 3, 3.0),
        ("whole", 0, 0),
        ("polarity", -1, -1),
        ("text", "µ", "µ"),
        ("choice", "coil", "coil"),
        ("flag", False, False),
        ("span", ["-1 mm", "1 m"], (-0.001, 1.0)),
    ],
)
def test_what_fits_is_given_back(reader, raw, value):
    read = READERS[reader](raw, PLACE)
    assert read == value
    assert type(read) is type(value)


SCALARS = st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=20)
TOML = st.recursive(
    SCALARS | st.dates(),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(), inner, max_size=3),
    max_leaves=5,
)


@given(TOML)
def test_every_reader_gives_a_value_or_one_sentence_for_any_value(raw):
    for read in READERS.values():
        message = PLACE
        try:
            read(raw, PLACE)
        except InputError as error:
            message = str(error)
        assert message.startswith(PLACE)
        assert "\n" not in message
        assert len(message) < 600


@given(TOML)
def test_any_section_is_read_or_refused(raw):
    keys = [Key("a", number()), Key("b", text(), field="c")]
    try:
        values = read_section(raw, keys, "here")
    except InputError:
        return
    assert set(values) <= {"a", "c"}


def test_a_key_fills_its_field():
    keys = [Key("from", quantity("m"), required=True, field="start")]
    assert read_section({"from": "1 mm"}, keys, "here") == {"start": 0.001}


@pytest.mark.parametrize(
    ("name", "remedy"),
    [
        ("positon", "write 'position' if that is meant"),
        ("POSITION", "write 'position' if that is meant"),
        ("zzz", ""),
        ("position" * 10_000, ""),
    ],
)
def test_the_nearest_word(name, remedy):
    assert nearest(name, ["time", "position", "flux"]) == remedy


def test_none_of_a_few_words():
    with pytest.raises(InputError) as error:
        one_of("wier", ["wire", "coil"], PLACE, "a probe among")
    assert str(error.value) == (
        f"{PLACE}: found 'wier', expected a probe among 'wire', 'coil'; write 'wire' if that is "
        "meant."
    )


@pytest.mark.parametrize(
    ("raw", "words"),
    [
        (True, "true"),
        (3, "3"),
        (10**20, "a huge number"),
        (0.5, "0.5"),
        ("x\n", r"'x\n'"),
        ([1], "a list"),
        ({}, "a table"),
        (dt.date(2021, 3, 4), "the date 2021-03-04"),
    ],
)
def test_values_are_shown_in_words(raw, words):
    assert shown(raw) == words
