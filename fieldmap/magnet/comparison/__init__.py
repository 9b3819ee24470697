"""A map beside an earlier one, a sister magnet's or a design profile."""

from fieldmap.magnet.comparison.compare import compare
from fieldmap.magnet.comparison.outcome import Comparison

__all__ = ["Comparison", "compare"]
