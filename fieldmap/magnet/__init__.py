"""What the magnet is: map to results with uncertainty."""

from fieldmap.magnet.evaluate import evaluate
from fieldmap.magnet.quantity import Quantity
from fieldmap.magnet.results import LineResults, Results
from fieldmap.magnet.verdict import Verdict, conformity, decide

__all__ = [
    "LineResults",
    "Quantity",
    "Results",
    "Verdict",
    "conformity",
    "decide",
    "evaluate",
]
