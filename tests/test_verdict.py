"""Decisions against limits, and the probability of conformity."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from fieldmap.magnet.quantity import Quantity
from fieldmap.magnet.verdict import conformity, decide
from fieldmap.readings import Limit

TWO_SIDED = Limit("magnetic_length", 1.0, 2.0)


def decision(value, u, limit=TWO_SIDED, **more):
    return decide(limit, Quantity(value, u, "m"), **more).decision


@pytest.mark.parametrize(
    ("value", "expected"),
    [
        (1.5, "accept"),
        (1.2, "accept"),  # the interval just touches the limit
        (1.19, "undecided"),
        (1.0, "undecided"),
        (0.81, "undecided"),
        (0.79, "reject"),
        (1.8, "accept"),
        (1.81, "undecided"),
        (2.21, "reject"),
    ],
)
def test_two_sided_limits_with_u_of_a_tenth(value, expected):
    assert decision(value, 0.1) == expected


def test_open_sides():
    assert decision(-1e9, 1.0, Limit("r", None, 2.0)) == "accept"
    assert decision(1e9, 1.0, Limit("r", 1.0, None)) == "accept"
    assert decision(1e9, 1.0, Limit("r", None, 2.0)) == "reject"
    assert decision(0.0, 1.0, Limit("r", None, None)) == "accept"


def test_coverage_factor():
    assert decision(1.25, 0.1, k=2.0) == "accept"
    assert decision(1.25, 0.1, k=3.0) == "undecided"


def test_an_interval_wider_than_the_limits_is_undecided():
    assert decision(1.5, 10.0) == "undecided"


def test_a_verdict_names_result_and_line():
    found = decide(TWO_SIDED, Quantity(1.5, 0.1, "m"), line=3)
    assert found.as_dict() == {
        "result": "magnetic_length",
        "line": 3,
        "decision": "accept",
        "probability": pytest.approx(1.0, abs=1e-6),
    }


@pytest.mark.parametrize("value", [0.5, 1.0, 1.5, 2.0, 2.5])
def test_a_value_without_uncertainty_conforms_or_not(value):
    # decision and probability say the same at the limits too
    expected = 1.0 <= value <= 2.0
    assert conformity(value, 0.0, 1.0, 2.0) == float(expected)
    assert (decision(value, 0.0) == "accept") == expected


@given(
    st.floats(-10, 10),
    st.floats(1e-3, 10),
    st.none() | st.floats(-5, 0),
    st.none() | st.floats(0, 5),
)
def test_probability_is_one_and_agrees_with_the_decision(value, u, lower, upper):
    chance = conformity(value, u, lower, upper)
    assert 0 <= chance <= 1
    found = decide(Limit("r", lower, upper), Quantity(value, u, "m"))
    if found.decision == "accept":
        assert chance > 0.95
    if found.decision == "reject":
        assert chance < 0.025
    outside = 0.0
    if lower is not None:
        outside += 0.5 * math.erfc((value - lower) / (u * math.sqrt(2)))
    if upper is not None:
        outside += 0.5 * math.erfc((upper - value) / (u * math.sqrt(2)))
    assert chance + outside == pytest.approx(1.0, abs=1e-12)
