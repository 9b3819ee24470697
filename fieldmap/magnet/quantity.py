"""A value with its standard uncertainty and unit."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

__all__ = ["Quantity"]


@dataclass(frozen=True)
class Quantity:
    """A value with its standard uncertainty.

    Parameters
    ----------
    value : float
        SI.
    u : float
        Standard uncertainty, SI.
    unit : str
        SI unit as text.

    Examples
    --------
    >>> Quantity(0.2006412, 5.1e-5, "T m").expanded(k=2)
    0.000102
    """

    value: float
    u: float
    unit: str

    def expanded(self, k: float = 2.0) -> float:
        """Half width of the interval value ± k·u."""
        return k * self.u

    def as_dict(self) -> dict[str, Any]:
        """The form used in results.json."""
        return {"value": self.value, "u": self.u, "unit": self.unit}
