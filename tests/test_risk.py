"""Risks of acceptance rules: limits of the formula, and counts of drawn items."""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.errors import InputError
from fieldmap.magnet.quantity import Quantity
from fieldmap.magnet.risk import risks, specific_risk
from fieldmap.magnet.verdict import conformity, decide
from fieldmap.readings import Limit

SIDES = {"two": (0.98, 1.03), "upper": (None, 1.02), "lower": (0.99, None)}


def rule(sides="two", guard=1.0, k=None):
    return Limit("magnetic_length", *SIDES[sides], k=k, guard=guard)


@pytest.mark.parametrize("sides", SIDES)
@pytest.mark.parametrize("guard", [0.0, 0.7, 1.0])
def test_the_rule_of_the_decisions_is_the_rule_of_the_risks(sides, guard):
    rng = np.random.default_rng(7)
    limit, u, mean, sd, n = rule(sides, guard), 0.01, 1.0, 0.02, 20_000
    found = risks(limit, u, mean, sd)
    true = rng.normal(mean, sd, n)
    shown = rng.normal(true, u)
    made = [decide(limit, Quantity(one, u, "m")).decision for one in shown.tolist()]
    decisions = np.array(made)
    lower = -np.inf if limit.lower is None else limit.lower
    upper = np.inf if limit.upper is None else limit.upper
    conforms = (lower <= true) & (true <= upper)
    counted = {
        "consumer": np.mean(~conforms & (decisions == "accept")),
        "producer": np.mean(conforms & (decisions != "accept")),
        "rejected": np.mean(conforms & (decisions == "reject")),
    }
    for name, share in counted.items():
        expected = getattr(found, name)
        assert abs(share - expected) < 4 * np.sqrt(expected * (1 - expected) / n) + 1 / n, name


def test_a_perfect_measurement_errs_nowhere():
    found = risks(rule(), 0.0, 1.0, 0.02)
    assert (found.consumer, found.producer, found.rejected) == (0.0, 0.0, 0.0)


def test_a_worthless_measurement_accepts_by_chance():
    # u far above limits and process: nothing is learnt, the two are independent
    limit, u = rule(guard=0.0), 1.0
    found = risks(limit, u, 1.0, 0.02)
    conform, accept = conformity(1.0, 0.02, 0.98, 1.03), conformity(1.0, u, 0.98, 1.03)
    assert found.consumer == pytest.approx((1 - conform) * accept, rel=1e-3)
    assert found.producer == pytest.approx(conform * (1 - accept), rel=1e-3)


def test_a_wider_guard_band_shifts_the_risk_to_the_producer():
    ladder = [risks(rule(guard=guard), 0.004, 1.0, 0.02) for guard in (0.0, 0.5, 1.0, 2.0)]
    consumer, producer = [one.consumer for one in ladder], [one.producer for one in ladder]
    assert consumer == sorted(consumer, reverse=True)
    assert producer == sorted(producer)
    assert ladder[0].producer == pytest.approx(ladder[0].rejected)  # nothing is undecided


def test_guard_bands_that_meet_accept_nothing():
    limit = rule(guard=4.0)
    found = risks(limit, 0.01, 1.0, 0.02)
    assert found.consumer == 0.0
    assert found.producer == pytest.approx(conformity(1.0, 0.02, 0.98, 1.03))
    assert specific_risk(limit, 0.01) == 0.0


def test_an_open_limit_has_no_risk():
    free = Limit("magnetic_length", None, None)
    found = risks(free, 0.01, 1.0, 0.02)
    assert (found.consumer, specific_risk(free, 0.01)) == (0.0, 0.0)
    assert abs(found.producer) < 1e-12


def test_coverage_factor():
    assert risks(rule(k=3.0), 0.004, 1.0, 0.02) == risks(rule(), 0.004, 1.0, 0.02, k=3.0)
    assert risks(rule(k=3.0, guard=0.5), 0.004, 1.0, 0.02).consumer == pytest.approx(
        risks(rule(guard=0.75), 0.004, 1.0, 0.02).consumer
    )


@pytest.mark.parametrize(("u", "sd"), [(-0.1, 0.1), (0.1, 0.0), (0.1, np.inf), (np.nan, 0.1)])
def test_refuses_what_is_no_spread(u, sd):
    with pytest.raises(InputError, match="expected a finite number"):
        risks(rule(), u, 1.0, sd)
