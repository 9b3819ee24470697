"""A result as a functional of the profile: uncertainty and covariance by hand."""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.estimate.fieldline import FieldLine
from fieldmap.estimate.spline import UniformSpline
from fieldmap.magnet.functional import covariance, functional
from fieldmap.magnet.quantity import Quantity

SPLINE = UniformSpline(0.0, 0.01, 4)
SPREAD = np.diag([1.0, 4.0, 9.0, 16.0]) * 1e-10
LINE = FieldLine(0.0, 0.0, 0.0, 0.01, SPLINE, np.ones(4), SPREAD)


def test_uncertainty_of_profile_and_of_other_causes_add_in_squares():
    one = functional(LINE, 2.0, np.array([1.0, 1.0, 0.0, 0.0]), "T", {"law": -2e-5})
    assert one.u == pytest.approx(np.sqrt(1 + 4 + 4) * 1e-5)
    assert one.expanded(2) == pytest.approx(6e-5)
    assert isinstance(one, Quantity)
    assert one.as_dict() == {"value": 2.0, "u": one.u, "unit": "T"}


def test_one_cause_in_two_results_is_one_error():
    first = functional(LINE, 0.0, np.array([1.0, 0.0, 0.0, 0.0]), "T", {"law": 3e-5, "own": 1e-5})
    second = functional(LINE, 0.0, np.array([1.0, 0.0, 1.0, 0.0]), "T", {"law": -2e-5})
    found = covariance(LINE, {"first": first, "second": second})
    assert found == pytest.approx(1e-10 * np.array([[1 + 9 + 1, 1 - 6], [1 - 6, 1 + 9 + 4]]))
    assert np.sqrt(np.diagonal(found)) == pytest.approx([first.u, second.u])
