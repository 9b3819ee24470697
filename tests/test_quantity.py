"""A value with its uncertainty, and the results of a map."""

from __future__ import annotations

from dataclasses import FrozenInstanceError

import pytest

from fieldmap.estimate.findings import Finding
from fieldmap.magnet.quantity import Quantity
from fieldmap.magnet.results import LineResults, Results
from fieldmap.magnet.verdict import Verdict

LENGTH = Quantity(0.381, 5e-5, "m")
FIRST = LineResults(0.0, 0.005, {"magnetic_length": LENGTH})
OTHER = LineResults(0.01, 0.005, {"magnetic_length": Quantity(0.382, 6e-5, "m")})
RESULTS = Results(
    campaign="shop",
    sha256="beef",
    lines=(FIRST, OTHER),
    findings=(Finding("spike", "warn", "p.csv", "one sentence."),),
    verdicts=(Verdict("magnetic_length", 1, "undecided", 0.5),),
)


def test_expanded_uncertainty():
    assert LENGTH.expanded() == 1e-4
    assert LENGTH.expanded(3.0) == pytest.approx(1.5e-4)


def test_values_cannot_be_changed():
    with pytest.raises(FrozenInstanceError):
        LENGTH.value = 1.0


def test_short_cut_to_the_first_line():
    assert RESULTS["magnetic_length"] is LENGTH
    with pytest.raises(KeyError):
        RESULTS["central_field"]


def test_content_of_results_json():
    assert RESULTS.as_dict() == {
        "format": "fieldmap-results/1",
        "campaign": {"name": "shop", "sha256": "beef"},
        "lines": [
            {
                "x": 0.0,
                "y": 0.005,
                "results": {"magnetic_length": {"value": 0.381, "u": 5e-5, "unit": "m"}},
            },
            {
                "x": 0.01,
                "y": 0.005,
                "results": {"magnetic_length": {"value": 0.382, "u": 6e-5, "unit": "m"}},
            },
        ],
        "findings": [
            {"code": "spike", "severity": "warn", "where": "p.csv", "text": "one sentence."}
        ],
        "verdicts": [
            {"result": "magnetic_length", "line": 1, "decision": "undecided", "probability": 0.5}
        ],
    }
