"""What a kind of fault is: its five sizes, and what could reveal it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np

from fieldmap.bench.faults.setting import Faulty, Setting

__all__ = ["SEVERITIES", "FaultKind", "Put", "RevealedBy"]

RevealedBy = Literal[
    "overlap", "smoothness", "redundancy of probes", "reference", "file", "nothing"
]
Put = Callable[[Setting, float, np.random.Generator], Faulty | None]

SEVERITIES = (1, 2, 3, 4, 5)


@dataclass(frozen=True)
class FaultKind:
    """One way in which a bench lies.

    Parameters
    ----------
    key : str
        Stable name.
    words : str
        What happened, as part of a sentence.
    sizes : tuple of five floats
        How large it is at severities 1 (surely harmless, or the mildest form) to 5 (gross).
    of : str
        What the size counts.
    put : callable
        Puts it into a setting at a size; None where the campaign has no place for it.
    revealed_by : str
        What can reveal it: the overlap of passes, the smoothness of the field, a second probe,
        an absolute reference, the file itself, or nothing.
    reason : str
        Why, in a sentence.
    """

    key: str
    words: str
    sizes: tuple[float, float, float, float, float]
    of: str
    put: Put
    revealed_by: RevealedBy
    reason: str

    def size(self, severity: int) -> float:
        """The size at a severity, 1 to 5."""
        return self.sizes[severity - 1]
