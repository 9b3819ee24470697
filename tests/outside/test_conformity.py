"""Probabilities of conformity and risks of acceptance rules.

Sources: JCGM 106:2012, Evaluation of measurement data - The role of measurement uncertainty in
conformity assessment: 7.3.3, 7.4, guard bands (8.3.2 with figure 9), global risks (9.5). Global
risks are probabilities of rectangles under a bivariate normal distribution (true value, measured
value), which scipy integrates by its own method (A. Genz, J. Comput. Graph. Stat. 1, 141, 1992).
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy import integrate, stats

from fieldmap.magnet.quantity import Quantity
from fieldmap.magnet.risk import risks, specific_risk
from fieldmap.magnet.verdict import conformity, decide
from fieldmap.readings import Limit


def test_one_sided_limit():
    # 7.3.3: y = -5.47, u = 0.05, upper limit -5.40: conformity 0.919 (design figure)
    assert conformity(-5.47, 0.05, None, -5.40) == pytest.approx(0.919, abs=5e-4)


def test_two_sided_limits():
    # 7.4: limits 12.5 and 16.3, y = 13.6, u = 1.8: conformity 0.663 (memory)
    assert conformity(13.6, 1.8, 12.5, 16.3) == pytest.approx(0.663, abs=5e-4)


@pytest.mark.parametrize(
    ("r", "risk"),
    [
        (0.0, 0.50),  # no guard band: shared risk
        (1.0, 0.0228),  # guard band U = 2u
        (1.5, 0.00135),
    ],
)
def test_risk_at_the_edge_of_a_guard_band(r, risk):
    # a value just accepted, one guard band r·U inside the limit
    u = 0.1
    value = 1.0 - r * 2 * u
    assert 1 - conformity(value, u, None, 1.0) == pytest.approx(risk, rel=3e-3)
    limit = Limit("central_field", None, 1.0, guard=r)
    assert specific_risk(limit, u) == pytest.approx(risk, rel=3e-3)
    assert decide(limit, Quantity(value - 1e-12, u, "T")).decision == "accept"
    assert decide(limit, Quantity(value + 1e-9, u, "T")).decision != "accept"


def test_the_rule_of_the_kit_is_the_guard_band_of_one_expanded_uncertainty():
    # 8.3.2: accept when the value is inside the limits narrowed by U; risk 2.28 % at most
    u, limit = 0.1, Limit("central_field", None, 1.0)
    just = decide(limit, Quantity(1.0 - 2 * u - 1e-12, u, "T"))
    over = decide(limit, Quantity(1.0 - 2 * u + 1e-9, u, "T"))
    assert (just.decision, over.decision) == ("accept", "undecided")
    assert 1 - just.probability == pytest.approx(0.0228, abs=5e-5)


def test_the_wanted_probability_is_symmetric():
    # 7.2.2: by the symmetry of the normal distribution
    assert conformity(1.0, 0.3, 0.5, None) == pytest.approx(conformity(-1.0, 0.3, None, -0.5))


RULES = [
    # lower, upper, guard, k, u, process mean, process sd
    (0.98, 1.02, 1.0, 2.0, 0.004, 1.0, 0.01),
    (0.98, 1.02, 0.0, 2.0, 0.004, 1.005, 0.01),
    (0.98, 1.02, 0.5, 3.0, 0.010, 0.99, 0.015),
    (None, 1.02, 1.0, 2.0, 0.004, 1.0, 0.01),
    (None, 1.02, 0.0, 2.0, 0.020, 1.01, 0.01),
    (0.98, None, 1.5, 2.0, 0.003, 0.985, 0.02),
]


def rectangle(low, high, mean, covariance):
    """Probability that (true, measured) lies in a rectangle, by scipy's distribution function."""
    joint = stats.multivariate_normal
    far = 12 * np.sqrt(np.diagonal(covariance))
    low, high = np.maximum(low, mean - far), np.minimum(high, mean + far)
    if np.any(low >= high):
        return 0.0
    return float(joint.cdf(high, mean, covariance, lower_limit=low, abseps=1e-10, releps=1e-10))


@pytest.mark.parametrize("case", RULES)
def test_global_risks_are_those_of_a_bivariate_normal(case):
    lower, upper, guard, k, u, mean, sd = case
    found = risks(Limit("central_field", lower, upper, k=k, guard=guard), u, mean, sd)
    low = -np.inf if lower is None else lower
    high = np.inf if upper is None else upper
    accepted = low + guard * k * u, high - guard * k * u
    middle = np.array([mean, mean])
    spread = np.array([[sd**2, sd**2], [sd**2, sd**2 + u**2]])
    bad = [(-np.inf, low), (high, np.inf)]
    consumer = sum(
        rectangle(np.array([a, accepted[0]]), np.array([b, accepted[1]]), middle, spread)
        for a, b in bad
    )
    good = stats.norm(mean, sd).cdf(high) - stats.norm(mean, sd).cdf(low)
    right = rectangle(np.array([low, accepted[0]]), np.array([high, accepted[1]]), middle, spread)
    assert found.consumer == pytest.approx(consumer, abs=2e-9)
    assert found.producer == pytest.approx(good - right, abs=2e-9)


def test_global_risks_by_quadrature_in_two_dimensions():
    lower, upper, u, mean, sd = 0.98, 1.02, 0.004, 1.003, 0.01
    found = risks(Limit("central_field", lower, upper), u, mean, sd)

    def joint(shown, true):
        return stats.norm.pdf(true, mean, sd) * stats.norm.pdf(shown, true, u)

    low, high = lower + 2 * u, upper - 2 * u
    consumer = sum(
        integrate.dblquad(joint, *ends, low, high, epsabs=1e-12)[0]
        for ends in ((mean - 8 * sd, lower), (upper, mean + 8 * sd))
    )
    assert found.consumer == pytest.approx(consumer, rel=1e-6)
