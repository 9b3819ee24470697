"""Decisions against limits, and the probability of conformity."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from fieldmap.magnet.quantity import Quantity
from fieldmap.magnet.verdict import conformity, decide, guard_band
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


@pytest.mark.parametrize(
    ("guard", "value", "expected"),
    [
        (0.0, 1.0, "accept"),
        (0.0, 0.99, "reject"),
        (0.5, 1.11, "accept"),  # half of U = 0.2 inside the limit
        (0.5, 1.09, "undecided"),
        (0.5, 0.91, "undecided"),
        (0.5, 0.89, "reject"),
        (1.5, 1.29, "undecided"),
        (1.5, 1.31, "accept"),
        (1.5, 0.69, "reject"),
    ],
)
def test_guard_bands(guard, value, expected):
    assert decision(value, 0.1, Limit("r", 1.0, 2.0, guard=guard)) == expected


def test_a_limit_names_its_own_coverage_factor():
    strict = Limit("r", 1.0, 2.0, k=3.0)
    assert decision(1.25, 0.1, strict) == "undecided"
    assert decision(1.25, 0.1, strict, k=1.0) == "undecided"
    assert decide(strict, Quantity(1.25, 0.1, "m")).band == pytest.approx(0.3)
    assert guard_band(Limit("r", 1.0, None, guard=0.5), 0.1, k=3.0) == pytest.approx(0.15)


@given(st.floats(-3, 3), st.floats(1e-3, 1), st.floats(0.1, 5))
def test_without_a_guard_band_nothing_is_undecided(value, u, k):
    assert decision(value, u, Limit("r", -1.0, 1.0, k=k, guard=0.0)) == (
        "accept" if -1 <= value <= 1 else "reject"
    )


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
