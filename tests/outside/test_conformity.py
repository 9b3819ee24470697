"""Probabilities of conformity.

Source: JCGM 106:2012, Evaluation of measurement data - The role of measurement uncertainty in
conformity assessment: 7.3.3, 7.4, and guard bands (8.3.2 with figure 9).
"""

from __future__ import annotations

import pytest

from fieldmap.magnet.quantity import Quantity
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
